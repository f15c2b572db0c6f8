"""What stands on every page: title, input, page number, that this is no verdict, and who has reviewed it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from tomofolio.report.cautions import DENIAL
from tomofolio.report.style import (
    HAIR,
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_SMALL,
    SOFT,
    WARM,
    Sheet,
    fitting,
    mm,
    width_of,
)

# isort: split
from reportlab.pdfgen.canvas import Canvas

NOT_REVIEWED = "Not reviewed: no one has reviewed this report."

#: Digits of the input's hash on every page.
SHORT_HASH = 12


@dataclass(frozen=True)
class Running:
    """The texts of head and foot. ``reviewer`` is "" until one is named."""

    title: str
    number: str
    short_hash: str
    reviewer: str


def review_state(reviewer: str) -> str:
    """The sentence about the review. A named reviewer has not signed yet, and the sentence says so."""
    return f"Reviewer named: {reviewer}. Not valid without signature." if reviewer else NOT_REVIEWED


def furniture(sheet: Sheet, running: Running) -> Callable[[Canvas, int, int], None]:
    """A function that draws head and foot of one page."""
    left, right = sheet.left, sheet.width - sheet.right
    head, foot = sheet.height - 12.5 * mm, 13.5 * mm
    line = SIZE_SMALL * 1.4

    def draw(canvas: Canvas, page: int, pages: int) -> None:
        canvas.saveState()
        canvas.setStrokeColor(HAIR)
        canvas.setLineWidth(0.5)
        canvas.line(left, head - 2.6 * mm, right, head - 2.6 * mm)
        canvas.line(left, foot + 3.6 * mm, right, foot + 3.6 * mm)

        identifier = f"Input {running.short_hash}"
        canvas.setFont(REGULAR, SIZE_SMALL)
        canvas.setFillColor(SOFT)
        canvas.drawRightString(right, head, identifier)
        room = right - left - width_of(identifier, SIZE_SMALL) - 6 * mm
        canvas.setFillColor(INK)
        canvas.setFont(SEMIBOLD, SIZE_SMALL)
        number = f"   {running.number}" if running.number else ""
        number = clipped(number, SIZE_SMALL, room / 2)
        title = clipped(running.title, SIZE_SMALL, room - width_of(number, SIZE_SMALL), SEMIBOLD)
        canvas.drawString(left, head, title)
        if number:
            canvas.setFont(REGULAR, SIZE_SMALL)
            canvas.setFillColor(SOFT)
            canvas.drawString(left + width_of(title, SIZE_SMALL, SEMIBOLD), head, number)

        canvas.setFont(REGULAR, SIZE_SMALL)
        canvas.setFillColor(SOFT)
        folio = f"page {page} of {pages}"
        canvas.drawString(left, foot, DENIAL)
        canvas.drawRightString(right, foot, folio)
        canvas.setFont(SEMIBOLD, SIZE_SMALL)
        canvas.setFillColor(INK if running.reviewer else WARM)
        state = review_state(running.reviewer)
        canvas.drawString(left, foot - line, clipped(state, SIZE_SMALL, right - left, SEMIBOLD))
        canvas.restoreState()

    return draw


def clipped(text: str, size: float, room: float, font: str = REGULAR) -> str:
    """The text, shortened with an ellipsis where it is wider than the room."""
    if width_of(text, size, font) <= room:
        return text
    text = text[: fitting(text, size, room - width_of("…", size, font), font)].rstrip()
    return f"{text}…" if text else ""
