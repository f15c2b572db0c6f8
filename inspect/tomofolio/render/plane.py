"""Grey pictures: sections by trilinear interpolation, and maximum intensity projections."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from tomofolio.render.camera import Camera
from tomofolio.render.casting import TILE, cell_of, ray_limits, slice_exit, stretch_exit
from tomofolio.render.field import RayField, over_parts
from tomofolio.render.sampling import FAST, careful_trilinear, trilinear

Array = NDArray[Any]


def section(field: RayField, camera: Camera) -> NDArray[np.float32]:
    """Values in the plane through the camera's centre, shape (height, width); NaN outside the scan."""
    return field.values_at(camera.pixel_positions_mm())


def project_maximum(field: RayField, camera: Camera, empty: float) -> NDArray[np.float32]:
    """Largest value along every ray of the camera.

    Values are read where the ray meets the planes of voxels across its main axis, and half-way between them. Along
    an axis of the grid this is the exact maximum of the trilinear values: between planes they are linear.

    Parameters
    ----------
    empty : value that stands in for what is hidden.

    Returns
    -------
    shape (height, width), float32, NaN where the ray misses the scan.
    """
    along = field.mm_to_index @ camera.axes[2]
    axis = int(np.argmax(np.abs(along)))
    step = along / abs(along[axis]) / 2
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


@njit(cache=True, nogil=True, fastmath=FAST)
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
    top = np.array([float(knots[slices - 1]), rows - 1.0, columns - 1.0])
    delta = geometry[3]
    dz, dy, dx = f(delta[0]), f(delta[1]), f(delta[2])
    iz = f(1.0) / dz if abs(dz) > 1e-9 else f(1e12)
    iy = f(1.0) / dy if abs(dy) > 1e-9 else f(1e12)
    ix = f(1.0) / dx if abs(dx) > 1e-9 else f(1e12)
    start = np.empty(3)
    for tile in range(0, out.shape[1], TILE):
        for py in range(first_row, last_row):
            for px in range(tile, min(tile + TILE, out.shape[1])):
                for a in range(3):
                    start[a] = geometry[0, a] + px * geometry[1, a] + py * geometry[2, a]
                to_plane = -start[axis] / delta[axis]  # u = 0 on the first voxel plane of the main axis
                for a in range(3):
                    start[a] += to_plane * delta[a]
                    if abs(start[a] - round(start[a])) < 1e-4:
                        start[a] = round(start[a])
                u_in, u_out = ray_limits(start, delta, top)
                n, last = int(np.ceil(u_in - 1e-3)), int(np.floor(u_out + 1e-3))
                if n > last:
                    continue
                bz, by, bx = f(start[0]), f(start[1]), f(start[2])
                best = f(-np.inf)
                while n <= last:
                    z = min(max(bz + f(n) * dz, f(0.0)), f(top[0]))
                    y = min(max(by + f(n) * dy, f(0.0)), f(top[1]))
                    x = min(max(bx + f(n) * dx, f(0.0)), f(top[2]))
                    k, fz = cell_of(z, knots, finder, refine, even)
                    j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                    block = np.uint64(((k >> 3) * block_rows + (j >> 3)) * block_columns + (i >> 3))
                    if limits[block] <= best:
                        leave = slice_exit((k >> 3) * 8, ((k >> 3) + 1) * 8, knots, bz, iz)
                        leave = min(leave, stretch_exit((j >> 3) * 8, ((j >> 3) + 1) * 8, rows, by, iy))
                        leave = min(leave, stretch_exit((i >> 3) * 8, ((i >> 3) + 1) * 8, columns, bx, ix))
                        n = max(n + 1, int(np.floor(min(leave, f(last + 1)))))
                        continue
                    if has_hidden[block]:
                        v = careful_trilinear(
                            stored, hidden, hidden_from, slices, rows, columns,
                            k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                        )  # fmt: skip
                    else:
                        o = (k * rows + j) * columns + i
                        v = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                    best = max(best, v)
                    n += 1
                out[py, px] = best if best > f(-np.inf) else empty
