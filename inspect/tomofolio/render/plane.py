"""Grey pictures: sections by trilinear interpolation, and maximum intensity projections."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tomofolio.render.camera import Camera
from tomofolio.render.field import RayField, over_parts
from tomofolio.render.sampling import careful_trilinear, helper, kernel, trilinear
from tomofolio.render.stepping import TILE, axis_limits, cell_of, slice_exit, stretch_exit

Array = NDArray[Any]


def section(field: RayField, camera: Camera) -> NDArray[np.float32]:
    """Values in the plane through the camera's centre, shape (height, width); NaN outside the scan."""
    return field.values_at(camera.pixel_positions_mm())


def project_maximum(field: RayField, camera: Camera, empty: float) -> NDArray[np.float32]:
    """Largest value along every ray of the camera.

    Values are read where the ray meets the planes of voxels across its main axis, and half-way between them unless it
    runs along the axis itself: then the values between are linear, and this is their exact maximum.

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
    if np.abs(np.delete(step, axis)).max() > 1e-6:
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
