"""The ray kernel: walks one ray after the other from the front of the scan to its back. `rays` says what it computes."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from tomofolio.render.sampling import (
    FAST,
    careful_gradient,
    careful_trilinear,
    find_slice,
    gradient,
    trilinear,
)

Array = NDArray[Any]
TILE = 16

# What a block holds: 1 … FARTHEST = clear, with the distance to what is not clear, in blocks.
# THIN = visible, but nowhere dense enough to be a surface: sampled with a longer stride.
VISIBLE, FARTHEST, VISIBLE_WITH_HIDDEN, UNIFORM, THIN = 0, 249, 250, 251, 252
STRIDE = 4

#: Light is worked out anew when a ray has gained this much weight on a surface since the last time.
RELIGHT = np.float32(0.03)

#: A ray ends when it lets through less than this: below half a grey level even on the brightest ground.
OPAQUE = np.float32(1.0 / 1024.0)
#: Optical depth below which a stretch is passed over.
NOTHING = np.float32(1e-6)
FAR = np.float32(1e30)
ZERO, HALF, ONE = np.float32(0.0), np.float32(0.5), np.float32(1.0)


@njit(cache=True, nogil=True, fastmath=FAST)
def jitter_of(x: int, y: int) -> float:
    """0 … 1, fixed for each pixel: spreads the sample planes of neighbouring rays (an integer hash, no pattern)."""
    h = (x * 0x9E3779B1 + y * 0x85EBCA77) & 0xFFFFFFFF
    h ^= h >> 15
    h = (h * 0x2C1B3C6D) & 0xFFFFFFFF
    h ^= h >> 12
    h = (h * 0x297A2D39) & 0xFFFFFFFF
    h ^= h >> 15
    return float(h) / 4294967296.0


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def opacity(optical_depth: float) -> float:
    """1 − exp(−x); a series where the exponential would lose digits."""
    x = optical_depth
    if x < np.float32(0.05):
        return x * (ONE - x * (HALF - x * (np.float32(1 / 6) - x * np.float32(1 / 24))))
    return ONE - math.exp(-x)


@njit(cache=True, nogil=True, fastmath=FAST)
def ray_limits(start: Array, delta: Array, top: Array) -> tuple[float, float]:
    """Where a line start + u · delta is inside the box 0 … top, as (first u, last u); first > last if nowhere."""
    first, last = -1e30, 1e30
    for axis in range(3):
        if abs(delta[axis]) < 1e-9:
            if start[axis] < -1e-4 or start[axis] > top[axis] + 1e-4:
                return 1.0, 0.0
            continue
        a = -start[axis] / delta[axis]
        b = (top[axis] - start[axis]) / delta[axis]
        first, last = max(first, min(a, b)), min(last, max(a, b))
    return first, last


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def stretch_exit(low: int, high: int, n: int, base: float, inverse: float) -> float:
    """u at which a coordinate leaves the voxels low … high; the ends of the scan don't count."""
    if inverse > 0:
        return FAR if high >= n - 1 else (np.float32(high) - base) * inverse
    return FAR if low <= 0 else (np.float32(low) - base) * inverse


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def slice_exit(low: int, high: int, knots: Array, base: float, inverse: float) -> float:
    """`stretch_exit` along the slice axis, whose slices need not be even."""
    if inverse > 0:
        return FAR if high >= knots.shape[0] - 1 else (knots[high] - base) * inverse
    return FAR if low <= 0 else (knots[low] - base) * inverse


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def cell_of(z: float, knots: Array, finder: Array, refine: float, even: bool) -> tuple[int, float]:
    """Slice below z and how far z is on the way to the next, 0 … 1."""
    if even:
        k = min(int(z), knots.shape[0] - 2)
        return k, z - np.float32(k)
    k = find_slice(z, knots, finder, refine)
    return k, (z - knots[k]) / (knots[k + 1] - knots[k])


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def between(integrals: Array, channel: int, v0: float, v1: float) -> float:
    """Integral of the table from v0 to v1, in table steps."""
    e0, e1 = min(int(v0), integrals.shape[0] - 2), min(int(v1), integrals.shape[0] - 2)
    q0, q1 = v0 - np.float32(e0), v1 - np.float32(e1)
    s0, s1, c, one = np.uint64(e0), np.uint64(e1), np.uint64(channel), np.uint64(1)
    a, b = integrals[s0, c], integrals[s1, c]
    return b + q1 * (integrals[s1 + one, c] - b) - a - q0 * (integrals[s0 + one, c] - a)


