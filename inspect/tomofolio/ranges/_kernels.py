"""Passes over the stored numbers: counts of values, and counts of the values inside uniform places.

Every task of the parallel loops counts into an array of its own, and counts are integers: the sums do not depend
on how many threads there are.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray


@njit(cache=True, parallel=True)
def count_values(
    stored: NDArray, no_data: NDArray, masked: bool, scale: NDArray, offset: NDArray, parts: int, counts: NDArray
) -> None:
    """Count the bins floor(scale[k] · stored + offset[k]); what lies beyond goes to the end bins, NaN nowhere.

    ``counts`` has the shape (slabs · parts, bins): slab s takes the slices from s · slices // slabs on, and a slab
    is cut into ``parts`` bands of rows.
    """
    slices, rows, columns = stored.shape
    slabs, last = counts.shape[0] // parts, counts.shape[1] - 1
    for s in prange(slabs):
        for k in range(s * slices // slabs, (s + 1) * slices // slabs):
            a, b = scale[k], offset[k]
            for j in range(rows):
                block = s * parts + j * parts // rows
                for i in range(columns):
                    if masked and no_data[k, j, i]:
                        continue
                    position = a * stored[k, j, i] + b
                    if position >= last:
                        counts[block, last] += 1
                    elif position >= 0:
                        counts[block, int(position)] += 1
                    elif position < 0:
                        counts[block, 0] += 1


@njit(cache=True, parallel=True)
def count_uniform_places(
    stored: NDArray,
    no_data: NDArray,
    masked: bool,
    scale: NDArray,
    offset: NDArray,
    step: NDArray,
    limits: NDArray,
    counts: NDArray,
) -> None:
    """Count means of seven voxels (a voxel and its six neighbours) by how uniform the place is.

    The level of a voxel is the first entry of ``limits`` (ascending, in bins) that the difference between the largest
    and the smallest of its six neighbours does not exceed; voxels above the last limit are not counted. ``step``
    is the step in (slices, rows) from one looked-at voxel to the next; along a row every voxel is looked at.
    ``counts`` has the shape (tasks, levels, bins).
    """
    slices, rows, columns = stored.shape
    tasks, levels, bins = counts.shape
    looked_at = (slices - 2 + step[0] - 1) // step[0] if slices >= 3 else slices
    flat = slices < 3
    for t in prange(tasks):
        for n in range(t * looked_at // tasks, (t + 1) * looked_at // tasks):
            k = n if flat else 1 + n * step[0]
            up, down = (k, k) if flat else (k - 1, k + 1)
            a, b = scale[k], offset[k]
            for j in range(1, rows - 1, step[1]):
                for i in range(1, columns - 1):
                    if masked and (
                        no_data[k, j, i]
                        or no_data[k, j, i - 1]
                        or no_data[k, j, i + 1]
                        or no_data[k, j - 1, i]
                        or no_data[k, j + 1, i]
                        or no_data[up, j, i]
                        or no_data[down, j, i]
                    ):
                        continue
                    centre = a * stored[k, j, i] + b
                    v1, v2 = a * stored[k, j, i - 1] + b, a * stored[k, j, i + 1] + b
                    v3, v4 = a * stored[k, j - 1, i] + b, a * stored[k, j + 1, i] + b
                    v5, v6 = scale[up] * stored[up, j, i] + offset[up], scale[down] * stored[down, j, i] + offset[down]
                    low = min(min(min(v1, v2), min(v3, v4)), min(v5, v6))
                    high = max(max(max(v1, v2), max(v3, v4)), max(v5, v6))
                    difference = high - low
                    if not difference <= limits[levels - 1]:
                        continue
                    level = 0
                    while difference > limits[level]:
                        level += 1
                    mean = (centre + (v1 + v2) + (v3 + v4) + (v5 + v6)) / 7
                    if mean >= 0 and mean < bins:
                        counts[t, level, int(mean)] += 1


def no_mask() -> NDArray[np.bool_]:
    """Stands in for the mask of a volume in which every voxel is data."""
    return np.zeros((1, 1, 1), np.bool_)
