"""The counting kernels against NumPy."""

from __future__ import annotations

import numpy as np
import pytest

from tomofolio.ranges._kernels import count_uniform_places, count_values, no_mask


def _scan(dtype, seed=5, shape=(9, 14, 17)):
    random = np.random.default_rng(seed)
    stored = random.normal(200, 60, shape)
    return stored.astype(dtype), random.random(shape) < 0.1, random.uniform(0.5, 2, 9), random.uniform(-20, 5, 9)


@pytest.mark.parametrize("dtype", [np.int16, np.uint16, np.float32])
@pytest.mark.parametrize("masked", [False, True])
def test_value_counts_agree_with_numpy_histogram(dtype, masked):
    stored, mask, scale, offset = _scan(dtype)
    counts = np.zeros((3 * 2, 300), np.int64)
    count_values(stored, mask if masked else no_mask(), masked, scale, offset, 2, counts)
    position = scale[:, None, None] * stored + offset[:, None, None]
    kept = ~mask if masked else np.ones_like(mask)
    clipped = np.clip(position, 0, 299.5)
    for slab in range(3):
        for part in range(2):
            block = (slice(3 * slab, 3 * slab + 3), slice(7 * part, 7 * part + 7))
            expected, _ = np.histogram(clipped[block][kept[block]], bins=300, range=(0, 300))
            np.testing.assert_array_equal(counts[2 * slab + part], expected)


def test_values_that_are_not_numbers_are_not_counted():
    stored = np.array([[[1.0, np.nan, 2.0]]], np.float32)
    counts = np.zeros((1, 4), np.int64)
    count_values(stored, no_mask(), False, np.ones(1), np.zeros(1), 1, counts)
    np.testing.assert_array_equal(counts, [[0, 1, 1, 0]])


@pytest.mark.parametrize("masked", [False, True])
@pytest.mark.parametrize("step", [(1, 1), (2, 3)])
def test_uniform_places_agree_with_numpy(masked, step):
    stored, mask, scale, offset = _scan(np.int16)
    limits = np.array([20.0, 60.0, 200.0])
    counts = np.zeros((2, 3, 400), np.int64)
    count_uniform_places(stored, mask if masked else no_mask(), masked, scale, offset, np.array(step), limits, counts)
    value = scale[:, None, None] * stored + offset[:, None, None]
    c = slice(1, -1)
    around = [value[:-2, c, c], value[2:, c, c], value[c, :-2, c], value[c, 2:, c], value[c, c, :-2], value[c, c, 2:]]
    gone = [mask[:-2, c, c], mask[2:, c, c], mask[c, :-2, c], mask[c, 2:, c], mask[c, c, :-2], mask[c, c, 2:]]
    difference = np.max(around, axis=0) - np.min(around, axis=0)
    mean = (np.sum(around, axis=0) + value[c, c, c]) / 7
    kept = ~(np.any(gone, axis=0) | mask[c, c, c]) if masked else np.ones(mean.shape, bool)
    looked = np.zeros(mean.shape, bool)
    looked[:: step[0], :: step[1]] = True
    for level, (low, high) in enumerate([(-1, 20), (20, 60), (60, 200)]):
        chosen = kept & looked & (difference > low) & (difference <= high)
        expected, _ = np.histogram(mean[chosen], bins=400, range=(0, 400))
        np.testing.assert_array_equal(counts.sum(axis=0)[level], expected)
