"""Small boxes around points of the object's outer surface, spread evenly over it, with their geometry in mm."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body, Region
from tomofolio.fitness.samples import BEYOND, Boxes, hashed_order, read_boxes
from tomofolio.volume import Grid, Volume

Array = NDArray[np.float64]

#: Half width of a box in voxels, and how many boxes are taken from the scan lines along each axis.
_HALF = 6
_PER_AXIS = 120
#: Lines along each axis that are searched for crossings of the surface.
_LINES = 72


@dataclass(frozen=True)
class Patches:
    """Boxes on the surface, flattened.

    Parameters
    ----------
    position : shape (patches, voxels, 3), mm from the middle voxel.
    value : shape (patches, voxels), float64.
    usable : shape (patches, voxels), False beyond the scan, in excluded things and where there is no data.
    side : shape (patches, voxels), int8: 1 object, −1 outside, 0 anything else.
    air, material : shape (patches,), medians of the outside and of the object voxels: where the levels start.
    inwards : shape (patches, 3), unit vectors that point into the material, first estimate.
    """

    position: Array
    value: Array
    usable: NDArray[np.bool_]
    side: NDArray[np.int8]
    air: Array
    material: Array
    inwards: Array

    def __len__(self) -> int:
        return len(self.value)

    def take(self, which: NDArray) -> Patches:
        """Some of them."""
        return Patches(*(getattr(self, name)[which] for name in self.__dataclass_fields__))


def surface_patches(volume: Volume, body: Body) -> Patches:
    """Boxes around up to 360 points where scan lines along the three axes cross from outside into the object."""
    points = np.concatenate([_crossings(body, axis) for axis in range(3)])
    half = [min(_HALF, n - 1) for n in volume.shape]
    boxes = read_boxes(volume, body.regions, points, half, half)
    return _flatten(volume.grid, boxes, half)


def _crossings(body: Body, axis: int) -> NDArray[np.int64]:
    """Up to ``_PER_AXIS`` object voxels whose neighbour along ``axis`` is outside, shape (n, 3).

    Two of three voxels on either side must agree, so that speckle is passed over.
    """
    low = [max(0, cut.start - 4) for cut in body.box]
    high = [min(n, cut.stop + 4) for cut, n in zip(body.box, body.regions.shape, strict=True)]
    index = [
        np.arange(first, last)
        if a == axis
        else np.unique(np.linspace(first, last - 1, min(last - first, _LINES)).round().astype(np.int64))
        for a, (first, last) in enumerate(zip(low, high, strict=True))
    ]
    if len(index[axis]) < 4:
        return np.zeros((0, 3), dtype=np.int64)
    # First the slice axis, one slice at a time: fancy indexing of all three at once would be slow.
    lines = np.stack([body.regions[k][np.ix_(index[1], index[2])] for k in index[0]])
    lines = np.moveaxis(lines, axis, 0)
    outside, solid = lines == Region.OUTSIDE, lines == Region.OBJECT
    found = []
    for turned in (False, True):
        o, s = (outside[::-1], solid[::-1]) if turned else (outside, solid)
        n = len(o)
        before = _sum_of_three(o)[: n - 3]  # voxels p − 3 … p − 1 for p = 3 … n − 1
        after = np.zeros_like(before)
        whole = _sum_of_three(s)
        after[: n - 5] = whole[3 : n - 2]  # voxels p … p + 2
        if n > 5:
            after[n - 5 :] = whole[n - 3]
        hit = (before >= 2) & (after >= 2) & o[2 : n - 1] & s[3:n]
        at = np.argwhere(hit)
        at[:, 0] += 3
        if turned:
            at[:, 0] = n - 1 - at[:, 0]
        found.append(at)
    at = np.concatenate(found)
    order = [axis, *(a for a in range(3) if a != axis)]
    points = np.empty((len(at), 3), dtype=np.int64)
    for column, a in enumerate(order):
        points[:, a] = index[a][at[:, column]]
    points = points[hashed_order(points)]
    return points[:_PER_AXIS]


def _sum_of_three(flags: NDArray[np.bool_]) -> NDArray[np.int8]:
    """Sums of voxels p, p + 1, p + 2 along the first axis; two shorter than the flags."""
    count = flags.astype(np.int8)
    return count[:-2] + count[1:-1] + count[2:]


def _flatten(grid: Grid, boxes: Boxes, half: list[int]) -> Patches:
    """Lay the boxes out in mm and find where the surface faces."""
    patches = len(boxes.centres)
    i = np.arange(-half[2], half[2] + 1) * grid.column_spacing_mm
    j = np.arange(-half[1], half[1] + 1) * grid.row_spacing_mm
    in_plane = i[None, :, None] * grid.direction[:, 0] + j[:, None, None] * grid.direction[:, 1]
    slices = boxes.centres[:, :1] + np.arange(-half[0], half[0] + 1)
    height = grid.slice_positions_mm[np.clip(slices, 0, grid.shape[0] - 1)]
    height = height - height[:, half[0]][:, None]
    position = in_plane[None, None] + (height[..., None, None, None] * grid.direction[:, 2])
    position = position.reshape(patches, -1, 3)
    value = boxes.values.reshape(patches, -1).astype(np.float64)
    labels = boxes.labels.reshape(patches, -1)
    usable = (labels != BEYOND) & (labels != Region.EXCLUDED) & (labels != Region.NO_DATA)
    side = (labels == Region.OBJECT).astype(np.int8) - (labels == Region.OUTSIDE)
    air, material = np.zeros(patches), np.zeros(patches)
    for n in range(patches):
        air[n] = np.median(value[n][labels[n] == Region.OUTSIDE])
        material[n] = np.median(value[n][labels[n] == Region.OBJECT])
    # The gradient of the least-squares plane through the values of a ball gives the first normal.
    near = usable & (np.linalg.norm(position, axis=-1) <= ball_radius(grid))
    relative = (value - air[:, None]) / np.where(material == air, 1, material - air)[:, None]
    weight = near.astype(np.float64)
    total = np.maximum(weight.sum(axis=1), 1)
    middle = np.einsum("pv,pvx->px", weight, position) / total[:, None]
    level = np.einsum("pv,pv->p", weight, relative) / total
    moment = np.einsum("pv,pvx,pvy->pxy", weight, position, position, optimize=True)
    moment -= total[:, None, None] * middle[:, :, None] * middle[:, None, :]
    pull = np.einsum("pv,pvx,pv->px", weight, position, relative, optimize=True)
    pull -= total[:, None] * middle * level[:, None]
    gradient = np.einsum("pxy,py->px", np.linalg.pinv(moment, rcond=1e-6, hermitian=True), pull)
    length = np.linalg.norm(gradient, axis=1)
    inwards = gradient / np.maximum(length, 1e-12)[:, None]
    good = (length > 1e-9) & (material != air) & (np.mean(labels == Region.EXCLUDED, axis=1) < 0.02)
    return Patches(position, value, usable, side, air, material, inwards).take(good)


def ball_radius(grid: Grid) -> float:
    """Half the width of the neighbourhood of a surface point, mm: five pixels, but at least one slice."""
    slices, rows, columns = grid.spacing_mm
    return max(5 * float(np.sqrt(rows * columns)), 1.1 * max(slices, rows, columns))
