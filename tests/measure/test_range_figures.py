"""Counts, sums, regions and intervals of the ranges against NumPy and `scipy.ndimage.label`."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body.result import Body
from tomofolio.measure.range_figures import range_figures


def everything(shape):
    return Body(np.ones(shape, np.uint8), tuple(slice(0, n) for n in shape), None)


def noisy(shape, seed, smooth=0.8):
    field = ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=shape), smooth)
    return 2000 + 1000 * field / field.std()


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize(
    "geometry",
    [{}, {"spacing": (2.0, 0.5, 0.7), "tilt_degrees": 20}, {"positions": np.cumsum(1 + 0.5 * np.sin(np.arange(37)))}],
    ids=["even", "tilted", "uneven"],
)
def test_agrees_with_numpy_and_scipy_on_random_values(phantoms, seed, geometry):
    shape = (37, 23, 29)  # several slabs, the last of them not full
    rng = np.random.default_rng(seed)
    grid = phantoms.grid_of(shape, **geometry)
    slope, intercept = rng.uniform(0.5, 2, shape[0]), rng.uniform(-300, 300, shape[0])
    volume = phantoms.volume_of(noisy(shape, seed), grid, slope, intercept)
    values = slope[:, None, None] * volume.stored + intercept[:, None, None]
    regions = rng.choice(np.array([0, 1, 2, 3, 4], np.uint8), shape, p=[0.4, 0.4, 0.1, 0.05, 0.05])
    body = Body(regions, tuple(slice(0, n) for n in shape), None)
    ranges = phantoms.ranges_of(1000, 2000, 3000)
    weight = np.broadcast_to(grid.voxel_volumes_mm3[:, None, None], shape)
    data = regions < 3
    for n, figures in enumerate(range_figures(volume, ranges, body)):
        own = data & (np.digitize(values, ranges.boundaries) == n)
        labels, count = ndimage.label(own)
        sizes = ndimage.sum_labels(weight, labels, np.arange(1, count + 1))
        assert figures.id == f"R{n + 1}"
        assert figures.regions == count
        assert figures.largest_region_mm3 == pytest.approx(sizes.max())
        assert figures.volume_mm3 == pytest.approx(weight[own].sum())
        assert figures.share == pytest.approx(weight[own].sum() / weight[data].sum())
        assert figures.mean == pytest.approx(values[own].mean())
        assert figures.sd == pytest.approx(values[own].std())


def test_a_region_that_parts_and_joins_again_over_many_slabs_is_one(phantoms):
    values = np.full((70, 12, 12), 0.0)
    values[2:68, 2, 2] = values[2:68, 8, 8] = 1000  # two legs …
    values[66, 2:9, 2] = values[66, 8, 2:9] = 1000  # … that meet at the far end only
    values[5:9, 5, 5] = 1000
    figures = range_figures(phantoms.volume_of(values), phantoms.ranges_of(0, 1000), everything(values.shape))[1]
    assert figures.regions == 2
    assert figures.largest_region_mm3 == np.count_nonzero(values) - 4


def test_interval_is_the_volume_at_the_ends_of_the_boundaries(phantoms):
    values = noisy((20, 30, 30), 5)
    volume = phantoms.volume_of(values)
    ranges = phantoms.ranges_of(1000, 2000, 3000, half_width=80)
    low, middle, high = range_figures(volume, ranges, everything(values.shape))
    stored = volume.stored
    assert low.volume_mm3_95 == (np.count_nonzero(stored < 1420), np.count_nonzero(stored < 1580))
    assert high.volume_mm3_95 == (np.count_nonzero(stored >= 2580), np.count_nonzero(stored >= 2420))
    gained = [np.count_nonzero((stored >= a) & (stored < b)) for a, b in ((1420, 1500), (2500, 2580))]
    lost = [np.count_nonzero((stored >= a) & (stored < b)) for a, b in ((1500, 1580), (2420, 2500))]
    expected = middle.volume_mm3 - np.hypot(*lost), middle.volume_mm3 + np.hypot(*gained)
    assert middle.volume_mm3_95 == pytest.approx(expected)


def test_intervals_wider_than_the_range_still_hold_the_estimate(phantoms):
    values = noisy((20, 20, 20), 6)
    ranges = phantoms.ranges_of(1900, 2000, 2100, half_width=400)
    for figures in range_figures(phantoms.volume_of(values), ranges, everything(values.shape)):
        low, high = figures.volume_mm3_95
        assert 0 <= low <= figures.volume_mm3 <= high <= values.size


def test_uniform_scan_has_one_range_without_interval(phantoms):
    values = noisy((5, 6, 7), 1)
    (figures,) = range_figures(phantoms.volume_of(values), phantoms.ranges_of(2000), everything(values.shape))
    assert (figures.share, figures.regions, figures.volume_mm3_95) == (1.0, 1, None)


def test_empty_range_has_neither_mean_nor_regions(phantoms):
    values = np.full((4, 5, 6), 100.0)
    empty = range_figures(phantoms.volume_of(values), phantoms.ranges_of(100, 900), everything(values.shape))[1]
    assert (empty.volume_mm3, empty.mean, empty.sd, empty.regions, empty.largest_region_mm3) == (0, None, None, 0, 0)


def test_floating_point_values_that_are_no_numbers_are_no_data(phantoms):
    values = noisy((6, 7, 8), 2)
    volume = phantoms.volume_of(values, dtype=np.float32)
    volume.stored[2, 3, 4] = np.nan
    figures = range_figures(volume, phantoms.ranges_of(1000, 3000), everything(values.shape))
    assert sum(f.volume_mm3 for f in figures) == values.size - 1


def test_spread_keeps_its_digits_far_from_zero(phantoms):
    values = 30000 + np.tile([0.0, 1.0], 500).reshape(10, 10, 10)
    figures = range_figures(phantoms.volume_of(values), phantoms.ranges_of(0, 30000), everything(values.shape))[1]
    assert (figures.mean, figures.sd) == (pytest.approx(30000.5, abs=1e-9), pytest.approx(0.5, abs=1e-9))
