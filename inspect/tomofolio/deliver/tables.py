"""The tables as CSV that spreadsheets open rightly: UTF-8 with a mark, one header row with units, a decimal point."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence

from tomofolio.case import Case
from tomofolio.deliver.measurements import measurements

#: Without this mark at the beginning common spreadsheets take UTF-8 for an older encoding.
UTF8_MARK = "\ufeff"


def voids_csv(case: Case) -> str:
    """One row per void, then one per inclusion, each largest first; the header alone where there are none."""
    document = measurements(case)
    rows = []
    for kind, key in (("void", "voids"), ("inclusion", "inclusions")):
        for item in (document[key] or {}).get("items", []):
            rows.append(
                [
                    kind,
                    item["id"],
                    item["volume_mm3"],
                    *_ends(item["volume_mm3_95"]),
                    item["threshold_volume_mm3"],
                    item["equivalent_diameter_mm"],
                    item["feret_max_mm"],
                    item["sphericity"],
                    *item["position_mm"],
                    item["ligament_mm"],
                    item["nearest_mm"],
                    item["contrast"],
                    "yes" if item["open"] else "no",
                ]
            )
    header = [
        "kind",
        "id",
        "volume (mm³)",
        "volume, 95 % from (mm³)",
        "volume, 95 % to (mm³)",
        "volume by threshold (mm³)",
        "equivalent diameter (mm)",
        "longest Feret diameter (mm)",
        "sphericity (1)",
        "position x, L+ (mm)",
        "position y, P+ (mm)",
        "position z, S+ (mm)",
        "ligament (mm)",
        "nearest neighbour (mm)",
        "contrast (1)",
        "open to the outside",
    ]
    return _csv(header, rows)


def ranges_csv(case: Case) -> str:
    """One row per value range, in ascending order."""
    unit = case.volume.unit.symbol
    rows = [
        [
            row["id"],
            row["name"],
            row["named_by"],
            row["lower"],
            *_ends(row["lower_95"]),
            row["upper"],
            *_ends(row["upper_95"]),
            row["peak"],
            row["spread"],
            row["volume_mm3"],
            *_ends(row["volume_mm3_95"]),
            row["share"],
            row["mean"],
            row["sd"],
            row["regions"],
            row["largest_region_mm3"],
            "yes" if row["background"] else "no",
        ]
        for row in measurements(case)["ranges"]
    ]
    header = ["id", "name", "named by"]
    header += [f"{end}{part} ({unit})" for end in ("lower", "upper") for part in ("", ", 95 % from", ", 95 % to")]
    header += [f"peak ({unit})", f"spread ({unit})"]
    header += ["volume (mm³)", "volume, 95 % from (mm³)", "volume, 95 % to (mm³)", "share (1)"]
    header += [f"mean ({unit})", f"standard deviation ({unit})", "regions", "largest region (mm³)", "background"]
    return _csv(header, rows)


def _ends(interval: Sequence[float] | None) -> tuple[float | None, float | None]:
    return (None, None) if interval is None else (interval[0], interval[1])


def _csv(header: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\r\n")  # RFC 4180
    writer.writerow(header)
    writer.writerows([_cell(cell) for cell in row] for row in rows)
    return UTF8_MARK + text.getvalue()


def _cell(cell: object) -> object:
    """A text that a spreadsheet would run as a formula is quoted by a leading apostrophe."""
    if isinstance(cell, str) and cell[:1] in ("=", "+", "-", "@", "\t", "\r"):
        return "'" + cell
    return cell
