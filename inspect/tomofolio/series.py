"""What the files say about the scan beside its pixels: kept apart from `Volume`, since measuring never needs it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from tomofolio.remarks import Remark
from tomofolio.volume import Kind


@dataclass(frozen=True)
class Series:
    """The header facts of one image series.

    ``identity`` holds what could name a patient, a customer or a place (label -> text as recorded); it must
    not reach any output while identity is hidden. ``acquisition`` holds how the scan was made (label -> text
    with unit, in the order to print). ``description`` is free text typed by an operator: it counts as identity.
    """

    uid: str
    description: str
    modality: str
    sop_class: str
    kind: Kind
    kind_reason: str
    patient_position: str = ""
    slice_thickness_mm: float | None = None
    window: tuple[float, float] | None = None
    inverted_display: bool = False
    identity: Mapping[str, str] = field(default_factory=dict)
    acquisition: Mapping[str, str] = field(default_factory=dict)
    files: int = 0
    remarks: tuple[Remark, ...] = ()
