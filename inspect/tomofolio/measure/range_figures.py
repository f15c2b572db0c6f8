"""What every value range amounts to: volume, share, mean, spread and connected regions.

The scan is read once, in slabs of slices. Each slab is sorted into classes; the connected regions of a class are found
within the slab on runs and stitched to those of the slab before, so that no more than one slab of classes and runs is
held however noisy the scan is.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from tomofolio.body.result import Body
from tomofolio.body.runs import Runs, find_runs
from tomofolio.measure.result import Interval, RangeFigures
from tomofolio.ranges.result import Ranges, ValueRange
from tomofolio.volume import Volume

Array = NDArray[Any]
Floats = NDArray[np.float64]

#: Slices in a slab.
DEPTH = 16
#: Class of voxels that are no data or left out. Classes are numbered from 0 and stay below 32 (see `find_runs`).
NONE = 31


def range_figures(volume: Volume, ranges: Ranges, body: Body) -> tuple[RangeFigures, ...]:
    """Figures of every range over all voxels that are data and not left out.

    The 95 % interval of a volume is what it would be with the boundaries at the ends of their own intervals; the two
    boundaries of a range are taken as independent, each side of the interval by itself. It is None where a boundary
    has no interval and where the range has no boundary.

    Returns
    -------
    one entry per range, in their order. ``mean`` and ``sd`` are None for an empty range.
    """
    edges = _all_edges(ranges)
    class_of_bin = np.searchsorted(ranges.boundaries, edges, side="right")
    class_of_bin = np.concatenate(([0], class_of_bin)).astype(np.uint8)
    voxel_mm3 = volume.grid.voxel_volumes_mm3
    shape = (volume.shape[0], len(edges) + 1)
    counts, sums, squares = np.zeros(shape, np.int64), np.zeros(shape), np.zeros(shape)
    reference = _references(ranges, class_of_bin)
    regions = [Stitched() for _ in ranges.items]
    for slab in volume.slabs(DEPTH):
        classes = np.empty((slab.stop - slab.start, *volume.shape[1:]), np.uint8)
        _sort_into_classes(
            volume.stored[slab],
            volume.slope[slab],
            volume.intercept[slab],
            body.regions[slab],
            edges,
            class_of_bin,
            reference,
            classes,
            counts[slab],
            sums[slab],
            squares[slab],
        )
        for n, region in enumerate(regions):
            region.add(classes, n, voxel_mm3[slab])
    mm3 = voxel_mm3 @ counts
    counted = counts.sum(axis=0)
    moments = sums.sum(axis=0), squares.sum(axis=0)
    total = float(mm3.sum())
    figures = []
    for n, item in enumerate(ranges.items):
        own = class_of_bin == n
        region = regions[n]
        region.finish()
        mean, sd = _mean_and_sd(counted[own], moments[0][own], moments[1][own], float(reference[own][0]))
        figures.append(
            RangeFigures(
                id=item.id,
                volume_mm3=float(mm3[own].sum()),
                volume_mm3_95=_interval(item, edges, mm3, own),
                share=float(mm3[own].sum()) / total if total > 0 else 0.0,
                mean=mean,
                sd=sd,
                regions=region.count,
                largest_region_mm3=region.largest_mm3,
            )
        )
    return tuple(figures)


def _all_edges(ranges: Ranges) -> Floats:
    """Boundaries and the ends of their intervals, ascending: what lies between two of them is a bin."""
    edges = list(ranges.boundaries)
    for item in ranges.items[1:]:
        edges += list(item.lower_95 or ())
    return np.unique(np.array(edges, dtype=np.float64))


def _references(ranges: Ranges, class_of_bin: Array) -> Floats:
    """Values near the middle of each bin's class: sums of squares of differences from them keep their digits."""
    return np.array([ranges.items[n].peak for n in class_of_bin], dtype=np.float64)


def _mean_and_sd(counts: Array, sums: Floats, squares: Floats, reference: float) -> tuple[float | None, float | None]:
    count = int(counts.sum())
    if count == 0:
        return None, None
    shift = float(sums.sum()) / count
    return reference + shift, float(np.sqrt(max(float(squares.sum()) / count - shift**2, 0.0)))


def _interval(item: ValueRange, edges: Floats, mm3: Floats, own: NDArray[np.bool_]) -> Interval | None:
    """Volume with each boundary at the ends of its interval."""
    if item.lower is None and item.upper is None:
        return None
    below = np.concatenate(([0.0], np.cumsum(mm3)))  # below[n] = volume of the values under edges[n − 1]

    def under(value: float | None, otherwise: float) -> float:
        return otherwise if value is None else float(below[np.searchsorted(edges, value) + 1])

    volume, total = float(mm3[own].sum()), float(below[-1])
    lost, gained = 0.0, 0.0
    low, high = under(item.lower, 0.0), under(item.upper, total)
    if item.lower is not None:
        if item.lower_95 is None:
            return None
        lost += max(under(max(item.lower_95), total) - low, 0.0) ** 2
        gained += max(low - under(min(item.lower_95), 0.0), 0.0) ** 2
    if item.upper is not None:
        if item.upper_95 is None:
            return None
        lost += max(high - under(min(item.upper_95), 0.0), 0.0) ** 2
        gained += max(under(max(item.upper_95), total) - high, 0.0) ** 2
    return max(volume - float(np.sqrt(lost)), 0.0), min(volume + float(np.sqrt(gained)), total)


