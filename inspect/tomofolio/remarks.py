"""Remarks: what a stage has noticed about the scan and wants the reader of the report to know."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Severity(StrEnum):
    """How much a remark weighs. ``STOP`` means that the figures it names are left out."""

    NOTE = "note"
    CAUTION = "caution"
    STOP = "stop"


@dataclass(frozen=True)
class Remark:
    """One plain sentence with a stable code, such as ``slice-gaps-uneven``."""

    code: str
    severity: Severity
    text: str
