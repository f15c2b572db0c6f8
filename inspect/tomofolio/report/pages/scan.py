"""Page "scan": geometry, unit, acquisition, what was left out, what the scan can bear, and every remark."""

from __future__ import annotations

import numpy as np

from tomofolio.report.facts import Fact, FactGrid, figure_fact
from tomofolio.report.numbers import NOT_AVAILABLE, count, figure, known, plain, trimmed, volume, with_unit
from tomofolio.report.remark_list import grouped
from tomofolio.report.setting import Setting
from tomofolio.report.style import mm
from tomofolio.report.table import Column, DataTable
from tomofolio.report.text import beside, page_head, para, small
from tomofolio.report.words import basis_sentence, direction_sentence, values_name
from tomofolio.volume import Grid, Volume

# isort: split
from reportlab.platypus import Flowable

#: Angles smaller than this (degrees) are rounding in the header.
SMALLEST_TILT = 0.05


def millimetres(*lengths: float) -> str:
    """Lengths as "0.5 × 0.4 × 0.4 mm"."""
    return with_unit(" × ".join(trimmed(length) for length in lengths), "mm")


def no_data_share(volume: Volume) -> float:
    """Share of the voxels that are no data."""
    if volume.no_data is None:
        return 0.0
    return float(sum(int(np.count_nonzero(plane)) for plane in volume.no_data)) / volume.no_data.size


def covered_mm(grid: Grid) -> float:
    """Length that the slices cover, half a gap beyond the outer ones included; 0 for a single slice."""
    distances = grid.slice_distances_mm
    return float(distances.sum() + (distances[0] + distances[-1]) / 2) if len(distances) else 0.0


def geometry_facts(setting: Setting) -> list[Fact]:
    """Where the voxels are."""
    grid = setting.case.volume.grid
    spacing, row, column = grid.spacing_mm
    distances = grid.slice_distances_mm
    if len(distances) and not grid.is_even:
        low, high = float(distances.min()), float(distances.max())
        gaps = with_unit(f"{trimmed(low)} to {trimmed(high)}", "mm")
        gap = Fact("Slice distances", gaps, f"uneven; median step {millimetres(spacing)}")
    else:
        distance = float(np.median(distances)) if len(distances) else spacing
        gap = Fact("Slice distance", millimetres(distance), "even throughout")
    tilt = grid.tilt_degrees
    slanted = tilt >= SMALLEST_TILT
    tilt_note = "the slice axis is not perpendicular to the slices; all figures allow for it" if slanted else ""
    depth = covered_mm(grid)
    matrix = f"{count(grid.rows)} rows × {count(grid.columns)} columns"
    missing = no_data_share(setting.case.volume)
    thickness = setting.case.series.slice_thickness_mm
    facts = [
        Fact("Slices", count(grid.shape[0])),
        Fact("Matrix", matrix),
        Fact("Pixel spacing", f"{trimmed(row)} × {millimetres(column)}", "between rows × between columns"),
        gap,
        Fact("Field of view", millimetres(grid.rows * row, grid.columns * column), "in the slice"),
        Fact("Covered length", with_unit(trimmed(depth), "mm") if depth else NOT_AVAILABLE, "across the slices"),
        Fact("Tilt", with_unit(plain(tilt, 1), "°") if slanted else "none", tilt_note),
        Fact(
            "No data (padding)",
            "none"
            if not missing
            else "less than 0.1 %"
            if missing < 0.001
            else with_unit(plain(100 * missing, 1), "%"),
            "left out of every figure" if missing else "every voxel is data",
        ),
    ]
    acquisition = setting.case.series.acquisition
    if thickness is not None and known(thickness) and "Slice thickness" not in acquisition:
        facts.append(Fact("Slice thickness", millimetres(thickness), "as recorded"))
    if setting.case.series.patient_position and "Patient position" not in acquisition:
        facts.append(Fact("Position code", setting.case.series.patient_position, "as recorded"))
    return facts


