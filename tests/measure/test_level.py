"""The level field's kernel against a plain twin."""

import numpy as np

from tomofolio.measure.level import CELL, CLEARANCE, _medians


def twin(values, regions, lower, upper, size):
    """Median of every second voxel, shifted in every second pair of rows, with NumPy alone."""
    medians = np.full(size, np.nan, np.float32)
    for a, b, c in np.ndindex(*size):
        held = []
        for k in range(a * CELL, min((a + 1) * CELL, values.shape[0]), 2):
            for j in range(b * CELL, min((b + 1) * CELL, values.shape[1]), 2):
                for i in range(c * CELL + (j // 2) % 2, min((c + 1) * CELL, values.shape[2]), 2):
                    around = [(k + s, j, i) for s in (-CLEARANCE, CLEARANCE)]
                    around += [(k, j + s, i) for s in (-CLEARANCE, CLEARANCE)]
                    around += [(k, j, i + s) for s in (-CLEARANCE, CLEARANCE)]
                    inside = all(0 <= x < n for place in around for x, n in zip(place, values.shape, strict=True))
                    deep = inside and all(regions[place] == 1 for place in (*around, (k, j, i)))
                    if deep and lower <= values[k, j, i] < upper:
                        held.append(values[k, j, i])
        if len(held) >= 8:
            medians[a, b, c] = np.median(np.array(held, np.float32))
    return medians


def test_medians_agree_with_a_plain_twin():
    rng = np.random.default_rng(8)
    stored = rng.integers(-500, 500, (20, 26, 30)).astype(np.int16)
    regions = np.ones(stored.shape, np.uint8)
    regions[:6, :9, :7], regions[14:, 20:, 12:] = 0, 2
    size = (3, 4, 4)
    medians, counts = np.full(size, np.nan, np.float32), np.zeros(size, np.float32)
    slope, intercept = np.full(20, 2.0), np.arange(20.0)
    _medians(stored, slope, intercept, regions, np.zeros(3, int), -800.0, 900.0, 0, 3, medians, counts)
    expected = twin(stored * 2.0 + np.arange(20.0)[:, None, None], regions, -800.0, 900.0, size)
    np.testing.assert_allclose(medians, expected)
    assert np.isfinite(expected).sum() > 10
