"""Flowing text: paragraphs, heads, side heads, points and remarks, all from plain strings."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from functools import cache
from xml.sax.saxutils import escape

from tomofolio.report.style import (
    HAIR,
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_BODY,
    SIZE_HEAD,
    SIZE_SMALL,
    SIZE_TITLE,
    SOFT,
    Color,
    Sheet,
    fitting,
    leading,
    mm,
    printable,
    width_of,
)

# isort: split
from reportlab.lib.styles import ParagraphStyle
from reportlab.platypus import CondPageBreak, Flowable, Paragraph, Spacer

#: reportlab breaks lines at a thin space; at this one, which the typeface draws nearly as narrow, it does not.
NO_BREAK = "\u00a0"


@cache
def text_style(size: float = SIZE_BODY, colour: Color = INK, font: str = REGULAR, after: float = 0.0) -> ParagraphStyle:
    """A paragraph style of the system."""
    return ParagraphStyle(
        "text",
        fontName=font,
        fontSize=size,
        leading=leading(size),
        textColor=colour,
        spaceAfter=after,
        allowWidows=0,
        allowOrphans=0,
        splitLongWords=1,
    )


def markup(text: str) -> str:
    """A plain string, with ``**semibold**`` parts, as reportlab reads it."""
    safe = escape(printable(text).replace("\u2009", NO_BREAK).replace("\u202f", NO_BREAK))
    return re.sub(r"\*\*(.+?)\*\*", r"<b>\1</b>", safe)


def para(text: str, size: float = SIZE_BODY, colour: Color = INK, font: str = REGULAR, after: float = 4.0) -> Paragraph:
    """One paragraph."""
    return Paragraph(markup(text), text_style(size, colour, font, after))


def small(text: str, after: float = 3.0) -> Paragraph:
    """A quiet paragraph: notes under tables."""
    return para(text, SIZE_SMALL, SOFT, after=after)


class OutlineMark(Flowable):
    """Puts the page on which it lands into the document's outline."""

    _ZEROSIZE = True  # reportlab's sign for a flowable without extent

    def __init__(self, title: str, level: int = 0) -> None:
        super().__init__()
        self._title, self._level = title, level
        self.width = self.height = 0
        self.keepWithNext = 1

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        return 0, 0

    def draw(self) -> None:
        self.canv.note_outline(self._title, self._level)


class Rule(Flowable):
    """A hairline over the full width, with space before and after."""

    def __init__(self, before: float = 0.0, after: float = 4.0, colour: Color = HAIR, weight: float = 0.5) -> None:
        super().__init__()
        self.spaceBefore, self.spaceAfter = before, after
        self._colour, self._weight = colour, weight
        self.keepWithNext = 1

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, self._weight
        return self.width, self.height

    def draw(self) -> None:
        self.canv.setStrokeColor(self._colour)
        self.canv.setLineWidth(self._weight)
        self.canv.line(0, 0, self.width, 0)


def page_head(title: str, lead: str = "") -> list[Flowable]:
    """The head of a section that begins a page."""
    parts: list[Flowable] = [OutlineMark(title), para(title, SIZE_TITLE, INK, SEMIBOLD, after=3)]
    if lead:
        parts.append(para(lead, SIZE_BODY + 0.5, SOFT, after=9))
    return parts


def head(title: str, room: float = 30 * mm) -> list[Flowable]:
    """A head over the full width; it goes to the next page when less than ``room`` is left under it."""
    return [
        CondPageBreak(room),
        Spacer(1, 7),
        Rule(after=3.5),
        para(title, SIZE_HEAD, INK, SEMIBOLD, after=4),
    ]


class SideHead(Flowable):
    """A head in the narrow column at the left; it takes no height, the text beside it begins on its line."""

    _ZEROSIZE = True

    def __init__(self, title: str, width: float) -> None:
        super().__init__()
        self._title, self._width = printable(title), width
        self.width = self.height = 0
        self.keepWithNext = 1

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        return 0, 0

    def draw(self) -> None:
        self.canv.setFillColor(INK)
        self.canv.setFont(SEMIBOLD, SIZE_BODY)
        for n, line in enumerate(wrapped(self._title, SIZE_BODY, self._width, SEMIBOLD)):
            self.canv.drawString(0, -SIZE_BODY - n * leading(SIZE_BODY), line)


def wrapped(text: str, size: float, room: float, font: str = REGULAR) -> list[str]:
    """Lines of a short text, broken at ordinary spaces; a word that is too wide is broken anywhere."""
    lines: list[str] = []
    line = ""
    for word in text.split(" "):
        while width_of(word, size, font) > room and len(word) > 1:
            if line:
                lines.append(line)
                line = ""
            cut = max(fitting(word, size, room, font), 1)
            lines.append(word[:cut])
            word = word[cut:]
        longer = f"{line} {word}".strip() if line else word
        if line and width_of(longer, size, font) > room:
            lines.append(line)
            line = word
        else:
            line = longer
    return [*lines, line] if line else lines


class Indented(Flowable):
    """Another flowable, further to the right. (reportlab's own indenter gives the full width to what it splits.)"""

    def __init__(self, inner: Flowable, left: float) -> None:
        super().__init__()
        self._inner, self._left = inner, left
        self.spaceBefore, self.spaceAfter = inner.getSpaceBefore(), inner.getSpaceAfter()
        self.keepWithNext = inner.getKeepWithNext()

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        _, self.height = self._inner.wrap(width - self._left, height)
        self.width = width
        return self.width, self.height

    def split(self, width: float, height: float) -> list[Flowable]:
        return [Indented(part, self._left) for part in self._inner.splitOn(self.canv, width - self._left, height)]

    def draw(self) -> None:
        self._inner.drawOn(self.canv, self._left, 0)


def beside(sheet: Sheet, title: str, parts: Iterable[Flowable], room: float = 18 * mm) -> list[Flowable]:
    """A block of text with its head in the narrow column at the left, under a hairline."""
    indented = [Indented(part, sheet.side) for part in parts]
    return [CondPageBreak(room), Rule(before=5, after=4), SideHead(title, sheet.side - 4 * mm), *indented]


def points(texts: Sequence[str], size: float = SIZE_BODY) -> list[Flowable]:
    """A list, one short dash a point."""
    style = ParagraphStyle(
        "point", parent=text_style(size), leftIndent=11, bulletIndent=0, bulletFontName=REGULAR, spaceAfter=3
    )
    return [Paragraph(markup(text), style, bulletText="–") for text in texts]
