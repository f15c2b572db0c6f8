"""Small steps that the ray kernel is built from: limits of a ray, leaps, sums of the table, light on a surface."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tomofolio.render.sampling import find_slice, helper, kernel

Array = NDArray[Any]
TILE = 16

# What a block holds. 1 … FARTHEST: clear, with the distance in blocks to what is not. UNIFORM + 1 … UNIFORM +
# FARTHEST: all on one plateau of the table, with the distance to what is not. THIN: visible, but nowhere dense enough
# to be a surface, so it is sampled with a longer stride.
VISIBLE, FARTHEST, UNIFORM, VISIBLE_WITH_HIDDEN, THIN = 0, 100, 100, 250, 252
STRIDE = 4

#: Light is worked out anew when a ray has gained this much weight on a surface since the last time.
RELIGHT = np.float32(0.04)

#: A ray ends when it lets through less than this: below half a grey level even on the brightest ground.
OPAQUE = np.float32(1.0 / 1024.0)
#: Optical depth below which a stretch is passed over, and below which its value may be taken as running straight.
NOTHING, FAINT = np.float32(1e-6), np.float32(0.003)
FAR = np.float32(1e30)
ZERO, HALF, ONE = np.float32(0.0), np.float32(0.5), np.float32(1.0)


@kernel
def jitter_of(x: int, y: int) -> float:
    """0 … 1, fixed for each pixel: spreads the sample planes of neighbouring rays (an integer hash, no pattern)."""
    h = (x * 0x9E3779B1 + y * 0x85EBCA77) & 0xFFFFFFFF
    h ^= h >> 15
    h = (h * 0x2C1B3C6D) & 0xFFFFFFFF
    h ^= h >> 12
    h = (h * 0x297A2D39) & 0xFFFFFFFF
    h ^= h >> 15
    return float(h) / 4294967296.0


@helper
def opacity(optical_depth: float) -> Any:
    """1 − exp(−x); a series where the exponential would lose digits."""
    x = optical_depth
    if x < np.float32(0.05):
        return x * (ONE - x * (HALF - x * (np.float32(1 / 6) - x * np.float32(1 / 24))))
    return ONE - math.exp(-x)


@kernel
def axis_limits(start: float, delta: float, top: float) -> Any:
    """Where start + u · delta is inside 0 … top, as (first u, last u); first > last if nowhere."""
    if abs(delta) < 1e-9:
        if start < -1e-4 or start > top + 1e-4:
            return 1.0, 0.0
        return -1e30, 1e30
    a, b = -start / delta, (top - start) / delta
    return min(a, b), max(a, b)


@helper
def stretch_exit(low: int, high: int, n: int, base: float, inverse: float) -> Any:
    """u at which a coordinate leaves the voxels low … high; the ends of the scan don't count."""
    if inverse > 0:
        return FAR if high >= n - 1 else (np.float32(high) - base) * inverse
    return FAR if low <= 0 else (np.float32(low) - base) * inverse


@helper
def slice_exit(low: int, high: int, knots: Array, base: float, inverse: float) -> Any:
    """`stretch_exit` along the slice axis, whose slices need not be even."""
    if inverse > 0:
        return FAR if high >= knots.shape[0] - 1 else (knots[high] - base) * inverse
    return FAR if low <= 0 else (knots[low] - base) * inverse


@helper
def cell_of(z: float, knots: Array, finder: Array, refine: float, even: bool) -> Any:
    """Slice below z and how far z is on the way to the next, 0 … 1."""
    if even:
        k = min(int(z), knots.shape[0] - 2)
        return k, z - np.float32(k)
    k = find_slice(z, knots, finder, refine)
    here = knots[np.uint64(k)]
    return k, (z - here) / (knots[np.uint64(k + 1)] - here)


@helper
def between(integrals: Array, channel: int, v0: float, v1: float) -> Any:
    """Integral of the table from v0 to v1, in table steps."""
    e0, e1 = min(int(v0), integrals.shape[0] - 2), min(int(v1), integrals.shape[0] - 2)
    q0, q1 = v0 - np.float32(e0), v1 - np.float32(e1)
    s0, s1, c, one = np.uint64(e0), np.uint64(e1), np.uint64(channel), np.uint64(1)
    a, b = integrals[s0, c], integrals[s1, c]
    return b + q1 * (integrals[s1 + one, c] - b) - a - q0 * (integrals[s0 + one, c] - a)


@helper
def shape_light(gz: float, gy: float, gx: float, normal: Array, light: Array) -> Any:
    """Light on matter with this gradient: (how surely it is a surface 0 … 1, diffuse |n·l|, gloss |n·h|^32)."""
    nx = normal[0, 0] * gz + normal[0, 1] * gy + normal[0, 2] * gx
    ny = normal[1, 0] * gz + normal[1, 1] * gy + normal[1, 2] * gx
    nz = normal[2, 0] * gz + normal[2, 1] * gy + normal[2, 2] * gx
    size = math.sqrt(nx * nx + ny * ny + nz * nz)
    sure: Any = min(max((size - light[9]) / (light[10] - light[9]), ZERO), ONE)
    sure = sure * sure * (np.float32(3.0) - np.float32(2.0) * sure)
    inverse = ONE / (size + np.float32(1e-20))
    lit = abs(nx * light[0] + ny * light[1] + nz * light[2]) * inverse
    gloss = abs(nx * light[3] + ny * light[4] + nz * light[5]) * inverse
    gloss *= gloss
    gloss *= gloss
    gloss *= gloss
    gloss *= gloss
    return sure, lit, gloss * gloss


@helper
def needs_care(code: int, hidden_from: int) -> bool:
    """Whether a block may hold hidden voxels: one that is clear may be so because of them."""
    return code == VISIBLE_WITH_HIDDEN or (hidden_from < 255 and VISIBLE < code <= FARTHEST)


@helper
def settle(
    red: float,
    green: float,
    blue: float,
    through: float,
    length: float,
    moment: float,
    entry: int,
    integrals: Array,
    step_mm: float,
    fade_base: float,
    light: Array,
) -> Any:
    """Composite a length (in steps) of matter like one table entry; (red, green, blue, through) after it."""
    e, one = np.uint64(entry), np.uint64(1)
    thick = integrals[e + one, 0] - integrals[e, 0]
    a = opacity(thick * length * step_mm)
    weight = through * a
    haze = min(max(fade_base + moment / length * light[11], ZERO), ONE)
    keep = weight * (ONE - haze) * light[16] / max(thick, np.float32(1e-30))
    haze *= weight
    red += keep * (integrals[e + one, 1] - integrals[e, 1]) + haze * light[13]
    green += keep * (integrals[e + one, 2] - integrals[e, 2]) + haze * light[14]
    blue += keep * (integrals[e + one, 3] - integrals[e, 3]) + haze * light[15]
    return red, green, blue, through * (ONE - a)


@helper
def average(integrals: Array, v0: float, v1: float) -> Any:
    """Mean density of the table between two values."""
    low: Any = v0
    high: Any = v1
    if abs(v1 - v0) < HALF:
        low = min(v0, np.float32(integrals.shape[0] - 2))
        high = low + ONE
    return between(integrals, 0, low, high) / (high - low)
