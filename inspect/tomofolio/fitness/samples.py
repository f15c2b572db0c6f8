"""Picking a few hundred small boxes out of a scan, always the same ones, and reading their values."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.volume import Volume

#: Label of box voxels that lie beyond the scan; `Region` uses the small numbers.
BEYOND = 255


@dataclass(frozen=True)
class Boxes:
    """Boxes of equal size around some voxels.

    Parameters
    ----------
    centres : shape (boxes, 3), index (slice, row, column) of the middle voxels.
    values : shape (boxes, k, j, i), float32. Beyond the scan the nearest value is repeated.
    labels : the same shape, uint8: `Region`, or ``BEYOND``.
    """

    centres: NDArray[np.int64]
    values: NDArray[np.float32]
    labels: NDArray[np.uint8]


def hashed_order(index: NDArray[np.int64]) -> NDArray[np.int64]:
    """An order of voxels that looks random, spreads evenly and is the same on every run.

    Parameters
    ----------
    index : shape (n, 3).

    Returns
    -------
    shape (n,), positions in ``index``. The mixing constants are those of splitmix64 (Steele, Lea and Flood 2014).
    """
    mixed = np.zeros(len(index), dtype=np.uint64)
    with np.errstate(over="ignore"):
        for axis in range(3):
            mixed += index[:, axis].astype(np.uint64) + np.uint64(0x9E3779B97F4A7C15)
            mixed = (mixed ^ (mixed >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
            mixed = (mixed ^ (mixed >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
            mixed ^= mixed >> np.uint64(31)
    return np.argsort(mixed, kind="stable")


def read_boxes(
    volume: Volume, regions: NDArray[np.uint8], centres: NDArray[np.int64], before: Sequence[int], after: Sequence[int]
) -> Boxes:
    """Read the boxes that reach from ``before`` voxels before to ``after`` voxels after each centre."""
    size = tuple(b + a + 1 for b, a in zip(before, after, strict=True))
    values = np.empty((len(centres), *size), dtype=np.float32)
    labels = np.empty((len(centres), *size), dtype=np.uint8)
    slope, intercept = volume.slope.astype(np.float32), volume.intercept.astype(np.float32)
    for n, centre in enumerate(centres):
        wanted = [np.arange(c - b, c + a + 1) for c, b, a in zip(centre, before, after, strict=True)]
        there = [np.clip(w, 0, length - 1) for w, length in zip(wanted, volume.shape, strict=True)]
        if all(w[0] == t[0] and w[-1] == t[-1] for w, t in zip(wanted, there, strict=True)):
            inside = tuple(slice(w[0], w[-1] + 1) for w in wanted)
            values[n], labels[n] = volume.stored[inside], regions[inside]
        else:
            at = np.ix_(*there)
            values[n], labels[n] = volume.stored[at], regions[at]
            for axis, (w, t) in enumerate(zip(wanted, there, strict=True)):
                np.moveaxis(labels[n], axis, 0)[w != t] = BEYOND
        k = there[0]
        values[n] *= slope[k, None, None]
        values[n] += intercept[k, None, None]
    return Boxes(centres, values, labels)


def flagged_first(flags: NDArray[np.bool_], most: int) -> NDArray[np.int64]:
    """Indices of the set flags, row by row, evenly thinned to ``most``; rows with fewer are filled with unset ones.

    Returns
    -------
    shape (rows, n), n = ``most`` or the largest number of set flags where that is smaller.
    """
    order = np.argsort(~flags, axis=1, kind="stable")
    counts = flags.sum(axis=1)
    n = int(min(most, max(1, counts.max(initial=1))))
    thinned = (np.arange(n)[None, :] * np.maximum(counts, n)[:, None]) // n
    return np.take_along_axis(order, thinned, axis=1)
