"""Whatever lies below a path is listed; what cannot be used says why."""

import json
import os
import shutil
import warnings
import zipfile

import numpy as np
import pytest
from pydicom.fileset import FileSet
from pydicom.uid import SecondaryCaptureImageStorage, XRayRadiationDoseSRStorage

from tomofolio.errors import InputError
from tomofolio.intake import read_series, survey
from tomofolio.listing import survey_json


def test_survey_gives_the_fields_of_the_interface(tmp_path, make_series, make_stored):
    make_series(tmp_path / "deep" / "er", make_stored())
    (tmp_path / "notes.txt").write_text("no image")
    (tmp_path / "empty.dcm").write_bytes(b"")
    (entry,) = json.loads(survey_json(survey(tmp_path)))
    assert entry["slices"] == 5 and entry["shape"] == [5, 6, 7]
    assert entry["spacing_mm"] == pytest.approx([1.0, 0.5, 0.4])
    assert entry["unit"] == "HU" and entry["modality"] == "CT" and entry["sop_class"] == "CT Image Storage"
    assert entry["fit"] is True and entry["recommended"] is True
    assert all(sentence.endswith(".") for sentence in entry["reasons"])


@pytest.mark.parametrize(
    ("elements", "reason"),
    [
        ({"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"]}, "localizer"),
        ({"ImageType": ["DERIVED", "SECONDARY", "PROJECTION IMAGE"]}, "projections"),
        ({"SOPClassUID": SecondaryCaptureImageStorage}, "secondary captures"),
        ({"Modality": "MR"}, "modality is MR"),
        ({"NumberOfFrames": "5"}, "5 frames in an object of a class for single images"),
        ({"PhotometricInterpretation": "PALETTE COLOR"}, "colour"),
    ],
)
def test_what_cannot_be_used_is_listed_with_the_reason(tmp_path, make_series, make_stored, elements, reason):
    make_series(tmp_path, make_stored(), **elements)
    (entry,) = survey(tmp_path)
    assert not entry.fit and not entry.recommended
    assert reason in entry.reasons[0]
    with pytest.raises(InputError):
        read_series(tmp_path)


def test_dose_reports_are_listed_as_holding_no_images(tmp_path, make_slice, save_slice, make_stored):
    data = make_slice(make_stored()[0], SOPClassUID=XRayRadiationDoseSRStorage, Modality="SR")
    for keyword in ("PixelData", "Rows", "Columns"):
        delattr(data, keyword)
    save_slice(data, tmp_path / "dose")
    (entry,) = survey(tmp_path)
    assert entry.slices == 0 and entry.shape is None and entry.spacing_mm is None and not entry.fit
    assert "no images" in entry.reasons[0]


def test_single_slice_is_listed_as_unfit(tmp_path, make_series, make_stored):
    make_series(tmp_path, make_stored(shape=(1, 5, 6)))
    (entry,) = survey(tmp_path)
    assert not entry.fit and "single slice" in entry.reasons[0]


@pytest.mark.parametrize(
    ("elements", "name"),
    [
        ({"FrameOfReferenceUID": "1.2.3"}, "2 frames of reference"),
        ({"StudyInstanceUID": "1.2.3"}, "2 studies"),
        ({"PatientID": "OTHER"}, "2 patients"),
    ],
)
def test_files_of_one_series_that_belong_to_different_scans_are_never_mixed(
    tmp_path, make_series, make_stored, elements, name
):
    def change(k, data):
        if k >= 3:
            for keyword, value in elements.items():
                setattr(data, keyword, value)

    make_series(tmp_path, make_stored(), change=change)
    found = survey(tmp_path)
    assert [item.slices for item in found] == [3, 2]
    assert not any(item.fit for item in found) and all(name in item.reasons[0] for item in found)
    with pytest.raises(InputError, match=name):
        read_series(tmp_path, found[0].uid)


def test_zip_is_read_in_place_and_gives_the_same_volume(tmp_path, make_series, make_stored):
    stored = make_stored(shape=(6, 20, 21))
    make_series(tmp_path / "plain", stored)
    with zipfile.ZipFile(tmp_path / "scan.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        for path in sorted((tmp_path / "plain").iterdir(), reverse=True):
            archive.write(path, f"any/folder/{path.name}")
        archive.writestr("readme.txt", "no image")
    from_zip, from_folder = read_series(tmp_path / "scan.zip"), read_series(tmp_path / "plain")
    np.testing.assert_array_equal(from_zip[0].stored, stored)
    assert from_zip[1] == from_folder[1]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["plain", "scan.zip"]


def test_file_names_that_are_no_text_can_be_shown(tmp_path, make_series, make_stored):
    (path,) = make_series(tmp_path, make_stored(shape=(1, 5, 6)))
    path.rename(os.fsdecode(os.fsencode(tmp_path) + b"/\xff\n.dcm"))
    with pytest.raises(InputError, match="single slice") as caught:
        read_series(tmp_path)
    assert str(caught.value).encode("utf-8") and "\n" not in str(caught.value)


def test_dicomdir_gives_the_files_it_lists(tmp_path, make_series, make_stored):
    stored = make_stored()
    files = FileSet()
    for path in make_series(tmp_path / "plain", stored, StudyDate="20200101", StudyTime="101010", StudyID="1"):
        files.add(path)
    files.write(tmp_path / "medium")
    shutil.copytree(tmp_path / "plain", tmp_path / "medium" / "unlisted")
    listing = tmp_path / "medium" / "DICOMDIR"
    np.testing.assert_array_equal(read_series(listing)[0].stored, stored)
    next((tmp_path / "medium" / "PT000000").rglob("IM000000")).unlink()
    volume, series = read_series(listing)
    assert volume.shape[0] == 4
    assert any(remark.code == "files-missing" and "One file" in remark.text for remark in series.remarks)
    shutil.rmtree(tmp_path / "medium" / "PT000000")
    with pytest.raises(InputError, match="none of the 5 files that the DICOMDIR lists is there"):
        survey(listing)


def test_pydicoms_own_test_files_never_raise_anything_but_input_errors(pydicom_files, capfd):
    # 100 files of many makers, some broken on purpose, and a medium with its DICOMDIR.
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        for path in [pydicom_files, pydicom_files / "dicomdirtests", *sorted(pydicom_files.rglob("*"))]:
            try:
                found = survey(path)
            except InputError as error:
                assert str(error).endswith(".") and error.remedy
            else:
                assert found and sum(item.recommended for item in found) <= 1
                assert all(item.fit or item.reasons for item in found)
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("seed", range(3))
def test_cut_and_scrambled_files_never_raise_anything_but_input_errors(
    tmp_path, make_slice, save_slice, make_stored, seed
):
    rng = np.random.default_rng(seed)
    whole = save_slice(make_slice(make_stored()[0]), tmp_path / "whole").read_bytes()
    for count in range(60):
        broken = bytearray(whole[: rng.integers(140, len(whole))])
        for place in rng.integers(128 if count % 2 else 140, len(broken), size=rng.integers(0, 12)):
            broken[place] = rng.integers(256)
        (tmp_path / "broken").mkdir(exist_ok=True)
        (tmp_path / "broken" / "a").write_bytes(broken)
        (tmp_path / "broken" / "b").write_bytes(whole)
        for attempt in (survey, read_series):
            try:
                attempt(tmp_path / "broken")
            except InputError as error:
                assert error.problem
