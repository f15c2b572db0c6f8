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
#: At most so many peaks are kept, those with the most places.
MOST_PEAKS = 10
#: A spike so many spreads (from, to) beside a peak with so many times its places is the peak's tail, cut off.
CUT_AWAY, CUT_REACH = 0.7, 4.0
CUT_PLACES = 3.0
#: What is farther above the uppermost peak than so many spreads, and than this part of the contrast to the lowest peak,
#: is a material of its own ...
TAIL_SPREADS, TAIL_CONTRAST = 10.0, 0.25
#: ... from this share of the object on, or of the scan where only one peak is found, ...
TAIL_LEAST, TAIL_LEAST_ALONE = 5e-4, 5e-3
#: ... unless this part of it lies as far below the lowest peak.
MIRRORED = 0.25
#: The shape of a peak is read where the kernel is narrower than this part of its spread, and from so many places.
SHARP_KERNEL = 0.5
FEWEST_FOR_SHAPE = 1000
#: So many uniform places count as one independent value.
DEPENDENT = 8.0
#: A level is not too lax for a peak while it allows at most so many of the peak's spreads: more is needless, for
#: noise makes neighbours differ by less.
LAXEST = 8.0
#: Values pile up at an end of the scan when the last bin holds so many times the mean of so many bins beside it.
PILE_HEIGHT, PILE_BINS = 5.0, 8
#: ... and this share of the peak's outer half.
PILE_SHARE = 0.05
#: Where values end in a peak, strict levels see the end alone; laxer ones are needed for it.
CUT_LIMIT = 1.0
#: Peaks are comparable where the rarer has this share of the other's places.
COMPARABLE = 0.1
#: Width at half height of a normal density, in standard deviations.
WIDTH_AT_HALF = 2.3548
#: From this share of a smoothed peak's width on the kernel hides the peak's own, which is taken from the counts.
WIDE_KERNEL = 0.7
#: The kernel that smooths a level, as a share of the difference that the level allows.
SMOOTHING = 0.25


@dataclass(frozen=True)
class Peak:
    """A material seen at uniform places.

    ``low`` and ``high`` are where the peak falls to `VALLEY` of its height, ``places`` the uniform places it holds,
    ``limit`` the level where it was first seen, ``share`` the share of all voxels that are seen to be pure at the
    level ``share_limit``, ``cut`` whether the stored values end in the peak, ``shape`` its standard deviation / the
    one that its width at half height gives: 1 for a normal density, less for a flat top, ``used_limit`` the level that
    ``value`` and ``spread`` are from. ``tail`` is not 0 for what shows no peak: see `_tail`.
    """

    value: float
    spread: float
    places: float
    low: float
    high: float
    limit: float
    share: float = 0.0
    share_limit: float = 0.0
    cut: bool = False
    shape: float = 1.0
    used_limit: float = 0.0
    tail: float = 0.0

    @property
    def value_error(self) -> float:
        """Standard error of ``value``; neighbouring places share voxels, so few of them are independent."""
        return self.spread * float(np.sqrt(DEPENDENT / max(self.places, DEPENDENT)))


def find_peaks(census: Census) -> list[Peak]:
    """All peaks, in ascending order; at least one where there is any data."""
    found: list[Peak] = []
    held = census.uniform.sum(axis=1)
    start = held[0] + STRICTEST_SHARE * (held[-1] - held[0])
    levels = [_peaks_of(census, n) if not n or held[n] >= start else [] for n in range(len(held))]
    for peak in (p for level in levels for p in sorted(level, key=lambda p: -p.places)):
        others = [p for p in found if not _is_cut_tail(p, peak, found, census)]
        if _is_new(peak, others):
            peak = replace(peak, cut=len(others) < len(found))
            found = sorted([*others, peak], key=lambda p: p.value)
    found = _marked_where_cut(found, census)
    found = sorted(sorted(found, key=lambda p: -p.places)[:MOST_PEAKS], key=lambda p: p.value)
    found = [_completed(p, found, levels, census) for p in found]
    return found + _tail(found, census) if found else [_whole(census)]


