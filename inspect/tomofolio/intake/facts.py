"""What the headers record beside the pixels, as labelled text: how the scan was made, and what could name somebody."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from pydicom.dataset import Dataset
from pydicom.uid import UID

from tomofolio.intake.elements import code, codes, finite, real, text
from tomofolio.intake.headers import Header
from tomofolio.volume import Kind

#: Identity: label, tag. What "{whose}" stands for depends on what was scanned.
IDENTITY = (
    ("{whose} name", 0x00100010),
    ("{whose} ID", 0x00100020),
    ("Other IDs", 0x00101000),
    ("Birth date", 0x00100030),
    ("Sex", 0x00100040),
    ("Age", 0x00101010),
    ("Weight", 0x00101030),
    ("Accession number", 0x00080050),
    ("Institution", 0x00080080),
    ("Institution address", 0x00080081),
    ("Department", 0x00081040),
    ("Station", 0x00081010),
    ("Device serial number", 0x00181000),
    ("Referring physician", 0x00080090),
    ("Performing physician", 0x00081050),
    ("Reading physician", 0x00081060),
    ("Operators", 0x00081070),
    ("Responsible person", 0x00102297),
    ("Study ID", 0x00200010),
    ("Study description", 0x00081030),
    ("Series description", 0x0008103E),
    ("Protocol name", 0x00181030),
    ("Requested procedure", 0x00321060),
    ("Image comments", 0x00204000),
    ("Study date", 0x00080020),
    ("Series date", 0x00080021),
    ("Acquisition date", 0x00080022),
    ("Study instance UID", 0x0020000D),
    ("Series instance UID", 0x0020000E),
)

#: Acquisition facts that are one number: label, tag, unit.
NUMBERS = (
    ("Exposure time", 0x00181150, "ms"),
    ("Reconstruction diameter", 0x00181100, "mm"),
    ("Data collection diameter", 0x00180090, "mm"),
    ("Gantry tilt as recorded", 0x00181120, "°"),
    ("Source to detector", 0x00181110, "mm"),
    ("Source to rotation centre", 0x00181111, "mm"),
)

#: Acquisition facts that are binary floating numbers.
REALS = (
    ("Spiral pitch factor", 0x00189311, ""),
    ("Table speed", 0x00189309, "mm/s"),
    ("Single collimation width", 0x00189306, "mm"),
    ("Total collimation width", 0x00189307, "mm"),
)


def identity(header: Dataset, kind: Kind) -> dict[str, str]:
    """What could name a patient, a customer or a place: label -> text as recorded, only what is filled in."""
    whose = "Component" if kind is Kind.COMPONENT else "Patient"
    found = {}
    for label, tag in IDENTITY:
        shown = _date(text(header, tag)) if label.endswith("date") else text(header, tag)
        if shown:
            found[label.format(whose=whose)] = shown
    return found


def acquisition(header: Dataset, headers: Sequence[Header]) -> dict[str, str]:
    """How the scan was made: label -> text with its unit, in the order to print, only what is recorded.

    Parameters
    ----------
    header : the full header of one slice, for what all slices share.
    headers : all slices, for what may vary between them.
    """
    found = {
        "Manufacturer": text(header, 0x00080070),
        "Model": text(header, 0x00081090),
        "Tube voltage": _span(headers, lambda item: item.kvp, "kV"),
        "Tube current": _span(headers, lambda item: item.current_ma, "mA"),
        "Exposure": _span(headers, lambda item: item.exposure_mas, "mAs"),
        "Kernel": headers[0].kernel,
        "Filter": text(header, 0x00181160),
        "Slice thickness": _span(headers, lambda item: item.thickness_mm, "mm"),
    }
    for label, tag, unit in NUMBERS:
        found[label] = _number(finite(header, tag), unit)
    for label, tag, unit in REALS:
        found[label] = _number(real(header, tag), unit)
    found["CTDIvol"] = _dose(header)
    found["Contrast agent"] = text(header, 0x00180010)
    found["Patient position"] = code(header, 0x00185100)
    found["Image type"] = " / ".join(value for value in headers[0].image_type if value)
    found["Transfer syntax"] = UID(headers[0].pixels.transfer_syntax).name
    found["Lossy compression"] = _lossy(header)
    return {label: shown for label, shown in found.items() if shown}


def _number(value: float | None, unit: str) -> str:
    return "" if value is None else f"{value:g} {unit}".replace(" °", "°").strip()


def _span(headers: Sequence[Header], get: Callable[[Header], float | None], unit: str) -> str:
    values = [value for header in headers if (value := get(header)) is not None]
    if not values:
        return ""
    low, high = min(values), max(values)
    return f"{low:g} {unit}" if low == high else f"{low:g} to {high:g} {unit}"


def _dose(header: Dataset) -> str:
    """CTDIvol means nothing without the phantom it refers to, so the phantom is named where it is recorded."""
    dose = _number(real(header, 0x00189345), "mGy")
    try:
        phantom = text(header[0x00189346].value[0], 0x00080104) if dose and 0x00189346 in header else ""
    except (AttributeError, IndexError, TypeError):
        phantom = ""
    return f"{dose} ({phantom})" if phantom else dose


def _lossy(header: Dataset) -> str:
    happened = code(header, 0x00282110)
    if happened != "01":
        return "none recorded" if happened == "00" else ""
    methods = ", ".join(codes(header, 0x00282114))
    ratios = " then ".join(f"{value} : 1" for value in codes(header, 0x00282112))
    return "yes" + (f", {methods}" if methods else "") + (f", ratio {ratios}" if ratios else "")


def _date(value: str) -> str:
    """19991231 as 1999-12-31; anything else as it is."""
    return f"{value[:4]}-{value[4:6]}-{value[6:]}" if len(value) == 8 and value.isdigit() else value