def fitness_facts(setting: Setting) -> list[Fact]:
    """What the scan can bear."""
    fitness, words, symbol = setting.case.fitness, setting.words, setting.symbol
    contrast = words.contrast
    noise_why = setting.reason("noise-unknown", "noise-absent", "no-object")
    contrast_why = setting.reason("background-missing", "no-object")
    blur_why = setting.reason("blur-unknown", "background-missing", "no-object")
    axes = ""
    if fitness.blur_sigma_axes_mm is not None and all(map(known, fitness.blur_sigma_axes_mm)):
        axes = "slice, row, column: " + ", ".join(figure(v).value for v in fitness.blur_sigma_axes_mm) + "\u2009mm"
    facts = [
        figure_fact("Noise", figure(fitness.noise, unit=symbol), noise_why, "standard deviation in the main range"),
        figure_fact(
            contrast.capitalize(), figure(fitness.contrast, unit=symbol), contrast_why, "main range to background"
        ),
        figure_fact(
            f"{contrast.capitalize()} to noise",
            figure(fitness.cnr),
            f"{contrast_why if fitness.contrast is None else noise_why}",
        ),
        figure_fact("Blur (σ)", figure(fitness.blur_sigma_mm, unit="mm"), blur_why, axes),
        figure_fact("MTF at 10 %", figure(fitness.mtf10_per_mm, unit="/mm"), blur_why, "spatial frequency"),
    ]
    correlation = fitness.noise_correlation_mm
    if correlation is not None and all(map(known, correlation)):
        texts = ", ".join(figure(v, digits=2).value for v in correlation)
        facts.append(Fact("Noise correlation (σ)", with_unit(texts, "mm"), "slice, row, column; 0 is white noise"))
    if setting.measures_voids:
        why = setting.reason("smallest-void-unknown", "noise-unknown", "blur-unknown", "background-missing")
        found = figure(fitness.detectable_diameter_mm, unit="mm")
        sized = figure(fitness.measurable_diameter_mm, unit="mm")
        facts += [
            figure_fact(
                "Smallest void found", found, why, "diameter; lone sphere of air, 95 % found; a limit in theory"
            ),
            figure_fact(
                "Smallest void measured", sized, why, "diameter; volume within ±25 % at 95 %; a limit in theory"
            ),
        ]
    return facts


def scan_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    case, sheet = setting.case, setting.sheet
    unit = case.volume.unit
    lead = "How the scan was made and covered, what was left out, and what its images can bear."
    parts: list[Flowable] = page_head("The scan", lead)
    direction = Fact("Orientation (nearest axes)", direction_sentence(case.volume.grid, setting.words))
    parts += beside(sheet, "Geometry", [FactGrid(geometry_facts(setting)), FactGrid([direction], columns=1)])
    unit_facts = [
        Fact("Values", values_name(unit)),
        Fact("Unit", unit.symbol or "none"),
        Fact("Basis", unit.basis.value),
    ]
    parts += beside(sheet, "Unit", [FactGrid(unit_facts), small(basis_sentence(unit))])
    parts += beside(sheet, "Fitness", [FactGrid(fitness_facts(setting))])
    parts += beside(sheet, "Remarks", grouped(setting.remarks))
    parts += beside(sheet, "Left out", _left_out(setting))
    parts += beside(sheet, "Acquisition", _acquisition(setting))
    if case.keep_identity and case.series.identity:
        facts = [Fact(label, value) for label, value in case.series.identity.items()]
        parts += beside(sheet, "Identity as recorded", [FactGrid(facts)])
    parts += _supplied(setting)
    return parts


def _acquisition(setting: Setting) -> list[Flowable]:
    case = setting.case
    facts = [Fact(label, setting.free_text(value)) for label, value in case.series.acquisition.items()]
    facts.insert(0, Fact("Modality", case.series.modality or NOT_AVAILABLE))
    facts.append(Fact("Files", count(case.series.files)))
    parts: list[Flowable] = [FactGrid(facts)]
    if not case.series.acquisition:
        parts.append(small("The files record nothing of how the scan was made."))
    reason = setting.sentence(case.series.kind_reason)
    spoken = f"This report speaks of a {setting.words.subject}."
    parts.append(small(f"{spoken} {reason}" if reason else spoken))
    return parts


def _supplied(setting: Setting) -> list[Flowable]:
    """What the job sheet says of the laboratory, and its notes."""
    job = setting.case.job
    labels = {
        "name": "Laboratory",
        "address": "Address",
        "operator": "Operator",
        "scanned": "Scanned",
        "method": "Method",
    }
    facts = [
        Fact(label, setting.free_text(job.laboratory[key])) for key, label in labels.items() if job.laboratory.get(key)
    ]
    parts: list[Flowable] = []
    if facts:
        parts += beside(setting.sheet, "Laboratory, as supplied", [FactGrid(facts, columns=2)])
    if job.notes.strip():
        parts += beside(setting.sheet, "Notes, as supplied", [para(setting.free_text(job.notes))])
    return parts


def _left_out(setting: Setting) -> list[Flowable]:
    excluded = setting.case.body.excluded
    if not excluded:
        return [para("Nothing was left out: no table, holder or loose piece was found.")]
    columns = [
        Column("What", align="left", most=44 * mm),
        Column("Volume", "", align="left"),
        Column("Position", "L, P, S (mm)" if setting.words.axes[0][1] == "Left" else "X, Y, Z (mm)", align="left"),
    ]
    rows = [
        [thing.name, str(volume(thing.volume_mm3)), ", ".join(plain(x, 1) for x in thing.position_mm)]
        for thing in excluded
    ]
    reasons = [f"{thing.name}: {thing.reason}." for thing in excluded]
    unique = list(dict.fromkeys(reasons))
    return [DataTable(columns, rows), *(small(text, after=1) for text in unique)]
