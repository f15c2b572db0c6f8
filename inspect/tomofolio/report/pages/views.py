"""Page "views": rendered pictures two a row at one scale, sections and projections as large as fits."""

from __future__ import annotations

from collections.abc import Sequence

from tomofolio.render.view import View
from tomofolio.report.picture import Picture, PictureRow, common_scale
from tomofolio.report.setting import Setting
from tomofolio.report.style import mm
from tomofolio.report.text import head, page_head, para

# isort: split
from reportlab.platypus import Flowable

#: Height of a rendered picture: three rows of them fill a page.
RENDER_HEIGHT = 57 * mm
#: Height of a section or projection: two rows of them fill a page.
SECTION_HEIGHT = 92 * mm
#: A section this many times wider than high gets a row of its own.
WIDE = 1.3


def views_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    views, sheet = setting.case.views, setting.sheet
    lead = "Drawn from the values of the scan; colours are chosen and are no real colours."
    parts: list[Flowable] = page_head("Views", lead)
    if not views:
        return [*parts, para("The preset asks for no views.")]
    rendered = [view for view in views if view.kind == "render"]
    if rendered:
        scale = common_scale(rendered, sheet.column(2), RENDER_HEIGHT)
        pictures = [Picture(view, scale, setting.symbol) for view in rendered]
        parts += _pairs(pictures, sheet.gutter)
    for title, kind in (("Sections", "section"), ("Projections", "projection")):
        chosen = [view for view in views if view.kind == kind]
        if chosen:
            parts += head(title, room=90 * mm) if parts[2:] else []
            parts += _large(setting, chosen)
    return parts


def _pairs(pictures: Sequence[Picture], gutter: float) -> list[Flowable]:
    return [PictureRow(pictures[n : n + 2], 2, gutter) for n in range(0, len(pictures), 2)]


def _large(setting: Setting, views: Sequence[View]) -> list[Flowable]:
    """Wide pictures over the whole width, the others two a row, in their order as far as that goes."""
    sheet = setting.sheet
    rows: list[Flowable] = []
    waiting: list[Picture] = []
    for view in views:
        if view.pixels.shape[1] > WIDE * view.pixels.shape[0]:
            rows += _pairs(waiting, sheet.gutter)
            waiting = []
            scale = common_scale([view], sheet.text_width, SECTION_HEIGHT)
            rows.append(PictureRow([Picture(view, scale, setting.symbol, aside=True)], 1, sheet.gutter))
        else:
            scale = common_scale([view], sheet.column(2), SECTION_HEIGHT)
            waiting.append(Picture(view, scale, setting.symbol))
    return rows + _pairs(waiting, sheet.gutter)
