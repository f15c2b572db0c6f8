"""Multi-frame CT: the same volume as from single slices, against highdicom's converter and reader."""

import copy
import zipfile

import highdicom
import numpy as np
import pydicom
import pytest
from highdicom.legacy import LegacyConvertedEnhancedCTImage
from pydicom.dataset import Dataset
from pydicom.uid import EnhancedCTImageStorage, JPEG2000Lossless, RLELossless, generate_uid

from tomofolio.errors import InputError
from tomofolio.intake import read_series, survey


def group(**elements):
    item = Dataset()
    for keyword, value in elements.items():
        setattr(item, keyword, value)
    return [item]


def enhanced(single):
    """An Enhanced CT object from single slices: what all frames share once, the rest in each frame."""
    data = copy.deepcopy(single[0])
    for keyword in ("ImagePositionPatient", "ImageOrientationPatient", "PixelSpacing", "SliceThickness", "KVP"):
        delattr(data, keyword)
    for keyword in ("RescaleSlope", "RescaleIntercept", "RescaleType", "ConvolutionKernel"):
        delattr(data, keyword)
    data.SOPClassUID = data.file_meta.MediaStorageSOPClassUID = EnhancedCTImageStorage
    data.NumberOfFrames = len(single)
    data.PixelData = b"".join(one.PixelData for one in single)
    shared = Dataset()
    shared.PixelMeasuresSequence = group(PixelSpacing=single[0].PixelSpacing, SliceThickness="2.0")
    shared.PlaneOrientationSequence = group(ImageOrientationPatient=single[0].ImageOrientationPatient)
    shared.CTXRayDetailsSequence = group(KVP="90")
    data.SharedFunctionalGroupsSequence = [shared]
    frames = []
    for k, one in enumerate(single):
        frame = Dataset()
        frame.PlanePositionSequence = group(ImagePositionPatient=one.ImagePositionPatient)
        frame.CTImageFrameTypeSequence = group(FrameType=["ORIGINAL", "PRIMARY", "VOLUME", "NONE"])
        frame.CTExposureSequence = group(XRayTubeCurrentInmA=100.0 + k)
        frame.PixelValueTransformationSequence = group(
            RescaleSlope=str(1 + k), RescaleIntercept=str(-10 * k), RescaleType="HU"
        )
        frames.append(frame)
    data.PerFrameFunctionalGroupsSequence = frames
    return data


@pytest.fixture
def single(make_slice, make_stored):
    stored = make_stored(seed=11, shape=(5, 32, 33))
    order = [3, 0, 4, 1, 2]
    tilted = (1, 0, 0, 0, 0.95, -0.31224990)
    return stored, [make_slice(stored[k], k, position=(5, 6, 1.5 * k), orientation=tilted) for k in order]


@pytest.mark.parametrize("syntax", [None, RLELossless, JPEG2000Lossless])
def test_frames_are_sorted_and_rescaled_each_by_its_own_groups(tmp_path, single, save_slice, syntax):
    stored, slices = single
    data = enhanced(slices)
    if syntax is not None:
        data.compress(syntax, generate_instance_uid=False)
    save_slice(data, tmp_path / "frames.dcm")
    volume, series = read_series(tmp_path)
    np.testing.assert_array_equal(volume.stored, stored)
    np.testing.assert_array_equal(volume.slope, 1.0 + np.array([1, 3, 4, 0, 2]))
    np.testing.assert_array_equal(volume.intercept, -10.0 * np.array([1, 3, 4, 0, 2]))
    np.testing.assert_allclose(volume.grid.slice_positions_mm, 1.5 * np.arange(5), atol=1e-6)
    np.testing.assert_allclose(volume.grid.direction[:, 2], [0, 0, 1], atol=1e-9)
    assert volume.unit.symbol == "HU" and series.files == 1 and series.slice_thickness_mm == 2.0
    assert series.acquisition["Tube voltage"] == "90 kV"
    assert series.acquisition["Tube current"] == "100 to 104 mA"
    (entry,) = survey(tmp_path)
    assert entry.fit and entry.recommended and entry.shape == (5, 32, 33)


def test_frames_inside_a_zip_are_read(tmp_path, single, save_slice):
    stored, slices = single
    path = save_slice(enhanced(slices), tmp_path / "frames.dcm")
    with zipfile.ZipFile(tmp_path / "a.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        archive.write(path, "frames.dcm")
    np.testing.assert_array_equal(read_series(tmp_path / "a.zip")[0].stored, stored)


def test_legacy_conversion_by_highdicom_gives_the_volume_of_the_single_slices(tmp_path, make_slice, make_stored):
    stored = make_stored(seed=12, shape=(4, 8, 9))
    elements = {"PatientBirthDate": "", "PatientSex": "", "StudyID": "1", "StudyDate": "", "StudyTime": ""}
    elements |= {"AccessionNumber": "", "Manufacturer": "M", "ReferringPhysicianName": "", "AcquisitionNumber": 1}
    single = [make_slice(pixels, k, position=(1, 2, 0.7 * k), **elements) for k, pixels in enumerate(stored)]
    converted = LegacyConvertedEnhancedCTImage(single[::-1], generate_uid(), 2, generate_uid(), 1)
    converted.save_as(tmp_path / "frames.dcm")
    volume, _ = read_series(tmp_path)
    np.testing.assert_array_equal(volume.stored, stored)
    other = highdicom.imread(tmp_path / "frames.dcm").get_volume()
    first = other.map_indices_to_reference(np.array([[0, 0, 0]]))[0]
    last = other.map_indices_to_reference(np.array([[3, 7, 8]]))[0]
    ends = volume.grid.to_mm(np.array([[0, 0, 0], [3, 7, 8]]))
    # highdicom's slice order may run the other way: its two corners are compared as corners of the same box.
    np.testing.assert_allclose(sorted([first[2], last[2]]), sorted(ends[:, 2]), atol=1e-6)
    np.testing.assert_allclose(first[:2], ends[0, :2], atol=1e-6)
    np.testing.assert_allclose(last[:2], ends[1, :2], atol=1e-6)


def test_frames_cut_short_or_not_described_are_refused(tmp_path, single, save_slice):
    data = enhanced(single[1])
    path = save_slice(data, tmp_path / "cut" / "frames.dcm")
    path.write_bytes(path.read_bytes()[:-100])
    with pytest.raises(InputError, match="pixel data end early"):
        read_series(tmp_path / "cut")
    data.NumberOfFrames = 6
    save_slice(data, tmp_path / "more" / "frames.dcm")
    with pytest.raises(InputError, match="6 frames are declared and 5 are described"):
        read_series(tmp_path / "more")


def test_pydicom_reads_the_same_frames(tmp_path, single, save_slice):
    path = save_slice(enhanced(single[1]), tmp_path / "frames.dcm")
    frames = pydicom.dcmread(path).pixel_array
    volume, _ = read_series(path)
    np.testing.assert_array_equal(volume.stored, frames[[1, 3, 4, 0, 2]])
