"""Missing slices are told apart from gaps that are meant."""

import numpy as np
import pytest

from tomofolio.errors import InputError
from tomofolio.intake import read_series, survey
from tomofolio.intake.gaps import gap_remarks, missing_slices
from tomofolio.volume import Grid


def grid(positions):
    return Grid(np.zeros(3), np.eye(3), 0.5, 0.5, np.asarray(positions, float), 4, 4)


def codes(remarks):
    return {remark.code for remark in remarks}


@pytest.mark.parametrize("taken", [{3}, {4, 5}, {2, 8}, {3, 4, 5, 9}])
@pytest.mark.parametrize("step", [0.03, 0.625, 5.0])
def test_slices_taken_out_of_an_even_series_are_counted_and_placed(taken, step):
    left = [k for k in range(14) if k not in taken]
    found = missing_slices(grid(step * (np.array(left) - left[0])))
    assert sum(count for _, count in found) == len(taken)
    for k, count in found:
        assert set(range(left[k] + 1, left[k] + 1 + count)) <= taken


@pytest.mark.parametrize("seed", range(4))
def test_uneven_gaps_are_not_taken_for_missing_slices(seed):
    positions = np.concatenate(([0], np.cumsum(np.random.default_rng(seed).uniform(0.5, 2.9, size=20))))
    assert missing_slices(grid(positions)) == []
    assert "slice-gaps-uneven" in codes(gap_remarks(grid(positions), None))


def test_change_from_thin_to_thick_slices_is_not_taken_for_missing_slices():
    positions = np.concatenate((2.0 * np.arange(8), 14 + 4.0 * np.arange(1, 8)))
    assert missing_slices(grid(positions)) == []


def test_missing_slice_is_a_caution_with_its_place_and_is_not_filled(tmp_path, make_series, make_stored):
    stored = make_stored(shape=(6, 4, 5))
    positions = np.outer([0.0, 1.0, 2.0, 4.0, 5.0, 6.0], [0, 0, 1])
    make_series(tmp_path, stored, positions=positions)
    volume, series = read_series(tmp_path)
    np.testing.assert_array_equal(volume.stored, stored)
    np.testing.assert_allclose(volume.grid.slice_positions_mm, positions[:, 2])
    remark = next(remark for remark in series.remarks if remark.code == "slices-missing")
    assert remark.severity == "caution" and "between slices 3 and 4 (2 to 4 mm" in remark.text
    assert any("missing" in reason for reason in survey(tmp_path)[0].reasons)


def test_thickness_tells_slices_that_do_not_touch_from_those_that_overlap():
    assert "slices-apart" in codes(gap_remarks(grid(3.0 * np.arange(5)), 1.0))
    assert "slices-overlap" in codes(gap_remarks(grid(1.0 * np.arange(5)), 2.0))
    assert not codes(gap_remarks(grid(1.0 * np.arange(5)), 1.0))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"SOPInstanceUID": "1.2.3"}, "images of different times or kinds"),
        ({"SOPInstanceUID": "1.2.3", "AcquisitionNumber": 2}, "2 acquisitions"),
        ({}, "copies of the same image"),
    ],
)
def test_two_slices_at_one_place_are_refused_with_the_likely_reason(
    tmp_path, make_series, make_slice, save_slice, make_stored, change, message
):
    stored = make_stored()
    make_series(tmp_path, stored)
    save_slice(make_slice(stored[2], 2, **change), tmp_path / "extra")
    with pytest.raises(InputError, match=f"one place holds more than one slice.*{message}"):
        read_series(tmp_path)
