"""Facts on a grid: a quiet label, its value under it, and a note; and the row of large figures on page one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from tomofolio.report.frame import clipped
from tomofolio.report.numbers import NOT_AVAILABLE, Figure
from tomofolio.report.style import (
    HAIR,
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_BODY,
    SIZE_FIGURE,
    SIZE_HEAD,
    SIZE_SMALL,
    SOFT,
    leading,
    mm,
    printable,
    width_of,
)
from tomofolio.report.text import wrapped

# isort: split
from reportlab.platypus import Flowable


@dataclass(frozen=True)
class Fact:
    """A label, a value and a note; all plain text."""

    label: str
    value: str
    note: str = ""


def figure_fact(label: str, figure: Figure, reason: str = "", note: str = "") -> Fact:
    """A figure with its interval as the note; one that does not exist says why."""
    if not figure.exists:
        return Fact(label, NOT_AVAILABLE, reason)
    if figure.interval:
        interval = f"95 %: {figure.interval}"
        note = f"{interval}; {note}" if note else interval
    return Fact(label, str(Figure(figure.value, "", figure.unit)), note)


class FactGrid(Flowable):
    """Facts in rows of so many columns; it splits between rows.

    Parameters
    ----------
    facts : in reading order, along the rows.
    columns : how many side by side.
    gutter : between two columns, in points.
    most_lines : a longer value is cut, with an ellipsis.
    """

    def __init__(
        self,
        facts: Sequence[Fact],
        columns: int = 3,
        gutter: float = 5 * mm,
        size: float = SIZE_BODY,
        most_lines: int = 40,
    ) -> None:
        super().__init__()
        self._most_lines = most_lines
        self._facts = [Fact(printable(f.label), printable(f.value), printable(f.note)) for f in facts]
        self._columns, self._gutter, self._size = columns, gutter, size
        self.spaceAfter = 3

    def _rows(self, width: float) -> list[tuple[float, list[tuple[list[str], list[str], list[str]]]]]:
        """Height and the wrapped texts of every row."""
        room = (width - self._gutter * (self._columns - 1)) / self._columns
        rows = []
        for first in range(0, len(self._facts), self._columns):
            cells = [
                (
                    wrapped(fact.label, SIZE_SMALL, room),
                    self._cut(wrapped(fact.value, self._size, room), room),
                    wrapped(fact.note, SIZE_SMALL, room) if fact.note else [],
                )
                for fact in self._facts[first : first + self._columns]
            ]
            height = max(
                (len(label) + len(note)) * leading(SIZE_SMALL) + len(value) * leading(self._size)
                for label, value, note in cells
            )
            rows.append((height + 5, cells))
        return rows

    def _cut(self, lines: list[str], room: float) -> list[str]:
        if len(lines) <= self._most_lines:
            return lines
        rest = " ".join(lines[self._most_lines - 1 :])
        return [*lines[: self._most_lines - 1], clipped(rest, self._size, room)]

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, sum(row for row, _ in self._rows(width))
        return self.width, self.height

    def split(self, width: float, height: float) -> list[Flowable]:
        used, fits = 0.0, 0
        for row, _ in self._rows(width):
            if used + row > height:
                break
            used, fits = used + row, fits + 1
        if not fits:
            return []
        cut = fits * self._columns
        parts = (self._facts[:cut], self._facts[cut:])
        return [FactGrid(part, self._columns, self._gutter, self._size, self._most_lines) for part in parts if part]

    def draw(self) -> None:
        canvas, step = self.canv, (self.width + self._gutter) / self._columns
        top = self.height
        for row, cells in self._rows(self.width):
            for n, (label, value, note) in enumerate(cells):
                y = top
                for lines, size, colour in (
                    (label, SIZE_SMALL, SOFT),
                    (value, self._size, INK),
                    (note, SIZE_SMALL, SOFT),
                ):
                    canvas.setFont(REGULAR, size)
                    canvas.setFillColor(colour)
                    for line in lines:
                        canvas.drawString(n * step, y - size, line)
                        y -= leading(size)
            top -= row


@dataclass(frozen=True)
class Tile:
    """One large figure: label above, interval and note under it."""

    label: str
    figure: Figure
    note: str = ""


class Tiles(Flowable):
    """Large figures side by side, parted by hairlines."""

    def __init__(self, tiles: Sequence[Tile]) -> None:
        super().__init__()
        self._tiles = [Tile(printable(t.label), t.figure, printable(t.note)) for t in tiles]
        self.spaceAfter = 8

    def _room(self, width: float) -> float:
        return width / len(self._tiles) - 5 * mm

    def _under(self, tile: Tile, room: float) -> list[str]:
        lines = wrapped(f"95 %: {tile.figure.interval}", SIZE_SMALL, room) if tile.figure.interval else []
        return lines + (wrapped(tile.note, SIZE_SMALL, room)[:3] if tile.note else [])

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        room = self._room(width)
        most = max(len(self._under(tile, room)) for tile in self._tiles)
        self.width = width
        self.height = leading(SIZE_SMALL) + 1.25 * SIZE_FIGURE + max(most, 1) * leading(SIZE_SMALL) + 3
        return self.width, self.height

    def draw(self) -> None:
        canvas, step = self.canv, self.width / len(self._tiles)
        room = self._room(self.width)
        for n, tile in enumerate(self._tiles):
            x, y = n * step, self.height - SIZE_SMALL
            if n:
                canvas.setStrokeColor(HAIR)
                canvas.setLineWidth(0.5)
                canvas.line(x - 2.5 * mm, 1, x - 2.5 * mm, self.height)
            canvas.setFont(REGULAR, SIZE_SMALL)
            canvas.setFillColor(SOFT)
            canvas.drawString(x, y, clipped(tile.label, SIZE_SMALL, step - 3 * mm))
            y -= 1.25 * SIZE_FIGURE
            self._draw_figure(tile.figure, x, y, room)
            canvas.setFont(REGULAR, SIZE_SMALL)
            canvas.setFillColor(SOFT)
            for line in self._under(tile, room):
                y -= leading(SIZE_SMALL)
                canvas.drawString(x, y, line)

    def _draw_figure(self, figure: Figure, x: float, y: float, room: float) -> None:
        canvas = self.canv
        canvas.setFillColor(INK)
        if not figure.exists:
            canvas.setFont(SEMIBOLD, SIZE_HEAD)
            canvas.drawString(x, y, figure.value)
            return
        unit = width_of(figure.unit, SIZE_HEAD) + 3 if figure.unit else 0.0
        size = min(SIZE_FIGURE, SIZE_FIGURE * (room - unit) / width_of(figure.value, SIZE_FIGURE, SEMIBOLD))
        canvas.setFont(SEMIBOLD, size)
        canvas.drawString(x, y, figure.value)
        if figure.unit:
            canvas.setFont(REGULAR, SIZE_HEAD)
            canvas.drawString(x + width_of(figure.value, size, SEMIBOLD) + 3, y, figure.unit)


class Columns(Flowable):
    """Blocks side by side; it does not split, so it is for a few lines only."""

    def __init__(self, blocks: Sequence[Sequence[Flowable]], gutter: float, shares: Sequence[float] = ()) -> None:
        super().__init__()
        self._blocks, self._gutter = blocks, gutter
        self._shares = tuple(shares) or (1.0,) * len(blocks)

    def _widths(self, width: float) -> list[float]:
        free = width - self._gutter * (len(self._blocks) - 1)
        return [free * share / sum(self._shares) for share in self._shares]

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width = width
        self.height = max(
            sum(part.wrap(w, 1e6)[1] + part.getSpaceAfter() for part in block)
            for block, w in zip(self._blocks, self._widths(width), strict=True)
        )
        return self.width, self.height

    def draw(self) -> None:
        x = 0.0
        for block, width in zip(self._blocks, self._widths(self.width), strict=True):
            y = self.height
            for part in block:
                y -= part.wrap(width, 1e6)[1]
                part.drawOn(self.canv, x, y)
                y -= part.getSpaceAfter()
            x += width + self._gutter
