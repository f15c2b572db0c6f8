"""The public step of this room: from values and ranges to the object."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.attached import mark_attached
from tomofolio.body.material import ATTACHED, mark_material
from tomofolio.body.pieces import SMALLEST_PIECE_VOXELS, Pieces, Role, judge_pieces, main_piece, measure_pieces
from tomofolio.body.result import Body, Region
from tomofolio.body.runs import Runs, find_runs, paint
from tomofolio.body.words import LeftOut, excluded_things, remarks_about
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Grid, Volume


def find_body(volume: Volume, ranges: Ranges) -> Body:
    """Find the object in the scan.

    Material is what lies at or above the boundary between the background range and the next; in a scan without
    background all that is data is the object. The rules, in the order in which they are applied:

    1. Pieces (6-connected material) of fewer than `pieces.SMALLEST_PIECE_VOXELS` voxels are noise and count as
       background.
    2. Of the other pieces the large and thick one is the main piece. A piece is left out as a support when it runs
       through the whole scan as a sheet much thinner than the main piece (or with an unchanging cross-section beside
       an object whose cross-section changes); a piece that is small beside the main one is left out as loose; all
       others belong to the object (`pieces.judge_pieces`).
    3. A support that touches the main piece is looked for only where that piece runs through the whole scan, and
       taken off only with strong evidence (`attached.mark_attached`): flanges and ribs stay.
    4. Everything that is not the object, supports and loose pieces too, is outside where it reaches (6-connected)
       the border of the scan or the no-data area. **The border of the scan counts as outside**: a cavity that
       the first or last slice cuts open is not enclosed. Background closed in by a support alone is therefore
       outside, and a loose piece closed in by the object belongs to the object.

    Parameters
    ----------
    volume : any grid; volumes and positions use the true voxel volumes.
    ranges : only the background range, the boundaries and the peaks are used.

    Returns
    -------
    `Body`; ``excluded`` lists what was left out, largest first. Where nothing but noise lies above the threshold,
    the box is empty and a remark with the severity STOP says so.
    """
    threshold = ranges.background.upper if ranges.background is not None else None
    regions = mark_material(volume, threshold)
    if threshold is None:
        return Body(regions, _box_of_data(regions), None)
    pieces, left_out = _sort_pieces(regions, volume.grid)
    if pieces is None:
        return Body(regions, (slice(0, 0), slice(0, 0), slice(0, 0)), threshold, (), remarks_about(None, (), volume))
    main = main_piece(pieces)
    if pieces.runs_through(volume.shape[0])[main] and mark_attached(volume, ranges, regions, pieces, main):
        supports = _take_off(regions, volume.grid)
        pieces, remnants = _sort_pieces(regions, volume.grid)
        left_out += _with_remnants(supports, remnants)
    _close_in(regions)
    left_out = [thing for thing in left_out if regions[thing.voxel] == Region.EXCLUDED]
    assert pieces is not None, "the main piece is never taken off"
    excluded = excluded_things(left_out, pieces, volume)
    return Body(regions, _box(pieces), threshold, excluded, remarks_about(pieces, excluded, volume))


def _sort_pieces(regions: NDArray[np.uint8], grid: Grid) -> tuple[Pieces | None, list[LeftOut]]:
    """Paint noise as background and what is left out as excluded; give the pieces of the object and the rest."""
    runs = find_runs(regions, [Region.OBJECT])
    large = runs.voxels() >= SMALLEST_PIECE_VOXELS
    if not large.all():
        paint(regions, runs, ~large, {Region.OBJECT: Region.OUTSIDE})
    if not large.any():
        return None, []
    runs = runs.keep(large)
    pieces = measure_pieces(runs, grid)
    roles = judge_pieces(pieces, grid.shape[0])
    out = np.array([role is not Role.OBJECT for role in roles])
    if out.any():
        paint(regions, runs, out, {Region.OBJECT: Region.EXCLUDED})
    return pieces.only(~out), _left_out(runs, pieces, out, roles, touches=False)


def _take_off(regions: NDArray[np.uint8], grid: Grid) -> list[LeftOut]:
    """Paint marked supports as excluded and give those that are large enough to list."""
    runs = find_runs(regions, [ATTACHED])
    paint(regions, runs, np.ones(runs.count, bool), {ATTACHED: Region.EXCLUDED})
    runs = runs.keep(runs.voxels() >= SMALLEST_PIECE_VOXELS)
    pieces = measure_pieces(runs, grid)
    return _left_out(runs, pieces, np.ones(len(pieces), bool), [Role.SUPPORT] * len(pieces), touches=True)


def _with_remnants(supports: list[LeftOut], remnants: list[LeftOut]) -> list[LeftOut]:
    """Supports with what hung on the object by them alone: each remnant goes to the support nearest to it."""
    if not supports:
        return remnants
    supports = list(supports)
    for remnant in remnants:
        away = [float(np.linalg.norm(support.position_mm - remnant.position_mm)) for support in supports]
        n = int(np.argmin(away))
        supports[n] = supports[n].joined(remnant)
    return supports


def _left_out(runs: Runs, pieces: Pieces, out: NDArray[np.bool_], roles: list[Role], *, touches: bool) -> list[LeftOut]:
    labels, run = np.unique(runs.label, return_index=True)
    run = run[labels >= 0]
    k, j = np.divmod(runs.row[run], runs.shape[1])
    return [
        LeftOut(
            role=roles[n],
            touches=touches,
            voxel=(int(k[n]), int(j[n]), int(runs.start[run[n]])),
            volume_mm3=float(pieces.volume_mm3[n]),
            position_mm=pieces.position_mm[n],
        )
        for n in np.flatnonzero(out)
    ]


def _close_in(regions: NDArray[np.uint8]) -> None:
    """Paint what the object closes in: background becomes enclosed, loose pieces become object."""
    runs = find_runs(regions, [Region.OUTSIDE, Region.EXCLUDED, Region.NO_DATA])
    outside = runs.touches_border()
    if not outside.all():
        paint(regions, runs, ~outside, {Region.OUTSIDE: Region.ENCLOSED, Region.EXCLUDED: Region.OBJECT})


def _box(pieces: Pieces) -> tuple[slice, slice, slice]:
    """Box of the object; what it encloses cannot reach beyond it."""
    low, high = pieces.low.min(axis=0), pieces.high.max(axis=0)
    return slice(int(low[0]), int(high[0])), slice(int(low[1]), int(high[1])), slice(int(low[2]), int(high[2]))


def _box_of_data(regions: NDArray[np.uint8]) -> tuple[slice, slice, slice]:
    ends = []
    for axes in ((1, 2), (0, 2), (0, 1)):
        there = np.flatnonzero((regions == Region.OBJECT).any(axis=axes))
        ends.append(slice(int(there[0]), int(there[-1]) + 1) if len(there) else slice(0, 0))
    return ends[0], ends[1], ends[2]
