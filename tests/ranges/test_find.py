"""Ranges of phantoms with known materials, from several seeds."""

from __future__ import annotations

import numpy as np
import pytest
from skimage.filters import threshold_otsu

from tomofolio.errors import CallError
from tomofolio.ranges import find_ranges

SEEDS = (1, 2, 3)


def as_int16(values):
    return np.clip(np.rint(values), -32768, 32767).astype(np.int16)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(("noise", "blur"), [(60, 0.6), (400, 0.9), (1000, 1.3)])
def test_two_materials_give_two_ranges_with_the_boundary_half_way(phantoms, seed, noise, blur):
    stored = as_int16(phantoms.draw([phantoms.part_in_air(seed)], [1000, 9000], noise, seed, blur=blur))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert [item.background for item in ranges.items] == [True, False]
    assert ranges.items[0].peak == pytest.approx(1000, abs=20 + 0.1 * noise)
    assert ranges.items[1].peak == pytest.approx(9000, abs=20 + 0.1 * noise)
    assert ranges.items[1].spread == pytest.approx(noise, rel=0.2)
    assert ranges.boundaries[0] == pytest.approx(5000, abs=20 + 0.1 * noise)
    assert ranges.main.id == "R2"
    # Otsu, IEEE Trans. SMC 9(1) 1979, as in scikit-image: between the two classes.
    assert ranges.items[0].peak < threshold_otsu(stored) < ranges.items[1].peak


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("noise", [10, 30])
def test_four_tissues_give_four_ranges(phantoms, seed, noise):
    shape = (40, 96, 96)
    k = range(-2, 43, 2)
    shift = float(np.random.default_rng(seed).uniform(-2, 2))
    skin = phantoms.balls_in(shape, [(n, 48 + shift, 48) for n in k], [36] * len(k))
    muscle = phantoms.balls_in(shape, [(n, 48 + shift, 50) for n in k], [29] * len(k))
    bones = phantoms.balls_in(shape, [(n, y, x) for n in k for y, x in ((44, 40), (54, 60))], [7] * 2 * len(k))
    values = phantoms.draw([skin, muscle, bones], [-1000, -95, 55, 1250], noise, seed)
    ranges = find_ranges(phantoms.to_volume(as_int16(values)))
    assert [item.peak for item in ranges.items] == pytest.approx([-1000, -95, 55, 1250], abs=6)
    assert ranges.boundaries == pytest.approx([-547.5, -20, 652.5], abs=6)
    assert [item.background for item in ranges.items] == [True, False, False, False]


def test_a_uniform_scan_has_one_range_and_no_background(phantoms):
    ranges = find_ranges(phantoms.to_volume(as_int16(1000 + 50 * phantoms.grainy((40, 60, 60), 4))))
    (item,) = ranges.items
    assert (item.lower, item.upper, item.background) == (None, None, False)
    assert item.peak == pytest.approx(1000, abs=3)
    assert item.spread == pytest.approx(50, rel=0.03)
    assert len(ranges.boundaries) == 0


def test_a_constant_scan_has_one_range(phantoms):
    (item,) = find_ranges(phantoms.to_volume(np.full((4, 12, 12), 7, np.int16))).items
    assert item.peak == pytest.approx(7, abs=0.5)


def test_a_scan_without_data_has_one_range_and_no_figures_that_are_not_numbers(phantoms):
    ranges = find_ranges(phantoms.to_volume(np.zeros((3, 8, 8), np.int16), no_data=np.ones((3, 8, 8), bool)))
    assert len(ranges.items) == 1
    assert np.isfinite(ranges.items[0].peak)
    assert np.isfinite(ranges.model).all()


def test_a_block_that_fills_the_scan_has_no_background_though_it_has_voids(phantoms):
    centres = np.random.default_rng(6).uniform(14, 50, (12, 3))
    solid = 1 - phantoms.balls_in((64, 64, 64), centres, np.full(12, 4.5))
    ranges = find_ranges(phantoms.to_volume(as_int16(phantoms.draw([solid], [0, 1000], 30, 6))))
    assert len(ranges.items) == 2
    assert ranges.background is None


def test_names_are_given_in_ascending_order_and_must_be_as_many_as_ranges(phantoms):
    stored = as_int16(phantoms.draw([phantoms.part_in_air(1)], [1000, 9000], 300, 1))
    ranges = find_ranges(phantoms.to_volume(stored), names=("air", "light alloy"), named_by="job sheet")
    assert [(i.id, i.name, i.named_by) for i in ranges.items] == [
        ("R1", "air", "job sheet"),
        ("R2", "light alloy", "job sheet"),
    ]
    with pytest.raises(
        CallError, match=r"3 names are given, but 2 ranges were found .* at (99\d|100\d), (89|90)\d\d u"
    ):
        find_ranges(phantoms.to_volume(stored), names=("a", "b", "c"))


def test_the_model_holds_as_many_voxels_as_the_histogram_and_follows_it(phantoms):
    stored = as_int16(phantoms.draw([phantoms.part_in_air(2)], [1000, 9000], 400, 2))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert ranges.histogram.counts.sum() == stored.size
    assert ranges.model.sum() == pytest.approx(stored.size, rel=1e-3)
    difference = np.abs(np.cumsum(ranges.model) - np.cumsum(ranges.histogram.counts)).max()
    assert difference < 0.01 * stored.size


