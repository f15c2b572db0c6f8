"""Page "summary": the page that answers alone."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from tomofolio.render.view import Stroke, View
from tomofolio.report.facts import Columns, Fact, FactGrid, Tile, Tiles, figure_fact
from tomofolio.report.frame import review_state
from tomofolio.report.numbers import NOT_AVAILABLE, Figure, count, figure, known, percent, trimmed, volume
from tomofolio.report.pages.ranges import label_notes
from tomofolio.report.pages.scan import covered_mm, millimetres
from tomofolio.report.picture import Picture, PictureRow, level_scales
from tomofolio.report.range_tables import short_table
from tomofolio.report.remark_list import RemarkLine
from tomofolio.report.setting import Setting
from tomofolio.report.style import (
    INK,
    REGULAR,
    SEMIBOLD,
    SIZE_BODY,
    SIZE_HEAD,
    SIZE_SMALL,
    SIZE_TITLE,
    SOFT,
    WARM,
    mm,
)
from tomofolio.report.text import OutlineMark, Rule, para
from tomofolio.report.words import basis_sentence, values_name
from tomofolio.volume import Kind

# isort: split
from reportlab.platypus import Flowable, Spacer

#: Height of the pictures on page one: never less or more, and from where no remark gives way to them.
SIZE_NOTE = SIZE_SMALL + 0.5
LEAST_PICTURE, GOOD_PICTURE, MOST_PICTURE = 30 * mm, 48 * mm, 84 * mm
#: Title under the pictures and the space after them, in points.
PICTURE_TEXT = 26.0
#: Labels under which the header's name of the item stands.
NAMES = ("Component name", "Patient name")
#: Remarks shown on page one at most, heaviest first.
MOST_REMARKS = 6


class HandLine(Flowable):
    """A label and a line to write on, for what must not be printed."""

    def __init__(self, label: str) -> None:
        super().__init__()
        self._label = label
        self.spaceAfter = 7

    def wrap(self, width: float, height: float) -> tuple[float, float]:
        self.width, self.height = width, 34.0
        return self.width, self.height

    def draw(self) -> None:
        canvas = self.canv
        canvas.setStrokeColor(INK)
        canvas.setLineWidth(0.5)
        canvas.line(0, 8, 92 * mm, 8)
        canvas.setFont(REGULAR, SIZE_SMALL)
        canvas.setFillColor(SOFT)
        canvas.drawString(0, 0, self._label)


def summary_page(setting: Setting) -> list[Flowable]:
    """The page's flowables, fitted to one page: the pictures get the room that is left, texts are cut if they must."""
    sheet = setting.sheet
    views = chosen_views(setting.case.views)
    parts: list[Flowable] = []
    for tight in (False, True):
        used = _height(_parts(setting, [], tight), sheet.text_width)
        room = sheet.text_height - used - (PICTURE_TEXT if views else 0.0)
        height = min(max(room, LEAST_PICTURE), MOST_PICTURE)
        scales = level_scales(views, sheet.text_width, height, sheet.gutter)
        pictures = [Picture(view, scale, captioned=False) for view, scale in zip(views, scales, strict=True)]
        parts = _parts(setting, pictures, tight)
        if room >= (GOOD_PICTURE if views else 0.0):
            break
    return parts


def chosen_views(views: Sequence[View]) -> list[View]:
    """The oblique rendering (else the first), and the section that outlines the largest void (else the first)."""

    def first(wanted: Sequence[Callable[[View], bool]]) -> list[View]:
        return next(([view] for test in wanted for view in views if test(view)), [])

    render = first([lambda v: v.kind == "render" and "oblique" in v.id, lambda v: v.kind == "render"])
    section = first(
        [
            lambda v: v.id.startswith("void") and any(isinstance(m, Stroke) and m.role == "outline" for m in v.marks),
            lambda v: v.id.startswith("void"),
            lambda v: v.kind == "section",
        ]
    )
    return [*render, *section]


def _height(parts: Sequence[Flowable], width: float) -> float:
    return sum(part.wrap(width, 1e6)[1] + part.getSpaceBefore() + part.getSpaceAfter() for part in parts)


