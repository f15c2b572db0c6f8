"""Page "method": how everything was computed, and what is needed to repeat it."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence

from tomofolio.report.facts import Fact, FactGrid
from tomofolio.report.method_text import method_sections
from tomofolio.report.setting import Setting
from tomofolio.report.style import SIZE_SMALL, mm, printable
from tomofolio.report.table import Column, DataTable
from tomofolio.report.text import beside, page_head, para, small, wrapped

# isort: split
from reportlab.platypus import Flowable


def method_page(setting: Setting) -> list[Flowable]:
    """The page's flowables."""
    case, sheet = setting.case, setting.sheet
    provenance = case.provenance
    lead = "How the figures came about, and what is needed to repeat them."
    parts: list[Flowable] = page_head("Method", lead)
    for title, paragraphs in method_sections(setting):
        parts += beside(sheet, title, [para(text) for text in paragraphs])
    hash_text = provenance.pixels_sha256
    record = [
        Fact("Report made", provenance.created),
        Fact("By", f"tomofolio {provenance.tool_version}"),
        Fact("SHA-256 of values and geometry", hash_text),
    ]
    parts += beside(sheet, "This run", [FactGrid(record[:2], columns=2), FactGrid(record[2:], columns=1)])
    parts += beside(sheet, "Parameters", [_pairs(provenance.parameters, "Parameter")])
    parts += beside(sheet, "Libraries", [_pairs(provenance.libraries, "Library")])
    parts += _job_sheet(setting)
    return parts


def _pairs(entries: Mapping[str, object], what: str) -> Flowable:
    rows = [[name, text] for name, text in flattened(entries)]
    if not rows:
        return para("None is recorded.")
    return FactGrid([Fact(name, text) for name, text in rows], columns=4 if what == "Library" else 3)


def flattened(entries: Mapping[str, object], prefix: str = "") -> list[tuple[str, str]]:
    """Names and values as texts; tables within tables get longer names."""
    rows: list[tuple[str, str]] = []
    for key, value in entries.items():
        name = f"{prefix}{key}".replace("_", " ")
        if isinstance(value, Mapping):
            rows += flattened(value, f"{name}, ")
        else:
            rows.append((name, value_text(value)))
    return rows


def value_text(value: object) -> str:
    """A value as a reader expects it."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if value is None:
        return "none"
    if isinstance(value, float):
        return f"{value:.6g}".replace("-", "−")
    if isinstance(value, Sequence) and not isinstance(value, str):
        return ", ".join(value_text(entry) for entry in value)
    return str(value)


def _job_sheet(setting: Setting) -> list[Flowable]:
    source = setting.case.job.source
    if not source.strip():
        return list(beside(setting.sheet, "Job sheet", [para("None was given.")]))
    digest = hashlib.sha256(source.encode()).hexdigest()
    if not setting.case.keep_identity:
        text = "A job sheet was given. It is not printed, since identity is hidden."
        return list(beside(setting.sheet, "Job sheet", [para(text)]))
    room = setting.sheet.text_width - setting.sheet.side
    lines = [part for line in source.splitlines() for part in wrapped(printable(line), SIZE_SMALL, room)]
    table = DataTable([Column("Text as given", align="left")], [[line] for line in lines if line.strip()], SIZE_SMALL)
    return list(beside(setting.sheet, "Job sheet", [small(f"SHA-256 {digest}"), table], room=24 * mm))
