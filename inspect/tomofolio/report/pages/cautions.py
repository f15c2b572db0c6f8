"""Page "cautions": the whole text, and the block for a signature."""

from __future__ import annotations

from tomofolio.report.cautions import cautions
from tomofolio.report.frame import review_state
from tomofolio.report.setting import Setting
from tomofolio.report.style import HAIR, INK, REGULAR, SEMIBOLD, SIZE_BODY, SIZE_SMALL, SOFT, WARM, mm
from tomofolio.report.text import beside, page_head, para, points

# isort: split
from reportlab.platypus import Flowable, KeepTogether, Spacer


class SignOff(Flowable):
    """Four lines to fill in by hand; name and qualification are set where the job sheet gives them."""

    LINES = ("Name", "Qualification, licence or certificate", "Date", "Signature")

    def __init__(self, name: str, qualification: str) -> None:
        super().__init__()
        self._given = (name, qualification, "", "")

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, 38 * mm
        return self.width, self.height

    def draw(self) -> None:
        canvas, gutter = self.canv, 8 * mm
        room = (self.width - gutter) / 2
        for n, (label, given) in enumerate(zip(self.LINES, self._given, strict=True)):
            x = (n % 2) * (room + gutter)
            y = self.height - 10 * mm - (n // 2) * 15 * mm
            canvas.setStrokeColor(INK)
            canvas.setLineWidth(0.5)
            canvas.line(x, y, x + room, y)
            canvas.setFont(REGULAR, SIZE_BODY)
            canvas.setFillColor(INK)
            canvas.drawString(x, y + 3, given)
            canvas.setFont(REGULAR, SIZE_SMALL)
            canvas.setFillColor(SOFT)
            canvas.drawString(x, y - 1.3 * SIZE_SMALL, label)
        canvas.setStrokeColor(HAIR)


def cautions_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    lead = "What this report is not, and what it cannot show. Read it before using any figure."
    parts: list[Flowable] = page_head("Cautions", lead)
    for caution in cautions():
        parts += beside(setting.sheet, caution.title, points(caution.points))
    parts.append(Spacer(1, 6))
    parts.append(KeepTogether(_review(setting)))
    return parts


def _review(setting: Setting) -> list[Flowable]:
    job = setting.case.job
    state = review_state(setting.reviewer)
    text = "By signing, the reviewer states to have checked this report against the original images, and takes "
    text += "responsibility for every conclusion drawn from it. The report itself draws none."
    parts: list[Flowable] = [
        para(state, SIZE_BODY, INK if setting.reviewer else WARM, SEMIBOLD, after=3),
        para(text, after=2),
        SignOff(setting.free_text(job.reviewer_name), setting.free_text(job.reviewer_qualification)),
        para("End of the report.", SIZE_SMALL, SOFT, after=0),
    ]
    return list(beside(setting.sheet, "Review", parts, room=60 * mm))
