"""Remarks as a list that shows by shape as well as by colour how much each weighs."""

from __future__ import annotations

from collections.abc import Sequence

from tomofolio.remarks import Remark, Severity
from tomofolio.report.style import INK, SEMIBOLD, SIZE_BODY, SOFT, WARM, Color, mm
from tomofolio.report.text import para

# isort: split
from reportlab.platypus import Flowable, Paragraph

#: Title over the remarks of one weight.
TITLES = {
    Severity.STOP: "Stop: figures left out",
    Severity.CAUTION: "Cautions",
    Severity.NOTE: "Notes",
}


class RemarkLine(Flowable):
    """One remark: a mark, the sentence, and (for the auditor) its code."""

    def __init__(self, remark: Remark, size: float = SIZE_BODY, with_code: bool = True) -> None:
        super().__init__()
        self._remark, self._size = remark, size
        code = f"  [{remark.code}]" if with_code else ""
        self._text = para(f"{remark.text}{code}", size, after=0)
        self.spaceAfter = 3.5

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width = width
        self.height = self._text.wrap(width - 4 * mm, height)[1]
        return self.width, self.height

    def draw(self) -> None:
        draw_weight(self.canv, self._remark.severity, 0, self.height - 0.86 * self._size, 0.62 * self._size)
        self._text.drawOn(self.canv, 4 * mm, 0)


def draw_weight(canvas: Flowable, severity: Severity, x: float, y: float, side: float) -> None:
    """A filled square for stop, a filled triangle for caution, an open circle for a note."""
    canvas.saveState()
    colour: Color = WARM if severity is not Severity.NOTE else SOFT
    canvas.setFillColor(colour)
    canvas.setStrokeColor(colour)
    canvas.setLineWidth(0.8)
    if severity is Severity.STOP:
        canvas.rect(x, y, side, side, stroke=0, fill=1)
    elif severity is Severity.CAUTION:
        path = canvas.beginPath()
        path.moveTo(x, y)
        path.lineTo(x + side, y)
        path.lineTo(x + side / 2, y + side)
        path.close()
        canvas.drawPath(path, stroke=0, fill=1)
    else:
        canvas.circle(x + side / 2, y + side / 2, 0.36 * side, stroke=1, fill=0)
    canvas.restoreState()


def grouped(remarks: Sequence[Remark]) -> list[Flowable]:
    """All remarks under a title for each weight."""
    parts: list[Flowable] = []
    for severity, title in TITLES.items():
        chosen = [remark for remark in remarks if remark.severity is severity]
        if chosen:
            head: Paragraph = para(title, SIZE_BODY, INK, SEMIBOLD, after=3)
            head.keepWithNext = 1
            parts += [head, *(RemarkLine(remark) for remark in chosen)]
    return parts or [para("None of the stages has a remark.")]
