"""Page "views": all rendered pictures on one page at one scale, then sections large, close-ups and projections."""

from __future__ import annotations

from collections.abc import Sequence

from tomofolio.render.view import View
from tomofolio.report.picture import Picture, PictureRow, level_scales
from tomofolio.report.setting import Setting
from tomofolio.report.style import mm
from tomofolio.report.text import head, page_head, para

# isort: split
from reportlab.platypus import CondPageBreak, Flowable

#: Highest rendered picture and highest section; two rows of sections fill a page.
RENDER_HEIGHT, SECTION_HEIGHT = 86 * mm, 90 * mm
#: Height of the page's head and of the head of a group, and the space after a row, in points.
PAGE_HEAD, GROUP_HEAD, ROW_AFTER = 62.0, 36.0, 9.0


def views_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    views = setting.case.views
    lead = "Drawn from the values of the scan; colours are chosen and are no real colours."
    parts: list[Flowable] = page_head("Views", lead)
    if not views:
        return [*parts, para("The preset asks for no views.")]
    rendered = [view for view in views if view.kind == "render"]
    if rendered:
        parts += rendered_rows(setting, rendered)
    sections = [view for view in views if view.kind == "section" and not view.id.startswith("void")]
    if sections:
        parts += _group(setting, "Sections", _rows(setting, sections, 2))
    parts += _last_groups(setting)
    return parts


def rendered_rows(setting: Setting, views: Sequence[View]) -> list[Flowable]:
    """All rendered pictures at one scale, two or three a row, whichever shows them larger on one page."""
    room = setting.sheet.text_height - PAGE_HEAD
    columns, scale = max(((n, _largest_scale(setting, views, n, room)) for n in (2, 3)), key=lambda found: found[1])
    pictures = [Picture(view, scale, setting.symbol) for view in views]
    gutter = setting.sheet.gutter
    return [PictureRow(pictures[n : n + columns], gutter, columns) for n in range(0, len(pictures), columns)]


def _largest_scale(setting: Setting, views: Sequence[View], columns: int, room: float) -> float:
    """Points per pixel at which the pictures fit into their columns, and all their rows into the room."""
    width = setting.sheet.column(columns)
    pixels, texts = 0.0, 0.0
    for first in range(0, len(views), columns):
        row = views[first : first + columns]
        pixels += max(view.pixels.shape[0] for view in row)
        texts += max(Picture(view, 0.0, setting.symbol).wrap(width, room)[1] for view in row) + ROW_AFTER
    scale = min(width / view.pixels.shape[1] for view in views)
    scale = min(scale, RENDER_HEIGHT / max(view.pixels.shape[0] for view in views))
    # At least a third of the largest scale: many rows then run on to the next page.
    return max(min(scale, (room - texts) / pixels), scale / 3)


def _rows(setting: Setting, views: Sequence[View], per_row: int) -> list[Flowable]:
    """So many pictures a row at one height; one that is left over has its texts at its right."""
    sheet = setting.sheet
    rows: list[Flowable] = []
    for first in range(0, len(views), per_row):
        row = views[first : first + per_row]
        scales = level_scales(row, sheet.text_width, SECTION_HEIGHT, sheet.gutter)
        alone = len(row) == 1
        pictures = [Picture(view, scale, setting.symbol, aside=alone) for view, scale in zip(row, scales, strict=True)]
        rows.append(PictureRow(pictures, sheet.gutter, 1 if alone else 0))
    return rows


def _group(setting: Setting, title: str, rows: list[Flowable]) -> list[Flowable]:
    """A head and its rows; a group that fits on one page is not torn apart."""
    whole = _height(setting, rows) + GROUP_HEAD
    first = _height(setting, rows[:1]) + GROUP_HEAD
    room = whole if whole <= setting.sheet.text_height else first
    return [CondPageBreak(room), *head(title, room=first), *rows]


def _last_groups(setting: Setting) -> list[Flowable]:
    """Close-ups of the largest void and projections: as large as lets both stand on one page."""
    views = setting.case.views
    groups = [
        ("Largest void", [view for view in views if view.kind == "section" and view.id.startswith("void")]),
        ("Projections", [view for view in views if view.kind == "projection"]),
    ]
    groups = [(title, chosen) for title, chosen in groups if chosen]
    made: list[list[Flowable]] = []
    for per_row in ((2, 2), (3, 2), (3, 3)):
        made = [_rows(setting, chosen, n) for (_, chosen), n in zip(groups, per_row[-len(groups) :], strict=False)]
        if sum(_height(setting, rows) + GROUP_HEAD for rows in made) <= setting.sheet.text_height:
            break
    parts: list[Flowable] = []
    for (title, _), rows in zip(groups, made, strict=True):
        parts += _group(setting, title, rows)
    return parts


def _height(setting: Setting, rows: Sequence[Flowable]) -> float:
    return sum(row.wrap(setting.sheet.text_width, 1e6)[1] + ROW_AFTER for row in rows)
