"""Supports that touch the object, told by value: a denser sheet that hangs on by a seam of lower values.

Where two bodies only touch, the voxels of the seam are a mixture with background, so material above a higher value
falls apart into the bodies; where a flange or a rib is of one piece with its body, it does not (the idea of the
saddle height of Najman & Couprie, IEEE Trans. Image Process. 15(11) 2006, and of dynamics before them). The
tests that make the evidence strong are ours.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.body.material import ATTACHED, DENSE, at_least
from tomofolio.body.pieces import SUPPORT_LENGTH, Pieces, measure_pieces
from tomofolio.body.result import Region
from tomofolio.body.runs import Runs, find_runs, paint
from tomofolio.body.sheet import mark_touching_sheet
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Grid, Volume

#: Slices that are looked at to decide whether there is a support at all; it runs through all of them.
SLICES_LOOKED_AT = 32
#: A touching support is at most this thick, compared with the piece that it touches, ...
ATTACHED_THICKNESS = 0.25
#: ... and at most this share of its volume.
ATTACHED_SHARE = 0.35
#: Share of a support's surface that faces background within `SEAM_VOXELS`: of one side of a sheet, 70 % may touch.
EXPOSED_SHARE = 0.65
#: Width of the rim of mixed values around a dense sheet, in voxels.
SEAM_VOXELS = 4
#: First level, between the peaks of background (0) and the range above it (1).
FIRST_LEVEL = 0.75
#: Further levels: the boundaries above, and this many standard deviations above each range's peak.
BEYOND_SPREADS = 3.0
#: Levels that are tried at most, from the lowest.
MOST_LEVELS = 6


def mark_attached(volume: Volume, ranges: Ranges, regions: NDArray[np.uint8], pieces: Pieces, main: int) -> bool:
    """Paint supports that touch the object as `material.ATTACHED` in ``regions``.

    By value: at some level above the threshold a piece comes off that reaches from the first slice of the scan to
    the last, is a sheet much thinner than the main piece, and faces background with most of its surface.
    By shape: see `sheet.mark_touching_sheet`.

    Returns
    -------
    whether anything was painted.
    """
    looked_at = np.unique(np.linspace(0, volume.shape[0] - 1, SLICES_LOOKED_AT).round().astype(int))
    found = False
    for level in _levels(ranges):
        found |= _mark_denser(volume, regions, level, looked_at, pieces, main)
    return mark_touching_sheet(regions, volume.grid, looked_at) or found


def _levels(ranges: Ranges) -> Iterator[float]:
    """Levels above the threshold at which bodies may come apart: the highest first, which cuts nearest to the sheet."""
    background = ranges.background
    above = [item for item in ranges.items if background is not None and item.peak > background.peak]
    if background is None or not above:
        return
    first = background.peak + FIRST_LEVEL * (above[0].peak - background.peak)
    levels = [first, *(item.peak + BEYOND_SPREADS * item.spread for item in above)]
    levels += [item.lower for item in above[1:] if item.lower is not None]
    threshold = background.upper if background.upper is not None else np.inf
    yield from sorted({level for level in levels if level > threshold})[:MOST_LEVELS][::-1]


def _mark_denser(
    volume: Volume, regions: NDArray[np.uint8], level: float, looked_at: NDArray, pieces: Pieces, main: int
) -> bool:
    sample = _sample(volume, regions, level, looked_at)
    candidates = _candidates(sample, _sampled_grid(volume.grid, looked_at), pieces, main)
    if not candidates.any():
        return False
    for k in range(volume.shape[0]):
        regions[k][(regions[k] == Region.OBJECT) & at_least(volume, k, level)] = DENSE
    runs = find_runs(regions, [DENSE])
    chosen = _components_at(runs, candidates, looked_at)
    sizes = measure_pieces(runs.keep(chosen), volume.grid).volume_mm3
    chosen[np.flatnonzero(chosen)[sizes > ATTACHED_SHARE * pieces.volume_mm3[main]]] = False
    paint(regions, runs, chosen, {DENSE: ATTACHED})
    paint(regions, runs, np.ones(runs.count, bool), {DENSE: Region.OBJECT})
    if chosen.any():
        for k in range(volume.shape[0]):
            _grow_downhill(regions[k], volume.stored[k], bool(volume.slope[k] > 0))
    return bool(chosen.any())


def _sample(volume: Volume, regions: NDArray[np.uint8], level: float, looked_at: NDArray) -> NDArray[np.uint8]:
    sample = regions[looked_at]
    for n, k in enumerate(looked_at):
        sample[n][(sample[n] == Region.OBJECT) & at_least(volume, int(k), level)] = DENSE
    return sample


def _sampled_grid(grid: Grid, looked_at: NDArray) -> Grid:
    return Grid(
        grid.origin_mm,
        grid.direction,
        grid.row_spacing_mm,
        grid.column_spacing_mm,
        grid.slice_positions_mm[looked_at] - grid.slice_positions_mm[0],
        grid.rows,
        grid.columns,
    )


def _candidates(sample: NDArray[np.uint8], grid: Grid, whole: Pieces, main: int) -> NDArray[np.bool_]:
    """Shape of the sample: voxels of the dense pieces that pass all tests."""
    marked = np.zeros(sample.shape, bool)
    runs = find_runs(sample, [DENSE])
    large = runs.voxels() >= sample.shape[0]
    if not large.any():
        return marked
    runs = runs.keep(large)
    pieces = measure_pieces(runs, grid)
    fits = pieces.runs_through(sample.shape[0])
    fits &= pieces.thickness_mm <= ATTACHED_THICKNESS * whole.thickness_mm[main]
    fits &= pieces.length_mm >= SUPPORT_LENGTH * pieces.thickness_mm
    fits &= pieces.volume_mm3 <= ATTACHED_SHARE * whole.volume_mm3[main]
    for n in np.flatnonzero(fits):
        one = np.zeros(sample.shape, np.uint8)
        paint(one, runs, np.arange(runs.count) == n, {0: 1})
        (j0, i0), (j1, i1) = np.maximum(pieces.low[n, 1:] - SEAM_VOXELS, 0), pieces.high[n, 1:] + SEAM_VOXELS
        around = sample[:, j0:j1, i0:i1]
        background = (around == Region.OUTSIDE) | (around == Region.NO_DATA)
        if _exposed_share(one[:, j0:j1, i0:i1] > 0, background) >= EXPOSED_SHARE:
            marked |= one > 0
    return marked


def _exposed_share(piece: NDArray[np.bool_], background: NDArray[np.bool_]) -> float:
    """Share of the faces in the slices from which background is reached within `SEAM_VOXELS`."""
    faces, exposed = 0, 0
    for axis, way in ((1, 1), (1, -1), (2, 1), (2, -1)):
        face = piece & ~_shifted(piece, axis, way)
        reached = np.zeros_like(face)
        for step in range(1, SEAM_VOXELS + 1):
            reached |= _shifted(background, axis, way * step)
        faces += int(np.count_nonzero(face))
        exposed += int(np.count_nonzero(face & reached))
    return exposed / max(faces, 1)


def _shifted(mask: NDArray, axis: int, steps: int) -> NDArray:
    """What lies ``steps`` further along the axis; beyond the edge there is nothing."""
    out = np.zeros_like(mask)
    n = mask.shape[axis]
    if abs(steps) < n:
        to, from_ = [slice(None)] * mask.ndim, [slice(None)] * mask.ndim
        to[axis] = slice(max(-steps, 0), n - max(steps, 0))
        from_[axis] = slice(max(steps, 0), n + min(steps, 0))
        out[tuple(to)] = mask[tuple(from_)]
    return out


def _components_at(runs: Runs, marked: NDArray[np.bool_], looked_at: NDArray) -> NDArray[np.bool_]:
    """Shape (runs.count,): the components with a run that begins in a marked voxel of the sampled slices."""
    chosen = np.zeros(runs.count, bool)
    rows = runs.shape[1]
    for n, k in enumerate(looked_at):
        some = slice(runs.first[k * rows], runs.first[(k + 1) * rows])
        row = np.repeat(np.arange(rows), np.diff(runs.first[k * rows : (k + 1) * rows + 1]))
        chosen[runs.label[some][marked[n, row, runs.start[some]]]] = True
    return chosen


def _grow_downhill(region: NDArray[np.uint8], stored: NDArray, rising: bool) -> None:
    """Let marked voxels of one slice take over their rim: object voxels of values that fall away from them.

    The values fall to the seam and rise again in the object, so growth ends at the seam. Where no background is near
    the object may follow without a seam (as high as the rim): there only the first voxel is taken.
    """
    marked = region == ATTACHED
    ends = [np.flatnonzero(marked.any(axis=axis)) for axis in (1, 0)]
    if not len(ends[0]):
        return
    box = tuple(slice(max(int(a[0]) - SEAM_VOXELS, 0), int(a[-1]) + SEAM_VOXELS + 1) for a in ends)
    codes, values = region[box], stored[box].astype(np.float32) * (1 if rising else -1)
    edge = codes == ATTACHED
    allowed = codes == Region.OBJECT
    near = ndimage.binary_dilation((codes == Region.OUTSIDE) | (codes == Region.NO_DATA), iterations=2)
    for _ in range(SEAM_VOXELS):
        taken = np.zeros_like(edge)
        for axis, way in ((0, 1), (0, -1), (1, 1), (1, -1)):
            taken |= _shifted(edge, axis, way) & (values < _shifted(values, axis, way))
        taken &= allowed
        codes[taken] = ATTACHED
        edge, allowed = taken, near & (codes == Region.OBJECT)
