"""The one typographic system: typeface, sizes, colours and the page grid.

Import this module before any other part of reportlab: it names the base typeface, without which reportlab writes
Helvetica, a font that is not embedded, into every file.
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from functools import cache
from importlib.resources import files

from reportlab import rl_config

REGULAR, SEMIBOLD = "FolioSans-Regular", "FolioSans-Semibold"

rl_config.canvas_basefontname = REGULAR
rl_config.defaultGraphicsFontName = REGULAR
rl_config.useA85 = 0

from reportlab.lib.colors import Color  # noqa: E402 - after the base typeface is named
from reportlab.lib.pagesizes import A4, LETTER  # noqa: E402
from reportlab.lib.units import mm  # noqa: E402
from reportlab.pdfbase import pdfmetrics  # noqa: E402
from reportlab.pdfbase.ttfonts import TTFont  # noqa: E402


def _load_fonts() -> None:
    """Register the typeface with reportlab, before the parts of it that look for their base typeface at import."""
    folder = files("tomofolio.report") / "fonts"
    for name in (REGULAR, SEMIBOLD):
        pdfmetrics.registerFont(TTFont(name, str(folder / f"{name}.ttf")))
    pdfmetrics.registerFontFamily(REGULAR, normal=REGULAR, bold=SEMIBOLD, italic=REGULAR, boldItalic=SEMIBOLD)


_load_fonts()

#: Sizes in points, smallest to largest; the leading of a size is `leading(size)`.
SIZE_MARK, SIZE_SMALL, SIZE_TABLE, SIZE_BODY, SIZE_HEAD, SIZE_FIGURE, SIZE_TITLE = 6.5, 7.5, 8.0, 9.0, 11.0, 17.0, 21.0

#: Spaces at which no line may break: between a number and its unit, between an axis and its value.
CLOSE = re.compile(
    r"(?<=\d) (?=(?:%|[cmµ]m[²³]?|GV|HU|kV|mA|mAs|ms|mGy|g|g/cm³|voxels)(?!\w))"
    r"|(?<=\b[xyzXYZ]) (?=[=−\d])|(?<==) (?=[−\d])"
)

#: Stands for a character that the typeface lacks.
LACKING = "□"


def leading(size: float) -> float:
    """Distance of the lines of a size, in points."""
    return round(size * (1.15 if size > SIZE_HEAD else 1.36), 1)


def rgb(red: int, green: int, blue: int) -> Color:
    """A colour from sRGB 0..255."""
    return Color(red / 255, green / 255, blue / 255)


# Quiet colours whose lightness alone keeps them apart in a grey print.
INK = rgb(28, 34, 38)
SOFT = rgb(88, 98, 104)
HAIR = rgb(206, 211, 213)
PAPER = rgb(255, 255, 255)
ACCENT = rgb(44, 101, 123)
WARM = rgb(164, 84, 24)


@dataclass(frozen=True)
class Sheet:
    """The page grid, in points: margins, the width of the text, and the narrow column for side heads."""

    width: float
    height: float
    left: float = 18 * mm
    right: float = 18 * mm
    top: float = 21 * mm
    bottom: float = 22 * mm
    gutter: float = 6 * mm
    side: float = 34 * mm

    @property
    def text_width(self) -> float:
        return self.width - self.left - self.right

    @property
    def text_height(self) -> float:
        return self.height - self.top - self.bottom

    def column(self, count: int) -> float:
        """Width of one of ``count`` equal columns with gutters between them."""
        return (self.text_width - (count - 1) * self.gutter) / count


def sheet(page_size: str) -> Sheet:
    """The grid on ``"A4"`` or ``"Letter"``."""
    width, height = {"A4": A4, "Letter": LETTER}[page_size]
    return Sheet(width, height)


def forget_document(document: object) -> None:
    """Let go of the glyph lists that the fonts keep for a finished document."""
    for name in (REGULAR, SEMIBOLD):
        pdfmetrics.getFont(name).state.pop(document, None)


def width_of(text: str, size: float, font: str = REGULAR) -> float:
    """Width of a text in points."""
    return float(pdfmetrics.stringWidth(text, font, size))


def fitting(text: str, size: float, room: float, font: str = REGULAR) -> int:
    """How many characters of a text fit into the room."""
    used = 0.0
    for n, character in enumerate(text):
        used += width_of(character, size, font)
        if used > room:
            return n
    return len(text)


@cache
def _glyphs() -> frozenset[int]:
    return frozenset(pdfmetrics.getFont(REGULAR).face.charToGlyph)


def printable(text: str) -> str:
    """The text with thin spaces before units, spaces for control characters, boxes for what the typeface lacks."""
    glyphs = _glyphs()
    text = CLOSE.sub("\u2009", text)
    composed = unicodedata.normalize("NFC", text)
    spaced = "".join(" " if unicodedata.category(c) in ("Cc", "Cf", "Zl", "Zp") else c for c in composed)
    return "".join(c if ord(c) in glyphs else LACKING for c in spaced)
