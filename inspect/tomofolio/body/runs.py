"""Connected components on runs: stretches of voxels along a row instead of single voxels.

A scan has few runs (some per row) where it has many voxels, so sizes, centroids and boxes of all components come
from short arrays. Runs of neighbouring rows (in the slice and in the next slice) that share a column are joined by
union-find: 6-connectivity. Method: Rosenfeld & Pfaltz, J. ACM 13(4) 1966, on runs instead of pixels; path halving
after Tarjan & van Leeuwen, J. ACM 31(2) 1984.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[Any]


@dataclass(frozen=True)
class Runs:
    """All runs of some codes in ``regions``, row by row, with the component each belongs to.

    Parameters
    ----------
    shape : (slices, rows, columns) of the scan.
    first : shape (slices · rows + 1,), where the runs of each row begin.
    start, stop : shape (runs,), columns of the run, ``stop`` not included.
    label : shape (runs,), component from 0, in the order in which components first appear; −1 left aside.
    count : number of components.
    """

    shape: tuple[int, int, int]
    first: NDArray[np.int64]
    start: NDArray[np.uint16]
    stop: NDArray[np.uint16]
    label: NDArray[np.int32]
    count: int

    @property
    def length(self) -> NDArray[np.int64]:
        """Shape (runs,): voxels of each run."""
        return self.stop.astype(np.int64) - self.start

    @property
    def row(self) -> NDArray[np.int64]:
        """Shape (runs,): slice · rows + row of each run."""
        return np.repeat(np.arange(len(self.first) - 1), np.diff(self.first))

    def voxels(self) -> NDArray[np.int64]:
        """Shape (count,): voxels of each component."""
        used = self.label >= 0
        return np.bincount(self.label[used], self.length[used], minlength=self.count).astype(np.int64)

    def keep(self, wanted: NDArray[np.bool_]) -> Runs:
        """The same runs with only the wanted components, numbered anew; the others get the label −1."""
        number = np.full(self.count + 1, -1, np.int32)
        number[:-1][wanted] = np.arange(np.count_nonzero(wanted), dtype=np.int32)
        return Runs(self.shape, self.first, self.start, self.stop, number[self.label], int(np.count_nonzero(wanted)))

    def touches_border(self) -> NDArray[np.bool_]:
        """Shape (count,): whether a component has a voxel in a first or last slice, row or column."""
        slices, rows, columns = self.shape
        k, j = np.divmod(self.row, rows)
        at_border = (k == 0) | (k == slices - 1) | (j == 0) | (j == rows - 1)
        at_border |= (self.start == 0) | (self.stop == columns)
        touching = np.zeros(self.count, bool)
        touching[self.label[at_border & (self.label >= 0)]] = True
        return touching


def find_runs(regions: NDArray[np.uint8], codes: Sequence[int]) -> Runs:
    """Runs and 6-connected components of the voxels that hold one of ``codes``.

    Parameters
    ----------
    regions : shape (slices, rows, columns), uint8, C order.
    codes : codes (below 32) that count as one class.
    """
    slices, rows, columns = regions.shape
    member = np.zeros(256, np.bool_)
    member[list(codes)] = True
    flat = regions.reshape(slices * rows, columns)
    first = np.zeros(slices * rows + 1, np.int64)
    _count_runs(flat, np.uint32(sum(1 << int(code) for code in set(codes))), first[1:])
    np.cumsum(first, out=first)
    start, stop = np.empty(first[-1], np.uint16), np.empty(first[-1], np.uint16)
    _fill_runs(flat, member, first, start, stop)
    parent = np.arange(first[-1], dtype=np.int32)
    _join(first, start, stop, rows, parent)
    count = _number(parent)
    return Runs((slices, rows, columns), first, start, stop, parent, count)


def paint(regions: NDArray[np.uint8], runs: Runs, chosen: NDArray[np.bool_], new: Mapping[int, int]) -> None:
    """Change codes in place in the runs of the chosen components.

    Parameters
    ----------
    chosen : shape (runs.count,); runs with the label −1 are never chosen.
    new : old code -> new code; codes not named stay.
    """
    table = np.arange(256, dtype=np.uint8)
    for old, code in new.items():
        table[old] = code
    chosen = np.append(chosen, False)
    slices, rows, columns = runs.shape
    _paint(regions.reshape(slices * rows, columns), runs.first, runs.start, runs.stop, chosen[runs.label], table)


def shared_columns(runs: Runs, weight: NDArray[np.float64]) -> NDArray[np.float64]:
    """Shape (count,): columns that runs share with the row before, summed per component.

    ``weight`` (shape (slices,)) multiplies what is found in each slice. With it the faces between rows are counted:
    a component of n voxels in a slice has 2 n − 2 · (shared columns) of them.
    """
    total = np.zeros(runs.count)
    _shared_columns(runs.first, runs.start, runs.stop, runs.label, runs.shape[1], weight, total)
    return total


@njit(cache=True)
def _count_runs(flat: Array, member: np.uint32, counts: Array) -> None:
    for r in range(flat.shape[0]):
        count = np.int32((member >> flat[r, 0]) & 1)
        for i in range(1, flat.shape[1]):  # without branches, so that several voxels are compared at once
            count += ((member >> flat[r, i]) & ~(member >> flat[r, i - 1])) & 1
        counts[r] = count


@njit(cache=True)
def _fill_runs(flat: Array, member: Array, first: Array, start: Array, stop: Array) -> None:
    for r in range(flat.shape[0]):
        at, before = first[r], False
        if at == first[r + 1]:
            continue
        for i in range(flat.shape[1]):
            inside = member[flat[r, i]]
            if inside != before:
                if inside:
                    start[at] = i
                else:
                    stop[at] = i
                    at += 1
                before = inside
        if before:
            stop[at] = flat.shape[1]


@njit(cache=True)
def _root(parent: Array, a: int) -> int:
    while parent[a] != a:
        parent[a] = parent[parent[a]]
        a = parent[a]
    return a


@njit(cache=True)
def _join_rows(r: int, q: int, first: Array, start: Array, stop: Array, parent: Array) -> None:
    a, b = first[r], first[q]
    while a < first[r + 1] and b < first[q + 1]:
        if start[a] < stop[b] and start[b] < stop[a]:
            x, y = _root(parent, a), _root(parent, b)
            if x < y:
                parent[y] = x
            elif y < x:
                parent[x] = y
        if stop[a] < stop[b]:
            a += 1
        else:
            b += 1


@njit(cache=True)
def _join(first: Array, start: Array, stop: Array, rows: int, parent: Array) -> None:
    for r in range(first.shape[0] - 1):
        if r % rows:
            _join_rows(r, r - 1, first, start, stop, parent)
        if r >= rows:
            _join_rows(r, r - rows, first, start, stop, parent)


@njit(cache=True)
def _number(parent: Array) -> int:
    """Turn roots into numbers from 0; a root is the first run of its component, so it is met before the others."""
    count = 0
    for a in range(parent.shape[0]):
        if parent[a] == a:
            parent[a] = count
            count += 1
        else:
            parent[a] = parent[parent[a]]
    return count


@njit(cache=True)
def _paint(flat: Array, first: Array, start: Array, stop: Array, chosen: Array, table: Array) -> None:
    for r in range(flat.shape[0]):
        for a in range(first[r], first[r + 1]):
            if chosen[a]:
                for i in range(start[a], stop[a]):
                    flat[r, i] = table[flat[r, i]]


@njit(cache=True)
def _shared_columns(
    first: Array, start: Array, stop: Array, label: Array, rows: int, weight: Array, total: Array
) -> None:
    for r in range(first.shape[0] - 1):
        if r % rows == 0:
            continue
        a, b = first[r], first[r - 1]
        while a < first[r + 1] and b < first[r]:
            low, high = max(start[a], start[b]), min(stop[a], stop[b])
            if low < high and label[a] >= 0:
                total[label[a]] += weight[r // rows] * (high - low)
            if stop[a] < stop[b]:
                a += 1
            else:
                b += 1
