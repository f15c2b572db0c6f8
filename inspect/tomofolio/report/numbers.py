"""How a figure is written: two digits of its uncertainty, its unit, its interval.

A typographic minus and thin spaces are used throughout; a value that does not exist is None, never "nan".
"""

from __future__ import annotations

import math
from dataclasses import dataclass

MINUS = "\u2212"
THIN = "\u2009"
NOT_AVAILABLE = "not available"

#: A figure never shows more digits than these, however small its interval.
MOST_DIGITS = 6
#: Digits of a figure that has no interval.
BARE_DIGITS = 3
#: From this volume on cubic centimetres are easier to read.
CM3_FROM_MM3 = 1000.0

Interval = tuple[float, float]


@dataclass(frozen=True)
class Figure:
    """A figure ready to print; ``interval`` is "" where there is none, ``unit`` "" where it has none."""

    value: str
    interval: str
    unit: str

    def __str__(self) -> str:
        text = with_unit(self.value, self.unit)
        return f"{text} ({self.interval})" if self.interval else text

    @property
    def exists(self) -> bool:
        return self.value != NOT_AVAILABLE


def known(value: float | None) -> bool:
    """Whether there is a finite number."""
    return value is not None and math.isfinite(value)


def plain(value: float, decimals: int) -> str:
    """A number with so many decimals (negative: rounded to tens, hundreds ...), grouped from five digits on."""
    rounded = round(value, decimals)
    text = f"{abs(rounded):.{max(decimals, 0)}f}"
    whole, point, rest = text.partition(".")
    if len(whole) >= 5:
        whole = f"{int(whole):,}".replace(",", THIN)
    negative = rounded < 0 and any(c in "123456789" for c in text)
    return f"{MINUS if negative else ''}{whole}{point}{rest}"


def decimals_of(uncertainty: float) -> int:
    """Decimals that show two digits of an uncertainty: 0.415 gives 2, 12 gives 0, 340 gives −1."""
    magnitude = math.floor(math.log10(uncertainty))
    # 0.0996 rounds to 0.10, whose two digits end one place earlier.
    if round(uncertainty / 10.0**magnitude, 1) >= 10:
        magnitude += 1
    return 1 - magnitude


def decimals_for(value: float, interval: Interval | None = None, digits: int = BARE_DIGITS) -> int:
    """Decimals for a figure: by its interval where it has one, else so that ``digits`` digits count."""
    half = 0.0 if interval is None else (interval[1] - interval[0]) / 2
    magnitude = math.floor(math.log10(abs(value))) if value else None
    if half > 0:
        decimals = decimals_of(half)
        return decimals if magnitude is None else min(decimals, MOST_DIGITS - 1 - magnitude)
    # Without an interval a number keeps its whole part.
    return 0 if magnitude is None else max(digits - 1 - magnitude, 0)


def figure(value: float | None, interval: Interval | None = None, unit: str = "", digits: int = BARE_DIGITS) -> Figure:
    """A figure with its interval, both to the same decimals."""
    if value is None or not math.isfinite(value):
        return Figure(NOT_AVAILABLE, "", "")
    if interval is not None and not (all(map(math.isfinite, interval)) and interval[1] > interval[0]):
        interval = None
    decimals = decimals_for(value, interval, digits)
    span = "" if interval is None else between(plain(interval[0], decimals), plain(interval[1], decimals))
    return Figure(plain(value, decimals), span, unit)


def between(low: str, high: str) -> str:
    """ "11.9 to 12.7": a dash would be read as a minus."""
    return f"{low} to {high}"


def volume(value_mm3: float | None, interval: Interval | None = None) -> Figure:
    """A volume in mm³ or, from 1000 mm³ on, in cm³."""
    if value_mm3 is None or abs(value_mm3) < CM3_FROM_MM3:
        return figure(value_mm3, interval, "mm³")
    scaled = None if interval is None else (interval[0] / 1000, interval[1] / 1000)
    return figure(value_mm3 / 1000, scaled, "cm³")


def percent(value: float | None, interval: Interval | None = None) -> Figure:
    """A figure that is already in per cent."""
    return figure(value, interval, "%")


def count(number: int) -> str:
    """A whole number, grouped."""
    return plain(number, 0)


def with_unit(text: str, unit: str) -> str:
    """Number and unit with a thin space; the degree sign stands close."""
    if not unit or text == NOT_AVAILABLE:
        return text
    return f"{text}{unit}" if unit == "°" else f"{text}{THIN}{unit}"


def trimmed(value: float, digits: int = 4) -> str:
    """A given (not measured) number such as a spacing: so many digits at most, no zeros at its end."""
    if value == 0:
        return "0"
    text = plain(value, max(digits - 1 - math.floor(math.log10(abs(value))), 0))
    return text.rstrip("0").rstrip(".") if "." in text else text