def test_the_same_scan_gives_the_same_ranges_to_the_bit(phantoms):
    stored = as_int16(phantoms.draw([phantoms.part_in_air(1)], [1000, 9000], 300, 1))
    first, second = (find_ranges(phantoms.to_volume(stored)) for _ in range(2))
    assert first.items == second.items
    np.testing.assert_array_equal(first.model, second.model)


def test_intervals_hold_the_truth(phantoms):
    # 24 draws of noise and place; with 95 % intervals fewer than 20 hits have a probability of 0.6 %.
    hits = 0
    for seed in range(24):
        part = phantoms.part_in_air(seed, (48, 72, 72))
        noise = float(np.random.default_rng(seed).uniform(100, 700))
        ranges = find_ranges(phantoms.to_volume(as_int16(phantoms.draw([part], [2000, 9000], noise, seed))))
        low, high = ranges.items[1].lower_95
        hits += low <= 5500 <= high
        assert high - low < 0.2 * noise + 0.01 * 7000
    assert hits >= 20


@pytest.mark.parametrize("distance", [1.5, 1.8])
def test_peaks_too_near_to_be_told_apart_are_one_range_with_a_remark(phantoms, distance):
    half = np.broadcast_to(np.arange(64) < 32, (48, 64, 64)).astype(float)
    stored = as_int16(phantoms.draw([half], [1000, 1000 + 100 * distance], 100, 3))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert len(ranges.items) == 1
    assert "ranges-flat-peak" in {remark.code for remark in ranges.remarks}


@pytest.mark.parametrize("distance", [2.6, 3.0])
def test_peaks_that_overlap_are_two_ranges_with_a_remark(phantoms, distance):
    half = np.broadcast_to(np.arange(64) < 32, (48, 64, 64)).astype(float)
    stored = as_int16(phantoms.draw([half], [1000, 1000 + 100 * distance], 100, 3))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert [item.peak for item in ranges.items] == pytest.approx([1000, 1000 + 100 * distance], abs=12)
    assert ranges.boundaries[0] == pytest.approx(1000 + 50 * distance, abs=8)
    assert "ranges-overlap" in {remark.code for remark in ranges.remarks}


def test_every_label_of_a_segmented_scan_is_a_range(phantoms):
    part = phantoms.part_in_air(1) > 0.5
    ranges = find_ranges(phantoms.to_volume(part.astype(np.int16)))
    assert [item.peak for item in ranges.items] == pytest.approx([0, 1], abs=0.1)
    assert ranges.background is not None
    core = phantoms.balls_in(part.shape, [(32, 30, 66)], [6]) > 0.5
    ranges = find_ranges(phantoms.to_volume((100 * part + 50 * core).astype(np.int16)))
    assert [item.peak for item in ranges.items] == pytest.approx([0, 100, 150], abs=1)


@pytest.mark.parametrize("seed", SEEDS)
def test_thin_walls_without_a_pure_voxel_are_a_range(phantoms, seed):
    part = phantoms.part_in_air(seed) * (np.arange(96) % 12 < 2)
    ranges = find_ranges(phantoms.to_volume(as_int16(phantoms.draw([part], [0, 5000], 150, seed))))
    assert len(ranges.items) == 2
    assert ranges.background is not None
    # walls of two voxels with a blur of 0.8 reach erf(1 / (0.8 √2)) = 0.79 of the contrast at most: closed form
    assert 0.7 * 5000 / 2 < ranges.boundaries[0] < 1.05 * 5000 / 2


@pytest.mark.parametrize("seed", [1, 2, 3, 4, 5])
def test_a_shell_of_varying_density_without_a_peak_is_a_range(phantoms, seed):
    y, x = np.ogrid[:96, :96]
    radius, angle = np.hypot(y - 48, x - 48), np.arctan2(y - 48, x - 48)
    shell = np.clip(1.6 - np.abs(radius - 34) / (1.2 + 0.8 * np.sin(3 * angle + seed)), 0, 1) ** 2
    values = -1000 + 1030 * (radius < 40) + shell * 1400 * (0.6 + 0.4 * np.sin(5 * angle))
    values = np.broadcast_to(values, (24, 96, 96)) + 12 * phantoms.grainy((24, 96, 96), seed)
    ranges = find_ranges(phantoms.to_volume(as_int16(values)))
    assert [item.peak for item in ranges.items[:2]] == pytest.approx([-1000, 30], abs=5)
    assert len(ranges.items) == 3
    assert 100 < ranges.boundaries[1] < 450


@pytest.mark.parametrize("shape", [(1, 1, 1), (1, 2, 2), (2, 3, 3), (3, 3, 3), (30, 1, 40), (40, 30, 2)])
def test_scans_too_small_for_a_uniform_place_have_one_range(phantoms, shape):
    stored = np.random.default_rng(2).normal(100, 10, shape).astype(np.int16)
    ranges = find_ranges(phantoms.to_volume(stored))
    assert len(ranges.items) == 1
    assert np.isfinite(ranges.model).all()


def test_noise_that_is_large_in_a_few_rows_is_no_range(phantoms):
    values = phantoms.draw([phantoms.part_in_air(1)], [1000, 9000], 200, 1)
    values[:, 45:50] += 2500 * np.random.default_rng(3).normal(size=(64, 5, 96))
    assert len(find_ranges(phantoms.to_volume(as_int16(values))).items) == 2
