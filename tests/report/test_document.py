"""The whole report, read back with two PDF libraries that know nothing of it."""

from __future__ import annotations

import io
import re
from dataclasses import replace

import pikepdf
import pypdf
import pytest

from tomofolio.job import Job
from tomofolio.remarks import Remark, Severity
from tomofolio.report import report_bytes, write_report
from tomofolio.report.cautions import DENIAL, cautions_text
from tomofolio.report.frame import NOT_REVIEWED
from tomofolio.volume import Kind

SHORT_HASH = "3f9a0c1d2e4b"


def texts(data: bytes) -> list[str]:
    """Text of every page, all kinds of space made alike."""
    pages = pypdf.PdfReader(io.BytesIO(data)).pages
    return [re.sub(r"\s+", " ", page.extract_text()) for page in pages]


def everything(data: bytes) -> bytes:
    """All bytes of the file with its streams unpacked, and the texts of all pages."""
    out = io.BytesIO()
    with pikepdf.open(io.BytesIO(data)) as pdf:
        pdf.save(out, compress_streams=False, stream_decode_level=pikepdf.StreamDecodeLevel.generalized)
    return out.getvalue() + " ".join(texts(data)).encode()


VARIANTS = {
    "component": {},
    "no voids": {"voids": 0, "uneven": True},
    "many voids": {"voids": 3000},
    "six ranges": {"ranges": 6, "keep": False},
    "figures unknown": {"unknown": True, "ranges": 2},
    "no views": {"views": (), "preset": "specimen"},
    "patient": {"kind": Kind.PATIENT, "keep": False, "ranges": 5},
    "patient shown": {"kind": Kind.PATIENT, "keep": True, "ranges": 2, "uneven": True},
}


@pytest.fixture(scope="module")
def reports(case_of) -> dict[str, bytes]:
    return {name: report_bytes(case_of(**options)) for name, options in VARIANTS.items()}


@pytest.fixture(scope="module", params=VARIANTS)
def report(request, reports) -> bytes:
    return reports[request.param]


def test_every_page_says_what_it_is(report):
    pages = texts(report)
    with pikepdf.open(io.BytesIO(report)) as pdf:
        assert len(pdf.pages) == len(pages)
    for n, text in enumerate(pages, start=1):
        assert f"page {n} of {len(pages)}" in text
        assert SHORT_HASH in text and DENIAL in text and NOT_REVIEWED in text
        assert "CT scan report" in text


def test_no_page_is_empty(report):
    running = (
        r"CT scan report: \w+( and measurements)?|Input \w{12}|page \d+ of \d+|"
        + re.escape(DENIAL)
        + "|"
        + NOT_REVIEWED
    )
    for text in texts(report):
        assert len(re.sub(running, "", text).strip()) > 80


def test_all_fonts_are_embedded_and_ours(report):
    with pikepdf.open(io.BytesIO(report)) as pdf:
        for page in pdf.pages:
            fonts = page.Resources.get("/Font", {})
            assert fonts
            for font in fonts.values():
                assert "FolioSans" in str(font.BaseFont)
                assert "/FontFile2" in font.FontDescriptor


def test_no_text_falls_back_to_the_missing_glyph(report):
    assert not any("□" in text for text in texts(report))


def test_pages_carry_no_transition_and_the_file_its_title_and_language(report):
    with pikepdf.open(io.BytesIO(report)) as pdf:
        assert not any("/Trans" in page for page in pdf.pages)
        assert str(pdf.Root.Lang) == "en-GB"
        assert str(pdf.docinfo["/Author"]) == "tomofolio"
        assert str(pdf.docinfo["/Title"]).startswith("CT scan report")


def test_file_is_well_formed_and_small(report):
    with pikepdf.open(io.BytesIO(report)) as pdf:
        assert pdf.check_pdf_syntax() == [] if hasattr(pdf, "check_pdf_syntax") else pdf.check() == []
    assert len(report) < 8_000_000


def test_outline_leads_to_every_section(reports):
    reader = pypdf.PdfReader(io.BytesIO(reports["component"]))
    entries = [(item.title, reader.get_destination_page_number(item)) for item in reader.outline]
    assert [title for title, _ in entries] == [
        "Summary",
        "Voids and inclusions",
        "Views",
        "Ranges",
        "The scan",
        "Method",
        "Cautions",
    ]
    pages = texts(reports["component"])
    for title, number in entries[1:]:
        assert title in pages[number]


VERDICTS = (
    r"\b(pass|passes|passed|fail|fails|failed|accept|accepted|reject|rejected|normal|abnormal|acceptable|defective)\b"
)


