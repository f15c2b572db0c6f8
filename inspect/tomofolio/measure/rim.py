"""The edge of the filled object: how much material its mixed voxels hold, from sums over a band around the surface.

Blur moves grey value about but loses none of it. So the band's grey value above the outside, over the contrast at the
rim, is the volume of material in the band, whatever the blur, the curvature and the corners (counting voxels past
half-way loses about σ² · mean curvature per area). Beside the band lie the shells that say what the rim's levels are:
two deeper and deeper inside, one outside. Everything is linear in the values, so one mean level serves a surface whose
level varies: the mean over the shell is the mean over the surface. Where a denser material lies at the surface (a
sleeve, a coating) no one level serves; there the threshold's count is kept.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.volume import Volume

Array = NDArray[Any]
Floats = NDArray[np.float64]

#: Half the width of the band in σ of the edge response (plus half a voxel): beyond, an edge has 0.6 % left to go.
BAND_SIGMAS = 2.5
#: Squared distances are whole numbers, the band's half width squared being this; a shell is half a half width thick.
UNIT = 1024
DEEP_END, DEEPER_END = UNIT * 9 // 4, UNIT * 4
#: Stands for farther than the margin; a step may be added to it within int16.
FAR = 25000
#: Edge of a tile in voxels.
TILE = 24
#: Rows of `RimSums.table`.
BAND_IN, BAND_OUT, DEEP, DEEPER, OUTER, ASIDE = range(6)


@dataclass(frozen=True)
class RimSums:
    """Sums over the band and the shells, tile by tile.

    Parameters
    ----------
    tiles : shape (tiles, 6, 3): rows band within the threshold's object, band outside it, inner shell, next inner
        shell, outer shell, what of the band was left aside; columns number of voxels, volume in mm³, volume · value.
    """

    tiles: Floats

    @cached_property
    def table(self) -> Floats:
        """Shape (6, 3): the sums of all tiles."""
        return self.tiles.sum(axis=0)


def rim_sums(volume: Volume, body: Body, blur_vox: Floats, denser: float | None) -> RimSums:
    """Sum up the band and its shells.

    A voxel of the object belongs to the band when an outside voxel lies within `BAND_SIGMAS` σ and half a voxel, each
    axis in its own measure, and an outside voxel when one of the object does. Left aside are voxels as near to things
    left out, to no data, to enclosed voids and to denser material: there the threshold decides.

    Parameters
    ----------
    blur_vox : σ of the edge response in voxels [slice, row, column].
    denser : value from which on a denser material than the rim's begins; None where there is none.
    """
    reach = np.clip(BAND_SIGMAS * blur_vox + 0.5, 1.5, 8.0)
    margin = np.floor(2 * reach).astype(np.int64)
    low = np.maximum([part.start - m for part, m in zip(body.box, margin, strict=True)], 0)
    high = np.minimum([part.stop + m for part, m in zip(body.box, margin, strict=True)], volume.shape)
    tiles = -(-(high - low) // TILE)
    sums = np.zeros((max(int(tiles.prod()), 0), 6, 3))
    voxels = (volume.stored, volume.slope, volume.intercept, body.regions, volume.grid.voxel_volumes_mm3)
    _sum_tiles(*voxels, np.inf if denser is None else float(denser), low, high, tiles, reach, margin, sums)
    return RimSums(sums[sums[:, :, 0].any(axis=1)])


@njit(cache=True)
def _lower(row: Array, by: Array, cost: np.int16) -> None:
    """Lower a row to another row plus the cost of the way there; on whole rows, so that it is done in large steps."""
    for i in range(row.shape[0]):
        way = np.int16(by[i] + cost)
        row[i] = way if way < row[i] else row[i]


@njit(cache=True)
def _distances(distance: Array, reach: Array, margin: Array) -> Array:
    """Squared distance to the nearest flagged (0) voxel in units of the reach, exact as far as the margin.

    Axis by axis the minimum over all offsets of what was there and the offset squared. The last ``margin[2]`` voxels
    of every row must be `FAR`: they keep the rows apart when a whole plane is moved along its rows.
    """
    planes, rows, columns = distance.shape
    for axis in range(3):
        result = distance.copy()
        for offset in range(-margin[axis], margin[axis] + 1):
            cost = np.int16(round(UNIT * (offset / reach[axis]) ** 2))
            if axis == 0:
                for k in range(max(0, -offset), min(planes, planes - offset)):
                    _lower(result[k].ravel(), distance[k + offset].ravel(), cost)
                continue
            shift = offset if axis == 2 else offset * columns
            first, last = max(0, -shift), min(rows * columns, rows * columns - shift)
            for k in range(planes):
                _lower(result[k].ravel()[first:last], distance[k].ravel()[first + shift : last + shift], cost)
        distance = result
    return distance


@njit(cache=True)
def _has_like_neighbours(
    stored: Array, slope: Array, intercept: Array, regions: Array, denser: float, k: int, j: int, i: int
) -> bool:
    """Whether half of the six neighbours are enclosed (or dense) as this voxel is; lone ones are noise."""
    enclosed, dense = 0, 0
    for dk, dj, di in ((-1, 0, 0), (1, 0, 0), (0, -1, 0), (0, 1, 0), (0, 0, -1), (0, 0, 1)):
        a, b, c = k + dk, j + dj, i + di
        if 0 <= a < regions.shape[0] and 0 <= b < regions.shape[1] and 0 <= c < regions.shape[2]:
            enclosed += regions[a, b, c] == 2
            dense += slope[a] * stored[a, b, c] + intercept[a] >= denser
    return enclosed >= 3 if regions[k, j, i] == 2 else dense >= 3


@njit(cache=True, parallel=True)
def _sum_tiles(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    voxel_mm3: Array,
    denser: float,
    low: Array,
    high: Array,
    tiles: Array,
    reach: Array,
    margin: Array,
    sums: Array,
) -> None:
    for t in prange(tiles[0] * tiles[1] * tiles[2]):
        a = low[0] + t // (tiles[1] * tiles[2]) * TILE
        b = low[1] + t // tiles[2] % tiles[1] * TILE
        c = low[2] + t % tiles[2] * TILE
        a0, b0, c0 = max(a - margin[0], 0), max(b - margin[1], 0), max(c - margin[2], 0)
        a1, b1, c1 = min(a + TILE, high[0]), min(b + TILE, high[1]), min(c + TILE, high[2])
        near = regions[a0 : a1 + margin[0], b0 : b1 + margin[1], c0 : c1 + margin[2]]
        outside = np.full((near.shape[0], near.shape[1], near.shape[2] + margin[2]), np.int16(FAR))
        filled, other = outside.copy(), outside.copy()
        is_there = np.zeros(3, np.bool_)
        for k in range(near.shape[0]):
            for j in range(near.shape[1]):
                for i in range(near.shape[2]):
                    code = near[k, j, i]
                    if code == 0:
                        outside[k, j, i] = 0
                        is_there[0] = True
                    elif code <= 2:
                        filled[k, j, i] = 0
                        is_there[1] = True
                    apart = code > 2
                    if code == 2 or (
                        code == 1 and slope[a0 + k] * stored[a0 + k, b0 + j, c0 + i] + intercept[a0 + k] >= denser
                    ):
                        apart = _has_like_neighbours(stored, slope, intercept, regions, denser, a0 + k, b0 + j, c0 + i)
                    if apart:
                        other[k, j, i] = 0
                        is_there[2] = True
        if not (is_there[0] and is_there[1]):
            continue
        outside = _distances(outside, reach, margin)
        filled = _distances(filled, reach, margin)
        if is_there[2]:
            other = _distances(other, reach, margin)
        for k in range(a, a1):
            for j in range(b, b1):
                for i in range(c, c1):
                    kk, jj, ii = k - a0, j - b0, i - c0
                    if regions[k, j, i] > 2:
                        continue
                    if regions[k, j, i] == 0:
                        distance = filled[kk, jj, ii]
                        row = 1 if distance <= UNIT else 4
                        if distance > DEEP_END:
                            continue
                    else:
                        distance = outside[kk, jj, ii]
                        row = 0 if distance <= UNIT else (2 if distance <= DEEP_END else 3)
                        if distance > DEEPER_END:
                            continue
                    if other[kk, jj, ii] <= UNIT:
                        if row > 1:
                            continue
                        row = 5
                    sums[t, row, 0] += 1
                    sums[t, row, 1] += voxel_mm3[k]
                    sums[t, row, 2] += voxel_mm3[k] * (slope[k] * stored[k, j, i] + intercept[k])
