"""From a case to a PDF file: the pages that the preset wants, in its order."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import partial
from io import BytesIO
from pathlib import Path

from tomofolio.case import Case
from tomofolio.report.frame import furniture
from tomofolio.report.pages.cautions import cautions_page
from tomofolio.report.pages.method import method_page
from tomofolio.report.pages.ranges import ranges_page
from tomofolio.report.pages.scan import scan_page
from tomofolio.report.pages.summary import summary_page
from tomofolio.report.pages.views import views_page
from tomofolio.report.pages.voids import voids_page
from tomofolio.report.setting import Setting
from tomofolio.report.sheets import SheetCanvas

# isort: split
from reportlab.platypus import BaseDocTemplate, Flowable, Frame, PageBreak, PageTemplate

PAGES: Mapping[str, Callable[[Setting], list[Flowable]]] = {
    "summary": summary_page,
    "voids": voids_page,
    "views": views_page,
    "ranges": ranges_page,
    "scan": scan_page,
    "method": method_page,
    "cautions": cautions_page,
}


def write_report(case: Case, path: Path) -> None:
    """Set the report and write it to exactly this path. The same case gives the same bytes.

    Raises
    ------
    OSError : the file cannot be written.
    """
    path.write_bytes(report_bytes(case))


def report_bytes(case: Case) -> bytes:
    """The report as the bytes of a PDF file."""
    setting = Setting.of(case)
    sheet = setting.sheet
    story: list[Flowable] = []
    for name in case.preset.pages:
        if story:
            story.append(PageBreak())
        story += PAGES[name](setting)
    out = BytesIO()
    frame = Frame(
        sheet.left, sheet.bottom, sheet.text_width, sheet.text_height,
        leftPadding=0, rightPadding=0, topPadding=0, bottomPadding=0,
    )  # fmt: skip
    document = BaseDocTemplate(out, pagesize=(sheet.width, sheet.height), allowSplitting=1, invariant=1)
    document.addPageTemplates(PageTemplate("page", [frame]))
    canvas = partial(
        SheetCanvas,
        furniture=furniture(sheet, setting.running),
        title=setting.title,
        subject=f"Input {setting.running.short_hash}",
        created=case.provenance.created,
    )
    document.build(story, canvasmaker=canvas)
    return out.getvalue()