def test_no_verdict_outside_the_cautions(report):
    denied = set(re.findall(VERDICTS, cautions_text(), re.IGNORECASE))
    pages = texts(report)
    first = next(n for n, text in enumerate(pages) if "What this report is not, and what it cannot show" in text)
    for text in pages[:first]:
        assert not re.findall(VERDICTS, text, re.IGNORECASE)
    for text in pages[first:]:
        assert set(re.findall(VERDICTS, text, re.IGNORECASE)) <= denied


def test_summary_answers_alone_for_a_component(reports):
    page = texts(reports["component"])[0]
    for wanted in (
        "Pump cover 7",
        "5.432 cm³",
        "95 %: 5.402 to 5.462",
        "Closed voids",
        "Porosity",
        "Largest void",
        "20 slices of 24 × 28",
        "grey values in GV, implied",
        "−150.0 to 1550.0",
        "41.2 GV",
        "53.4 times the noise",
        "The slices are 3.1 times as far apart as the pixels.",
        "What this report does not say",
    ):
        assert wanted in page, wanted


def test_summary_is_one_page(report):
    assert "What this report does not say" in texts(report)[0]


def test_long_texts_and_many_ranges_still_leave_page_one_whole(case_of, long_job):
    job = replace(long_job, page_size="Letter")
    pages = texts(report_bytes(case_of(job=job, ranges=6)))
    assert "What this report does not say" in pages[0] and "Testwright" in pages[0]
    assert all("R-0042-2026-SERIES-B-AMENDED" in page for page in pages)


def test_patient_report_has_patient_words_and_no_voids(reports):
    whole = " ".join(texts(reports["patient"]))
    before = whole[: whole.index("What this report is not, and what it cannot show")]
    assert "Grey-value difference" in before and "tissue" in before
    assert "columns towards Left; rows towards Posterior; slices towards Superior" in before
    for unwanted in ("Porosity", "igament", "Contrast to noise", "Closed voids", "+X;"):
        assert unwanted not in before, unwanted


def test_component_report_names_axes(reports):
    assert "columns towards +X; rows towards +Y; slices towards +Z" in " ".join(texts(reports["component"]))


def test_table_of_voids_holds_the_largest_with_units_and_intervals(reports):
    page = texts(reports["component"])[1]
    assert re.search(r"V1 0\.567 0\.510 0\.635 0\.527 1\.03 1\.33", page)
    assert "V12" in page and "V9 open" in page


def test_many_voids_are_cut_to_the_largest_and_say_so(reports):
    whole = " ".join(texts(reports["many voids"]))
    assert "The table holds the 200 largest of 3000 voids" in whole and "voids.csv" in whole
    assert re.search(r"\bV200\b", whole) and not re.search(r"\bV201\b", whole)


def test_no_void_found_is_not_called_none(reports):
    whole = " ".join(texts(reports["no voids"]))
    assert "No void large enough was found. This does not mean that there is none." in whole


def test_uneven_slices_show_their_extremes(reports):
    assert "0.5 to 0.8 mm" in " ".join(texts(reports["no voids"]))


def test_missing_figures_say_so_with_the_reason(reports):
    page = texts(reports["figures unknown"])[0]
    assert "not available" in page and "The noise could not be measured." in page


def test_what_was_left_out_is_listed(reports):
    whole = " ".join(texts(reports["component"]))
    assert "support below the object 123 mm³" in whole and "thin beside the object" in whole


def test_method_holds_hash_date_parameters_and_libraries(reports):
    whole = " ".join(texts(reports["component"]))
    for wanted in (
        SHORT_HASH + "57" * 26,
        "2026-05-06T07:08:09+00:00",
        "tomofolio 0.1.0",
        "nested, depth 3",
        "numpy 2.1.0",
    ):
        assert wanted in whole, wanted


@pytest.mark.parametrize("name", ["six ranges", "patient"])
def test_hidden_identity_is_nowhere_in_the_file(reports, identity_marks, name):
    data = everything(reports[name])
    for mark in identity_marks:
        assert mark.encode() not in data
        assert mark.encode("utf-16-be") not in data


def test_hidden_identity_is_blanked_in_texts_that_a_person_typed(case_of, identity_marks):
    job = Job(
        title="Scan for Ilse Quorvane",
        item="Quorvane",
        customer="Clinic of Upper Vellmark",
        notes="seen by oskar tarbolde; ID ZX-99817-K",
        reviewer_name="Tarbolde",
        source='item = "Quorvane"',
        pseudonym="case 14",
    )
    data = report_bytes(case_of(Kind.PATIENT, keep=False, job=job))
    whole = " ".join(texts(data))
    for mark in identity_marks:
        assert mark.lower() not in whole.lower()
    assert "case 14" in texts(data)[0] and "(withheld)" in whole


