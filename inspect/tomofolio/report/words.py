"""The vocabulary: one set of words for a patient's scan, one for a component's."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from tomofolio.remarks import Remark
from tomofolio.volume import Basis, Grid, Kind, Unit

#: Remarks that speak of the smallest void have no place where voids are not looked for.
ABOUT_VOIDS = frozenset({"smallest-void-unknown"})


@dataclass(frozen=True)
class Words:
    """Words that depend on what was scanned.

    ``axes`` names the ends of the LPS axes (− then +), ``matter`` is what a range may or may not be.
    """

    subject: str
    object: str
    volume_title: str
    contrast: str
    ligament: str
    matter: str
    axes: tuple[tuple[str, str], ...]

    def reword(self, text: str) -> str:
        """A sentence of another room in this vocabulary."""
        for word, ours in (("contrast", self.contrast), ("ligament", self.ligament)):
            if word != ours:
                text = re.sub(rf"\b{word}\b(?! agent| medium)", ours, text)
                text = re.sub(rf"\b{word.capitalize()}\b(?! agent| medium)", ours.capitalize(), text)
        return text


PATIENT = Words(
    subject="patient",
    object="body part in the scan",
    volume_title="Volume of the scanned body part",
    contrast="grey-value difference",
    ligament="remaining wall",
    matter="tissue",
    axes=(("Right", "Left"), ("Anterior", "Posterior"), ("Inferior", "Superior")),
)

COMPONENT = Words(
    subject="component",
    object="component",
    volume_title="Volume of the part",
    contrast="contrast",
    ligament="ligament",
    matter="material",
    axes=(("−X", "+X"), ("−Y", "+Y"), ("−Z", "+Z")),
)


def words_for(kind: Kind) -> Words:
    """The vocabulary of a kind; everything that is no component is spoken of as a patient."""
    return COMPONENT if kind is Kind.COMPONENT else PATIENT


def values_name(unit: Unit) -> str:
    """What the values are, in the plural: "CT numbers", "grey values", "densities"."""
    names = {"CT number": "CT numbers", "grey value": "grey values", "density": "densities"}
    return names.get(unit.quantity, f"values ({unit.symbol})" if unit.symbol else "values")


def basis_sentence(unit: Unit) -> str:
    """Where the unit comes from, and what that means."""
    if unit.basis is Basis.CALIBRATED:
        return "Calibrated: the job sheet gave reference values."
    if unit.quantity == "grey value":
        reason = "the file says that they have none" if unit.basis is Basis.DECLARED else "the file declares none"
        return f"Grey values without a unit: {reason}, and nothing was calibrated. They hold within this scan only."
    if unit.basis is Basis.DECLARED:
        return "Declared: the file names this unit. Whether the scanner was calibrated is not recorded."
    return "Implied: the file declares no unit, and an original CT image without one is in Hounsfield units."


def label_sentence(unit: Unit, words: Words, named_by: str) -> str:
    """What a name from a job sheet means, and what it does not."""
    return f"label supplied by {named_by}: same {values_name(unit)}, not necessarily the same {words.matter}"


def direction_sentence(grid: Grid, words: Words) -> str:
    """Where columns, rows and slices run, by the nearest axis and the angle to it."""
    parts = []
    for name, column in (("columns", 0), ("rows", 1), ("slices", 2)):
        vector = grid.direction[:, column]
        axis = int(abs(vector).argmax())
        end = words.axes[axis][int(vector[axis] > 0)]
        parts.append(f"{name} towards {end}")
    return "; ".join(parts)


def relevant(remarks: Sequence[Remark], voids_measured: bool) -> list[Remark]:
    """The remarks without those that speak of voids nobody looked for."""
    return [r for r in remarks if voids_measured or r.code not in ABOUT_VOIDS]
