"""What of the scan is the object: found once, after the ranges, and handed on."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from tomofolio.remarks import Remark


class Region(IntEnum):
    """What a voxel belongs to; the numbers stand in `Body.regions`."""

    OUTSIDE = 0  #: background that reaches the border of the scan or of the no-data area without crossing material
    OBJECT = 1  #: material of the object
    ENCLOSED = 2  #: background closed in by the object (6-connected): void or closed cavity
    EXCLUDED = 3  #: material that is not the object: table, headrest, holder, loose pieces
    NO_DATA = 4


@dataclass(frozen=True)
class Excluded:
    """One thing that was left out, with the reason in plain words."""

    name: str
    volume_mm3: float
    position_mm: tuple[float, float, float]
    reason: str


@dataclass(frozen=True)
class Body:
    """The object in the scan.

    Parameters
    ----------
    regions : shape of the volume, uint8, values of `Region`.
    box : three slices (slice, row, column): the smallest box that holds object and enclosed voxels.
    threshold : the value between background and material that was used; None where there is no background.
    excluded : what was left out, largest first.
    """

    regions: NDArray[np.uint8]
    box: tuple[slice, slice, slice]
    threshold: float | None
    excluded: tuple[Excluded, ...] = ()
    remarks: tuple[Remark, ...] = ()
