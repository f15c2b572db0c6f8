"""The command line as scripts outside call it: exit status, messages, files."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import zipfile

import pikepdf
import pypdf
import pytest

from tomofolio.cli import main


def run(*arguments, **environment):
    """The command in a process of its own, as a user starts it."""
    return subprocess.run(
        [sys.executable, "-m", "tomofolio", *map(str, arguments)],
        capture_output=True,
        encoding="utf-8",
        env={**os.environ, **environment},
    )


def files(folder):
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file())


@pytest.fixture(scope="module")
def done(block_series, tmp_path_factory):
    """One full run with data files."""
    place = tmp_path_factory.mktemp("done")
    result = run(
        "report", block_series, "--preset", "casting", "--out", place / "r.pdf", "--data", place / "data",
        SOURCE_DATE_EPOCH="1700000000",
    )  # fmt: skip
    assert result.returncode == 0, result.stderr
    return place, result


def test_report_writes_the_pdf_and_the_data_files_and_is_quiet_in_a_pipe(done):
    place, result = done
    written = files(place)
    assert {"r.pdf", "data/measurements.json", "data/voids.csv", "data/ranges.csv"} <= set(written)
    assert sum(name.startswith("data/images/") and name.endswith(".png") for name in written) >= 10
    assert result.stderr == ""
    assert len(result.stdout.splitlines()) == 5
    with pikepdf.open(place / "r.pdf") as pdf:
        assert len(pdf.pages) >= 5


def test_same_input_gives_the_same_bytes_in_every_file(done, block_series, tmp_path):
    place, _ = done
    again = run(
        "report", block_series, "--preset", "casting", "--out", tmp_path / "r.pdf", "--data", tmp_path / "data",
        SOURCE_DATE_EPOCH="1700000000", NUMBA_NUM_THREADS="1",
    )  # fmt: skip
    assert again.returncode == 0, again.stderr
    assert files(tmp_path) == files(place)
    for name in files(place):
        assert (tmp_path / name).read_bytes() == (place / name).read_bytes(), name


def test_identity_is_hidden_in_doubt_everywhere(done):
    place, result = done
    document = json.loads((place / "data" / "measurements.json").read_text(encoding="utf-8"))
    assert document["series"]["uid"] is None
    with pikepdf.open(place / "r.pdf") as pdf:
        pdf.save(place / "plain.pdf", compress_streams=False, stream_decode_level=pikepdf.StreamDecodeLevel.all)
    text = "".join(page.extract_text() for page in pypdf.PdfReader(place / "r.pdf").pages)
    assert "qorvex" not in (text + result.stdout).lower()
    for name in files(place):
        assert b"qorvex" not in (place / name).read_bytes().lower(), name
    (place / "plain.pdf").unlink()


def test_default_name_comes_from_the_series_and_lies_in_the_current_folder(block_series, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert main(["report", str(block_series), "--identity", "keep", "--preset", "casting"]) == 0
    (name,) = files(tmp_path)
    assert name.startswith("tomofolio-qorvex-block-") and name.endswith(".pdf")


def test_survey_json_lists_what_is_there(block_series, capsys):
    assert main(["survey", str(block_series), "--json"]) == 0
    (entry,) = json.loads(capsys.readouterr().out)
    assert entry["slices"] == 32 and entry["shape"] == [32, 64, 64]
    assert entry["spacing_mm"] == pytest.approx([0.2, 0.2, 0.2])
    assert entry["fit"] is True and entry["recommended"] is True
    assert entry["modality"] == "CT" and entry["description"] == "qorvex block"


def test_survey_table_is_for_people(block_series, capsys):
    assert main(["survey", str(block_series)]) == 0
    out = capsys.readouterr().out
    assert "recommended" in out and "qorvex block" in out


def test_a_zip_is_read_like_a_folder(block_series, tmp_path, capsys):
    with zipfile.ZipFile(tmp_path / "scan.zip", "w") as archive:
        for path in block_series.iterdir():
            archive.write(path, f"disc/{path.name}")
    assert main(["survey", str(tmp_path / "scan.zip"), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)[0]["slices"] == 32


def test_a_terminal_without_unicode_gets_replacements_and_no_fault(block_series):
    result = run("survey", block_series, PYTHONIOENCODING="ascii", PYTHONUTF8="0")
    assert result.returncode == 0 and "?" in result.stdout and "64 ? 64" in result.stdout


def test_wrong_calls_end_with_2(block_series, tmp_path):
    assert run("report").returncode == 2
    assert run("report", block_series, "--presett", "casting").returncode == 2
    assert run("report", block_series, "--preset", "none", "--out", tmp_path / "r.pdf").returncode == 2
    assert run("report", block_series, "--job", tmp_path / "none.toml", "--out", tmp_path / "r.pdf").returncode == 2
    odd = run("report", block_series, "--out", tmp_path / "r.pdf", SOURCE_DATE_EPOCH="yesterday")
    assert odd.returncode == 2 and "SOURCE_DATE_EPOCH" in odd.stderr
    assert files(tmp_path) == []


def one_message(result, status, *words):
    assert result.returncode == status, result.stderr
    assert "Traceback" not in result.stderr and len(result.stderr.strip().splitlines()) == 1
    for word in words:
        assert word in result.stderr


def test_unusable_input_ends_with_3_and_one_message(block_series, block_pixels, series_writer, tmp_path):
    out = ("--out", tmp_path / "out" / "r.pdf")
    (tmp_path / "out").mkdir()
    (tmp_path / "empty").mkdir()
    (tmp_path / "text").mkdir()
    (tmp_path / "text" / "notes.txt").write_text("no scan here")
    one_message(run("report", tmp_path / "none", *out), 3, "none")
    one_message(run("report", tmp_path / "empty", *out), 3)
    one_message(run("report", tmp_path / "text", *out), 3)
    one_message(run("report", series_writer(tmp_path / "one", block_pixels[:1]), *out), 3)
    few = block_pixels[:6]
    one_message(run("report", series_writer(tmp_path / "zero", few, RescaleSlope=0), *out), 3, "lope")
    one_message(run("report", series_writer(tmp_path / "nowhere", few, ImagePositionPatient=None), *out), 3)
    one_message(run("report", series_writer(tmp_path / "unscaled", few, PixelSpacing=None), *out), 3)
    one_message(run("report", series_writer(tmp_path / "mr", few, Modality="MR"), *out), 3)
    choose = run("report", block_series, "--series", "9.9.9", *out)
    assert choose.returncode == 3 and choose.stderr.startswith("tomofolio: ") and "--series" in choose.stderr
    assert files(tmp_path / "out") == []


def test_a_place_that_cannot_be_written_ends_with_4_before_any_work(block_series, tmp_path):
    one_message(run("report", block_series, "--out", tmp_path / "none" / "r.pdf"), 4, "none")
    (tmp_path / "keep.dcm").write_bytes(b"not a pdf")
    one_message(run("report", block_series, "--out", tmp_path / "keep.dcm"), 4, "keep.dcm")
    one_message(run("report", block_series, "--out", tmp_path / "r.pdf", "--data", tmp_path / "keep.dcm"), 4)
    assert (tmp_path / "keep.dcm").read_bytes() == b"not a pdf"
    assert files(tmp_path) == ["keep.dcm"]
