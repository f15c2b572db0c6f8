"""Patient or component: what the headers say of what was scanned."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from pydicom.dataset import Dataset

from tomofolio.intake.elements import code
from tomofolio.volume import Kind

#: Group of the elements that DICONDE (ASTM E2339), the standard for non-destructive evaluation, adds to DICOM.
DICONDE_GROUP = 0x0014

#: Elements that are filled in for a living being only, strongest first.
PERSON = {
    0x00100030: "a birth date",
    0x00100040: "a sex",
    0x00101010: "an age",
    0x00101030: "a body weight",
}

#: Elements that a scan of a human keeps when its identity has been taken out.
HUMAN = {
    0x00120062: "that a patient's identity was removed",
    0x00180015: "a body part",
    0x00185100: "a patient position",
}


@dataclass(frozen=True, slots=True)
class Evidence:
    """What one header says: for a component, for a person (`PERSON`), for a human scan (`HUMAN`)."""

    component: tuple[str, ...] = ()
    person: tuple[int, ...] = ()
    human: tuple[int, ...] = ()


def gather_evidence(header: Dataset) -> Evidence:
    """Look for the evidence in one header."""
    component = []
    for tag in header.keys():  # noqa: SIM118  (iterating the dataset itself would convert every element)
        group = tag >> 16
        if group == DICONDE_GROUP:
            component.append("elements of group 0014")
            break
        if group & 1 and 0x10 <= (tag & 0xFFFF) <= 0xFF and "DICONDE" in code(header, tag).upper():
            component.append("a private creator that names DICONDE")
            break
    person = tuple(tag for tag in PERSON if code(header, tag))
    human = tuple(tag for tag in HUMAN if code(header, tag) not in ("", "NO"))
    return Evidence(tuple(component), person, human)


def decide_kind(evidence: Iterable[Evidence], *, calibrated: bool) -> tuple[Kind, str]:
    """The kind, and why in a sentence.

    A birth date or a sex always means a patient; then DICONDE means a component; then age and weight, or a human
    scan in HU, mean a patient.

    Parameters
    ----------
    calibrated : whether the values are CT numbers (HU), as a medical scanner writes them.
    """
    gathered = list(evidence)
    component = next((item.component[0] for item in gathered if item.component), "")
    person = {tag for item in gathered for tag in item.person}
    human = {tag for item in gathered for tag in item.human}
    strong = [text for tag, text in PERSON.items() if tag in person and tag in (0x00100030, 0x00100040)]
    if strong:
        return Kind.PATIENT, f"The header records {_listed(strong)}."
    if component:
        return Kind.COMPONENT, f"The header is that of a component: it has {component} (DICONDE)."
    if person:
        return Kind.PATIENT, f"The header records {_listed([text for tag, text in PERSON.items() if tag in person])}."
    if 0x00120062 in human or (human and calibrated):
        return Kind.PATIENT, f"The header records {_listed([text for tag, text in HUMAN.items() if tag in human])}."
    return Kind.UNKNOWN, "The header says neither that a patient nor that a component was scanned."


def _listed(texts: list[str]) -> str:
    return texts[0] if len(texts) == 1 else f"{', '.join(texts[:-1])} and {texts[-1]}"
