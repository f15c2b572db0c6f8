"""The tables of ranges: one for page one, and the two full ones."""

from __future__ import annotations

from tomofolio.measure.result import RangeFigures
from tomofolio.ranges.result import ValueRange
from tomofolio.report.histogram import range_colours
from tomofolio.report.numbers import between, count, decimals_for, decimals_of, figure, known, plain
from tomofolio.report.setting import Setting
from tomofolio.report.style import mm
from tomofolio.report.table import Cell, Column, DataTable, Swatch

#: In a table cell; the reason stands under the table.
MISSING = "–"


def range_label(item: ValueRange) -> str:
    """Number of a range, its name where a person gave one, and whether it is the background."""
    name = item.id if item.name in ("", item.id) else f"{item.id}  {item.name}"
    return f"{name}  (background)" if item.background else name


def peak_texts(item: ValueRange) -> tuple[str, str]:
    """Peak and spread, both with the decimals that two digits of the spread need."""
    if not known(item.peak):
        return MISSING, MISSING
    if not known(item.spread) or item.spread <= 0:
        return figure(item.peak, digits=4).value, "0"
    decimals = max(decimals_of(item.spread), 0)
    return plain(item.peak, decimals), plain(item.spread, decimals)


def span_text(item: ValueRange) -> str:
    """The values between which a range lies, in words where an end is open."""
    lower = figure(item.lower, item.lower_95).value if item.lower is not None else ""
    upper = figure(item.upper, item.upper_95).value if item.upper is not None else ""
    if lower and upper:
        return between(lower, upper)
    return f"from {lower}" if lower else f"below {upper}" if upper else "all values"


def pairs(setting: Setting) -> list[tuple[ValueRange, RangeFigures]]:
    """Ranges with their figures."""
    return list(zip(setting.case.ranges.items, setting.case.findings.ranges, strict=True))


def _swatch(setting: Setting, item: ValueRange) -> Swatch:
    return Swatch(range_colours(setting.case.tables).get(item.id))


def short_table(setting: Setting) -> DataTable:
    """For page one: what each range is, where it lies, how much of it there is."""
    columns = [
        Column("", align="swatch", share=0),
        Column("Range", align="left", share=3, most=56 * mm),
        Column("Values", setting.symbol, align="left"),
        Column("Peak", setting.symbol),
        Column("Volume", "cm³"),
        Column("95 % interval", "cm³", align="left"),
        Column("Share", "%"),
    ]
    rows: list[list[Cell]] = []
    for item, figures in pairs(setting):
        amount = cm3(figures)
        rows.append(
            [
                _swatch(setting, item),
                range_label(item),
                span_text(item),
                peak_texts(item)[0],
                amount[0],
                amount[1],
                share_text(figures),
            ]
        )
    return DataTable(columns, rows)


def cm3(figures: RangeFigures) -> tuple[str, str]:
    """Volume and interval in cm³, whatever their size, so that a column has one unit."""
    interval = figures.volume_mm3_95
    scaled = None if interval is None else (interval[0] / 1000, interval[1] / 1000)
    shown = figure(figures.volume_mm3 / 1000 if known(figures.volume_mm3) else None, scaled)
    return (shown.value if shown.exists else MISSING), shown.interval or MISSING


def share_text(figures: RangeFigures) -> str:
    """Share in per cent with one digit after the point, more where it is small."""
    percent = 100 * figures.share
    if not known(percent):
        return MISSING
    return plain(percent, 1) if percent >= 1 or percent == 0 else figure(percent, digits=2).value


def boundary_table(setting: Setting) -> DataTable:
    """Where each range begins and ends, and its peak."""
    symbol = setting.symbol
    columns = [
        Column("", align="swatch", share=0),
        Column("Range", align="left", share=2, most=50 * mm),
        Column("From", symbol),
        Column("95 % interval", symbol, align="left"),
        Column("To", symbol),
        Column("95 % interval", symbol, align="left"),
        Column("Peak", symbol),
        Column("Spread", symbol),
    ]
    rows: list[list[Cell]] = []
    for item, _ in pairs(setting):
        peak, spread = peak_texts(item)
        row: list[Cell] = [_swatch(setting, item), range_label(item)]
        for value, interval in ((item.lower, item.lower_95), (item.upper, item.upper_95)):
            shown = figure(value, interval)
            row += ["open", ""] if value is None else [shown.value, shown.interval or MISSING]
        rows.append([*row, peak, spread])
    return DataTable(columns, rows)


def amount_table(setting: Setting) -> DataTable:
    """How much of each range there is, and how its values are spread."""
    symbol = setting.symbol
    columns = [
        Column("", align="swatch", share=0),
        Column("Range", align="left", share=2, most=38 * mm),
        Column("Volume", "cm³"),
        Column("95 % interval", "cm³", align="left"),
        Column("Share", "%"),
        Column("Mean", symbol),
        Column("Standard\ndeviation", symbol),
        Column("Regions"),
        Column("Largest\nregion", "cm³"),
    ]
    rows: list[list[Cell]] = []
    for item, figures in pairs(setting):
        amount, interval = cm3(figures)
        largest = figure(figures.largest_region_mm3 / 1000 if known(figures.largest_region_mm3) else None, digits=4)
        decimals = max(decimals_for(figures.sd), 0) if known(figures.sd) and figures.sd else 1
        rows.append(
            [
                _swatch(setting, item),
                range_label(item),
                amount,
                interval,
                share_text(figures),
                plain(figures.mean, decimals) if figures.mean is not None and known(figures.mean) else MISSING,
                plain(figures.sd, decimals) if figures.sd is not None and known(figures.sd) else MISSING,
                count(figures.regions),
                largest.value if largest.exists else MISSING,
            ]
        )
    return DataTable(columns, rows)
