"""Points on the outside surface of the part, to sub-voxel accuracy."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.threads import over_parts
from tomofolio.volume import Volume

Array = NDArray[Any]


def outside_points(volume: Volume, body: Body) -> NDArray[np.float64]:
    """Indices [slice, row, column], shape (n, 3), where the values cross the threshold.

    One point for every pair of an object voxel and an outside voxel that share a face.
    """
    if body.threshold is None:
        return np.empty((0, 3))
    box = np.array([(part.start, part.stop) for part in body.box])
    counts = np.zeros(volume.shape[0], np.int64)
    start, slices = body.box[0].start, body.box[0].stop - body.box[0].start
    over_parts(lambda p: _count(body.regions, box, start + p.start, start + p.stop, counts), slices, 8)
    first = np.concatenate(([0], np.cumsum(counts)))
    points = np.empty((first[-1], 3), np.float32)
    voxels = (volume.stored, volume.slope, volume.intercept, body.regions)
    arguments = (*voxels, box, float(body.threshold), first)
    over_parts(lambda p: _fill(*arguments, start + p.start, start + p.stop, points), slices, 8)
    return points.astype(np.float64)


@njit(cache=True)
def _is_out(code: int) -> bool:
    return code != 1 and code != 2


@njit(cache=True, nogil=True)
def _count(regions: Array, box: Array, low: int, high: int, counts: Array) -> None:
    slices, rows, columns = regions.shape
    for k in range(low, high):
        n = 0
        for j in range(box[1, 0], box[1, 1]):
            for i in range(box[2, 0], box[2, 1]):
                if regions[k, j, i] == 1:
                    n += k > 0 and _is_out(regions[k - 1, j, i])
                    n += k + 1 < slices and _is_out(regions[k + 1, j, i])
                    n += j > 0 and _is_out(regions[k, j - 1, i])
                    n += j + 1 < rows and _is_out(regions[k, j + 1, i])
                    n += i > 0 and _is_out(regions[k, j, i - 1])
                    n += i + 1 < columns and _is_out(regions[k, j, i + 1])
        counts[k] = n


@njit(cache=True, nogil=True)
def _fill(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    box: Array,
    threshold: float,
    first: Array,
    low: int,
    high: int,
    points: Array,
) -> None:
    for k in range(low, high):
        if first[k] < first[k + 1]:
            _fill_slice(stored, slope, intercept, regions, box, threshold, k, first[k], points)


@njit(cache=True)
def _fill_slice(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    box: Array,
    threshold: float,
    k: int,
    n: int,
    points: Array,
) -> None:
    slices, rows, columns = regions.shape
    steps = ((-1, 0, 0), (1, 0, 0), (0, -1, 0), (0, 1, 0), (0, 0, -1), (0, 0, 1))
    for j in range(box[1, 0], box[1, 1]):
        for i in range(box[2, 0], box[2, 1]):
            if regions[k, j, i] != 1:
                continue
            here = slope[k] * stored[k, j, i] + intercept[k]
            for dk, dj, di in steps:
                a, b, c = k + dk, j + dj, i + di
                if not (0 <= a < slices and 0 <= b < rows and 0 <= c < columns) or not _is_out(regions[a, b, c]):
                    continue
                there = slope[a] * stored[a, b, c] + intercept[a]
                part = 0.5
                if here != there:
                    part = min(max((here - threshold) / (here - there), 0.0), 1.0)
                points[n, 0] = k + part * dk
                points[n, 1] = j + part * dj
                points[n, 2] = i + part * di
                n += 1
