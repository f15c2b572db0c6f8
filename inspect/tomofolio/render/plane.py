"""Grey pictures: sections by trilinear interpolation, and maximum intensity projections."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.render.camera import Camera
from tomofolio.render.field import RayField
from tomofolio.render.sampling import careful_trilinear, helper, kernel, trilinear
from tomofolio.render.stepping import TILE, axis_limits, cell_of, slice_exit, stretch_exit
from tomofolio.threads import over_parts

Array = NDArray[Any]

#: Slices that are looked at together.
SLAB = 32


def section(field: RayField, camera: Camera) -> NDArray[np.float32]:
    """Values in the plane through the camera's centre, shape (height, width); NaN outside the scan."""
    return field.values_at(camera.pixel_positions_mm())


def project_maximum(field: RayField, camera: Camera, empty: float) -> NDArray[np.float32]:
    """Largest value along every ray of the camera.

    A ray along an axis of the grid shows the maxima of the lines of voxels, interpolated between the lines. On other
    rays values are read where they meet the planes of voxels across the main axis, and half-way between them.

    Parameters
    ----------
    empty : value that stands in for what is hidden.

    Returns
    -------
    shape (height, width), float32, NaN where the ray misses the scan.
    """
    along = field.mm_to_index @ camera.axes[2]
    axis = int(np.argmax(np.abs(along)))
    step = along / abs(along[axis])
    if np.abs(np.delete(step, axis)).max() < 1e-6:
        return _sampled(field, camera, _maxima_along(field, axis, empty), axis)
    step /= 2
    start = (camera.first_pixel_mm - field.origin_mm) @ field.mm_to_index.T
    right, down = field.mm_to_index @ camera.axes[0], field.mm_to_index @ camera.axes[1]
    geometry = np.stack((start, right * camera.mm_per_pixel, down * camera.mm_per_pixel, step))
    scale, offset = field.slope.astype(np.float32), field.intercept.astype(np.float32)
    out = np.full((camera.height, camera.width), np.nan, np.float32)
    limits = field.highest.copy()
    limits[field.has_hidden] = np.maximum(limits[field.has_hidden], np.float32(empty))

    def part(rows: slice) -> None:
        _project_rows(
            field.stored, field.hidden, field.hidden_from, *field.shape, scale, offset, np.float32(empty), field.knots,
            field.finder, field.refine, field.even, limits.reshape(-1), field.has_hidden.reshape(-1), geometry, axis,
            rows.start, rows.stop, out,
        )  # fmt: skip

    over_parts(part, camera.height, TILE)
    return out


def _maxima_along(field: RayField, axis: int, empty: float) -> NDArray[np.float32]:
    """Largest value of every line of voxels along an axis, slab by slab; hidden voxels count as ``empty``."""
    stored = field.stored.reshape(field.shape)
    hidden = field.hidden.reshape(field.shape) if field.hidden_from < 255 else None
    parts = []
    for first in range(0, field.shape[0], SLAB):
        slab = slice(first, first + SLAB)
        slope, intercept = field.slope[slab, None, None], field.intercept[slab, None, None]
        if np.ptp(slope) == 0 and np.ptp(intercept) == 0 and slope[0, 0, 0] > 0:
            # The largest stored number is the largest value: no float copy of the slab is needed.
            values = stored[slab]
            if hidden is not None and (hidden[slab] >= field.hidden_from).any():
                lowest = np.iinfo(values.dtype).min if values.dtype.kind in "iu" else -np.inf
                values = np.where(hidden[slab] >= field.hidden_from, values.dtype.type(lowest), values)
            most = values.max(axis=axis).astype(np.float64) * slope[0] + intercept[0]
            if hidden is not None:
                most = np.maximum(most, empty)
        else:
            every = stored[slab] * slope + intercept
            if hidden is not None:
                every = np.where(hidden[slab] >= field.hidden_from, empty, every)
            most = every.max(axis=axis)
        parts.append(most.astype(np.float32))
    return np.max(parts, axis=0) if axis == 0 else np.concatenate(parts, axis=0)


def _sampled(field: RayField, camera: Camera, flat: NDArray[np.float32], axis: int) -> NDArray[np.float32]:
    """A picture of values on the two other axes, bilinear between the voxels, NaN outside the scan."""
    start = (camera.first_pixel_mm - field.origin_mm) @ field.mm_to_index.T
    right = field.mm_to_index @ camera.axes[0] * camera.mm_per_pixel
    down = field.mm_to_index @ camera.axes[1] * camera.mm_per_pixel
    across, up = np.arange(camera.width), np.arange(camera.height)[:, None]
    places = []
    for n in (n for n in range(3) if n != axis):
        place = start[n] + across * right[n] + up * down[n]
        near = np.clip(place, 0, field.size[n])
        place = np.where(np.abs(place - near) < 1e-3, near, place)  # rounding must not drop border voxels
        if n == 0 and not field.even:
            place = np.interp(place, field.knots, np.arange(field.shape[0]), left=-1, right=field.shape[0])
        places.append(place)
    return ndimage.map_coordinates(flat, places, order=1, mode="constant", cval=np.nan)