def _is_cut_tail(spike: Peak, peak: Peak, found: list[Peak], census: Census) -> bool:
    """Whether a spike is the tail of a peak, cut off where the stored values end, and not a material of its own."""
    near = min((abs(p.value - peak.value) for p in found if p is not spike), default=np.inf)
    if not spike.spread < census.axis.width <= peak.spread or peak.limit > BETWEEN_LIMIT * near:
        return False
    away = CUT_AWAY * peak.spread <= abs(spike.value - peak.value) <= CUT_REACH * peak.spread
    return away and peak.places > CUT_PLACES * places_near(spike, census, peak.limit)


def _marked_where_cut(found: list[Peak], census: Census) -> list[Peak]:
    """The lowest and the highest peak marked as cut where the values pile up at that end of the scan."""
    used = np.flatnonzero(census.counts)
    marked = list(found)
    for n, step in ((0, 1), (-1, -1)):
        if not found or len(used) <= PILE_BINS or found[n].spread < census.axis.width:
            continue
        end = int(used[n])
        beside = census.counts[end + step : end + step * (PILE_BINS + 1) : step]
        outer = (census.axis.centres - found[n].value) * step < 0
        pile = census.counts[end] > PILE_SHARE * census.counts[outer].sum()
        if beside.min() > 0 and pile and census.counts[end] > PILE_HEIGHT * beside.mean():
            marked[n] = replace(marked[n], cut=True)
    return marked


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


def _tail(found: list[Peak], census: Census) -> list[Peak]:
    """A peak for what is far brighter than the uppermost one, and so cannot be mixed of those found.

    Grains and walls too thin to have a uniform place, or bone without one. Its value is what only one voxel in twenty
    of it exceeds: in small things hardly a voxel is pure. ``tail`` is the share of the object that lies there, 0 where
    the object shows nothing else. As many voxels as far below the lowest peak make it noise.
    """
    lowest, top = found[0], found[-1]
    away = max(TAIL_SPREADS * top.spread, TAIL_CONTRAST * (top.value - lowest.value))
    centres, counts = census.axis.centres, census.counts
    beyond = np.where(centres > top.value + away, counts, 0)
    mirrored = counts[centres < lowest.value - away].sum()
    only = len(found) == 1
    rest = counts.sum() if only else counts[centres > (lowest.value + found[1].value) / 2].sum()
    fewest = max(FEWEST_PLACES, (TAIL_LEAST_ALONE if only else TAIL_LEAST) * rest)
    if top.spread < census.axis.width or beyond.sum() < fewest or mirrored > MIRRORED * beyond.sum():
        return []
    value = float(np.interp(0.95, np.cumsum(beyond) / beyond.sum(), centres))
    spread = (value - top.value - away) / 10
    share = 0.0 if only else float(beyond.sum() / rest)
    return [Peak(value, spread, float(beyond.sum()), value - spread, value + spread, away, tail=share)]


def _completed(peak: Peak, found: list[Peak], levels: list[list[Peak]], census: Census) -> Peak:
    """The peak as the laxest level shows it that is still strict for its distance to its neighbours.

    More places give a surer value than those of the level where the peak was first seen.
    """
    others = [p.value for p in found if p is not peak]
    near = min((abs(value - peak.value) for value in others), default=np.inf)
    limit = max(peak.limit, (CUT_LIMIT if peak.cut else BETWEEN_LIMIT) * near)
    best = sharp = peak
    for p in (p for level in levels for p in level):
        alone = p.low <= peak.value <= p.high and not any(p.low <= value <= p.high for value in others)
        if alone and peak.limit < p.limit <= limit and (peak.cut or p.limit <= LAXEST * best.spread):
            best = replace(p, cut=peak.cut)
        if alone and p.limit <= limit and SMOOTHING * p.limit <= SHARP_KERNEL * p.spread:
            sharp = p
    share = places_near(best, census, limit) / max(1, census.looked_at)
    shape = _shape(sharp, census)
    return replace(best, limit=peak.limit, share=share, share_limit=limit, shape=shape, used_limit=best.limit)


