"""Area of the outside surface, counted along 13 directions (Crofton's formula)."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray
from scipy.spatial import SphericalVoronoi

from tomofolio.body.result import Body
from tomofolio.volume import Grid

Array = NDArray[Any]
Floats = NDArray[np.float64]

#: Index steps (slice, row, column) to the 13 neighbours on one side; the first four stay within the slice.
STEPS = np.array(
    [(0, 0, 1), (0, 1, -1), (0, 1, 0), (0, 1, 1)] + [(1, j, i) for j in (-1, 0, 1) for i in (-1, 0, 1)], np.int64
)
IN_SLICE = 4


def surface_area_mm2(body: Body, grid: Grid) -> float:
    """Area between the filled object (object and what it encloses) and the outside, bores included.

    Lines run through the voxels along 13 directions. Crofton's formula says that the area is twice the mean, over all
    directions, of the crossings times the area per line; each of the 13 stands for the directions nearest to it (the
    area of its spherical Voronoi cell, from the true directions in mm). Method: Ohser & Mücklich, Statistical Analysis
    of Microstructures in Materials Science, 2000, ch. 4; weights by Voronoi cells after Lehmann & Legland, Insight
    Journal 2012. Where slices stand unevenly, every gap has its own directions and weights.

    Where the scan cuts the object, the cut is no surface: only faces to voxels that are known to be outside count,
    neither the border of the scan nor faces to things left out.
    """
    box = np.array([(part.start, part.stop) for part in body.box], np.int64)
    crossings = np.zeros((grid.shape[0], len(STEPS)), np.int64)
    if box[0, 0] == box[0, 1]:
        return 0.0
    low = np.maximum(box[:, 0] - 1, 0)
    high = np.minimum(box[:, 1] + 1, np.array(grid.shape))
    _count_crossings(body.regions, low, high, crossings)
    return float((crossings * _areas_per_crossing(grid)).sum())


def _areas_per_crossing(grid: Grid) -> Floats:
    """Shape (slices, 13): area that one crossing stands for, between a slice and itself or the next slice."""
    gaps = np.diff(grid.slice_positions_mm)
    if not len(gaps):
        gaps = np.array([np.sqrt(grid.row_spacing_mm * grid.column_spacing_mm)])
    different, which = np.unique(np.round(gaps, 6), return_inverse=True)
    area = np.stack([_areas_of_gap(grid, gap) for gap in different])[which]
    result = np.zeros((grid.shape[0], len(STEPS)))
    result[: len(area), IN_SLICE:] = area[: grid.shape[0], IN_SLICE:]
    # A slice lies between two gaps and shares in both.
    before, after = np.concatenate((area[:1], area)), np.concatenate((area, area[-1:]))
    result[:, :IN_SLICE] = ((before + after) / 2)[: grid.shape[0], :IN_SLICE]
    return result


def _areas_of_gap(grid: Grid, gap_mm: float) -> Floats:
    """Shape (13,): 2 · weight · (voxel volume / step length) for slices that are ``gap_mm`` apart along their axis."""
    spacing = np.array([gap_mm, grid.row_spacing_mm, grid.column_spacing_mm])
    per_index = grid.direction[:, ::-1] * spacing  # columns: mm per slice, row, column
    vectors = STEPS @ per_index.T
    length = np.linalg.norm(vectors, axis=1)
    unit = vectors / length[:, None]
    cells = SphericalVoronoi(np.concatenate((unit, -unit))).calculate_areas()
    weight = (cells[: len(unit)] + cells[len(unit) :]) / cells.sum()
    return 2 * weight * abs(float(np.linalg.det(per_index))) / length


@njit(cache=True, parallel=True)
def _count_crossings(regions: Array, low: Array, high: Array, crossings: Array) -> None:
    """Per slice and step, pairs of voxels of which one is filled (codes 1, 2) and the other outside (0)."""
    width = high[2] - low[2]
    for k in prange(low[0], high[0]):
        found = np.zeros(len(STEPS), np.int64)
        for n in range(len(STEPS)):
            dk, dj, di = STEPS[n]
            if k + dk >= high[0]:
                continue
            for j in range(max(low[1], low[1] - dj), min(high[1], high[1] - dj)):
                here, there = regions[k, j, low[2] : high[2]], regions[k + dk, j + dj, low[2] : high[2]]
                count = np.int32(0)
                for i in range(max(0, -di), min(width, width - di)):
                    a, b = here[i], there[i + di]
                    # One is 0 and the other is 1 or 2: their product is 0 and their sum 1 or 2.
                    count += ((a == 0) & (np.uint8(b - 1) < 2)) | ((b == 0) & (np.uint8(a - 1) < 2))
                found[n] += count
        crossings[k] = found