@helper
def on_voxel(at: float) -> float:
    """The whole number next to ``at`` where it is within rounding of it."""
    whole = math.floor(at + 0.5)
    return whole if abs(at - whole) < 1e-4 else at


@kernel
def _project_rows(
    stored: Array,
    hidden: Array,
    hidden_from: int,
    slices: int,
    rows: int,
    columns: int,
    scale: Array,
    offset: Array,
    empty: float,
    knots: Array,
    finder: Array,
    refine: float,
    even: bool,
    limits: Array,
    has_hidden: Array,
    geometry: Array,
    axis: int,
    first_row: int,
    last_row: int,
    out: Array,
) -> None:
    """Maximum along the rays of some picture rows; blocks that hold nothing larger are leapt over."""
    f = np.float32
    layer = rows * columns
    block_rows, block_columns = (rows - 2) // 8 + 1, (columns - 2) // 8 + 1
    top_z = knots[slices - 1]
    step_z, step_y, step_x = geometry[3, 0], geometry[3, 1], geometry[3, 2]
    dz, dy, dx = f(step_z), f(step_y), f(step_x)
    iz = f(1.0) / dz if abs(dz) > 1e-9 else f(1e12)
    iy = f(1.0) / dy if abs(dy) > 1e-9 else f(1e12)
    ix = f(1.0) / dx if abs(dx) > 1e-9 else f(1e12)
    for tile in range(0, out.shape[1], TILE):
        for py in range(first_row, last_row):
            for px in range(tile, min(tile + TILE, out.shape[1])):
                # u = 0 on the first voxel plane of the main axis
                to_plane = -(geometry[0, axis] + px * geometry[1, axis] + py * geometry[2, axis]) / geometry[3, axis]
                start_z = on_voxel(geometry[0, 0] + px * geometry[1, 0] + py * geometry[2, 0] + to_plane * step_z)
                start_y = on_voxel(geometry[0, 1] + px * geometry[1, 1] + py * geometry[2, 1] + to_plane * step_y)
                start_x = on_voxel(geometry[0, 2] + px * geometry[1, 2] + py * geometry[2, 2] + to_plane * step_x)
                in_z, out_z = axis_limits(start_z, step_z, float(top_z))
                in_y, out_y = axis_limits(start_y, step_y, rows - 1.0)
                in_x, out_x = axis_limits(start_x, step_x, columns - 1.0)
                u_in, u_out = max(in_z, in_y, in_x), min(out_z, out_y, out_x)
                n, last = math.ceil(u_in - 1e-3), math.floor(u_out + 1e-3)
                if n > last:
                    continue
                bz, by, bx = f(start_z), f(start_y), f(start_x)
                best = f(-np.inf)
                while n <= last:
                    z = min(max(bz + f(n) * dz, f(0.0)), top_z)
                    y = min(max(by + f(n) * dy, f(0.0)), f(rows - 1))
                    x = min(max(bx + f(n) * dx, f(0.0)), f(columns - 1))
                    k, fz = cell_of(z, knots, finder, refine, even)
                    j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                    block = np.uint64(((k >> 3) * block_rows + (j >> 3)) * block_columns + (i >> 3))
                    if limits[block] <= best:
                        leave = slice_exit((k >> 3) * 8, ((k >> 3) + 1) * 8, knots, bz, iz)
                        leave = min(leave, stretch_exit((j >> 3) * 8, ((j >> 3) + 1) * 8, rows, by, iy))
                        leave = min(leave, stretch_exit((i >> 3) * 8, ((i >> 3) + 1) * 8, columns, bx, ix))
                        n = max(n + 1, math.floor(min(leave, f(last + 1))))
                        continue
                    o = (k * rows + j) * columns + i
                    v = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                    if v > best and has_hidden[block]:  # hidden voxels can only lower it, so most need no closer look
                        v = careful_trilinear(
                            stored, hidden, hidden_from, slices, rows, columns,
                            k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                        )  # fmt: skip
                    best = max(best, v)
                    n += 1
                out[py, px] = best if best > f(-np.inf) else empty
