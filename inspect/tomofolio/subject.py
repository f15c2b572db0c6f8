"""Whether the report speaks of a patient or of a component, and what follows: preset, voids, identity."""

from __future__ import annotations

from dataclasses import dataclass

from tomofolio.job import Job
from tomofolio.preset import Preset, load_preset
from tomofolio.remarks import Remark, Severity
from tomofolio.series import Series
from tomofolio.volume import Kind


@dataclass(frozen=True)
class Subject:
    """The decision, with its reason in a sentence. ``kind`` is never UNKNOWN."""

    kind: Kind
    reason: str
    preset: Preset
    measure_voids: bool
    keep_identity: bool
    remarks: tuple[Remark, ...] = ()


def decide_subject(series: Series, job: Job, preset: Preset | None, keep_identity: bool | None) -> Subject:
    """Job sheet before header before preset; in doubt a patient.

    The preset asked for settles only what the header leaves open: a header that speaks of a living person is not
    overruled by a preset, it needs ``subject.kind`` in the job sheet. Identity is kept without being asked only
    where job sheet or header say that it is a component.
    """
    remarks: list[Remark] = []
    if job.kind is not None:
        kind, reason = job.kind, "The job sheet says so."
    elif series.kind is not Kind.UNKNOWN:
        kind, reason = series.kind, series.kind_reason
    elif preset is not None and preset.subject == "component":
        kind, reason = Kind.COMPONENT, f"The header leaves it open; the preset {preset.name} is for components."
    else:
        kind, reason = Kind.PATIENT, "The header leaves it open, so the scan is treated as a patient's."
    if preset is None:
        preset = load_preset("casting" if kind is Kind.COMPONENT else "case-note")
    if kind is Kind.PATIENT and preset.measure_voids:
        text = "Voids and inclusions are not measured in a patient's scan."
        if series.kind is not Kind.PATIENT:
            text += ' If this is a component, say so in the job sheet: kind = "component" under [subject].'
        remarks.append(Remark("voids-not-for-patients", Severity.NOTE, text))
    known_component = kind is Kind.COMPONENT and (job.kind is not None or series.kind is Kind.COMPONENT)
    return Subject(
        kind=kind,
        reason=reason,
        preset=preset,
        measure_voids=preset.measure_voids and kind is Kind.COMPONENT,
        keep_identity=known_component if keep_identity is None else keep_identity,
        remarks=tuple(remarks),
    )