def _parts(setting: Setting, pictures: list[Picture], tight: bool) -> list[Flowable]:
    sheet = setting.sheet
    title = SIZE_HEAD + 4 if tight else SIZE_TITLE
    parts: list[Flowable] = [OutlineMark("Summary"), para(setting.title, title, INK, SEMIBOLD, after=2)]
    parts += _item(setting, SIZE_BODY if tight else SIZE_HEAD + 1)
    parts.append(FactGrid(_particulars(setting), columns=5 if tight else 4, most_lines=2 if tight else 3))
    parts.append(Rule(before=1, after=7))
    parts.append(Tiles(_tiles(setting)))
    if pictures:
        parts.append(PictureRow(pictures, sheet.gutter))
    parts.append(short_table(setting))
    parts += label_notes(setting)
    parts.append(Spacer(1, 3))
    scan = _scan(setting, tight)
    parts.append(Columns([scan, _look_first(setting, _height(scan, sheet.column(2)))], sheet.gutter))
    parts.append(Rule(before=3, after=5))
    parts.append(Columns([_not_said(), _reviewed(setting)], sheet.gutter))
    return parts


def _item(setting: Setting, size: float) -> list[Flowable]:
    """What was scanned: named where identity may be shown, else the pseudonym, else a line for the hand."""
    job, case = setting.case.job, setting.case
    if not case.keep_identity:
        pseudonym = setting.free_text(job.pseudonym)
        if pseudonym:
            return [para(pseudonym, size, SOFT, after=6)]
        return [HandLine("Item or person (identity is hidden; write it here if it must be on paper)")]
    recorded = next((case.series.identity[label] for label in NAMES if case.series.identity.get(label)), "")
    name = job.item or " ".join(recorded.replace("^", " ").split()) or case.series.description
    if not name.strip():
        return [HandLine("Item")]
    return [para(name, size, SOFT, after=6)]


def _particulars(setting: Setting) -> list[Fact]:
    job, case = setting.case.job, setting.case
    grid = case.volume.grid
    laboratory = job.laboratory
    given = [
        ("Report number", job.number),
        ("Customer", job.customer if case.keep_identity else ""),
        ("Laboratory", laboratory.get("name", "")),
        ("Purpose", job.purpose),
        ("Received", job.received),
        ("Scanned", laboratory.get("scanned", "")),
    ]
    facts = [Fact(label, setting.free_text(text)) for label, text in given if text.strip()]
    facts.append(Fact("Report made", case.provenance.created[:10]))
    facts.append(Fact("Input", setting.running.short_hash, f"{count(grid.shape[0])} slices"))
    return facts


def _tiles(setting: Setting) -> list[Tile]:
    """The main figures of a component, or those of a patient's scan."""
    case = setting.case
    if case.kind is Kind.COMPONENT and setting.measures_voids:
        return _component_tiles(setting)
    fitness, part = case.fitness, case.findings.part
    contrast = setting.words.contrast
    tiles = [
        _tile(
            setting.words.volume_title,
            volume(None if part is None else part.volume_mm3, None if part is None else part.volume_mm3_95),
            setting.reason("no-object", "background-missing"),
        ),
        Tile("Ranges found", Figure(count(len(case.ranges.items)), "", ""), "in the scan's own histogram"),
        _tile("Noise", figure(fitness.noise, unit=setting.symbol), setting.reason("noise-unknown", "no-object")),
        _tile(
            contrast.capitalize(),
            figure(fitness.contrast, unit=setting.symbol),
            setting.reason("background-missing", "no-object"),
            _times_noise(setting),
        ),
    ]
    return tiles


def _component_tiles(setting: Setting) -> list[Tile]:
    findings = setting.case.findings
    part, voids = findings.part, findings.voids
    reason = setting.reason("no-object", "voids-need-background", "background-missing")
    tiles = [
        _tile(
            setting.words.volume_title,
            volume(None if part is None else part.volume_mm3, None if part is None else part.volume_mm3_95),
            reason,
            "without its voids",
        )
    ]
    if voids is None:
        return [*tiles, Tile("Voids", Figure(NOT_AVAILABLE, "", ""), reason)]
    total = volume(voids.total_mm3, voids.total_mm3_95)
    together = f"together {total}" if voids.count else "none large enough was found"
    tiles.append(
        Tile(
            "Closed voids",
            Figure(count(voids.count), "", ""),
            together,
        )
    )
    tiles.append(_tile("Porosity", percent(voids.porosity_percent, voids.porosity_percent_95), reason))
    if voids.items:
        largest = voids.items[0]
        diameter = figure(largest.equivalent_diameter_mm, unit="mm")
        second = voids.items[1] if len(voids.items) > 1 else None
        note = f"{largest.id}, diameter {diameter}"
        note += f"; next {volume(second.volume_mm3)}" if second is not None else ""
        tiles.append(_tile("Largest void", volume(largest.volume_mm3, largest.volume_mm3_95), reason, note))
    else:
        found = setting.case.fitness.detectable_diameter_mm
        why = setting.reason("smallest-void-unknown")
        tiles.append(_tile("Smallest void to be found", figure(found, unit="mm"), why, "diameter, in theory"))
    return tiles


