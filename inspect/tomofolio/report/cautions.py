"""The cautions: read from the one text that also is the project's SAFETY.md."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from importlib.resources import files

#: On every page of every report.
DENIAL = "Neither a diagnosis nor an acceptance decision."


@dataclass(frozen=True)
class Caution:
    """One heading with its points; a point may begin with a ``**lead**``."""

    title: str
    points: tuple[str, ...]


@cache
def cautions() -> tuple[Caution, ...]:
    """All cautions in the order to print."""
    found: list[tuple[str, list[str]]] = []
    for line in cautions_text().splitlines():
        if line.startswith("## "):
            found.append((line[3:].strip(), []))
        elif line.startswith("- "):
            found[-1][1].append(line[2:].strip())
        elif line.startswith("  "):
            found[-1][1][-1] += " " + line.strip()
    return tuple(Caution(title, tuple(points)) for title, points in found)


def cautions_text() -> str:
    """The whole text, in Markdown."""
    return (files("tomofolio.report") / "cautions.md").read_text(encoding="utf-8")
