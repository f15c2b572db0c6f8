"""What the command line prints: the table of series and the closing lines of a run."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from tomofolio.remarks import Severity

if TYPE_CHECKING:
    from tomofolio.case import Case
    from tomofolio.intake import SeriesSummary

SURVEY_KEYS = (
    "uid",
    "description",
    "modality",
    "sop_class",
    "slices",
    "shape",
    "spacing_mm",
    "unit",
    "fit",
    "recommended",
    "reasons",
)


def survey_json(found: Sequence[SeriesSummary]) -> str:
    """The list of series as JSON, in the order of the survey."""
    rows = [{key: getattr(entry, key) for key in SURVEY_KEYS} for entry in found]
    return json.dumps(rows, ensure_ascii=False, allow_nan=False, indent=2)


def survey_table(found: Sequence[SeriesSummary]) -> None:
    """Print the list of series as a table, then, by the same numbers, each one's description, UID and reasons."""
    from rich.console import Console
    from rich.padding import Padding
    from rich.table import Table
    from rich.text import Text

    console = Console(highlight=False)
    if not found:
        console.print("No image series found.")
        return
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    for name in ("", "report?"):
        table.add_column(name, no_wrap=True)
    for name in ("slices", "rows × columns", "spacing (mm)"):
        table.add_column(name, justify="right", no_wrap=True)
    table.add_column("unit", no_wrap=True)
    for number, entry in enumerate(found, start=1):
        verdict = "recommended" if entry.recommended else "yes" if entry.fit else "no"
        size = f"{entry.shape[1]} × {entry.shape[2]}" if entry.shape else "–"
        spacing = " × ".join(f"{s:.3g}" for s in entry.spacing_mm) if entry.spacing_mm else "–"
        table.add_row(str(number), verdict, str(entry.slices), size, spacing, entry.unit or "–")
    console.print(table)
    console.print()
    for number, entry in enumerate(found, start=1):
        console.print(Text(f"{number}  {entry.description or 'no description'}"), soft_wrap=True)
        console.print(Text(f"   {entry.uid}", style="dim"), soft_wrap=True)
        for reason in entry.reasons:
            console.print(Padding(Text(reason), (0, 0, 0, 3)))


def closing_lines(case: Case, report: Path, data: Path | None) -> list[str]:
    """Five lines at the end of a run: what was found, what to look at first, where the files are."""
    grid, unit = case.volume.grid, case.volume.unit
    peaks = ", ".join(f"{item.name} around {float(f'{item.peak:.4g}'):g} {unit.symbol}" for item in case.ranges.items)
    lines = [
        f"Scan     {grid.shape[0]} slices of {grid.rows} × {grid.columns}, {unit.quantity} ({unit.basis.value})",
        f"Ranges   {peaks}",
        f"Measured {_measured(case)}",
        f"Look at  {_look_at(case)}",
        f"Files    {report}" + (f" and {data}{'/' if not str(data).endswith('/') else ''}" if data else ""),
    ]
    return lines


def _measured(case: Case) -> str:
    part, voids, inclusions = case.findings.part, case.findings.voids, case.findings.inclusions
    texts = []
    if part is not None:
        texts.append(f"part {part.volume_mm3 / 1000:.4g} cm³")
    if voids is not None:
        share = "" if voids.porosity_percent is None else f", porosity {voids.porosity_percent:.3g} %"
        texts.append(_counted(voids.count, "closed void") + share)
    if inclusions is not None:
        texts.append(_counted(inclusions.count, "inclusion"))
    return "; ".join(texts) or "range volumes"


def _counted(number: int, thing: str) -> str:
    return f"{number} {thing}{'' if number == 1 else 's'}"


def _look_at(case: Case) -> str:
    every = (case.series, case.ranges, case.body, case.fitness, case.findings)
    remarks = [remark for stage in every for remark in stage.remarks if remark.severity is not Severity.NOTE]
    if not remarks:
        return "page 1"
    worst = min(remarks, key=lambda remark: remark.severity is not Severity.STOP)
    more = f" (and {_counted(len(remarks) - 1, 'more caution')} in the report)" if len(remarks) > 1 else ""
    return f"{worst.text}{more}"
