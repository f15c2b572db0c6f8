"""What the values of a series mean (DICOM PS3.3 C.11.1.1.2 and C.8.2.1, from memory)."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from pydicom.uid import CTImageStorage

from tomofolio.errors import InputError
from tomofolio.intake.headers import Header
from tomofolio.volume import Basis, Kind, Unit

#: Symbol of a value that has no unit.
GREY_VALUE = "GV"


def implies_hu(header: Header) -> bool:
    """Whether the standard lets an absent Rescale Type mean HU: on original CT images that are no localizers."""
    return (
        header.modality == "CT"
        and header.sop_class == CTImageStorage
        and header.image_type[:1] == ("ORIGINAL",)
        and "LOCALIZER" not in header.image_type
    )


def decide_unit(headers: Sequence[Header], kind: Kind) -> Unit:
    """The unit of a series.

    A declared Rescale Type is believed. Without one, an original CT image is in HU, but never a component's: there
    nobody has calibrated to water. Anything else is a grey value.
    """
    declared = headers[0].rescale_type
    if declared.upper() == "HU":
        return Unit("CT number", "HU", Basis.DECLARED)
    if declared.upper() == "US":
        return Unit("grey value", GREY_VALUE, Basis.DECLARED)
    if declared:
        return Unit("other", declared, Basis.DECLARED)
    if kind is not Kind.COMPONENT and all(implies_hu(header) for header in headers):
        return Unit("CT number", "HU", Basis.IMPLIED)
    return Unit("grey value", GREY_VALUE, Basis.IMPLIED)


def rescale_of(headers: Sequence[Header]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Slope and intercept of each slice, shape (slices,) both; 1 and 0 where none is recorded.

    Raises
    ------
    InputError : a slope is zero or no number, an intercept is no number, or only some slices have them.
    """
    for name in ("slope", "intercept"):
        recorded = [header for header in headers if getattr(header, name) is not None]
        if 0 < len(recorded) < len(headers):
            bare = next(header for header in headers if getattr(header, name) is None)
            raise InputError(
                f"Rescale {name.capitalize()} is recorded in {len(recorded)} of the {len(headers)} slices only",
                file=bare.source.label,
                remedy="Export the series again",
            )
        for header in recorded:
            value = getattr(header, name)
            if not math.isfinite(value) or (name == "slope" and value == 0):
                raise InputError(
                    f"Rescale {name.capitalize()} is {'zero' if value == 0 else 'not a finite number'}",
                    file=header.source.label,
                    remedy="Export the series again",
                )
    slopes = np.array([1.0 if header.slope is None else header.slope for header in headers])
    intercepts = np.array([0.0 if header.intercept is None else header.intercept for header in headers])
    return slopes, intercepts
