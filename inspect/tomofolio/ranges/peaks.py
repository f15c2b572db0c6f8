"""Which values are materials: peaks in the histogram of uniform places.

A mixed voxel lies on a surface, so its neighbours differ; a voxel inside a material has neighbours that are alike.
Means over seven voxels taken at uniform places alone therefore show pure peaks where the histogram of all voxels
shows a plateau, and with less noise. How uniform "uniform" is depends on the noise, which differs from material to
material: all levels are looked at, the strictest first.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter1d

from tomofolio.ranges.histogram import Census

Array = NDArray[np.float64]

#: A peak stands out when the valleys at both sides fall to this share of its height.
VALLEY = 0.5
#: ... and when it holds at least so many uniform places, ...
FEWEST_PLACES = 60
#: ... and at least this share of the places that the level holds.
SMALLEST_SHARE = 1e-5
#: Between two materials a peak also needs this share of the weaker one's places.
BETWEEN_SHARE = 1e-4
#: Between two materials, places count as uniform up to this share of the difference of the two: an edge as wide as
#: three voxels (σ) still differs by more across its middle.
BETWEEN_LIMIT = 0.15
#: The strictest level that is looked at holds this share of the places that are not perfectly even.
STRICTEST_SHARE = 0.02
#: A bump within so many spreads of another peak is its tail, ...
TAIL = 5.0
#: ... unless it holds this share of the other's places.
TAIL_SHARE = 0.05
#: A spike within so many spreads of a peak with so many times its places is the peak's tail, cut off.
CUT_REACH = 4.0
CUT_PLACES = 3.0
#: Peaks are comparable where the rarer has this share of the other's places.
COMPARABLE = 0.1
#: Standard deviation of the part of a normal density above half its height, in its own standard deviation.
SPREAD_ABOVE_HALF = 0.6187
#: The kernel that smooths a level, as a share of the difference that the level allows.
SMOOTHING = 0.25


@dataclass(frozen=True)
class Peak:
    """A material seen at uniform places.

    ``low`` and ``high`` are where the peak falls to `VALLEY` of its height, ``places`` the uniform places it holds at
    the level ``limit`` where it was first seen, ``share`` the share of all voxels that are seen to be pure at the
    level ``share_limit``, ``reach`` the spread at the laxest level that still shows the peak apart from others.
    """

    value: float
    spread: float
    places: float
    low: float
    high: float
    limit: float
    share: float = 0.0
    share_limit: float = 0.0
    reach: float = 0.0


def find_peaks(census: Census) -> list[Peak]:
    """All peaks, in ascending order; at least one where there is any data."""
    found: list[Peak] = []
    held = census.uniform.sum(axis=1)
    start = held[0] + STRICTEST_SHARE * (held[-1] - held[0])
    levels = [_peaks_of(census, n) if not n or held[n] >= start else [] for n in range(len(held))]
    for peak in (p for level in levels for p in sorted(level, key=lambda p: -p.places)):
        others = [p for p in found if not _is_cut_tail(p, peak, census.axis.width)]
        if _is_new(peak, others):
            found = sorted([*others, peak], key=lambda p: p.value)
    return [_completed(p, found, levels, census) for p in found] or [_whole(census)]


def _is_cut_tail(spike: Peak, peak: Peak, width: float) -> bool:
    """Whether a spike is the tail of a peak, cut off where the stored values end, and not a material of its own."""
    beside = abs(spike.value - peak.value) <= CUT_REACH * peak.spread + width
    return spike.spread < width <= peak.spread and beside and peak.places > CUT_PLACES * spike.places


def _is_new(peak: Peak, found: list[Peak]) -> bool:
    """Whether a peak is none of those found so far, and can be believed beside them."""
    for other in found:
        distance = abs(peak.value - other.value)
        if distance <= peak.limit or peak.low <= other.value <= peak.high or other.low <= peak.value <= other.high:
            return False
        if distance < TAIL * other.spread and peak.places < TAIL_SHARE * other.places:
            return False
    below = [p for p in found if p.value < peak.value]
    above = [p for p in found if p.value > peak.value]
    if not below or not above:
        return True
    if peak.limit > BETWEEN_LIMIT * (above[0].value - below[-1].value):
        return False
    return peak.places >= BETWEEN_SHARE * min(below[-1].places, above[0].places)


def _completed(peak: Peak, found: list[Peak], levels: list[list[Peak]], census: Census) -> Peak:
    """The peak with its share (of voxels that are uniform for its distance to its neighbours) and its reach."""
    others = [p.value for p in found if p is not peak]
    near = min((abs(value - peak.value) for value in others), default=np.inf)
    limit = max(peak.limit, BETWEEN_LIMIT * near)
    reach = peak.spread
    for p in (p for level in levels for p in level):
        if p.low <= peak.value <= p.high and not any(p.low <= value <= p.high for value in others):
            reach = max(reach, p.spread)
    share = places_near(peak, census, limit) / max(1, census.looked_at)
    return replace(peak, share=share, share_limit=limit, reach=reach)


def places_near(peak: Peak, census: Census, limit: float) -> float:
    """How many places that are uniform within ``limit`` have the value of a peak."""
    level = max(0, int(np.searchsorted(census.limits, limit * (1 + 1e-9), side="right")) - 1)
    reach = max(2 * peak.spread, census.axis.width)
    return float(census.uniform[level][np.abs(census.axis.centres - peak.value) <= reach].sum())


def emptiest_between(a: Peak, b: Peak, census: Census) -> float:
    """How far the curve of uniform places falls between two peaks, as a share of the lower one's height.

    Between two materials it falls to next to nothing, as far as their noise lets it; a material whose value changes
    slowly from one end of the scan to the other has uniform places at all values between. 0 where that cannot be seen,
    since the one is too rare beside the other's tail or the noise too large.
    """
    limit = max(a.limit, b.limit)
    places = [places_near(p, census, limit) for p in (a, b)]
    if limit > BETWEEN_LIMIT * abs(b.value - a.value) or min(places) < COMPARABLE * max(places):
        return 0.0
    level = int(np.argmax(census.limits >= limit))
    smooth = _smoothed(census, level)
    centres = census.axis.centres
    heights = [smooth[(centres >= p.low) & (centres <= p.high)].max(initial=0.0) for p in (a, b)]
    middle = smooth[(centres > a.high) & (centres < b.low)]
    return float(middle.min() / max(min(heights), 1e-300)) if middle.size else 1.0


def _smoothed(census: Census, level: int) -> Array:
    kernel = max(1.0, SMOOTHING * float(census.limits[level]) / census.axis.width)
    return gaussian_filter1d(census.uniform[level].astype(np.float64), kernel, mode="constant", truncate=4)


def _peaks_of(census: Census, level: int) -> list[Peak]:
    """Peaks of one level that stand out of their valleys and hold enough places."""
    axis, limit = census.axis, float(census.limits[level])
    counts = census.uniform[level].astype(np.float64)
    if counts.sum() < FEWEST_PLACES:
        return []
    smooth = _smoothed(census, level)
    fewest = max(FEWEST_PLACES, SMALLEST_SHARE * counts.sum())
    peaks = []
    for top, first, last in prominent(smooth, VALLEY):
        places = counts[first : last + 1].sum()
        if places < fewest:
            continue
        half = smooth >= VALLEY * smooth[top]
        start = top - int(np.argmin(half[top::-1])) if not half[: top + 1].all() else -1
        stop = top + int(np.argmin(half[top:])) if not half[top:].all() else len(half)
        near = slice(start + 1, stop)
        centres, weight = axis.centres[near], counts[near]
        value = float(np.average(centres, weights=weight))
        spread = float(np.sqrt(np.average((centres - value) ** 2, weights=weight))) / SPREAD_ABOVE_HALF
        peaks.append(Peak(value, spread, float(places), float(centres[0]), float(centres[-1]), limit))
    return peaks


def prominent(curve: Array, valley: float) -> list[tuple[int, int, int]]:
    """Tops that stand out of a curve: (top, first, last) with the valleys beside it.

    A top stands out when the curve falls to ``valley`` × its height at both sides before it rises above it; beyond
    the ends the curve is 0. Walking from the left with one hand on the last high and the last low (hysteresis)
    finds all of them in one pass.
    """
    tops: list[tuple[int, int, int]] = []
    top, bottom = 0, 0
    rising = True
    for b in range(len(curve)):
        if rising:
            if curve[b] > curve[top]:
                top = b
            elif curve[b] < valley * curve[top]:
                tops.append((top, bottom, b))
                rising, bottom = False, b
        elif curve[b] <= curve[bottom]:
            bottom = b
            first, start, _ = tops[-1]
            tops[-1] = (first, start, b)
        elif curve[b] * valley > curve[bottom]:
            rising, top = True, b
    if rising and len(curve) and curve[top] > 0:
        tops.append((top, bottom, len(curve) - 1))
    return tops


def _whole(census: Census) -> Peak:
    """One peak of everything, for scans without enough uniform places."""
    centres, counts = census.axis.centres, census.counts.astype(np.float64)
    if counts.sum() <= 0:
        middle = float(centres[len(centres) // 2])
        return Peak(middle, 0.0, 0.0, middle, middle, 0.0)
    value = float(np.average(centres, weights=counts))
    spread = float(np.sqrt(np.average((centres - value) ** 2, weights=counts)))
    return Peak(value, spread, float(counts.sum()), float(centres[0]), float(centres[-1]), 0.0, reach=spread)
