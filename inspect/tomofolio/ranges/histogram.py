"""What one look at the scan gives: counts of all values, of uniform places, and of the border."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.ranges._kernels import count_uniform_places, count_values, no_mask
from tomofolio.volume import Volume

Array = NDArray[np.float64]
Counts = NDArray[np.int64]

#: A histogram has at most this many bins.
MOST_BINS = 4096
#: Where no more levels than this are used (a segmented scan), each is a material: bins are so many times finer, which
#: keeps them apart.
FEW_LEVELS, FEW_LEVELS_FINER = 4, 8
#: From so many voxels, evenly spread, limits and steps of the values are read.
SAMPLE_VOXELS = 1 << 21
#: Blocks of neighbouring slices (and rows) that are counted apart, for the bootstrap.
BLOCKS = 16
#: Uniform places are looked for at no more than about so many voxels.
LOOKED_AT_VOXELS = 1 << 24
#: Step between the levels of uniformity: two levels double the difference allowed.
LEVEL_STEP = 2.0**0.5
#: The border is read from at most so many slices.
BORDER_SLICES = 64


@dataclass(frozen=True)
class ValueAxis:
    """Bins of equal width: bin b holds first + b · width <= value < first + (b + 1) · width."""

    first: float
    width: float
    bins: int

    @property
    def centres(self) -> Array:
        return np.asarray(self.first + (np.arange(self.bins) + 0.5) * self.width, np.float64)

    def transform(self, volume: Volume) -> tuple[Array, Array]:
        """Per slice the (scale, offset) that take a stored number to a position on the axis, in bins."""
        return volume.slope / self.width, (volume.intercept - self.first) / self.width


@dataclass(frozen=True)
class Census:
    """All counts of a scan on one axis.

    Parameters
    ----------
    blocks : shape (blocks, bins), voxels that are data, block by block; the end bins hold what lies beyond too.
    uniform : shape (levels, bins), means over seven voxels where neighbours differ by at most ``limits[level]``
        (cumulative: every level holds those below).
    limits : shape (levels,), in the unit of the values.
    border : shape (bins,), voxels at the lateral border of the data.
    looked_at : how many voxels were looked at for ``uniform``.
    """

    axis: ValueAxis
    blocks: Counts
    uniform: Counts
    limits: Array
    border: Counts
    looked_at: int

    @property
    def counts(self) -> Counts:
        return self.blocks.sum(axis=0)


def take_census(volume: Volume) -> Census:
    """Count the scan once for all values and once for uniform places.

    Voxels of ``volume.no_data`` are left out, and so are uniform places that touch them.
    """
    axis = choose_axis(volume)
    scale, offset = axis.transform(volume)
    masked = volume.no_data is not None
    no_data = volume.no_data if volume.no_data is not None else no_mask()
    slices, rows, columns = volume.shape
    slabs = min(slices, BLOCKS)
    parts = min(rows, -(-BLOCKS // slabs))
    blocks = np.zeros((slabs * parts, axis.bins), np.int64)
    count_values(volume.stored, no_data, masked, scale, offset, parts, blocks)

    span = max(axis.bins / 2, 2.0)
    limits: Array = LEVEL_STEP ** np.arange(int(np.log(span) / np.log(LEVEL_STEP)) + 1, dtype=np.float64)
    step = np.ones(2, np.int64)
    while volume.stored.size / step.prod() > LOOKED_AT_VOXELS and step[1] < 4:
        step[np.argmin(step)] += 1
    uniform = np.zeros((min(slices, 8), len(limits), axis.bins), np.int64)
    if rows >= 3 and columns >= 3:
        count_uniform_places(volume.stored, no_data, masked, scale, offset, step, limits, uniform)
    levels = uniform.sum(axis=0).cumsum(axis=0)
    looked_at = int(blocks.sum() // step.prod())
    return Census(axis, blocks, levels, limits * axis.width, _count_border(volume, axis), looked_at)


def choose_axis(volume: Volume) -> ValueAxis:
    """Bins as wide as the scan's own steps, or a multiple of them.

    Integers that use every level keep one bin a level while `MOST_BINS` suffice. Where a rescaling has left gaps
    (8-bit data stored in 16 bits) a bin holds one used level on average, so that the histogram has no comb. A few
    voxels far out do not widen the bins: they are counted in the end bins.
    """
    slices = volume.shape[0]
    stride = max(1, int(np.ceil((volume.stored.size / SAMPLE_VOXELS) ** (1 / 3))))
    pick = (
        slice(None, None, stride if slices >= 8 * stride else 1),
        slice(None, None, stride),
        slice(None, None, stride),
    )
    sample = volume.stored[pick]
    kept = np.isfinite(sample)
    if volume.no_data is not None:
        kept &= ~volume.no_data[pick]
    slope, intercept = volume.slope[pick[0]], volume.intercept[pick[0]]
    values = (sample * slope[:, None, None] + intercept[:, None, None])[kept]
    if not values.size:
        return ValueAxis(-0.5, 1.0, 1)
    low, high = _limits(values)
    integer = np.issubdtype(volume.stored.dtype, np.integer)
    if high <= low:
        width = float(np.abs(slope[0])) if integer else max(abs(low), 1.0) * 1e-3
        return ValueAxis(low - 1.5 * width, width, 3)
    same = bool(np.ptp(volume.slope) == 0 and np.ptp(volume.intercept) == 0)
    if integer and same:
        width = _step(sample[kept], slope[0], intercept[0], low, high) * abs(float(slope[0]))
    else:
        width = float(np.median(np.abs(slope))) if integer else (high - low) / (MOST_BINS / 2)
    if integer and len(np.unique(values)) <= FEW_LEVELS:
        width /= FEW_LEVELS_FINER
    width *= max(1, int(np.ceil((high - low) / (width * (MOST_BINS - 8)))))
    margin = 2
    bins = int(np.floor((high - low) / width + 0.5)) + 1 + 2 * margin
    return ValueAxis(low - (margin + 0.5) * width, width, bins)


def _limits(values: Array) -> tuple[float, float]:
    """Ends of the values; a few voxels that lie many times the rest's span away are left out."""
    low, high = float(values.min()), float(values.max())
    few = min(max(3, values.size // 100_000), (values.size - 1) // 2)
    inner = np.partition(values, (few, values.size - 1 - few))
    inner_low, inner_high = float(inner[few]), float(inner[values.size - 1 - few])
    reach = inner_high - inner_low
    if reach > 0 and high - low > 3 * reach:
        low, high = max(low, inner_low - reach), min(high, inner_high + reach)
    return low, high


def _step(stored: NDArray, slope: float, intercept: float, low: float, high: float) -> int:
    """Typical distance between the levels that integers use, in levels, 1 where all are used.

    Gaps count as much as the rarer level beside them: where values are rare most levels are unused in any scan.
    """
    ends = sorted(((low - intercept) / slope, (high - intercept) / slope))
    inside = stored[(stored >= ends[0]) & (stored <= ends[1])]
    used, counts = np.unique(inside, return_counts=True)
    if len(used) < 8:
        return 1
    gaps = np.diff(used).astype(np.int64)
    common = int(np.gcd.reduce(gaps))
    if common > 1:
        return common
    order = np.argsort(gaps, kind="stable")
    passed = np.cumsum(np.minimum(counts[1:], counts[:-1])[order])
    return int(gaps[order][np.searchsorted(passed, 0.75 * passed[-1])])


def _count_border(volume: Volume, axis: ValueAxis) -> Counts:
    """Voxels at the lateral border of the slices, or beside no data, on the axis."""
    slices = volume.shape[0]
    counts = np.zeros(axis.bins, np.int64)
    for k in range(0, slices, max(1, slices // BORDER_SLICES)):
        edge = np.ones(volume.shape[1:], bool)
        edge[1:-1, 1:-1] = False
        if volume.no_data is not None:
            gone = volume.no_data[k]
            edge[:, 1:] |= gone[:, :-1]
            edge[:, :-1] |= gone[:, 1:]
            edge[1:] |= gone[:-1]
            edge[:-1] |= gone[1:]
            edge &= ~gone
        values = volume.stored[k][edge] * volume.slope[k] + volume.intercept[k]
        values = values[np.isfinite(values)]
        position = np.clip((values - axis.first) / axis.width, 0, axis.bins - 1).astype(np.int64)
        counts += np.bincount(position, minlength=axis.bins)
    return counts