def _tile(label: str, shown: Figure, reason: str, note: str = "") -> Tile:
    return Tile(label, shown, note if shown.exists else reason)


def _times_noise(setting: Setting) -> str:
    cnr = setting.case.fitness.cnr
    return f"{figure(cnr).value} times the noise" if known(cnr) else ""


def _scan(setting: Setting, tight: bool) -> list[Flowable]:
    """How the scan covered the item, and what its values mean."""
    case = setting.case
    grid, fitness, unit = case.volume.grid, case.fitness, case.volume.unit
    distances = grid.slice_distances_mm
    spacing = f"{trimmed(grid.row_spacing_mm)} × {trimmed(grid.column_spacing_mm)} mm pixels"
    if len(distances) and not grid.is_even:
        spacing += f", slices {trimmed(float(distances.min()))} to {trimmed(float(distances.max()))} mm apart"
    else:
        spacing += f", slices {trimmed(float(distances[0]) if len(distances) else grid.spacing_mm[0])} mm apart"
    shape = f"{count(grid.shape[0])} slices of {count(grid.rows)} × {count(grid.columns)}"
    covered = millimetres(covered_mm(grid), grid.rows * grid.row_spacing_mm, grid.columns * grid.column_spacing_mm)
    meaning = f"{values_name(unit)} in {unit.symbol}" if unit.symbol else values_name(unit)
    facts = [
        Fact("Coverage", f"{shape}, {covered}", spacing.replace(" mm", "\u2009mm")),
        Fact("Unit", f"{meaning}, {unit.basis.value}", "" if tight else basis_sentence(unit)),
    ]
    parts: list[Flowable] = [_title("The scan"), FactGrid(facts, columns=1)]
    if case.kind is Kind.COMPONENT and setting.measures_voids:
        noise_why = setting.reason("noise-unknown", "no-object")
        noise = figure_fact("Noise", figure(fitness.noise, unit=unit.symbol), noise_why)
        contrast = figure_fact(
            setting.words.contrast.capitalize(),
            figure(fitness.contrast, unit=unit.symbol),
            setting.reason("background-missing", "no-object"),
            _times_noise(setting),
        )
        parts.append(FactGrid([noise, contrast], columns=2))
    return parts


def _title(text: str) -> Flowable:
    return para(text, SIZE_BODY, INK, SEMIBOLD, after=3)


def _look_first(setting: Setting, height: float) -> list[Flowable]:
    """The heaviest remarks, as many as fit beside the scan's facts, and how many more there are."""
    remarks = setting.remarks
    parts: list[Flowable] = [_title("Look first at")]
    if not remarks:
        return [*parts, para("Nothing was remarked on by any stage.", SIZE_NOTE)]
    for shown in range(min(MOST_REMARKS, len(remarks)), 0, -1):
        lines: list[Flowable] = [RemarkLine(remark, SIZE_NOTE, with_code=False) for remark in remarks[:shown]]
        left = len(remarks) - shown
        if left:
            more = "remark" if left == 1 else "remarks"
            lines.append(para(f"{count(left)} more {more} under “The scan”.", SIZE_NOTE, SOFT, after=0))
        if _height([*parts, *lines], setting.sheet.column(2)) <= height + 8:
            break
    return [*parts, *lines]


def _not_said() -> list[Flowable]:
    text = (
        "Neither a diagnosis nor an acceptance decision; no statement of conformity. It does not say what a material "
        "or tissue is, only which values it has. Nothing smaller than the scan resolves is shown. Results relate only "
        "to the item scanned. Read the cautions on the last pages."
    )
    return [_title("What this report does not say"), para(text, SIZE_NOTE, after=0)]


def _reviewed(setting: Setting) -> list[Flowable]:
    colour = INK if setting.reviewer else WARM
    text = (
        "A licensed or qualified person must review it before any use; local codes and licensed practice come first. "
        "The last page has room for the signature."
    )
    return [
        _title("Review"),
        para(review_state(setting.reviewer), SIZE_NOTE, colour, SEMIBOLD, after=1),
        para(text, SIZE_NOTE, after=0),
    ]
