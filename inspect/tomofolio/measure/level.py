"""The local level of the main material: a smooth field, so that cupping hides no void and feigns none."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.body.result import Body, Region
from tomofolio.ranges.result import Ranges
from tomofolio.threads import over_parts
from tomofolio.volume import Volume

Array = NDArray[Any]

#: Edge of a cell in voxels, and how far a voxel must lie from everything else (along the axes) to count.
CELL, CLEARANCE = 8, 3
#: The cells' medians are smoothed with a Gaussian of this many cells.
SMOOTHING_CELLS = 1.5


@dataclass(frozen=True)
class LevelField:
    """Level of the main material on a lattice of cells over ``box``.

    ``cells`` has the shape of the lattice, float32, in the scan's unit; the centre of cell (a, b, c) is the voxel
    ``start + CELL · (a, b, c) + (CELL − 1) / 2``.
    """

    cells: NDArray[np.float32]
    start: tuple[int, int, int]

    def at(self, index: NDArray) -> NDArray[np.float64]:
        """Levels at voxel indices of shape (..., 3), by trilinear interpolation, held constant beyond the ends."""
        place = (np.asarray(index, float) - np.array(self.start) - (CELL - 1) / 2) / CELL
        return ndimage.map_coordinates(self.cells, np.moveaxis(place, -1, 0), order=1, mode="nearest")


def level_field(volume: Volume, ranges: Ranges, body: Body) -> LevelField:
    """Median of the voxels deep in the main material, cell by cell, then smoothed over neighbouring cells.

    A voxel counts when it is of the object, lies in the main range, and so do the six voxels `CLEARANCE` away. Cells
    without such voxels are filled from their neighbours by normalised convolution (Knutsson & Westin, CVPR 1993).
    """
    main = ranges.main
    lower = -np.inf if main.lower is None else main.lower
    upper = np.inf if main.upper is None else main.upper
    start = tuple(part.start for part in body.box)
    size = tuple(max(-(-(part.stop - part.start) // CELL), 1) for part in body.box)
    medians = np.full(size, np.nan, np.float32)
    counts = np.zeros(size, np.float32)
    voxels = (volume.stored, volume.slope, volume.intercept, body.regions)
    arguments = (*voxels, np.array(start), lower, upper)
    over_parts(lambda part: _medians(*arguments, part.start, part.stop, medians, counts), size[0], 2)
    known = np.isfinite(medians)
    if not known.any():
        return LevelField(np.full(size, main.peak, np.float32), start)
    cleaned = _without_outliers(medians, known)
    weight = np.where(known, np.minimum(counts, 64), 0).astype(np.float32)
    return LevelField(_smoothed(np.where(known, cleaned, 0), weight, main.peak), start)


def _without_outliers(medians: NDArray, known: NDArray) -> NDArray:
    """A cell whose level differs a lot from its neighbours' (a void fills it, say) takes the neighbours' median."""
    filled = np.where(known, medians, np.nanmedian(medians))
    return ndimage.median_filter(filled, size=3, mode="nearest")


def _smoothed(values: NDArray, weight: NDArray, fallback: float) -> NDArray[np.float32]:
    field = np.full(values.shape, fallback, np.float32)
    done = np.zeros(values.shape, bool)
    sigma = SMOOTHING_CELLS
    while not done.all() and sigma < 4 * max(values.shape):
        total = ndimage.gaussian_filter(weight, sigma, mode="constant")
        mean = ndimage.gaussian_filter(values * weight, sigma, mode="constant") / np.maximum(total, 1e-20)
        usable = ~done & (total > 0.5)
        field[usable] = mean[usable]
        done |= usable
        sigma *= 2
    return field


@njit(cache=True, nogil=True)
def _medians(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    start: Array,
    lower: float,
    upper: float,
    first: int,
    last: int,
    medians: Array,
    counts: Array,
) -> None:
    slices, rows, columns = stored.shape
    held = np.empty(CELL * CELL * CELL, np.float32)
    for a in range(first, last):
        for b in range(medians.shape[1]):
            for c in range(medians.shape[2]):
                n = 0
                k0, j0, i0 = start[0] + a * CELL, start[1] + b * CELL, start[2] + c * CELL
                for k in range(k0, min(k0 + CELL, slices), 2):
                    for j in range(j0, min(j0 + CELL, rows), 2):
                        for i in range(i0 + (j // 2) % 2, min(i0 + CELL, columns), 2):
                            if regions[k, j, i] == 1 and _is_deep(regions, k, j, i):
                                value = slope[k] * stored[k, j, i] + intercept[k]
                                if lower <= value < upper:
                                    # Kept sorted as it grows: at most 64 values, and no sort to compile.
                                    at = n
                                    while at > 0 and held[at - 1] > value:
                                        held[at] = held[at - 1]
                                        at -= 1
                                    held[at] = value
                                    n += 1
                if n >= 8:
                    medians[a, b, c] = (held[(n - 1) // 2] + held[n // 2]) / 2
                    counts[a, b, c] = n


@njit(cache=True)
def _is_deep(regions: Array, k: int, j: int, i: int) -> bool:
    slices, rows, columns = regions.shape
    for step in (-CLEARANCE, CLEARANCE):
        if not (0 <= k + step < slices and 0 <= j + step < rows and 0 <= i + step < columns):
            return False
        if regions[k + step, j, i] != 1 or regions[k, j + step, i] != 1 or regions[k, j, i + step] != 1:
            return False
    return True


assert Region.OBJECT == 1, "the kernels compare with the number"