def test_kept_identity_is_printed(reports):
    whole = " ".join(texts(reports["patient shown"]))
    assert "Quorvane Ilse" in whole and "ZX-99817-K" in whole


def test_same_case_gives_the_same_bytes(case_of, reports):
    assert report_bytes(case_of()) == reports["component"]


def test_environment_does_not_change_the_bytes(case_of, reports, monkeypatch):
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1234567890")
    data = report_bytes(case_of())
    assert data == reports["component"]
    with pikepdf.open(io.BytesIO(data)) as pdf:
        assert str(pdf.docinfo["/CreationDate"]) == "D:20260506070809+00'00'"


def test_written_file_is_the_report(case_of, reports, tmp_path):
    write_report(case_of(), tmp_path / "r.pdf")
    assert (tmp_path / "r.pdf").read_bytes() == reports["component"]
    with pytest.raises(OSError):
        write_report(case_of(views=()), tmp_path / "missing" / "r.pdf")


@pytest.mark.parametrize(("size", "points"), [("A4", (595.28, 841.89)), ("Letter", (612, 792))])
def test_page_size_of_the_job_sheet_wins(case_of, size, points):
    reader = pypdf.PdfReader(io.BytesIO(report_bytes(case_of(job=Job(page_size=size), views=()))))
    for page in reader.pages:
        assert (float(page.mediabox.width), float(page.mediabox.height)) == pytest.approx(points, abs=0.01)


def test_named_reviewer_replaces_the_warning_but_signs_nothing(case_of, long_job):
    pages = texts(report_bytes(case_of(job=long_job)))
    for page in pages:
        assert NOT_REVIEWED not in page
        assert "Reviewer named: Dr Annelore Testwright-Featherstonehaugh" in page
    assert "Not valid without signature" in pages[0] and "Signature" in pages[-1]


def test_names_from_a_job_sheet_are_labels(case_of):
    whole = " ".join(texts(report_bytes(case_of(names=("air", "alloy", "insert"), named_by="the foundry"))))
    assert "label supplied by the foundry: same grey values, not necessarily the same material" in whole


def test_boundaries_are_stated_with_their_values(case_of, reports):
    case = case_of()
    whole = " ".join(texts(reports["component"]))
    assert "Where void, outside and material part" in whole
    assert f"below {case.body.threshold:g} GV" in whole


def test_names_of_ranges_are_blanked_like_all_that_a_person_typed(case_of, identity_marks):
    case = case_of(Kind.PATIENT, keep=False, names=("air", "Quorvane", "bone"), named_by="Oskar Tarbolde")
    colours = (("Quorvane", (1, 2, 3)),)
    views = tuple(replace(view, key=replace(view.key, colours=colours)) for view in case.views)
    data = everything(report_bytes(replace(case, views=views)))
    assert b"air" in data and not any(mark.encode() in data for mark in identity_marks)


def test_endless_texts_do_not_stop_the_report(case_of):
    job = Job(title="T" * 400, item="I " * 800, notes="n " * 4000, reviewer_name="R " * 300, source="a" * 3000)
    case = case_of(ranges=12, names=("x" * 200,) * 12, named_by="y " * 300, job=job, views=())
    series = replace(case.series, identity={"Comment": "v" * 5000, "Other": "word " * 1500}, kind_reason="why " * 300)
    assert len(texts(report_bytes(replace(case, series=series)))) > 5


def test_odd_characters_do_not_break_the_report(case_of):
    job = Job(title="Тест & <b>Ωmega</b> 漢字 \u200f\x07", item="a\nb", notes="&amp; <para>" + "x" * 400)
    whole = " ".join(texts(report_bytes(case_of(job=job))))
    assert "Тест & <b>Ωmega</b> □□" in whole and "&amp; <para>" in whole


def test_a_name_that_is_an_everyday_word_leaves_no_gap_in_our_own_sentences(case_of):
    # A gap in a sentence that a reader can complete would tell the name.
    case = case_of()
    remark = Remark("object-cut", Severity.NOTE, "The part reaches the first slice.")
    series = replace(case.series, identity={"Patient name": "Part"}, remarks=(remark,))
    whole = "\n".join(texts(report_bytes(replace(case, series=series, keep_identity=False))))
    assert "The part reaches the first slice." in " ".join(whole.split())
