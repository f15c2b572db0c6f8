"""Tables of figures: strings set directly on the page, every column aligned on the decimal point.

A table of thousands of rows as reportlab paragraphs takes seconds; as strings it takes a fraction of one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from tomofolio.report.frame import clipped
from tomofolio.report.style import (
    HAIR,
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_TABLE,
    SOFT,
    Color,
    leading,
    printable,
    width_of,
)

# isort: split
from reportlab.platypus import Flowable

#: Space between two columns, in points.
GAP = 9.0


@dataclass(frozen=True)
class Column:
    """One column.

    ``title`` may hold line breaks; ``unit`` stands under it. ``align`` "point" lines numbers up on the decimal point,
    "left" is for texts. ``share`` says how much of the width that is left over the column takes. ``most`` limits the
    width of a text column in points.
    """

    title: str
    unit: str = ""
    align: Literal["point", "left", "swatch"] = "point"
    share: float = 1.0
    most: float = 0.0


@dataclass(frozen=True)
class Swatch:
    """A cell that shows a colour."""

    colour: Color | None


Cell = str | Swatch
Rows = Sequence[Sequence[Cell]]


def before_point(text: str) -> str:
    """The part of a number up to its decimal point; a text that is no number counts as a whole."""
    return text.partition(".")[0] if any(c.isdigit() for c in text) else text


@dataclass(frozen=True)
class Measured:
    """Width of a column and, for numbers, how far left of its point the column reaches."""

    width: float
    ahead: float


def measure_column(column: Column, cells: Sequence[Cell], size: float) -> Measured:
    """How wide a column must be."""
    lines = [*column.title.split("\n"), column.unit]
    head = max(width_of(line, size - 0.5, SEMIBOLD) for line in lines)
    texts = [cell for cell in cells if isinstance(cell, str)]
    if column.align == "swatch":
        return Measured(size, 0.0)
    if column.align == "left":
        widest = max((width_of(text, size) for text in texts), default=0.0)
        return Measured(max(head, min(widest, column.most) if column.most else widest), 0.0)
    # Digits are all equally wide in this typeface, so the longest text is the widest but for its punctuation.
    ahead = max((width_of(before_point(text), size) for text in texts), default=0.0)
    behind = max((width_of(text, size) - width_of(before_point(text), size) for text in texts), default=0.0)
    return Measured(max(head, ahead + behind), max(ahead, head - behind))


class DataTable(Flowable):
    """A table that reads along its rows: hairlines between them, no vertical rules, head repeated on every page.

    Parameters
    ----------
    columns, rows : what to print. ``rows`` hold one cell a column.
    size : of the figures, in points.
    emphasis : rows (by number) that are set semibold.
    """

    def __init__(
        self,
        columns: Sequence[Column],
        rows: Rows,
        size: float = SIZE_TABLE,
        emphasis: Sequence[int] = (),
        _measured: tuple[Measured, ...] | None = None,
    ) -> None:
        super().__init__()
        self._columns, self._size, self._emphasis = tuple(columns), size, frozenset(emphasis)
        self._rows = (
            [[printable(c) if isinstance(c, str) else c for c in row] for row in rows] if not _measured else rows
        )
        self._measured = _measured or tuple(
            measure_column(column, [row[n] for row in self._rows], size) for n, column in enumerate(columns)
        )
        self._titles = max(column.title.count("\n") + 1 for column in columns)
        self._has_units = any(column.unit for column in columns)
        self._row = round(leading(size) * 1.16, 2)
        self._line = leading(size - 0.5)
        self.spaceBefore, self.spaceAfter = 2, 6

    @property
    def natural_width(self) -> float:
        """Width without any space left over."""
        return sum(m.width for m in self._measured) + GAP * (len(self._columns) - 1)

    @property
    def _head(self) -> float:
        return (self._titles + (1 if self._has_units else 0)) * self._line + 4

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width = width
        self.height = self._head + len(self._rows) * self._row
        return self.width, self.height

    def split(self, width: float, height: float) -> list[Flowable]:
        fits = int((height - self._head) / self._row)
        if fits >= len(self._rows):
            return [self]
        if fits < min(3, len(self._rows)):
            return []
        # A last page with one or two rows looks lost: leave it at least three.
        fits = max(min(fits, len(self._rows) - 3), 3)
        return [self._part(0, fits), self._part(fits, len(self._rows))]

    def _part(self, first: int, last: int) -> DataTable:
        emphasis = [n - first for n in self._emphasis if first <= n < last]
        return DataTable(self._columns, self._rows[first:last], self._size, emphasis, self._measured)

    def _lefts(self) -> list[float]:
        """Left ends of the columns; the width left over is shared out."""
        spare = max(self.width - self.natural_width, 0.0)
        squeeze = min(1.0, self.width / self.natural_width)
        shares = sum(column.share for column in self._columns[:-1]) or 1.0
        lefts, x = [], 0.0
        for column, measured in zip(self._columns, self._measured, strict=True):
            lefts.append(x * squeeze)
            x += measured.width + GAP + spare * column.share / shares
        return lefts

    def draw(self) -> None:
        canvas, size = self.canv, self._size
        lefts = self._lefts()
        self._draw_head(lefts)
        y = self.height - self._head
        canvas.setStrokeColor(HAIR)
        canvas.setLineWidth(0.35)
        for n in range(1, len(self._rows) + 1):
            canvas.line(0, y - n * self._row, self.width, y - n * self._row)
        canvas.setFillColor(INK)
        canvas.setFont(REGULAR, size)
        for n, row in enumerate(self._rows):
            base = y - (n + 0.5) * self._row - 0.34 * size
            font = SEMIBOLD if n in self._emphasis else REGULAR
            canvas.setFont(font, size)
            for column, measured, left, cell in zip(self._columns, self._measured, lefts, row, strict=True):
                if isinstance(cell, Swatch):
                    self._draw_swatch(cell, left, base)
                elif column.align == "left":
                    canvas.drawString(left, base, clipped(cell, size, measured.width + 1, font))
                elif cell:
                    canvas.drawString(left + measured.ahead - width_of(before_point(cell), size, font), base, cell)

    def _draw_head(self, lefts: Sequence[float]) -> None:
        canvas = self.canv
        for column, measured, left in zip(self._columns, self._measured, lefts, strict=True):
            lines = column.title.split("\n")
            y = self.height - self._line * (self._titles - len(lines)) - self._size
            for n, line in enumerate([*lines, *([column.unit] if self._has_units else [])]):
                is_unit = n == len(lines)
                font = REGULAR if is_unit else SEMIBOLD
                canvas.setFont(font, self._size - 0.5)
                canvas.setFillColor(SOFT if is_unit else INK)
                canvas.drawString(left + self._indent(column, measured, line, font), y - n * self._line, line)
        canvas.setStrokeColor(INK)
        canvas.setLineWidth(0.6)
        canvas.line(0, self.height - self._head, self.width, self.height - self._head)

    def _indent(self, column: Column, measured: Measured, line: str, font: str) -> float:
        """Heads of figures end where the figures end."""
        if column.align != "point":
            return 0.0
        return max(measured.width - width_of(line, self._size - 0.5, font), 0.0)

    def _draw_swatch(self, cell: Swatch, left: float, base: float) -> None:
        canvas, side = self.canv, self._size * 0.8
        canvas.saveState()
        if cell.colour is None:
            canvas.setStrokeColor(SOFT)
            canvas.setLineWidth(0.5)
            canvas.rect(left, base - 0.5, side, side, stroke=1, fill=0)
        else:
            canvas.setFillColor(cell.colour)
            canvas.rect(left, base - 0.5, side, side, stroke=0, fill=1)
        canvas.restoreState()
