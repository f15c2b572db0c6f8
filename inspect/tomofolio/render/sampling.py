"""Reading values between the voxels, straight from the stored numbers: small kernels that others are built from.

Index positions are (z, y, x): x and y are fractional column and row; z runs along the slice axis in units of the
*mean* slice distance, so that a straight ray stays straight where the slices are uneven. ``knots`` holds the z of
every slice; for even slices it is 0, 1, 2 ... Values come out in units of the caller's ``scale`` and ``offset``
(one pair per slice), so the same kernels serve values and positions in a transfer table.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from tomofolio.body.result import Region

Array = NDArray[Any]
FAST = {"contract", "nsz", "arcp"}

OUTSIDE, OBJECT, EXCLUDED = int(Region.OUTSIDE), int(Region.OBJECT), int(Region.EXCLUDED)

# Kernels here allocate nothing, so numba's reference counts are left out of them (``_nrt``): they are atomic, sit in
# the innermost loop around every helper that takes an array, and took two thirds of the time.
kernel: Any = njit(cache=True, nogil=True, fastmath=FAST, _nrt=False)  # type: ignore[call-overload]
helper: Any = njit(cache=True, nogil=True, fastmath=FAST, forceinline=True, _nrt=False)  # type: ignore[call-overload]


@helper
def find_slice(z: float, knots: Array, finder: Array, refine: float) -> int:
    """Largest k with knots[k] <= z, at most slices − 2 (and at least 0).

    ``finder`` has the answer for every 1 / refine of z; a stretch that short holds one knot at most.
    """
    k = finder[np.uint64(min(max(int(z * refine), 0), finder.shape[0] - 1))]
    return k + (z >= knots[np.uint64(k + 1)] and k < knots.shape[0] - 2)


@helper
def trilinear(
    stored: Array,
    o: int,
    row: int,
    layer: int,
    k: int,
    fz: float,
    fy: float,
    fx: float,
    scale: Array,
    offset: Array,
) -> Any:
    """Trilinear value in the cell whose first corner is the flat index ``o`` in slice ``k``."""
    f, u = np.float32, np.uint64  # an unsigned index spares numba's check for negative ones, a third of the time
    one, a_, r, s = u(1), u(o), u(row), u(k)
    b_, c_ = a_ + r, a_ + u(layer)
    d_ = c_ + r
    a0, a1 = f(stored[a_]), f(stored[a_ + one])
    b0, b1 = f(stored[b_]), f(stored[b_ + one])
    c0, c1 = f(stored[c_]), f(stored[c_ + one])
    d0, d1 = f(stored[d_]), f(stored[d_ + one])
    a = a0 + fx * (a1 - a0)
    b = b0 + fx * (b1 - b0)
    c = c0 + fx * (c1 - c0)
    d = d0 + fx * (d1 - d0)
    near = scale[s] * (a + fy * (b - a)) + offset[s]
    far = scale[s + one] * (c + fy * (d - c)) + offset[s + one]
    return near + fz * (far - near)


@kernel
def careful_voxel(
    stored: Array,
    hidden: Array,
    hidden_from: int,
    slices: int,
    rows: int,
    columns: int,
    k: int,
    j: int,
    i: int,
    scale: Array,
    offset: Array,
    empty: float,
) -> Any:
    """Value of one voxel; ``empty`` outside the scan and where ``hidden`` holds a code from ``hidden_from`` on.

    Where the codes are those of `Region`, background that touches no object is empty as well: near hidden things it
    holds their blurred edges, which would hang in the air as a ghost.
    """
    if k < 0 or j < 0 or i < 0 or k >= slices or j >= rows or i >= columns:
        return empty
    o = (k * rows + j) * columns + i
    if hidden_from < 255 and hidden[o] >= hidden_from:
        return empty
    if hidden_from == EXCLUDED and hidden[o] == OUTSIDE:
        touching = (k > 0 and hidden[o - rows * columns] == OBJECT) or (
            k < slices - 1 and hidden[o + rows * columns] == OBJECT
        )
        touching = touching or (j > 0 and hidden[o - columns] == OBJECT)
        touching = touching or (j < rows - 1 and hidden[o + columns] == OBJECT)
        touching = touching or (i > 0 and hidden[o - 1] == OBJECT)
        touching = touching or (i < columns - 1 and hidden[o + 1] == OBJECT)
        if not touching:
            return empty
    return scale[k] * np.float32(stored[o]) + offset[k]


@kernel
def careful_trilinear(
    stored: Array,
    hidden: Array,
    hidden_from: int,
    slices: int,
    rows: int,
    columns: int,
    k: int,
    j: int,
    i: int,
    fz: float,
    fy: float,
    fx: float,
    scale: Array,
    offset: Array,
    empty: float,
) -> Any:
    """`trilinear` at the cell (k, j, i), with ``empty`` in place of voxels that are hidden or outside the scan."""
    total = np.float32(0.0)
    for corner in range(8):
        c, b, a = corner >> 2, (corner >> 1) & 1, corner & 1
        w = (fz if c else np.float32(1.0) - fz) * (fy if b else np.float32(1.0) - fy)
        w *= fx if a else np.float32(1.0) - fx
        if w > np.float32(0.0):
            total += w * careful_voxel(
                stored, hidden, hidden_from, slices, rows, columns, k + c, j + b, i + a, scale, offset, empty
            )
    return total


@helper
def _flat_value(stored: Array, q: int, row: int, fy: float, fx: float) -> Any:
    """Bilinear stored number in one slice; ``q`` and ``row`` are unsigned."""
    one = np.uint64(1)
    a0, a1 = np.float32(stored[q]), np.float32(stored[q + one])
    b0, b1 = np.float32(stored[q + row]), np.float32(stored[q + row + one])
    a, b = a0 + fx * (a1 - a0), b0 + fx * (b1 - b0)
    return a + fy * (b - a)


@helper
def _flat_gradient(stored: Array, q: int, row: int, fy: float, fx: float) -> Any:
    """(stored number, its change per row, per column) in one slice, from the 12 pixels around a cell."""
    f, one, two, half, whole = np.float32, np.uint64(1), np.uint64(2), np.float32(0.5), np.float32(1.0)
    u0, u1 = f(stored[q - row]), f(stored[q - row + one])
    t9, t0, t1, t2 = f(stored[q - one]), f(stored[q]), f(stored[q + one]), f(stored[q + two])
    p = q + row
    b9, b0, b1, b2 = f(stored[p - one]), f(stored[p]), f(stored[p + one]), f(stored[p + two])
    p += row
    d0, d1 = f(stored[p]), f(stored[p + one])
    up, top, low, down = u0 + fx * (u1 - u0), t0 + fx * (t1 - t0), b0 + fx * (b1 - b0), d0 + fx * (d1 - d0)
    gy = half * ((whole - fy) * (low - up) + fy * (down - top))
    left0, left1 = t9 + fy * (b9 - t9), t0 + fy * (b0 - t0)
    right0, right1 = t1 + fy * (b1 - t1), t2 + fy * (b2 - t2)
    gx = half * ((whole - fx) * (right0 - left0) + fx * (right1 - left1))
    return top + fy * (low - top), gy, gx


@helper
def gradient(
    stored: Array,
    o: int,
    row: int,
    layer: int,
    k: int,
    fz: float,
    fy: float,
    fx: float,
    scale: Array,
    offset: Array,
    knots: Array,
) -> Any:
    """Central differences at the eight corners of a cell, interpolated: smooth where the gradient of `trilinear` jumps.

    The four slices k − 1 … k + 2, rows and columns around the cell must exist.

    Returns
    -------
    (d/dz, d/dy, d/dx) per unit of z, row and column.
    """
    one, one32 = np.uint64(1), np.float32(1.0)
    q, r, s, up = np.uint64(o), np.uint64(row), np.uint64(k), np.uint64(layer)
    v0 = _flat_value(stored, q - up, r, fy, fx)
    v1, gy1, gx1 = _flat_gradient(stored, q, r, fy, fx)
    v2, gy2, gx2 = _flat_gradient(stored, q + up, r, fy, fx)
    v3 = _flat_value(stored, q + up + up, r, fy, fx)
    a, b, c, d = s - one, s, s + one, s + one + one
    v0 = scale[a] * v0 + offset[a]
    v1 = scale[b] * v1 + offset[b]
    v2 = scale[c] * v2 + offset[c]
    v3 = scale[d] * v3 + offset[d]
    w1, w2 = (one32 - fz) * scale[b], fz * scale[c]
    gz = (one32 - fz) * (v2 - v0) / (knots[c] - knots[a]) + fz * (v3 - v1) / (knots[d] - knots[b])
    return gz, w1 * gy1 + w2 * gy2, w1 * gx1 + w2 * gx2


@kernel
def careful_gradient(
    stored: Array,
    hidden: Array,
    hidden_from: int,
    slices: int,
    rows: int,
    columns: int,
    k: int,
    j: int,
    i: int,
    fz: float,
    fy: float,
    fx: float,
    scale: Array,
    offset: Array,
    knots: Array,
    empty: float,
) -> Any:
    """`gradient` with ``empty`` in place of voxels that are hidden or outside the scan."""
    gz = gy = gx = np.float32(0.0)
    for side in (-1, 1):
        sign = np.float32(side)
        gz += sign * careful_trilinear(
            stored, hidden, hidden_from, slices, rows, columns, k + side, j, i, fz, fy, fx, scale, offset, empty
        )  # fmt: skip
        gy += sign * careful_trilinear(
            stored, hidden, hidden_from, slices, rows, columns, k, j + side, i, fz, fy, fx, scale, offset, empty
        )  # fmt: skip
        gx += sign * careful_trilinear(
            stored, hidden, hidden_from, slices, rows, columns, k, j, i + side, fz, fy, fx, scale, offset, empty
        )  # fmt: skip
    last = slices - 1
    here, there = knots[k], knots[min(k + 1, last)]
    gap = max(there - here, np.float32(1e-6))
    before = here - knots[k - 1] if k > 0 else gap
    behind = knots[k + 2] - there if k + 2 <= last else gap
    width = gap + (np.float32(1.0) - fz) * before + fz * behind
    return gz / width, gy * np.float32(0.5), gx * np.float32(0.5)


@kernel
def sample_points(
    stored: Array,
    slices: int,
    rows: int,
    columns: int,
    points: Array,
    scale: Array,
    offset: Array,
    knots: Array,
    finder: Array,
    refine: float,
    out: Array,
) -> None:
    """Trilinear values at points, shape (n, 3), float32, order (z, y, x); NaN outside the box of voxel centres."""
    top = knots[slices - 1]
    for n in range(points.shape[0]):
        z, y, x = points[n, 0], points[n, 1], points[n, 2]
        if not (0.0 <= z <= top and 0.0 <= y <= rows - 1 and 0.0 <= x <= columns - 1):
            out[n] = np.nan
            continue
        k = find_slice(z, knots, finder, refine)
        j, i = min(int(y), rows - 2), min(int(x), columns - 2)
        fz = (z - knots[k]) / (knots[k + 1] - knots[k])
        o = (k * rows + j) * columns + i
        out[n] = trilinear(
            stored, o, columns, rows * columns, k, fz, y - np.float32(j), x - np.float32(i), scale, offset
        )  # fmt: skip
