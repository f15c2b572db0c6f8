"""What each value range amounts to: volume, share, mean, regions."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.body.runs import Runs, find_runs
from tomofolio.measure.result import Interval, RangeFigures
from tomofolio.ranges.result import Ranges, ValueRange
from tomofolio.volume import Volume

Array = NDArray[Any]


@dataclass(frozen=True)
class _Sums:
    """Per slice and range: voxels, sum and sum of squares of (value − peak), shape (slices, ranges)."""

    voxels: NDArray[np.int64]
    first: NDArray[np.float64]
    second: NDArray[np.float64]


def range_figures(volume: Volume, ranges: Ranges, body: Body) -> tuple[RangeFigures, ...]:
    """Figures of all ranges over the voxels that are data and not left out, with the true volume of every voxel.

    The 95 % interval of a volume goes from what lies between the boundaries when both are moved inwards to the ends
    of their own 95 % intervals, to what lies between them when both are moved outwards.
    """
    classes = np.empty(volume.shape, np.uint8)
    boundaries = ranges.boundaries.astype(np.float64)
    peaks = np.array([item.peak for item in ranges.items])
    sums = _Sums(*(np.zeros((volume.shape[0], len(ranges.items)), kind) for kind in (np.int64, float, float)))
    voxels = (volume.stored, volume.slope, volume.intercept, body.regions)
    _classify(*voxels, boundaries, peaks, classes, sums.voxels, sums.first, sums.second)
    tight, wide = (_moved(volume, ranges, body, outwards) for outwards in (False, True))
    per_voxel = volume.grid.voxel_volumes_mm3
    mm3 = per_voxel @ sums.voxels
    total = float(mm3.sum())
    figures = []
    for n, item in enumerate(ranges.items):
        count = int(sums.voxels[:, n].sum())
        mean = sums.first[:, n].sum() / count if count else 0.0
        variance = sums.second[:, n].sum() / count - mean**2 if count else 0.0
        regions, largest = _regions(find_runs(classes, [n]), per_voxel)
        figures.append(
            RangeFigures(
                id=item.id,
                volume_mm3=float(mm3[n]),
                volume_mm3_95=_interval(item, float(mm3[n]), float(tight[n]), float(wide[n])),
                share=float(mm3[n]) / total if total else 0.0,
                mean=float(item.peak + mean) if count else None,
                sd=float(np.sqrt(max(variance, 0.0))) if count else None,
                regions=regions,
                largest_region_mm3=largest,
            )
        )
    return tuple(figures)


def _interval(item: ValueRange, mm3: float, tight: float, wide: float) -> Interval | None:
    if item.lower_95 is None and item.upper_95 is None:
        return None
    return min(tight, mm3), max(wide, mm3)


def _moved(volume: Volume, ranges: Ranges, body: Body, outwards: bool) -> NDArray[np.float64]:
    """Shape (ranges,): volumes in mm³ with every boundary moved to the end of its interval, away or inwards."""
    ends = np.empty((len(ranges.items), 2))
    for n, item in enumerate(ranges.items):
        low = item.lower_95 or ((item.lower,) * 2 if item.lower is not None else (-np.inf,) * 2)
        high = item.upper_95 or ((item.upper,) * 2 if item.upper is not None else (np.inf,) * 2)
        ends[n] = (low[0], high[1]) if outwards else (low[1], high[0])
    counts = np.zeros((volume.shape[0], len(ranges.items)), np.int64)
    _count_between(volume.stored, volume.slope, volume.intercept, body.regions, ends, counts)
    return volume.grid.voxel_volumes_mm3 @ counts


def _regions(runs: Runs, per_voxel: NDArray[np.float64]) -> tuple[int, float]:
    """Number of 6-connected regions and the volume of the largest in mm³."""
    if not runs.count:
        return 0, 0.0
    weight = runs.length * per_voxel[runs.row // runs.shape[1]]
    return runs.count, float(np.bincount(runs.label, weight, minlength=runs.count).max())


@njit(cache=True, parallel=True)
def _classify(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    boundaries: Array,
    peaks: Array,
    classes: Array,
    voxels: Array,
    first: Array,
    second: Array,
) -> None:
    """Range of every voxel into ``classes`` (255: no data or left out) and the sums of its slice."""
    for k in prange(stored.shape[0]):
        for j in range(stored.shape[1]):
            for i in range(stored.shape[2]):
                if regions[k, j, i] >= 3:
                    classes[k, j, i] = 255
                    continue
                value = slope[k] * stored[k, j, i] + intercept[k]
                n = 0
                while n < boundaries.shape[0] and value >= boundaries[n]:
                    n += 1
                classes[k, j, i] = n
                # The distance from the peak keeps the sum of squares exact where values are large.
                off = value - peaks[n]
                voxels[k, n] += 1
                first[k, n] += off
                second[k, n] += off * off


@njit(cache=True, parallel=True)
def _count_between(stored: Array, slope: Array, intercept: Array, regions: Array, ends: Array, counts: Array) -> None:
    for k in prange(stored.shape[0]):
        for j in range(stored.shape[1]):
            for i in range(stored.shape[2]):
                if regions[k, j, i] >= 3:
                    continue
                value = slope[k] * stored[k, j, i] + intercept[k]
                for n in range(ends.shape[0]):
                    if ends[n, 0] <= value < ends[n, 1]:
                        counts[k, n] += 1
