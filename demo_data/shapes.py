"""Closed-form solids: signed distance, volume where there is a formula, and how much of every cell they fill.

Positions are x, y, z in mm, lengths in mm. A distance is negative inside. It is exact for one sphere, capsule, cylinder
or box, and elsewhere a close estimate near the surface, which is all that `coverage` needs.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray

Point = tuple[float, float, float]
#: Takes x, y, z (arrays that broadcast) and returns the signed distance to the surface.
Distance = Callable[[Any, Any, Any], Any]


@dataclass(frozen=True)
class Solid:
    """``low`` and ``high`` are corners of a box that holds the solid; ``volume`` is in mm³, None without a formula."""

    distance: Distance
    low: Point
    high: Point
    volume: float | None = None


def sphere(centre: Point, radius: float) -> Solid:
    """Volume 4/3 π r³."""
    cx, cy, cz = centre
    return Solid(
        lambda x, y, z: np.sqrt((x - cx) ** 2 + (y - cy) ** 2 + (z - cz) ** 2) - radius,
        *_around(centre, (radius, radius, radius)),
        4 / 3 * np.pi * radius**3,
    )


def ellipsoid(centre: Point, half_axes: Point) -> Solid:
    """Half axes along x, y, z; volume 4/3 π a b c. The distance is right to first order at the surface."""
    (cx, cy, cz), (a, b, c) = centre, half_axes

    def distance(x: Any, y: Any, z: Any) -> Any:
        u, v, w = (x - cx) / a, (y - cy) / b, (z - cz) / c
        level = np.sqrt(u * u + v * v + w * w)
        slope = np.sqrt((u / a) ** 2 + (v / b) ** 2 + (w / c) ** 2)
        return (level - 1) * level / np.maximum(slope, 1e-9)

    return Solid(distance, *_around(centre, half_axes), 4 / 3 * np.pi * a * b * c)


def capsule(start: Point, end: Point, radius: float) -> Solid:
    """All points within ``radius`` of a line from start to end; volume π r² l + 4/3 π r³."""
    direction = [e - s for s, e in zip(start, end, strict=True)]
    length_squared = sum(d * d for d in direction)

    def distance(x: Any, y: Any, z: Any) -> Any:
        away = [value - s for value, s in zip((x, y, z), start, strict=True)]
        along = sum(p * d for p, d in zip(away, direction, strict=True)) / length_squared
        along = np.clip(along, 0, 1)
        return np.sqrt(sum((p - along * d) ** 2 for p, d in zip(away, direction, strict=True))) - radius

    low = tuple(min(s, e) - radius for s, e in zip(start, end, strict=True))
    high = tuple(max(s, e) + radius for s, e in zip(start, end, strict=True))
    return Solid(distance, low, high, np.pi * radius**2 * length_squared**0.5 + 4 / 3 * np.pi * radius**3)  # type: ignore[arg-type]


def cylinder(centre: tuple[float, float], radius: float, low: float, high: float) -> Solid:
    """Upright along z from low to high; volume π r² h."""
    cx, cy = centre
    return Solid(
        lambda x, y, z: _upright(np.sqrt((x - cx) ** 2 + (y - cy) ** 2) - radius, z, low, high),
        (cx - radius, cy - radius, low),
        (cx + radius, cy + radius, high),
        np.pi * radius**2 * (high - low),
    )


def box(low: Point, high: Point, corner: float = 0.0) -> Solid:
    """Axis-parallel, its upright edges rounded with the radius ``corner``; volume (l w − (4 − π) r²) h."""
    (x0, y0, z0), (x1, y1, z1) = low, high

    def distance(x: Any, y: Any, z: Any) -> Any:
        over_x = np.abs(x - (x0 + x1) / 2) - (x1 - x0) / 2 + corner
        over_y = np.abs(y - (y0 + y1) / 2) - (y1 - y0) / 2 + corner
        outside = np.sqrt(np.maximum(over_x, 0) ** 2 + np.maximum(over_y, 0) ** 2)
        return _upright(outside + np.minimum(np.maximum(over_x, over_y), 0) - corner, z, z0, z1)

    return Solid(distance, low, high, ((x1 - x0) * (y1 - y0) - (4 - np.pi) * corner**2) * (z1 - z0))


def rib(start: tuple[float, float], end: tuple[float, float], thickness: float, low: float, high: float) -> Solid:
    """An upright wall with round ends along a line in the x-y plane; volume (l t + π t² / 4) h."""
    half = thickness / 2
    plan = capsule((*start, 0.0), (*end, 0.0), half)
    length = float(np.hypot(end[0] - start[0], end[1] - start[1]))
    return Solid(
        lambda x, y, z: _upright(plan.distance(x, y, np.float32(0)), z, low, high),
        (plan.low[0], plan.low[1], low),
        (plan.high[0], plan.high[1], high),
        (length * thickness + np.pi * half**2) * (high - low),
    )


def union(*solids: Solid) -> Solid:
    """All that is in any of them; the volume is not known, because they may overlap (see `spheres`)."""
    return Solid(
        lambda x, y, z: reduce(np.minimum, (s.distance(x, y, z) for s in solids)),
        tuple(min(s.low[i] for s in solids) for i in range(3)),  # type: ignore[arg-type]
        tuple(max(s.high[i] for s in solids) for i in range(3)),  # type: ignore[arg-type]
    )


def difference(solid: Solid, *others: Solid) -> Solid:
    """What is in the first and in none of the others."""
    return Solid(
        lambda x, y, z: reduce(np.maximum, (-s.distance(x, y, z) for s in others), solid.distance(x, y, z)),
        solid.low,
        solid.high,
    )


def intersection(*solids: Solid) -> Solid:
    """What is in all of them."""
    return Solid(
        lambda x, y, z: reduce(np.maximum, (s.distance(x, y, z) for s in solids)),
        tuple(max(s.low[i] for s in solids) for i in range(3)),  # type: ignore[arg-type]
        tuple(min(s.high[i] for s in solids) for i in range(3)),  # type: ignore[arg-type]
    )


def blend(first: Solid, second: Solid, fillet: float) -> Solid:
    """A union with its inner corners filled, as castings have them (the smooth minimum of implicit modelling)."""

    def distance(x: Any, y: Any, z: Any) -> Any:
        a, b = first.distance(x, y, z), second.distance(x, y, z)
        overlap = np.maximum(fillet - np.abs(a - b), 0) / fillet
        return np.minimum(a, b) - overlap * overlap * np.float32(fillet / 4)

    both = union(first, second)
    return Solid(distance, tuple(v - fillet for v in both.low), tuple(v + fillet for v in both.high))  # type: ignore[arg-type]


def spheres(*parts: tuple[Point, float]) -> Solid:
    """A union of spheres with its volume: the sum less the lens that each overlapping pair shares.

    Raises
    ------
    ValueError : three spheres overlap each other, where lenses could overlap, or one lies within another.
    """
    total, overlapping = 0.0, []
    for i, (centre, radius) in enumerate(parts):
        total += 4 / 3 * np.pi * radius**3
        for j, (other, other_radius) in enumerate(parts[:i]):
            apart = float(np.linalg.norm(np.subtract(centre, other)))
            if apart <= abs(radius - other_radius):
                raise ValueError(f"sphere {i} lies within another: {parts[i]}")
            if apart < radius + other_radius:
                overlapping.append((i, j))
                total -= lens_volume(radius, other_radius, apart)
    for i, j in overlapping:
        others = {k for pair in overlapping if i in pair for k in pair} & {k for p in overlapping if j in p for k in p}
        if others - {i, j}:
            raise ValueError(f"three spheres overlap: {sorted(others)}")
    whole = union(*(sphere(centre, radius) for centre, radius in parts))
    return Solid(whole.distance, whole.low, whole.high, total)


def lens_volume(first: float, second: float, apart: float) -> float:
    """Volume shared by two spheres of these radii whose centres are ``apart``: the sum of two spherical caps."""
    middle = (apart**2 + first**2 - second**2) / (2 * apart)
    caps = ((first, first - middle), (second, second - (apart - middle)))
    return float(sum(np.pi * h**2 * (3 * r - h) / 3 for r, h in caps))


def coverage(solid: Solid, z: NDArray, y: NDArray, x: NDArray, *, splits: int = 2) -> NDArray[np.float32]:
    """The share of every cell that the solid fills, 0 to 1.

    Cells near the surface are split into splits³; in each the share fades over one split's width, so that a flat face
    across an axis is exact wherever it lies. A sphere of radius r comes out too large by (width / r)² / 4 of its
    volume.

    Parameters
    ----------
    z, y, x : centres of the cells, evenly spaced, at least two along each axis.

    Returns
    -------
    len(z) × len(y) × len(x)
    """
    axes = tuple(np.asarray(axis, dtype=np.float32) for axis in (z, y, x))
    steps = tuple(float(axis[1] - axis[0]) for axis in axes)
    filled = np.zeros([len(axis) for axis in axes], np.float32)
    window = tuple(
        slice(int(np.searchsorted(axis, low - step)), int(np.searchsorted(axis, high + step, side="right")))
        for axis, step, low, high in zip(axes, steps, solid.low[::-1], solid.high[::-1], strict=True)
    )
    z, y, x = (axis[part] for axis, part in zip(axes, window, strict=True))
    if not (len(z) and len(y) and len(x)):
        return filled
    far = np.broadcast_to(
        solid.distance(x[None, None, :], y[None, :, None], z[:, None, None]), (len(z), len(y), len(x))
    )
    part = (far < 0).astype(np.float32)
    # Twice the half diagonal, because a combined distance is an estimate.
    k, j, i = np.nonzero(np.abs(far) < np.linalg.norm(steps))
    offsets = (np.arange(splits) + 0.5) / splits - 0.5
    width = np.float32(min(steps) / splits)
    total = np.zeros(len(k), np.float32)
    for dz in offsets * steps[0]:
        for dy in offsets * steps[1]:
            for dx in offsets * steps[2]:
                near = solid.distance(x[i] + np.float32(dx), y[j] + np.float32(dy), z[k] + np.float32(dz))
                total += np.clip(0.5 - near / width, 0, 1).astype(np.float32)
    part[k, j, i] = total / splits**3
    filled[window] = part
    return filled


def _upright(plan: Any, z: Any, low: float, high: float) -> Any:
    """Distance to a prism along z from the distance to its outline."""
    ends = np.abs(z - (low + high) / 2) - (high - low) / 2
    outside = np.sqrt(np.maximum(plan, 0) ** 2 + np.maximum(ends, 0) ** 2)
    return outside + np.minimum(np.maximum(plan, ends), 0)


def _around(centre: Point, reach: Sequence[float]) -> tuple[Point, Point]:
    low = tuple(c - r for c, r in zip(centre, reach, strict=True))
    high = tuple(c + r for c, r in zip(centre, reach, strict=True))
    return low, high  # type: ignore[return-value]