def _shape(peak: Peak, census: Census) -> float:
    """Standard deviation of the places around a peak / the one that its width gives: 1 if normal, 0.7 if flat."""
    centres = census.axis.centres
    near = np.abs(centres - peak.value) <= 3 * peak.spread
    counts = census.uniform[np.searchsorted(census.limits, peak.limit * (1 + 1e-9), side="right") - 1][near]
    sharp = max(2 * census.axis.width, SMOOTHING * peak.limit / SHARP_KERNEL) <= peak.spread
    if not sharp or counts.sum() < FEWEST_FOR_SHAPE:
        return 1.0
    mean = np.average(centres[near], weights=counts)
    return float(np.sqrt(np.average((centres[near] - mean) ** 2, weights=counts)) / peak.spread)


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
    limit = BETWEEN_LIMIT * abs(b.value - a.value)
    places = [places_near(p, census, limit) for p in (a, b)]
    if limit < max(a.limit, b.limit) or min(places) < COMPARABLE * max(places):
        return 0.0
    level = int(np.searchsorted(census.limits, limit, side="right")) - 1
    smooth = _smoothed(census, level)
    centres = census.axis.centres
    heights = [smooth[(centres >= p.low) & (centres <= p.high)].max(initial=0.0) for p in (a, b)]
    middle = smooth[(centres > a.high) & (centres < b.low)]
    return float(middle.min() / max(min(heights), 1e-300)) if middle.size else 1.0


def _kernel(census: Census, level: int) -> float:
    """Standard deviation of the kernel that smooths a level, in the unit of the values."""
    return max(census.axis.width, SMOOTHING * float(census.limits[level]))


def _smoothed(census: Census, level: int) -> Array:
    sigma = _kernel(census, level) / census.axis.width
    return gaussian_filter1d(census.uniform[level].astype(np.float64), sigma, mode="constant", truncate=4)


def _half_height(curve: Array, top: int) -> tuple[float, float]:
    """Where a curve falls to half of its height at ``top``, left and right of it, between bins."""
    half = curve[top] / 2
    left, right = top, top
    while left > 0 and curve[left - 1] >= half:
        left -= 1
    while right < len(curve) - 1 and curve[right + 1] >= half:
        right += 1
    start, stop = float(left), float(right)
    if left > 0:
        start -= (curve[left] - half) / (curve[left] - curve[left - 1])
    if right < len(curve) - 1:
        stop += (curve[right] - half) / (curve[right] - curve[right + 1])
    return start, stop


def _peaks_of(census: Census, level: int) -> list[Peak]:
    """Peaks of one level that stand out of their valleys and hold enough places."""
    axis, limit = census.axis, float(census.limits[level])
    counts = census.uniform[level].astype(np.float64)
    if counts.sum() < FEWEST_PLACES:
        return []
    smooth, kernel = _smoothed(census, level), _kernel(census, level)
    fewest = max(FEWEST_PLACES, SMALLEST_SHARE * counts.sum())
    peaks = []
    for top, first, last in prominent(smooth, VALLEY):
        places = counts[first : last + 1].sum()
        if places < fewest:
            continue
        start, stop = _half_height(smooth, top)
        near = slice(int(np.ceil(start)), int(np.floor(stop)) + 1)
        centres = axis.centres[near]
        value = float(np.average(centres, weights=np.maximum(counts[near], 1e-9)))
        width = (stop - start) * axis.width / WIDTH_AT_HALF
        if kernel < WIDE_KERNEL * width:
            spread = float(np.sqrt(width**2 - kernel**2))
        else:
            spread = float(np.sqrt(np.average((centres - value) ** 2, weights=np.maximum(counts[near], 1e-9))))
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
    return Peak(value, spread, float(counts.sum()), float(centres[0]), float(centres[-1]), 0.0)