@njit(cache=True, nogil=True, fastmath=FAST, forceinline=True)
def shape_light(gz: float, gy: float, gx: float, normal: Array, light: Array) -> tuple[float, float, float]:
    """Light on matter with this gradient: (how surely it is a surface 0 … 1, diffuse |n·l|, gloss |n·h|^32)."""
    nx = normal[0, 0] * gz + normal[0, 1] * gy + normal[0, 2] * gx
    ny = normal[1, 0] * gz + normal[1, 1] * gy + normal[1, 2] * gx
    nz = normal[2, 0] * gz + normal[2, 1] * gy + normal[2, 2] * gx
    size = math.sqrt(nx * nx + ny * ny + nz * nz)
    sure = min(max((size - light[9]) / (light[10] - light[9]), ZERO), ONE)
    sure = sure * sure * (np.float32(3.0) - np.float32(2.0) * sure)
    inverse = ONE / max(size, np.float32(1e-20))
    lit = abs(nx * light[0] + ny * light[1] + nz * light[2]) * inverse
    gloss = abs(nx * light[3] + ny * light[4] + nz * light[5]) * inverse
    gloss *= gloss
    gloss *= gloss
    gloss *= gloss
    gloss *= gloss
    return sure, lit, gloss * gloss


@njit(cache=True, nogil=True, fastmath=FAST)
def cast_rows(
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
    blocks: Array,
    integrals: Array,
    plateau: Array,
    geometry: Array,
    step_mm: float,
    normal: Array,
    light: Array,
    first_row: int,
    last_row: int,
    out: Array,
) -> None:
    """Cast the rays of some picture rows, tile by tile so that neighbouring rays share cached voxels.

    Parameters
    ----------
    blocks : flat, uint8, by slice, row and column of blocks; see the constants above.
    integrals : shape (entries, 4), running integrals of density and density × colour.
    plateau : shape (entries,): number of the plateau (equal entries) an entry lies on and is thin enough to be lit
        evenly; −1 elsewhere. Stretches on one plateau are summed and composited at once.
    geometry : shape (4, 3), index space: start of the first ray, steps to the next pixel to the right and down, and
        one step along the ray.
    light : see `rays.light_numbers`.
    """
    f = np.float32
    layer = rows * columns
    block_rows, block_columns = (rows - 2) // 8 + 1, (columns - 2) // 8 + 1
    last_entry = integrals.shape[0] - 1
    highest = f(last_entry)
    top = np.array([float(knots[slices - 1]), rows - 1.0, columns - 1.0])
    delta = geometry[3]
    dz, dy, dx = f(delta[0]), f(delta[1]), f(delta[2])
    iz = ONE / dz if abs(dz) > 1e-9 else f(1e12)
    iy = ONE / dy if abs(dy) > 1e-9 else f(1e12)
    ix = ONE / dx if abs(dx) > 1e-9 else f(1e12)
    ambient, diffuse, specular = light[6], light[7], light[8]
    fade_step, fade_start = light[11], light[12]
    ground_r, ground_g, ground_b = light[13], light[14], light[15]
    neutral, surface_from = light[16], light[17]
    start = np.empty(3)

    for tile in range(0, out.shape[1], TILE):
        for py in range(first_row, last_row):
            for px in range(tile, min(tile + TILE, out.shape[1])):
                for axis in range(3):
                    start[axis] = geometry[0, axis] + px * geometry[1, axis] + py * geometry[2, axis]
                u_in, u_out = ray_limits(start, delta, top)
                if not u_in < u_out:
                    continue
                jitter = jitter_of(px, py)
                origin = u_in + jitter  # from here on u counts steps from the first whole sample
                bz = f(start[0] + origin * delta[0])
                by = f(start[1] + origin * delta[1])
                bx = f(start[2] + origin * delta[2])
                end = f(u_out - origin)
                fade_base = fade_start + f(origin) * fade_step
                through, red, green, blue = ONE, ZERO, ZERO, ZERO
                u, n = f(-jitter), 0  # where the ray stands, and its next whole sample
                known, v0 = False, ZERO
                lit, gloss, unlit = neutral, ZERO, ONE
                code, k, j, i = 0, 0, 0, 0
                waiting, waiting_on, waiting_middle = ZERO, 0, ZERO  # length on a plateau, not composited yet
                while True:
                    # 1. the cell where the ray stands (known from the last sample unless it has leapt)
                    done = u >= end
                    on, v1, t = -1, v0, u
                    lone = False
                    if not done:
                        if not known:
                            z = bz + u * dz
                            y = by + u * dy
                            x = bx + u * dx
                            k, fz = cell_of(z, knots, finder, refine, even)
                            j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                            code = blocks[np.uint64(((k >> 3) * block_rows + (j >> 3)) * block_columns + (i >> 3))]
                        # 2. leap where the block allows it
                        stride = 1
                        if code != VISIBLE and code != VISIBLE_WITH_HIDDEN:
                            reach = int(code) if code <= FARTHEST else 1
                            low, high = ((k >> 3) - reach + 1) * 8, ((k >> 3) + reach) * 8
                            leave = slice_exit(low, high, knots, bz, iz)
                            low, high = ((j >> 3) - reach + 1) * 8, ((j >> 3) + reach) * 8
                            leave = min(leave, stretch_exit(low, high, rows, by, iy))
                            low, high = ((i >> 3) - reach + 1) * 8, ((i >> 3) + reach) * 8
                            leave = min(leave, stretch_exit(low, high, columns, bx, ix))
                            landing = end if leave >= end else f(math.floor(leave))
                            if code == THIN:
                                stride = STRIDE if landing >= f(n + STRIDE - 1) else 1
                            elif landing > u:
                                if code != UNIFORM:
                                    n = int(landing) + 1
                                    u, known, unlit = landing, False, ONE
                                    continue
                                if not known:
                                    o = (k * rows + j) * columns + i
                                    v0 = trilinear(
                                        stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset
                                    )  # fmt: skip
                                    v0 = min(max(v0, ZERO), highest)
                                t, v1, lone = landing, v0, True
                                n = int(landing) + 1
                        if not lone:
                            # 3. the values at both ends of the stretch
                            careful = code == VISIBLE_WITH_HIDDEN
                            if not known:
                                if careful:
                                    v0 = careful_trilinear(
                                        stored, hidden, hidden_from, slices, rows, columns,
                                        k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                                    )  # fmt: skip
                                else:
                                    o = (k * rows + j) * columns + i
                                    v0 = trilinear(
                                        stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset
                                    )  # fmt: skip
                                v0 = min(max(v0, ZERO), highest)
                            n += stride
                            t = min(f(n - 1), end)
                            z = bz + t * dz
                            y = by + t * dy
                            x = bx + t * dx
                            k, fz = cell_of(z, knots, finder, refine, even)
                            j, i = min(int(y), rows - 2), min(int(x), columns - 2)
                            code = blocks[np.uint64(((k >> 3) * block_rows + (j >> 3)) * block_columns + (i >> 3))]
                            if code == VISIBLE_WITH_HIDDEN:
                                careful = True
                                v1 = careful_trilinear(
                                    stored, hidden, hidden_from, slices, rows, columns,
                                    k, j, i, fz, y - f(j), x - f(i), scale, offset, empty,
                                )  # fmt: skip
                            else:
                                o = (k * rows + j) * columns + i
                                v1 = trilinear(stored, o, columns, layer, k, fz, y - f(j), x - f(i), scale, offset)
                            v1 = min(max(v1, ZERO), highest)
                        on = plateau[np.uint64(v0)]
                        if on >= 0 and on != plateau[np.uint64(v1)]:
                            on = -1
                        # 4. matter that is all alike only adds to what waits
                        if on >= 0 and (waiting == ZERO or on == waiting_on):
                            waiting_on = on
                            waiting_middle += (t - u) * HALF * (u + t)
                            waiting += t - u
                            u, v0, known = t, v1, not lone
                            continue
                    # 5. composite what waits, before anything that comes after it
                    if waiting > ZERO:
                        e = waiting_on
                        thick = integrals[e + 1, 0] - integrals[e, 0]
                        if thick > ZERO:
                            a = opacity(thick * waiting * step_mm)
                            haze = min(max(fade_base + waiting_middle / waiting * fade_step, ZERO), ONE)
                            weight = through * a
                            keep = weight * (ONE - haze) * neutral / thick
                            haze *= weight
                            red += keep * (integrals[e + 1, 1] - integrals[e, 1]) + haze * ground_r
                            green += keep * (integrals[e + 1, 2] - integrals[e, 2]) + haze * ground_g
                            blue += keep * (integrals[e + 1, 3] - integrals[e, 3]) + haze * ground_b
                            through *= ONE - a
                        waiting = waiting_middle = ZERO
                        if through < OPAQUE:
                            break
                    if done:
                        break
                    if on >= 0:
                        waiting_on, waiting, waiting_middle = on, t - u, (t - u) * HALF * (u + t)
                        u, v0, known = t, v1, not lone
                        continue
                    # 6. a stretch of its own
                    if abs(v1 - v0) < HALF:  # too close for a difference of integrals: one table step around them
                        middle = min(max(HALF * (v0 + v1), HALF), highest - HALF)
                        va, vb = middle - HALF, middle + HALF
                    else:
                        va, vb = v0, v1
                    part = ONE / (vb - va)
                    thick = part * between(integrals, 0, va, vb)
                    depth = thick * (t - u) * step_mm
                    if depth > NOTHING:
                        part /= thick
                        a = opacity(depth)
                        weight = through * a
                        um = HALF * (u + t)
                        haze = min(max(fade_base + um * fade_step, ZERO), ONE)
                        if thick <= surface_from:
                            lit, gloss = neutral, ZERO
                            unlit = ONE
                        elif unlit + weight > RELIGHT:
                            unlit = ZERO
                            zm = bz + um * dz
                            ym = by + um * dy
                            xm = bx + um * dx
                            km, fm = cell_of(zm, knots, finder, refine, even)
                            jm, im = min(int(ym), rows - 2), min(int(xm), columns - 2)
                            inner = km > 0 and jm > 0 and im > 0
                            inner = inner and km < slices - 2 and jm < rows - 2 and im < columns - 2
                            if careful or not inner:
                                gz, gy, gx = careful_gradient(
                                    stored, hidden, hidden_from, slices, rows, columns,
                                    km, jm, im, fm, ym - f(jm), xm - f(im), scale, offset, knots, empty,
                                )  # fmt: skip
                            else:
                                o = (km * rows + jm) * columns + im
                                gz, gy, gx = gradient(
                                    stored, o, columns, layer, km, fm, ym - f(jm), xm - f(im), scale, offset, knots
                                )  # fmt: skip
                            sure, lit, gloss = shape_light(gz, gy, gx, normal, light)
                            sure *= min((thick - surface_from) / (surface_from + f(1e-12)), ONE)
                            lit = neutral + sure * (ambient + diffuse * lit - neutral)
                            gloss *= sure * specular
                        else:
                            unlit += weight
                        shine = weight * (ONE - haze)
                        keep = shine * lit * part
                        shine *= gloss
                        haze *= weight
                        red += keep * between(integrals, 1, va, vb) + shine + haze * ground_r
                        green += keep * between(integrals, 2, va, vb) + shine + haze * ground_g
                        blue += keep * between(integrals, 3, va, vb) + shine + haze * ground_b
                        through *= ONE - a
                        if through < OPAQUE:
                            break
                    u, v0, known = t, v1, True
                out[py, px, 0] = red
                out[py, px, 1] = green
                out[py, px, 2] = blue
                out[py, px, 3] = ONE - through
