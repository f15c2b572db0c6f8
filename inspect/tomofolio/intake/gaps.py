"""Remarks on how the slices follow each other: missing ones, uneven gaps, slices that do not touch or overlap."""

from __future__ import annotations

import numpy as np

from tomofolio.remarks import Remark, Severity
from tomofolio.volume import Grid

#: A gap counts as whole steps where it is within this share of a step of a whole number of them.
STEP_TOLERANCE = 0.1

#: Slices are taken for missing only where at least this share of the gaps is one step.
EVEN_SHARE = 0.6

#: At most so many gaps are named one by one.
NAMED_GAPS = 5


def missing_slices(grid: Grid) -> list[tuple[int, int]]:
    """Gaps that are whole steps wide in an otherwise even series.

    Returns
    -------
    (k, n) for each: n slices are missing between slice k and slice k + 1.
    """
    gaps = np.diff(grid.slice_positions_mm)
    if len(gaps) < 3:
        return []
    step = float(np.median(gaps))
    steps = np.round(gaps / step)
    whole = (np.abs(gaps / step - steps) <= STEP_TOLERANCE) & (steps >= 1)
    if not whole.all() or np.mean(steps == 1) < EVEN_SHARE:
        return []
    return [(int(k), int(steps[k]) - 1) for k in np.flatnonzero(steps > 1)]


def gap_remarks(grid: Grid, thickness_mm: float | None) -> list[Remark]:
    """What the reader of a report should know of the gaps.

    Parameters
    ----------
    thickness_mm : the nominal slice thickness, where all slices have the same.
    """
    remarks = []
    distances = grid.slice_distances_mm
    missing = missing_slices(grid)
    if missing:
        remarks.append(Remark("slices-missing", Severity.CAUTION, _missing_text(grid, missing)))
    elif not grid.is_even:
        text = (
            f"The distance between slices varies from {distances.min():.3g} to {distances.max():.3g} mm. "
            "The true positions are used; nothing is resampled."
        )
        remarks.append(Remark("slice-gaps-uneven", Severity.CAUTION, text))
    if grid.tilt_degrees >= 0.5:
        text = (
            f"The slices lean by {grid.tilt_degrees:.1f}° against their axis (tilted gantry). "
            "The true geometry is used; nothing is resampled."
        )
        remarks.append(Remark("gantry-tilted", Severity.NOTE, text))
    if thickness_mm is not None and len(distances):
        typical = float(np.median(distances))
        if typical > 1.05 * thickness_mm:
            text = (
                f"The slices are {typical:.3g} mm apart but only {thickness_mm:.3g} mm thick: "
                "what lies between them was not recorded."
            )
            remarks.append(Remark("slices-apart", Severity.CAUTION, text))
        elif typical < 0.95 * thickness_mm:
            text = (
                f"The slices are {typical:.3g} mm apart and {thickness_mm:.3g} mm thick: they overlap, "
                "so the sharpness along the slice axis is that of the thickness."
            )
            remarks.append(Remark("slices-overlap", Severity.NOTE, text))
    return remarks


def _missing_text(grid: Grid, missing: list[tuple[int, int]]) -> str:
    total = sum(count for _, count in missing)
    places = []
    for k, count in missing[:NAMED_GAPS]:
        low, high = grid.slice_positions_mm[k], grid.slice_positions_mm[k + 1]
        places.append(f"{count} between slices {k + 1} and {k + 2} ({low:.4g} to {high:.4g} mm along the slice axis)")
    more = f" and at {len(missing) - NAMED_GAPS} more places" if len(missing) > NAMED_GAPS else ""
    what = "One slice seems" if total == 1 else f"{total} slices seem"
    return f"{what} to be missing: {'; '.join(places)}{more}. Nothing is filled in."
