"""One series is recommended only where no person has to choose."""

import numpy as np
import pytest

from tomofolio.errors import InputError
from tomofolio.intake import read_series, survey
from tomofolio.intake.recommending import kernel_sharpness


def stack(make_stored, slices):
    return make_stored(shape=(slices, 5, 6))


def positions(count, step):
    return np.outer(step * np.arange(count), [0, 0, 1])


@pytest.fixture
def place(tmp_path, make_series, make_stored):
    def write(uid, slices=10, step=1.0, **elements):
        folder = tmp_path / uid
        make_series(folder, stack(make_stored, slices), positions=positions(slices, step), uid=uid, **elements)

    write.path = tmp_path
    return write


def recommended(path):
    return [item.description for item in survey(path) if item.recommended]


def test_the_only_usable_series_is_recommended(place):
    place("slices", SeriesDescription="slices")
    place("scout", slices=2, ImageType=["ORIGINAL", "PRIMARY", "LOCALIZER"])
    assert recommended(place.path) == ["slices"]


def test_thinner_slices_of_the_same_acquisition_are_preferred(place):
    place("thick", slices=10, step=2.0, SeriesDescription="thick")
    place("thin", slices=20, step=1.0, SeriesDescription="thin")
    assert recommended(place.path) == ["thin"]


def test_complete_series_are_preferred_to_thin_parts_of_it(place):
    place("whole", slices=20, step=2.0, SeriesDescription="whole")
    place("part", slices=20, step=1.0, SeriesDescription="part")
    assert recommended(place.path) == ["whole"]


@pytest.mark.parametrize(("smooth", "sharp"), [("STANDARD", "BONE"), ("Xy30f", "Xy70f"), ("SOFT", "LUNG")])
def test_smoother_kernel_is_preferred(place, smooth, sharp):
    place("a", ConvolutionKernel=sharp, SeriesDescription="sharp")
    place("b", ConvolutionKernel=smooth, SeriesDescription="smooth")
    assert recommended(place.path) == ["smooth"]


def test_kernel_names_of_unknown_schemes_are_not_ranked():
    assert kernel_sharpness("A") is None and kernel_sharpness("") is None


def test_original_images_are_preferred_to_derived_ones(place):
    place("a", ImageType=["DERIVED", "SECONDARY", "MPR"], SeriesDescription="derived", slices=40, step=0.25)
    place("b", SeriesDescription="original")
    assert recommended(place.path) == ["original"]


def test_short_test_shots_do_not_compete(place):
    place("a", SeriesDescription="scan", slices=20, AcquisitionNumber=2)
    place("b", SeriesDescription="shot", slices=3, AcquisitionNumber=1)
    assert recommended(place.path) == ["scan"]


@pytest.mark.parametrize(
    "different",
    [
        {"AcquisitionNumber": 2},
        {"KVP": "80"},
        {"StudyInstanceUID": "1.2.3"},
        {"FrameOfReferenceUID": "1.2.3"},
        {"TemporalPositionIdentifier": 2},
    ],
    ids=lambda elements: next(iter(elements)),
)
def test_different_scans_compete_and_none_is_recommended(place, different):
    first = {"AcquisitionNumber": 1, "TemporalPositionIdentifier": 1}
    place("a", **first)
    place("b", **(first | different))
    found = survey(place.path)
    assert all(item.fit and not item.recommended for item in found)
    with pytest.raises(InputError, match="several series compete") as caught:
        read_series(place.path)
    for item in found:
        assert item.uid in str(caught.value)
    for item in found:
        assert read_series(place.path, item.uid)[1].uid == item.uid


def test_a_unique_beginning_of_the_uid_chooses_and_others_are_refused_with_the_choices(place):
    place("a", SeriesInstanceUID="1.2.30.1")
    place("b", SeriesInstanceUID="1.2.31.1")
    place("c", SeriesInstanceUID="1.2.31.1.5")
    assert read_series(place.path, "1.2.30")[1].uid == "1.2.30.1"
    assert read_series(place.path, "1.2.31.1")[1].uid == "1.2.31.1"  # a whole UID, though another begins with it
    with pytest.raises(InputError, match=r"2 series have a UID that begins with '1\.2\.31'"):
        read_series(place.path, "1.2.31")
    with pytest.raises(InputError, match=r"(?s)no series has a UID that begins with '9'.*1\.2\.30\.1"):
        read_series(place.path, "9")
