"""Page "ranges": the histogram with its model, and the tables of ranges."""

from __future__ import annotations

import numpy as np

from tomofolio.report.histogram import HistogramChart, path_length_mm
from tomofolio.report.numbers import count, trimmed
from tomofolio.report.range_tables import amount_table, boundary_table
from tomofolio.report.setting import Setting
from tomofolio.report.text import head, page_head, para, small
from tomofolio.report.words import label_sentence, values_name

# isort: split
from reportlab.platypus import Flowable


def object_size_mm(setting: Setting) -> float:
    """Longest side of the box that holds the object; of the scan where there is no object."""
    grid = setting.case.volume.grid
    cuts = [(part.start, part.stop) for part in setting.case.body.box]
    if any(stop <= start for start, stop in cuts):
        cuts = [(0, size) for size in grid.shape]
    low, high = (np.array([cut[side] for cut in cuts], dtype=float) for side in (0, 1))
    return float(max((high - low) * np.array(grid.spacing_mm)))


def ranges_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    case, words = setting.case, setting.words
    unit = case.volume.unit
    path_mm = path_length_mm(object_size_mm(setting))
    histogram = case.ranges.histogram
    number = len(case.ranges.items)
    lead = (
        f"{number} {'range' if number == 1 else 'ranges'} of {values_name(unit)}, found in this scan's own histogram. "
    )
    lead += f"A range is values that belong together; it need not be one {words.matter}."
    chart = HistogramChart(case.ranges, case.tables, unit, path_mm)
    caption = (
        f"**Histogram** of {count(int(histogram.counts.sum()))} voxels, on a logarithmic scale, in bins of "
        f"{setting.valued(trimmed(histogram.width))}. Grey: voxels counted. Solid line: the fitted model (pure "
        "components and the mixtures at their boundaries). Upright lines: boundaries; where the shaded band "
        "around one is wider than the line, it shows the 95 % interval. Dashed line, right-hand scale: opacity that "
        f"the rendered pictures give to a path of {trimmed(path_mm)}\u2009mm through matter of that value; at a "
        "boundary it rises because surfaces are made visible there."
    )
    parts: list[Flowable] = [*page_head("Ranges", lead), chart, small(caption, after=6)]
    parts += [*head("Boundaries"), boundary_table(setting)]
    parts.append(
        small(
            "A value belongs to a range from its lower boundary up to, not including, the next. Peak and spread: "
            "mean and standard deviation of the pure component in the fitted model; noise and variation are both in it."
        )
    )
    parts += [*head("Amounts"), amount_table(setting)]
    notes = "Over all voxels that are data and not left out. Mean and standard deviation: of the voxels between the "
    notes += "boundaries. Regions: parts that hang together face to face (6-connected)."
    if any(figures.volume_mm3_95 is None for figures in case.findings.ranges):
        notes += " –: no interval can be given for this range."
    parts.append(small(notes))
    parts += label_notes(setting)
    return parts


def label_notes(setting: Setting) -> list[Flowable]:
    """One sentence for every person who named ranges."""
    case = setting.case
    by: dict[str, list[str]] = {}
    for item in case.ranges.items:
        if item.named_by:
            by.setdefault(setting.free_text(item.named_by), []).append(item.id)
    return [
        para(f"**{', '.join(ids)}:** {label_sentence(case.volume.unit, setting.words, name)}.", 8.0)
        for name, ids in by.items()
    ]
