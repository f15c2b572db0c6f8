"""What was left out, in plain words, and what the reader of the report should know about the object."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.pieces import Pieces, Role, main_piece
from tomofolio.body.result import Excluded
from tomofolio.remarks import Remark, Severity
from tomofolio.volume import Volume

#: Loose pieces below this share of the object's volume are listed together, not one by one.
LISTED_SHARE = 1e-4
#: From this share of the object's volume, what was left out deserves a caution instead of a note.
CAUTION_SHARE = 0.2


@dataclass(frozen=True)
class LeftOut:
    """A piece that was left out: its role, whether it touches the object, one of its voxels, volume and centroid."""

    role: Role
    touches: bool
    voxel: tuple[int, int, int]
    volume_mm3: float
    position_mm: NDArray[np.float64]

    def joined(self, other: LeftOut) -> LeftOut:
        """Both as one thing under this one's name."""
        whole = self.volume_mm3 + other.volume_mm3
        centre = (self.volume_mm3 * self.position_mm + other.volume_mm3 * other.position_mm) / whole
        return replace(self, volume_mm3=whole, position_mm=centre)


def excluded_things(left_out: Sequence[LeftOut], object_: Pieces, volume: Volume) -> tuple[Excluded, ...]:
    """The list for `Body.excluded`, largest first."""
    whole = float(object_.volume_mm3.sum())
    small = [thing for thing in left_out if thing.role is Role.LOOSE and thing.volume_mm3 < LISTED_SHARE * whole]
    if len(small) < 2:
        small = []
    things = [_one_thing(thing, object_, volume) for thing in left_out if not any(thing is s for s in small)]
    if small:
        weights = np.array([thing.volume_mm3 for thing in small])
        centre = weights @ np.array([thing.position_mm for thing in small]) / weights.sum()
        reason = "small and apart from the object; the position is their common centroid"
        things.append(Excluded(f"{len(small)} small loose pieces", float(weights.sum()), _triple(centre), reason))
    return tuple(sorted(things, key=lambda thing: -thing.volume_mm3))


def _one_thing(thing: LeftOut, object_: Pieces, volume: Volume) -> Excluded:
    if thing.role is Role.LOOSE:
        name, reason = "loose piece", "apart from the object and small beside it"
    else:
        down = volume.grid.direction[:, 1]
        away = thing.position_mm - object_.position_mm[main_piece(object_)]
        away -= (away @ volume.grid.direction[:, 2]) * volume.grid.direction[:, 2]
        below = away @ down > 0.7 * np.linalg.norm(away)
        name = "support below the object" if below else "support beside the object"
        contact = "touches the object only lightly" if thing.touches else "apart from the object"
        reason = f"thin beside the object, runs through all slices, {contact}"
    return Excluded(name, float(thing.volume_mm3), _triple(thing.position_mm), reason)


def _triple(position: NDArray[np.float64]) -> tuple[float, float, float]:
    return float(position[0]), float(position[1]), float(position[2])


def remarks_about(object_: Pieces | None, excluded: Sequence[Excluded], volume: Volume) -> tuple[Remark, ...]:
    """Remarks about supports, loose pieces, several pieces, and an object that the end slices cut."""
    if object_ is None:
        text = "No object was found: no piece of material is larger than the noise."
        return (Remark("no-object", Severity.STOP, text),)
    remarks = []
    whole = float(object_.volume_mm3.sum())
    for word, code, what in (
        ("support", "support-excluded", "A support (table, holder) was found and left out"),
        ("loose", "pieces-excluded", "Loose pieces were left out"),
    ):
        share = sum(thing.volume_mm3 for thing in excluded if word in thing.name) / whole
        if share > 0:
            severity = Severity.CAUTION if share >= CAUTION_SHARE else Severity.NOTE
            percent = f"{100 * share:.1f} %" if share >= 0.001 else "less than 0.1 %"
            remarks.append(Remark(code, severity, f"{what}: {percent} of the object's volume."))
    if len(object_) > 1:
        text = f"The object consists of {len(object_)} pieces that do not touch within the scan."
        remarks.append(Remark("object-in-pieces", Severity.NOTE, text))
    ends = [w for w, cut in (("first", object_.low[:, 0].min() == 0), ("last", _at_last(object_, volume))) if cut]
    if ends:
        text = f"The object reaches the {' and the '.join(ends)} slice: "
        text += "what lies beyond is not in the scan, and cavities cut there count as open."
        remarks.append(Remark("object-cut", Severity.NOTE, text))
    return tuple(remarks)


def _at_last(object_: Pieces, volume: Volume) -> bool:
    return bool(object_.high[:, 0].max() == volume.shape[0])
