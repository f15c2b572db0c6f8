"""The committed files are what the script draws, and other libraries read them."""

from __future__ import annotations

import json

import highdicom
import numpy as np
import pydicom
import pytest
import SimpleITK as sitk  # noqa: N813 - the library's own usual name

from tomofolio.intake import survey
from tomofolio.job import load_job
from tomofolio.volume import Kind

#: Elements of type 1 and 2 in the CT image object that hold for these files: PS3.3, table A.3-1 and its modules
#: C.7.1.1, C.7.2.1, C.7.3.1, C.7.4.1, C.7.5.1, C.7.6.1 to 3, C.8.2.1 and C.12.1 (from memory).
FILLED = (
    "SOPClassUID",
    "SOPInstanceUID",
    "StudyInstanceUID",
    "SeriesInstanceUID",
    "FrameOfReferenceUID",
    "Modality",
    "ImageType",
    "InstanceNumber",
    "PixelSpacing",
    "ImageOrientationPatient",
    "ImagePositionPatient",
    "SamplesPerPixel",
    "PhotometricInterpretation",
    "Rows",
    "Columns",
    "BitsAllocated",
    "BitsStored",
    "HighBit",
    "PixelRepresentation",
    "RescaleIntercept",
    "RescaleSlope",
)
PRESENT = (
    "PatientName",
    "PatientID",
    "PatientBirthDate",
    "PatientSex",
    "StudyDate",
    "StudyTime",
    "StudyID",
    "AccessionNumber",
    "ReferringPhysicianName",
    "SeriesNumber",
    "Laterality",
    "PatientPosition",
    "Manufacturer",
    "PositionReferenceIndicator",
    "SliceThickness",
    "KVP",
    "AcquisitionNumber",
)


@pytest.mark.parametrize("first", [5, 21])
def test_files_hold_the_slices_that_the_script_draws(drawing, scan, first):
    some = range(first, first + 3)
    drawn = getattr(drawing, scan.name).draw(some)
    # Another processor may round the blur's last bit differently, which can move a rounded value by one.
    difference = np.abs(scan.values[some.start : some.stop] - drawn)
    assert difference.max() <= 1 and np.count_nonzero(difference) < 1e-4 * difference.size


@pytest.mark.slow
def test_script_writes_the_committed_bytes_anew(drawing, scan, tmp_path):
    getattr(drawing.draw, f"draw_{scan.name}")(tmp_path)
    again = sorted((tmp_path / scan.name).glob("*.dcm"))
    assert [path.name for path in again] == [path.name for path in scan.paths]
    for old, new in zip(scan.paths, again, strict=True):
        assert new.read_bytes() == old.read_bytes(), old.name
    assert json.loads((tmp_path / f"{scan.name}-truth.json").read_text(encoding="utf-8")) == scan.truth


def test_writing_twice_gives_the_same_bytes_and_the_pixels_come_back(drawing, tmp_path):
    pixels = np.random.default_rng(5).integers(0, 16, (2, 25, 22)).cumsum(axis=2).astype(np.uint16)
    pixels[0, 0, :2] = 0, 4095
    written = []
    for place in ("one", "two"):
        folder = tmp_path / place / "scan"
        drawing.dicom_files.write_series(folder, pixels, (1.0, 0.5, 0.5), (0.0, 0.0, 0.0), {"RescaleSlope": 1}, bits=12)
        written.append([path.read_bytes() for path in sorted(folder.glob("*.dcm"))])
        back = [pydicom.dcmread(path).pixel_array for path in sorted(folder.glob("*.dcm"))]
        np.testing.assert_array_equal(back, pixels)
    assert written[0] == written[1]


def test_scan_is_small_and_losslessly_compressed(scan):
    assert sum(path.stat().st_size for path in scan.paths) < 4_000_000
    assert {header.file_meta.TransferSyntaxUID for header in scan.headers} == {pydicom.uid.JPEGLSLossless}
    assert all("LossyImageCompression" not in header for header in scan.headers)


def test_every_file_is_a_complete_ct_image(scan):
    for header in scan.headers:
        assert header.SOPClassUID == pydicom.uid.CTImageStorage == header.file_meta.MediaStorageSOPClassUID
        assert [name for name in FILLED if header.get(name) in (None, "")] == []
        assert [name for name in PRESENT if name not in header] == []
        assert list(header.ImageType) == ["ORIGINAL", "PRIMARY", "AXIAL"]
    one_for_all = ("StudyInstanceUID", "SeriesInstanceUID", "FrameOfReferenceUID")
    assert all(len({header[name].value for header in scan.headers}) == 1 for name in one_for_all)
    assert len({header.SOPInstanceUID for header in scan.headers}) == len(scan.headers)


def test_simpleitk_reads_the_same_values_at_the_same_places(drawing, scan):
    reader = sitk.ImageSeriesReader()
    reader.SetFileNames(reader.GetGDCMSeriesFileNames(str(scan.folder)))
    image = reader.Execute()
    np.testing.assert_array_equal(sitk.GetArrayFromImage(image), scan.values)
    module = getattr(drawing, scan.name)
    np.testing.assert_allclose(image.GetSpacing(), module.SPACING[::-1])
    np.testing.assert_allclose(image.GetOrigin(), module.ORIGIN)


def test_highdicom_builds_the_same_volume(drawing, scan):
    volume = highdicom.get_volume_from_series(scan.headers)
    module = getattr(drawing, scan.name)
    volume = volume.to_patient_orientation("HPL")  # slices to the head, rows to the back, columns to the left
    assert volume.spatial_shape == module.SHAPE
    np.testing.assert_allclose(volume.spacing, module.SPACING)
    np.testing.assert_allclose(volume.map_indices_to_reference(np.zeros((1, 3), int))[0], module.ORIGIN)
    np.testing.assert_allclose(volume.array, scan.values)


def test_survey_finds_one_series_and_recommends_it(scan):
    (series,) = survey(scan.folder)
    assert series.recommended and series.slices == len(scan.paths)


def test_component_has_no_birth_date_or_sex_and_the_phantom_no_birth_date(cover, forearm):
    for header in cover.headers:
        assert not header.PatientBirthDate and not header.PatientSex and not header.PatientPosition
        assert [element.tag.group for element in header].count(0x0014) == 3
    for header in forearm.headers:
        assert not header.PatientBirthDate and header.PatientSex == "O" and header.PatientPosition == "HFS"
        assert header.BitsStored == 12 and header.RescaleIntercept == -1024


def test_job_sheet_is_valid_and_of_the_same_kind(scan):
    job = load_job(scan.job)
    assert job.kind is {"cover": Kind.COMPONENT, "forearm": Kind.PATIENT}[scan.name]
    assert job.laboratory["name"] and job.item and job.number
    # One sheet names a reviewer and one is silent, so that both can be shown.
    assert bool(job.reviewer_name) == (scan.name == "forearm")
