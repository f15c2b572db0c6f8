"""Reading single elements of a header: as numbers, as plain text, or as text in the header's own character set.

A series has thousands of headers, and pydicom takes 30 µs to convert one element. Numbers and codes are therefore
read from the raw bytes, which pydicom keeps until an element is asked for; they are ASCII whatever the character set.
"""

from __future__ import annotations

import math

from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset
from pydicom.multival import MultiValue
from pydicom.valuerep import PersonName

#: Longer texts are cut: they are printed in one line.
TEXT_LIMIT = 160


def codes(header: Dataset, tag: int) -> tuple[str, ...]:
    """The values of a code, UID or number string; empty where the element is absent or empty."""
    element = header.get_item(tag)
    if element is None or element.value is None:
        return ()
    value = element.value
    if isinstance(element, RawDataElement):
        values = _printable(value.decode("latin-1")).split("\\")
    elif isinstance(value, MultiValue | list | tuple):
        values = [_printable(str(part)) for part in value]
    else:
        values = [_printable(str(value))]
    values = [part.strip() for part in values]
    return tuple(values) if any(values) else ()


def code(header: Dataset, tag: int) -> str:
    """The first value, or an empty text."""
    values = codes(header, tag)
    return values[0] if values else ""


def numbers(header: Dataset, tag: int) -> tuple[float, ...] | None:
    """The values of a number string (DS, IS); NaN for what is no number, None where the element is absent or empty."""
    values = codes(header, tag)
    return tuple(_to_float(value) for value in values) if values else None


def number(header: Dataset, tag: int) -> float | None:
    """The first value of a number string, see `numbers`."""
    values = numbers(header, tag)
    return values[0] if values else None


def finite(header: Dataset, tag: int) -> float | None:
    """The first value of a number string where it is a finite number, else None."""
    value = number(header, tag)
    return value if value is not None and math.isfinite(value) else None


def whole(header: Dataset, tag: int, *, signed: bool = False) -> int | None:
    """The value of a 16-bit or 32-bit integer (US, SS, UL), read with the sign asked for; None where it is absent.

    The sign is the caller's: writers are known to use the wrong one of US and SS.
    """
    element = header.get_item(tag)
    if element is None or element.value is None:
        return None
    value = element.value
    if isinstance(element, RawDataElement):
        if len(value) < 2:
            return None
        width = 4 if element.VR in ("UL", "SL") else 2
        order = "little" if element.is_little_endian else "big"
        return int.from_bytes(value[:width], order, signed=signed)
    try:
        plain = int(value[0] if isinstance(value, MultiValue | list) else value)
    except (TypeError, ValueError, IndexError):
        return None
    if signed and 0x8000 <= plain < 0x10000:
        return plain - 0x10000
    return plain + 0x10000 if not signed and plain < 0 else plain


def real(header: Dataset, tag: int) -> float | None:
    """The value of a binary floating number (FD, FL) where it is finite, else None."""
    try:
        value = header[tag].value if tag in header else None
        value = float(value[0] if isinstance(value, MultiValue | list) else value)  # type: ignore[arg-type]
    except Exception:  # pydicom raises many kinds for broken values
        return None
    return value if math.isfinite(value) else None


def text(header: Dataset, tag: int) -> str:
    """A free text or name in the header's own Specific Character Set, on one line, without control characters."""
    try:
        value = header[tag].value if tag in header else None
    except Exception:  # pydicom raises many kinds for broken values
        value = ", ".join(codes(header, tag))
    if value is None:
        return ""
    if isinstance(value, MultiValue | list | tuple):
        joined = ", ".join(_plain(part) for part in value)
    else:
        joined = _plain(value)
    line = " ".join(_printable(joined).split())
    return line if len(line) <= TEXT_LIMIT else line[: TEXT_LIMIT - 1] + "…"


def _printable(text: str) -> str:
    """Control characters become spaces."""
    return text if text.isprintable() else "".join(letter if letter.isprintable() else " " for letter in text)


def _plain(value: object) -> str:
    """A person name has up to three spellings (=), each of up to five parts (^)."""
    if not isinstance(value, PersonName):
        return str(value)
    spellings = (" ".join(spelling.replace("^", " ").split()) for spelling in str(value).split("="))
    return " / ".join(spelling for spelling in spellings if spelling)


def _to_float(value: str) -> float:
    try:
        return float(value)
    except ValueError:
        return math.nan
