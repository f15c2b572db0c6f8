"""Everything that one run has found, as the report and the data files receive it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from tomofolio.body.result import Body
from tomofolio.fitness.result import Fitness
from tomofolio.job import Job
from tomofolio.measure.result import Findings
from tomofolio.preset import Preset
from tomofolio.ranges.result import Ranges
from tomofolio.render.tables import TransferTable
from tomofolio.render.view import View
from tomofolio.series import Series
from tomofolio.volume import Kind, Volume


@dataclass(frozen=True)
class Provenance:
    """Enough to repeat the run.

    ``parameters`` and ``libraries`` map names to values, in the order to print; ``created`` is an ISO 8601 time
    with its offset; ``pixels_sha256`` is over the rescaled values and the geometry.
    """

    tool_version: str
    parameters: Mapping[str, object]
    libraries: Mapping[str, str]
    created: str
    pixels_sha256: str


@dataclass(frozen=True)
class Case:
    """One run. ``kind`` is what the report speaks of: PATIENT or COMPONENT, never UNKNOWN."""

    job: Job
    preset: Preset
    kind: Kind
    keep_identity: bool
    series: Series
    volume: Volume
    ranges: Ranges
    body: Body
    fitness: Fitness
    findings: Findings
    tables: TransferTable
    views: tuple[View, ...]
    provenance: Provenance