class Stitched:
    """Count and largest volume of the 6-connected regions of one class, slab by slab.

    Only regions that reach the last slice seen are kept open; all others are finished and but counted.
    """

    def __init__(self) -> None:
        self.count = 0
        self.largest_mm3 = 0.0
        self._open_mm3: Floats = np.zeros(0)
        self._last: NDArray[np.int32] | None = None

    def add(self, classes: NDArray[np.uint8], code: int, voxel_mm3: Floats) -> None:
        """Go on with the next slices: ``classes`` (slices, rows, columns), ``voxel_mm3`` (slices,)."""
        runs = find_runs(classes, [code])
        slices, rows, _ = runs.shape
        weight = np.repeat(np.repeat(voxel_mm3, rows), np.diff(runs.first))
        new_mm3 = np.bincount(runs.label, weight * runs.length, minlength=runs.count)
        before = len(self._open_mm3)
        # Regions of the slab before and of this one are the same where they meet.
        node = np.arange(before + runs.count)
        if before and runs.count and self._last is not None:
            first = _labels_of_slice(runs, 0)
            meet = (self._last >= 0) & (first >= 0)
            ends = self._last[meet], first[meet] + before
            links = coo_array((np.ones(len(ends[0]), np.int8), ends), shape=(len(node), len(node)))
            node = connected_components(links.tocsr(), directed=False)[1]
        number = int(node.max()) + 1 if len(node) else 0
        mm3: Floats = np.bincount(node, np.concatenate((self._open_mm3, new_mm3)), minlength=number).astype(np.float64)
        last = _labels_of_slice(runs, slices - 1)
        alive, numbered = np.unique(node[before + last[last >= 0]], return_inverse=True)
        ended = np.ones(number, bool)
        ended[alive] = False
        self._finish(mm3[ended])
        self._open_mm3 = mm3[alive]
        last[last >= 0] = numbered
        self._last = last

    def finish(self) -> None:
        """There are no more slices: what is open ends here."""
        self._finish(self._open_mm3)
        self._open_mm3, self._last = np.zeros(0), None

    def _finish(self, mm3: Floats) -> None:
        self.count += len(mm3)
        self.largest_mm3 = max(self.largest_mm3, float(mm3.max(initial=0.0)))


def _labels_of_slice(runs: Runs, k: int) -> NDArray[np.int32]:
    """Shape (rows, columns): component of every voxel of a slice, −1 where there is none."""
    _, rows, columns = runs.shape
    first = runs.first[k * rows : (k + 1) * rows + 1]
    which = slice(first[0], first[-1])
    row = np.repeat(np.arange(rows), np.diff(first))
    # +1 where a run starts and −1 where it stops, of label + 1: the running sum is the label within the run.
    steps = np.zeros((rows, columns + 1), np.int32)
    value = runs.label[which] + 1
    steps[row, runs.start[which]] += value
    np.subtract.at(steps, (row, runs.stop[which]), value)
    return np.cumsum(steps[:, :-1], axis=1, dtype=np.int32) - 1


@njit(cache=True, parallel=True)
def _sort_into_classes(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    edges: Array,
    class_of_bin: Array,
    reference: Array,
    classes: Array,
    counts: Array,
    sums: Array,
    squares: Array,
) -> None:
    """Class of every voxel; per slice and bin the number of voxels and the sums of (value − reference) and its square.

    Every slice is summed by itself, row by row: the sums do not depend on the number of threads.
    """
    slices, rows, columns = stored.shape
    for k in prange(slices):
        count = np.zeros(len(edges) + 1, np.int64)
        total = np.zeros(len(edges) + 1)
        square = np.zeros(len(edges) + 1)
        a, b = slope[k], intercept[k]
        for j in range(rows):
            for i in range(columns):
                value = a * stored[k, j, i] + b
                if regions[k, j, i] >= 3 or value != value:
                    classes[k, j, i] = NONE
                    continue
                n = 0
                for edge in edges:
                    n += value >= edge
                difference = value - reference[n]
                classes[k, j, i] = class_of_bin[n]
                count[n] += 1
                total[n] += difference
                square[n] += difference * difference
        counts[k] = count
        sums[k] = total
        squares[k] = square
