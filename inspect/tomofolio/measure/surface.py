"""Surface area of the filled object by the Crofton formula, on any grid."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray
from scipy.spatial import SphericalVoronoi

from tomofolio.body.result import Body
from tomofolio.volume import Grid

Array = NDArray[Any]

#: One of every pair of opposite steps to the 26 neighbours [slice, row, column].
STEPS = np.array(
    [(k, j, i) for k in (-1, 0, 1) for j in (-1, 0, 1) for i in (-1, 0, 1) if (k, j, i) > (0, 0, 0)], np.int64
)


def surface_area_mm2(body: Body, grid: Grid) -> float:
    """Area between the filled object (object and what it encloses) and the outside, bores included.

    Crofton's formula over 13 directions: every direction is weighted with the solid angle that is nearest to it
    (spherical Voronoi cells of the true directions in mm, so unequal spacing and tilt are allowed for), and the
    changes between object and outside along its lines are counted. Where the object is cut by the border of the scan
    there is no surface.

    References
    ----------
    G. Lehmann and D. Legland, Efficient N-dimensional surface estimation using Crofton formula and run-length
    encoding, Insight Journal (2012). Cauchy–Crofton: the mean over all directions of the changes per area of
    cross-section is half of the surface.
    """
    box = np.array([(part.start, part.stop) for part in body.box])
    changes = np.zeros((grid.shape[0], len(STEPS)), np.int64)
    _count_changes(body.regions, box, STEPS, changes)
    even = _steps_mm(grid, 0) if grid.is_even else None
    even_weights = _solid_angles(even) if even is not None else None
    total = 0.0
    for k in np.flatnonzero(changes.any(axis=1)):
        steps = even if even is not None else _steps_mm(grid, int(k))  # with uneven gaps every slice has its own
        weights = even_weights if even_weights is not None else _solid_angles(steps)
        lengths = np.linalg.norm(steps, axis=1)
        total += float((weights * changes[k] / lengths).sum()) * float(grid.voxel_volumes_mm3[k])
    return 2 * total


def _steps_mm(grid: Grid, slice_index: int) -> NDArray[np.float64]:
    """Shape (13, 3): the steps from a voxel of this slice, in mm."""
    base = np.array([slice_index, 0, 0], float)
    return grid.to_mm(base + STEPS) - grid.to_mm(base)


def _solid_angles(steps_mm: NDArray[np.float64]) -> NDArray[np.float64]:
    """Shares of the sphere (sum 1) that lie nearest to each direction or its opposite."""
    directions = steps_mm / np.linalg.norm(steps_mm, axis=1)[:, None]
    areas = SphericalVoronoi(np.concatenate((directions, -directions))).calculate_areas()
    return (areas[: len(directions)] + areas[len(directions) :]) / areas.sum()


@njit(cache=True)
def _filled(code: int) -> bool:
    return code == 1 or code == 2


@njit(cache=True, parallel=True)
def _count_changes(regions: Array, box: Array, steps: Array, changes: Array) -> None:
    """Pairs of voxels, one filled and one not, along every step; counted in the slice of the first."""
    slices, rows, columns = regions.shape
    for k in prange(max(box[0, 0] - 1, 0), min(box[0, 1] + 1, slices)):
        for j in range(max(box[1, 0] - 1, 0), min(box[1, 1] + 1, rows)):
            for i in range(max(box[2, 0] - 1, 0), min(box[2, 1] + 1, columns)):
                here = _filled(regions[k, j, i])
                for n in range(steps.shape[0]):
                    a, b, c = k + steps[n, 0], j + steps[n, 1], i + steps[n, 2]
                    if 0 <= a < slices and 0 <= b < rows and 0 <= c < columns:
                        changes[k, n] += here != _filled(regions[a, b, c])
