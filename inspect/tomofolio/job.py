"""The job sheet: what the scan cannot know and a person has to say."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from tomofolio.errors import CallError
from tomofolio.volume import Kind

#: Sections and keys of a job sheet, with the kind of value each takes.
KEYS: Mapping[str, Mapping[str, type | tuple[type, ...]]] = {
    "report": {"title": str, "number": str, "page_size": str},
    "subject": {"kind": str, "item": str, "customer": str, "received": str, "purpose": str, "pseudonym": str},
    "laboratory": {"name": str, "address": str, "operator": str, "scanned": str, "method": str},
    "reviewer": {"name": str, "qualification": str},
    "notes": {"text": str},
    "ranges": {"names": list, "named_by": str},
    "views": {"oblique_direction": list},
}


@dataclass(frozen=True)
class Job:
    """A checked job sheet; every text is "" where the sheet is silent.

    ``range_names`` are for the ranges in ascending order, ``oblique_direction`` is the direction of sight in LPS.
    """

    source: str = ""
    title: str = ""
    number: str = ""
    page_size: str = ""
    kind: Kind | None = None
    item: str = ""
    customer: str = ""
    received: str = ""
    purpose: str = ""
    pseudonym: str = ""
    laboratory: Mapping[str, str] = field(default_factory=dict)
    reviewer_name: str = ""
    reviewer_qualification: str = ""
    notes: str = ""
    range_names: tuple[str, ...] = ()
    ranges_named_by: str = ""
    oblique_direction: tuple[float, float, float] | None = None


def load_job(path: Path) -> Job:
    """Read and check a job sheet.

    Raises
    ------
    CallError : not readable, not TOML, or a section, key or value that is not known.
    """
    try:
        source = path.read_text(encoding="utf-8")
        table = tomllib.loads(source)
    except OSError as error:
        raise CallError(f"the job sheet cannot be read ({error.strerror})", file=path) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise CallError(f"the job sheet is not valid TOML ({error})", file=path) from error
    _check_keys(table, path)
    report, subject = table.get("report", {}), table.get("subject", {})
    ranges, views = table.get("ranges", {}), table.get("views", {})
    return Job(
        source=source,
        title=report.get("title", ""),
        number=report.get("number", ""),
        page_size=_one_of(report.get("page_size", ""), ("", "A4", "Letter"), "report.page_size", path),
        kind=_kind(subject.get("kind", ""), path),
        item=subject.get("item", ""),
        customer=subject.get("customer", ""),
        received=subject.get("received", ""),
        purpose=subject.get("purpose", ""),
        pseudonym=subject.get("pseudonym", ""),
        laboratory=table.get("laboratory", {}),
        reviewer_name=table.get("reviewer", {}).get("name", ""),
        reviewer_qualification=table.get("reviewer", {}).get("qualification", ""),
        notes=table.get("notes", {}).get("text", ""),
        range_names=_texts(ranges.get("names", []), path),
        ranges_named_by=ranges.get("named_by", "job sheet"),
        oblique_direction=_direction(views.get("oblique_direction"), path),
    )


def _check_keys(table: dict, path: Path) -> None:
    for section, keys in table.items():
        if section not in KEYS:
            raise CallError(f"unknown section [{section}]", file=path, remedy=f"Known sections: {', '.join(KEYS)}")
        if not isinstance(keys, dict):
            raise CallError(f"{section} must be a section: [{section}]", file=path)
        for key, value in keys.items():
            if key not in KEYS[section]:
                known = ", ".join(KEYS[section])
                raise CallError(f"unknown key {key!r} in [{section}]", file=path, remedy=f"Known keys: {known}")
            wanted = KEYS[section][key]
            if not isinstance(value, wanted):
                name = {str: "a text", list: "a list"}[wanted]  # type: ignore[index]
                raise CallError(f"{section}.{key} must be {name}", file=path)


def _one_of(value: str, allowed: tuple[str, ...], key: str, path: Path) -> str:
    if value not in allowed:
        choices = ", ".join(repr(a) for a in allowed if a)
        raise CallError(f"{key} = {value!r} is not known", file=path, remedy=f"Allowed: {choices}")
    return value


def _kind(value: str, path: Path) -> Kind | None:
    allowed = ("", Kind.PATIENT.value, Kind.COMPONENT.value)
    return Kind(value) if _one_of(value, allowed, "subject.kind", path) else None


def _texts(values: list, path: Path) -> tuple[str, ...]:
    if not all(isinstance(value, str) for value in values):
        raise CallError("ranges.names must be a list of texts", file=path)
    return tuple(values)


def _direction(values: list | None, path: Path) -> tuple[float, float, float] | None:
    if values is None:
        return None
    numbers = [float(v) for v in values if isinstance(v, (int, float)) and not isinstance(v, bool)]
    if len(numbers) != 3 or len(values) != 3 or not any(numbers):
        raise CallError("views.oblique_direction must be three numbers (LPS), not all zero", file=path)
    return numbers[0], numbers[1], numbers[2]
