"""Whether a group of objects is one CT series that a volume can be made from, and if not, why."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from pydicom.uid import UID, CTImageStorage

from tomofolio.errors import InputError
from tomofolio.intake.decoding import can_decode, check_storage
from tomofolio.intake.geometry import ORIENTATION_TOLERANCE, Arrangement, arrange
from tomofolio.intake.headers import MULTI_FRAME, Header
from tomofolio.intake.units import rescale_of

#: Values of Image Type that mean a picture made from the slices, not a slice.
PROJECTIONS = {
    "PROJECTION IMAGE",
    "MIP",
    "MINIP",
    "MAX_IP",
    "MIN_IP",
    "MAXIMUM",
    "MINIMUM",
    "VOLUME_RENDER",
    "SURFACE_RENDER",
    "CURVED_MPR",
    "VRT",
    "SSD",
    "3D",
}

#: Values of Image Type that mean an overview radiograph.
OVERVIEWS = {"LOCALIZER", "SCOUT", "TOPOGRAM"}


def reason_against(headers: Sequence[Header]) -> tuple[str, Header] | None:
    """Why no volume can be made from objects of this kind, and which object it is; None where nothing is against it.

    Looks at what the objects are, not at how they fit together: see `check_slices`.
    """
    for header in headers:
        reason = _reason_against_one(header)
        if reason:
            return reason, header
    return None


def _reason_against_one(header: Header) -> str:
    name = UID(header.sop_class).name if header.sop_class else "an unknown class"
    pixels = header.pixels
    if pixels.offset is None and not (pixels.rows and pixels.columns):
        return f"it holds no images ({name})"
    if "Secondary Capture" in name:
        return "these are secondary captures (screen shots or pictures), not slices"
    if header.modality != "CT":
        return f"the modality is {header.modality or 'not recorded'}; only CT is read"
    if header.sop_class != CTImageStorage and header.sop_class not in MULTI_FRAME:
        return f"the objects are of the class {name}; only CT images are read"
    if pixels.frames > 1 and header.sop_class not in MULTI_FRAME:
        return f"there are {pixels.frames} frames in an object of a class for single images"
    if OVERVIEWS.intersection(header.image_type):
        return "it is or contains a localizer (an overview radiograph)"
    if PROJECTIONS.intersection(header.image_type):
        return "it is or contains derived projections, not slices"
    if pixels.samples != 1 or not pixels.photometric.startswith("MONOCHROME"):
        return f"the images are in colour ({pixels.photometric or 'photometric interpretation not recorded'})"
    return ""


def check_slices(headers: Sequence[Header]) -> Arrangement:
    """Check that the objects are the slices of one volume, and put them in order.

    Raises
    ------
    InputError : says which file does not fit, and how.
    """
    first = headers[0]
    reason = reason_against(headers)
    if reason is not None:
        problem, header = reason
        raise InputError(problem, file=header.source.label, remedy="Choose a series of CT slices")
    if len(headers) == 1:
        raise InputError(
            "there is a single slice; a volume needs at least two",
            file=first.source.label,
            remedy="Give the folder that holds all slices of the series",
        )
    for name, get in AGREEMENTS:
        _agree(headers, name, get)
    _agree_on_numbers(headers, "Pixel Spacing", lambda header: header.pixel_spacing_mm, 1e-4, relative=True)
    _agree_on_numbers(headers, "Image Orientation", lambda header: header.orientation, ORIENTATION_TOLERANCE)
    for header in headers:
        if header.has_lookup_table:
            raise InputError(
                "the values go through a Modality LUT Sequence; only Rescale Slope and Intercept are read",
                file=header.source.label,
                remedy="Export the series as original CT images",
            )
        check_storage(header)
    rescale_of(headers)
    _refuse_undecodable(first)
    return arrange(headers)


#: What all slices of a series must have in common.
AGREEMENTS: tuple[tuple[str, Callable[[Header], object]], ...] = (
    ("matrix", lambda header: f"{header.pixels.rows} × {header.pixels.columns}"),
    ("photometric interpretation", lambda header: header.pixels.photometric),
    ("Bits Allocated", lambda header: header.pixels.bits_allocated),
    ("Bits Stored", lambda header: header.pixels.bits_stored),
    ("High Bit", lambda header: header.pixels.high_bit),
    ("Pixel Representation", lambda header: "signed" if header.pixels.signed else "unsigned"),
    ("Rescale Type", lambda header: header.rescale_type or "none"),
)


def _agree(headers: Sequence[Header], name: str, get: Callable[[Header], object]) -> None:
    expected = get(headers[0])
    for header in headers:
        if get(header) != expected:
            raise InputError(
                f"slices of the series differ in {name} ({expected} and {get(header)})",
                file=header.source.label,
                remedy="Take the files that do not belong to the series out of the folder",
            )


def _agree_on_numbers(
    headers: Sequence[Header],
    name: str,
    get: Callable[[Header], tuple[float, ...] | None],
    tolerance: float,
    *,
    relative: bool = False,
) -> None:
    """As `_agree`, for tuples of numbers. What is missing or broken is refused later, with its own message."""
    recorded = [(header, np.array(get(header), dtype=float)) for header in headers if get(header) is not None]
    if not recorded:
        return
    expected = recorded[0][1]
    for header, numbers in recorded:
        allowed = tolerance * np.abs(expected) if relative else tolerance
        if numbers.shape != expected.shape or np.any(np.abs(numbers - expected) > allowed):
            values = f"{_printed(expected)} and {_printed(numbers)}"
            raise InputError(
                f"slices of the series differ in {name} ({values})",
                file=header.source.label,
                remedy="Take the files that do not belong to the series out of the folder",
            )
    if len(recorded) < len(headers):
        bare = next(header for header in headers if get(header) is None)
        raise InputError(f"{name} is missing", file=bare.source.label, remedy="Export the series again")


def _refuse_undecodable(header: Header) -> None:
    syntax = header.pixels.transfer_syntax
    if not can_decode(syntax):
        raise InputError(
            f"the pixel data are compressed in a way that cannot be decoded here ({UID(syntax).name})",
            file=header.source.label,
            remedy="Export the series uncompressed",
        )


def _printed(numbers: np.ndarray) -> str:
    return "\\".join(f"{value:g}" for value in numbers)
