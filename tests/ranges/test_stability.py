"""The same number of ranges and nearly the same boundaries, however the scan was stored, cut or disturbed."""

from __future__ import annotations

import numpy as np
import pytest

from tomofolio.ranges import find_ranges

SEEDS = (1, 2)


def as_int16(values):
    return np.clip(np.rint(values), -32768, 32767).astype(np.int16)


@pytest.fixture(scope="module", params=SEEDS)
def casting(request, phantoms):
    """Values of a part in air, eight-bit sized: air 20, material 150, noise 4; with the seed."""
    part = phantoms.part_in_air(request.param)
    return phantoms.draw([part], [20, 150], 4, request.param), part


def _two(volume, boundary, tolerance):
    ranges = find_ranges(volume)
    assert [item.background for item in ranges.items] == [True, False]
    assert ranges.boundaries[0] == pytest.approx(boundary, abs=tolerance)
    return ranges


def test_storage_in_eight_or_sixteen_bits(phantoms, casting):
    eight = np.clip(np.rint(casting[0]), 0, 255)
    _two(phantoms.to_volume(eight.astype(np.int16)), 85, 0.6)
    _two(phantoms.to_volume(eight.astype(np.uint16) * np.uint16(257)), 85 * 257, 0.6 * 257)
    _two(phantoms.to_volume(np.rint(eight * 3.7).astype(np.int16)), 85 * 3.7, 0.8 * 3.7)
    _two(phantoms.to_volume(np.rint(casting[0] * 200).astype(np.uint16)), 85 * 200, 0.6 * 200)
    _two(phantoms.to_volume((casting[0] / 100).astype(np.float32)), 0.85, 0.006)
    _two(phantoms.to_volume(eight.astype(np.int16), 3.7, -1000.0), 85 * 3.7 - 1000, 0.6 * 3.7)


def test_slices_with_their_own_rescale(phantoms, casting):
    slope = np.linspace(0.008, 0.012, 64)
    stored = as_int16((casting[0] + 50) / slope[:, None, None])
    _two(phantoms.to_volume(stored, slope, -50.0), 85, 0.6)


def test_a_tenth_of_the_voxels(phantoms, casting):
    stored = as_int16(10 * casting[0])
    _two(phantoms.to_volume(stored[::2, ::2, ::2].copy()), 850, 12)
    _two(phantoms.to_volume(stored[26:33].copy()), 850, 12)
    _two(phantoms.to_volume(stored[30:31].copy()), 850, 20)


def test_other_noise_draws_move_the_boundary_within_its_interval(phantoms):
    part = phantoms.part_in_air(5)
    found = [find_ranges(phantoms.to_volume(as_int16(phantoms.draw([part], [0, 2000], 120, s)))) for s in range(5)]
    boundaries = np.array([ranges.boundaries[0] for ranges in found])
    low, high = found[0].items[1].lower_95
    assert np.ptp(boundaries) < high - low


def test_cleared_air_is_a_background_without_spread(phantoms, casting):
    values, part = casting
    ranges = _two(phantoms.to_volume(as_int16(np.where(values < 45, 0, values))), 75, 1)
    assert ranges.items[0].peak == pytest.approx(0, abs=0.1)
    assert ranges.items[0].spread < 1
    _two(phantoms.to_volume(as_int16(np.where(part == 0, 0, values))), 75, 1)


def test_clipped_ends(phantoms, casting):
    _two(phantoms.to_volume(as_int16(np.minimum(casting[0], 149))), 85, 2)
    _two(phantoms.to_volume(as_int16(np.maximum(casting[0], 19))), 85, 2)
    heavily = _two(phantoms.to_volume(as_int16(np.maximum(100 * casting[0] - 1950, 0))), 6550, 150)
    assert heavily.items[1].peak == pytest.approx(13050, abs=150)


def test_leftover_padding_is_no_range(phantoms, casting):
    stored = as_int16(20 * casting[0] - 1000)
    y, x = np.ogrid[:96, :96]
    corner = (y - 47.5) ** 2 + (x - 47.5) ** 2 > 47**2
    stored[:, corner] = -2000
    ranges = _two(phantoms.to_volume(stored), 700, 12)
    assert ranges.items[0].peak == pytest.approx(-600, abs=8)
    known = _two(phantoms.to_volume(stored, no_data=stored == -2000), 700, 12)
    assert known.histogram.counts.sum() == (stored != -2000).sum()


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("noise", [20, 100, 400])
def test_cupping_leaves_one_range(phantoms, seed, noise):
    values = phantoms.draw([phantoms.part_in_air(seed)], [1000, 9000], noise, seed, cupping=0.1)
    ranges = _two(phantoms.to_volume(as_int16(values)), 4800, 160)
    assert 8200 < ranges.items[1].peak < 9000


@pytest.mark.parametrize("noise", [3, 20])
def test_a_uniform_block_with_cupping_is_one_range(phantoms, noise):
    values = phantoms.draw([np.ones((48, 80, 80))], [0, 1000], noise, 7, cupping=0.1)
    assert len(find_ranges(phantoms.to_volume(as_int16(values))).items) == 1


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("dense", [16000, 13000])
def test_a_small_denser_material_is_found(phantoms, seed, dense):
    part = phantoms.part_in_air(seed)
    grain = phantoms.balls_in(part.shape, [(31, 30, 62)], [3.3])
    assert grain.sum() / part.sum() < 1.3e-3
    ranges = find_ranges(phantoms.to_volume(as_int16(phantoms.draw([part, grain], [1000, 9000, dense], 200, seed))))
    assert len(ranges.items) == 3
    assert ranges.boundaries[0] == pytest.approx(5000, abs=60)
    # blur of 0.8 voxels leaves a grain of radius 3.3 no place that is quite pure
    assert ranges.boundaries[1] == pytest.approx((9000 + dense) / 2, rel=0.03)


@pytest.mark.parametrize("seed", SEEDS)
def test_materials_may_differ_in_noise(phantoms, seed):
    values = phantoms.draw([phantoms.part_in_air(seed)], [1000, 9000], [20, 700], seed)
    ranges = _two(phantoms.to_volume(as_int16(values)), 5000, 60)
    assert ranges.items[0].spread == pytest.approx(20, rel=0.1)
    assert ranges.items[1].spread == pytest.approx(700, rel=0.15)


def test_foam_beside_the_object_counts_with_the_background(phantoms):
    part = phantoms.part_in_air(4)
    foam = phantoms.balls_in(part.shape, [(32, 86, 48), (20, 86, 30)], [7, 6])
    stored = as_int16(phantoms.draw([foam, part], [-1000, -940, 800], 12, 4))
    ranges = _two(phantoms.to_volume(stored), -100, 10)
    assert "ranges-packing-joined" in {remark.code for remark in ranges.remarks}


def test_a_light_material_that_is_not_rare_is_a_range_beside_the_background(phantoms):
    part = phantoms.part_in_air(4)
    half = np.broadcast_to(np.arange(96) < 40, part.shape) * part
    stored = as_int16(phantoms.draw([part, half], [-1000, 800, -800], 20, 4))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert [item.peak for item in ranges.items] == pytest.approx([-1000, -800, 800], abs=12)
