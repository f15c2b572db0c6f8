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

Array = NDArray[Any]
FAST = {"contract", "nsz", "arcp"}


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def find_slice(z: float, knots: Array, finder: Array, refine: float) -> int:
    """Largest k with knots[k] <= z, at most slices − 2 (and at least 0)."""
    k = finder[min(max(int(z * refine), 0), finder.shape[0] - 1)]
    while k < knots.shape[0] - 2 and z >= knots[k + 1]:
        k += 1
    return k


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
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
) -> float:
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


@njit(cache=True, nogil=True, fastmath=FAST)
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
) -> float:
    """Value of one voxel; ``empty`` outside the scan and where ``hidden`` holds a code from ``hidden_from`` on."""
    if k < 0 or j < 0 or i < 0 or k >= slices or j >= rows or i >= columns:
        return empty
    o = (k * rows + j) * columns + i
    if hidden_from < 255 and hidden[o] >= hidden_from:
        return empty
    return scale[k] * np.float32(stored[o]) + offset[k]


@njit(cache=True, nogil=True, fastmath=FAST)
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
) -> float:
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


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
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
) -> tuple[float, float, float]:
    """Central differences at the eight corners of a cell, interpolated: smooth where the gradient of `trilinear` jumps.

    The four slices k − 1 … k + 2, rows and columns around the cell must exist.

    Returns
    -------
    (d/dz, d/dy, d/dx) per unit of z, row and column.
    """
    f, u, half, one = np.float32, np.uint64, np.float32(0.5), np.float32(1.0)
    i1, i2, j1, j2 = u(1), u(2), u(row), u(2 * row)
    gy = gx = f(0.0)
    before = near = far = behind = f(0.0)
    for c in range(4):
        q, slot = u(o + (c - 1) * layer), u(k + c - 1)
        s = scale[slot]
        # value of this slice at (fy, fx)
        m00, m01, m10, m11 = f(stored[q]), f(stored[q + i1]), f(stored[q + j1]), f(stored[q + j1 + i1])
        top = m00 + fx * (m01 - m00)
        low = m10 + fx * (m11 - m10)
        value = s * (top + fy * (low - top)) + offset[slot]
        if c == 0:
            before = value
        elif c == 3:
            behind = value
        else:
            w = fz if c == 2 else one - fz
            if c == 1:
                near = value
            else:
                far = value
            u0, u1 = f(stored[q - j1]), f(stored[q - j1 + i1])
            v0, v1 = f(stored[q + j2]), f(stored[q + j2 + i1])
            up = u0 + fx * (u1 - u0)
            down = v0 + fx * (v1 - v0)
            gy += w * s * half * ((one - fy) * (low - up) + fy * (down - top))
            l0, l1 = f(stored[q - i1]), f(stored[q + j1 - i1])
            r0, r1 = f(stored[q + i2]), f(stored[q + j1 + i2])
            left0, left1 = l0 + fy * (l1 - l0), m00 + fy * (m10 - m00)
            right0, right1 = m01 + fy * (m11 - m01), r0 + fy * (r1 - r0)
            gx += w * s * half * ((one - fx) * (right0 - left0) + fx * (right1 - left1))
    gz = (one - fz) * (far - before) / (knots[k + 1] - knots[k - 1])
    gz += fz * (behind - near) / (knots[k + 2] - knots[k])
    return gz, gy, gx


@njit(cache=True, nogil=True, fastmath=FAST)
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
) -> tuple[float, float, float]:
    """`gradient` with ``empty`` in place of voxels that are hidden or outside the scan."""
    around = np.empty(6, np.float32)
    for n in range(6):
        c, b, a = (n == 1) - (n == 0), (n == 3) - (n == 2), (n == 5) - (n == 4)
        around[n] = careful_trilinear(
            stored, hidden, hidden_from, slices, rows, columns,
            k + c, j + b, i + a, fz, fy, fx, scale, offset, empty,
        )  # fmt: skip
    last = slices - 1
    here, there = knots[k], knots[min(k + 1, last)]
    gap = max(there - here, np.float32(1e-6))
    before = here - knots[k - 1] if k > 0 else gap
    behind = knots[k + 2] - there if k + 2 <= last else gap
    width = gap + (np.float32(1.0) - fz) * before + fz * behind
    return (
        (around[1] - around[0]) / width,
        (around[3] - around[2]) * np.float32(0.5),
        (around[5] - around[4]) * np.float32(0.5),
    )


@njit(cache=True, nogil=True, fastmath=FAST)
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
