"""Supports that touch the object, told by shape: a sheet on which a round object lies.

Needed where sheet and object have the same values, so that nothing but the shape can tell them apart. A sheet is what
an opening of the slices takes away (Serra 1982) at the same place in every slice. It is a support only if the object
lies on one side of it, touches it on less than half of its width, and leaves it slowly on both sides of the contact,
as a round thing does that lies on a table. A flange or a rib meets its body at a corner or a short fillet and stays.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.body.material import ATTACHED
from tomofolio.body.result import Region
from tomofolio.volume import Grid

#: A sheet is thinner than this share of the diameter of a disc with the area of the mean cross-section.
THIN_SHARE = 0.12
#: Share of the slices in which a voxel of the slice must be thin to belong to a sheet (and in the first and last).
SAME_PLACE_SHARE = 0.9
#: Shares of that diameter which a wing of a sheet and a whole sheet must be long.
WING_LENGTH, SHEET_LENGTH = 0.1, 0.5
#: A sheet is at least this many times as long as thick.
SLENDER = 6.0
#: Columns whose thickness is within this share of the median are used for the shape of the sheet.
SAME_THICKNESS = 0.3
#: Greatest deviation (root mean square, voxels) of the middle of a sheet from a parabola.
SMOOTH_VOXELS = 1.0
#: Share of the object in the slice that may lie on the far side of the sheet.
FAR_SIDE_SHARE = 0.01
#: Contact is at most this share of the width of the sheet.
CONTACT_SHARE = 0.5
#: At a distance d = 2 · thickness + 2 voxels from the contact, the gap is at most this share of d (a corner has no
#: object above it there, a fillet of radius 4 · thickness has more).
LEAVING_SLOPE = 0.75
#: Share of the slices with contact in which that must hold.
AGREEING_SHARE = 0.8
#: Wings that are looked at, largest first.
MOST_WINGS = 6


@dataclass(frozen=True)
class _Sheet:
    """A sheet along the columns: between rows ``middle`` ± ``thickness`` / 2 (both in voxels) in ``columns``."""

    columns: NDArray[np.int64]
    middle: NDArray[np.float64]
    thickness: float

    def rows(self, count: int, margin: float = 0.0) -> NDArray[np.bool_]:
        """Shape (count, len(columns)): the voxels of the sheet, widened by ``margin`` on each side."""
        away = np.abs(np.arange(count)[:, None] - self.middle)
        return away <= self.thickness / 2 + margin


def mark_touching_sheet(regions: NDArray[np.uint8], grid: Grid, looked_at: NDArray[np.int64]) -> bool:
    """Paint sheets on which the object lies as `material.ATTACHED`.

    Parameters
    ----------
    regions : shape of the scan; changed in place where a sheet is found.
    looked_at : slices from which it is decided.

    Returns
    -------
    whether anything was painted.
    """
    sample = regions[looked_at] == Region.OBJECT
    spacing = np.array([grid.row_spacing_mm, grid.column_spacing_mm])
    diameter_mm = 2 * np.sqrt(sample.mean(axis=0).sum() * spacing.prod() / np.pi)
    size = np.maximum(2 * np.floor(THIN_SHARE * diameter_mm / spacing / 2) + 1, 3).astype(int)
    core = ndimage.minimum_filter(sample.view(np.uint8), (1, *size), mode="constant")
    core = ndimage.maximum_filter(core, (1, *size), mode="constant").view(bool)
    thin = sample & ~core
    place = (thin.mean(axis=0) >= SAME_PLACE_SHARE) & thin[0] & thin[-1]
    mask = np.zeros(place.shape, bool)
    for turned in (False, True):
        view = (lambda a: np.swapaxes(a, -1, -2)) if turned else (lambda a: a)
        diameter = diameter_mm / spacing[0 if turned else 1]
        for sheet in _sheets(view(place), diameter):
            if _carries(sheet, view(sample), view(core)):
                view(mask)[:, sheet.columns] |= _reach(sheet, view(place), view(mask).shape[0])
    if not mask.any():
        return False
    for region in regions:
        region[mask & (region == Region.OBJECT)] = ATTACHED
    return True


def _sheets(place: NDArray[np.bool_], diameter: float) -> Iterator[_Sheet]:
    """Sheets along the columns: one long wing, or two that continue each other across the contact."""
    labels, count = ndimage.label(place, np.ones((3, 3)))
    boxes = ndimage.find_objects(labels)
    long = [n for n in range(count) if boxes[n][1].stop - boxes[n][1].start >= WING_LENGTH * diameter]
    sizes = np.bincount(labels.ravel(), minlength=count + 1)[1:]
    wings = [labels == n + 1 for n in sorted(long, key=lambda n: -sizes[n])[:MOST_WINGS]]
    pairs = [a | b for a, b in combinations(wings, 2) if not (a.any(axis=0) & b.any(axis=0)).any()]
    for mask in pairs + wings:
        sheet = _fitted(mask)
        if sheet is not None and len(sheet.columns) >= SHEET_LENGTH * diameter:
            yield sheet


def _fitted(mask: NDArray[np.bool_]) -> _Sheet | None:
    """The sheet whose middle is a parabola, if the mask is one; holes between its ends are bridged."""
    there = np.flatnonzero(mask.any(axis=0))
    top = mask.argmax(axis=0)[there]
    bottom = mask.shape[0] - 1 - mask[::-1].argmax(axis=0)[there]
    thickness = bottom - top + 1.0
    typical = float(np.median(thickness))
    good = np.abs(thickness - typical) <= max(SAME_THICKNESS * typical, 1)
    columns = np.arange(there[0], there[-1] + 1)
    if good.sum() < 0.5 * len(there) or good.sum() < 8 or len(columns) < SLENDER * typical:
        return None
    curve = np.polynomial.Polynomial.fit(there[good], ((top + bottom) / 2)[good], 2)
    off = ((top + bottom) / 2)[good] - curve(there[good])
    if np.sqrt((off**2).mean()) > SMOOTH_VOXELS:
        return None
    return _Sheet(columns, curve(columns), typical)


def _carries(sheet: _Sheet, sample: NDArray[np.bool_], core: NDArray[np.bool_]) -> bool:
    """Whether the object lies on the sheet: one side, short contact, leaving slowly on both sides of it."""
    rows = sample.shape[1]
    index = np.arange(rows)[:, None]
    there = core[:, :, sheet.columns].sum(axis=0) * ~sheet.rows(rows, margin=1)
    before = int((there * (index < sheet.middle)).sum())
    share = before / max(int(there.sum()), 1)
    if min(share, 1 - share) > FAR_SIDE_SHARE or not there.any():
        return False
    middle, flipped = sheet.middle, share < 0.5
    if flipped:  # so that the object always lies towards smaller rows
        sample, middle = sample[:, ::-1], rows - 1 - middle
    edge = np.floor(middle - sheet.thickness / 2 - 1).astype(int)
    if edge.min() < 0 or edge.max() >= rows:
        return False
    votes = [_leaves_slowly(_gap(part[:, sheet.columns], edge), sheet.thickness) for part in sample]
    told = [vote for vote in votes if vote is not None]
    return bool(told) and sum(told) >= AGREEING_SHARE * len(told)


def _gap(part: NDArray[np.bool_], edge: NDArray[np.int64]) -> NDArray[np.float64]:
    """Shape (columns,): voxels of background between the sheet and the object; infinite where there is no object."""
    index = np.where(part, np.arange(len(part), dtype=np.int32)[:, None], -1)
    last = np.maximum.accumulate(index, axis=0)[edge, np.arange(len(edge))]
    return np.where(last < 0, np.inf, edge - last)


def _leaves_slowly(gap: NDArray[np.float64], thickness: float) -> bool | None:
    """None where there is no contact in this slice."""
    contact = np.flatnonzero(gap <= 0)
    if not len(contact):
        return None
    left, right, step = contact[0], contact[-1], int(np.ceil(2 * thickness + 2))
    if right - left + 1 > CONTACT_SHARE * len(gap) or left < step or right + step >= len(gap):
        return False
    return bool(max(gap[left - step], gap[right + step]) <= LEAVING_SLOPE * step)


def _reach(sheet: _Sheet, place: NDArray[np.bool_], rows: int) -> NDArray[np.bool_]:
    """Shape (rows, len(columns)): what is taken off: the sheet, with a rim of mixed values where it lies free."""
    free = ndimage.binary_dilation(place, np.ones((3, 3)))[:, sheet.columns] & sheet.rows(rows, margin=1.5)
    return sheet.rows(rows) | free
