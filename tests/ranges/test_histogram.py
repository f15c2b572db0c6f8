"""The value axis, and what counts as border."""

from __future__ import annotations

import numpy as np
import pytest

from tomofolio.ranges.histogram import MOST_BINS, choose_axis, take_census


def test_narrow_integers_keep_one_bin_a_level(phantoms):
    stored = np.random.default_rng(1).integers(0, 256, (16, 32, 32)).astype(np.int16)
    axis = choose_axis(phantoms.to_volume(stored))
    assert axis.width == 1
    census = take_census(phantoms.to_volume(stored))
    for level in (0, 17, 255):
        assert census.counts[np.argmin(np.abs(axis.centres - level))] == (stored == level).sum()


@pytest.mark.parametrize("factor", [257, 16])
def test_levels_left_out_by_a_rescaling_make_no_comb(phantoms, factor):
    eight_bit = np.clip(np.random.default_rng(2).normal(120, 15, (16, 32, 32)), 0, 255).astype(np.uint16)
    axis = choose_axis(phantoms.to_volume(eight_bit * np.uint16(factor)))
    assert axis.width == factor


def test_a_fractional_rescaling_makes_no_empty_bins_inside_a_peak(phantoms):
    eight_bit = np.clip(np.random.default_rng(2).normal(120, 15, (16, 64, 64)), 0, 255).round()
    census = take_census(phantoms.to_volume(np.rint(eight_bit * 3.7).astype(np.int16)))
    middle = np.abs(census.axis.centres - 120 * 3.7) < 50
    assert census.counts[middle].min() > 0


def test_rare_values_far_out_do_not_widen_the_bins(phantoms):
    values = np.random.default_rng(3).normal(0, 1, (16, 64, 64)).astype(np.float32)
    values[3, 4, 5] = 1e20
    census = take_census(phantoms.to_volume(values))
    assert census.axis.width < 0.1
    assert census.axis.bins <= MOST_BINS
    assert census.counts.sum() == values.size


def test_slices_with_their_own_rescale_meet_on_one_axis(phantoms):
    slope = np.linspace(0.5, 2.0, 12)
    values = np.random.default_rng(4).normal(1000, 40, (12, 40, 40))
    stored = np.rint((values + 200) / slope[:, None, None]).astype(np.int16)
    census = take_census(phantoms.to_volume(stored, slope, -200.0))
    read = stored * slope[:, None, None] - 200
    mean = np.average(census.axis.centres, weights=census.counts)
    assert mean == pytest.approx(read.mean(), abs=census.axis.width)


def test_no_data_is_neither_counted_nor_border(phantoms):
    stored = np.full((4, 20, 20), 50, np.int16)
    stored[:, 0:3] = -2000
    stored[:, 3] = 70
    gone = stored == -2000
    census = take_census(phantoms.to_volume(stored, no_data=gone))
    assert census.counts.sum() == (~gone).sum()
    at70 = np.abs(census.axis.centres - 70) < census.axis.width / 2
    assert census.border[at70].sum() == 4 * 20
    assert census.border.sum() == 4 * (20 + 2 * 16 - 0 + 18)


def test_all_voxels_without_data_give_an_empty_count(phantoms):
    census = take_census(phantoms.to_volume(np.zeros((3, 4, 4), np.int16), no_data=np.ones((3, 4, 4), bool)))
    assert census.counts.sum() == 0
