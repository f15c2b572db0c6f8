"""Which of several series a report should be made from, where nobody has said so."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tomofolio.intake.headers import Header
from tomofolio.volume import Grid

#: A series that covers less than this share of the longest one is a test shot or a detail: no competitor.
COVERING = 0.25

#: Series that cover at least this share of the longest one are equally complete.
COMPLETE = 0.9

#: Words in the names of reconstruction kernels, smooth to sharp. Common practice, no source.
KERNEL_WORDS = ("SOFT", "SMOOTH", "STANDARD", "STD", "DETAIL", "SHARP", "BONE", "LUNG", "EDGE")


@dataclass(frozen=True)
class Candidate:
    """A series that a report can be made from."""

    headers: Sequence[Header]
    grid: Grid

    @property
    def extent_mm(self) -> float:
        """What the slices that are there cover, perpendicular to them; missing ones cover nothing."""
        return len(self.headers) * float(np.median(self.grid.slice_distances_mm))


def recommend(candidates: Sequence[Candidate]) -> tuple[int | None, str]:
    """Choose one of the series.

    The rule:

    1. Original images before derived ones.
    2. Series that cover less than a quarter of the longest one are left aside.
    3. If what is left is not one acquisition (patient, study, frame of reference, acquisition number, tube voltage
       or phase differ), none is recommended: they show different things, and only a person knows which is meant.
    4. Of the reconstructions of one acquisition, the complete ones (90 % of the longest extent), then the thinnest
       slice distance, then the smoother kernel where both are recorded in a scheme that tells, then the one with
       more slices, then the lower series number and UID.

    Returns
    -------
    (index, why) or (None, why not), the sentence without its full stop.
    """
    if not candidates:
        return None, ""
    if len(candidates) == 1:
        return 0, "it is the only series that a report can be made from"
    left = [k for k, item in enumerate(candidates) if is_original(item.headers[0])] or list(range(len(candidates)))
    longest = max(candidates[k].extent_mm for k in left)
    left = [k for k in left if candidates[k].extent_mm >= COVERING * longest]
    differing = differences([candidates[k].headers for k in left])
    if differing:
        return None, f"several series compete: they differ in {differing}"
    left.sort(key=lambda k: _preference(candidates[k], longest))
    return left[0], "it is the most complete, with the thinnest slices and the smoothest kernel of those"


def is_original(header: Header) -> bool:
    """Whether the images are original ones by Image Type; where that is not recorded, they are taken for original."""
    return header.image_type[:1] != ("DERIVED",)


def differences(series: Sequence[Sequence[Header]]) -> str:
    """In what the series differ that makes them different scans, listed; empty where they are one acquisition."""
    facts = {
        "patient": lambda headers: headers[0].patient,
        "study": lambda headers: headers[0].study,
        "frame of reference": lambda headers: headers[0].frame_of_reference,
        "acquisition": lambda headers: frozenset(header.acquisition for header in headers if header.acquisition),
        "tube voltage": lambda headers: frozenset(header.kvp for header in headers if header.kvp is not None),
        "phase": lambda headers: frozenset(header.phase for header in headers if header.phase),
    }
    return ", ".join(name for name, get in facts.items() if len({get(headers) for headers in series}) > 1)


def kernel_sharpness(name: str) -> float | None:
    """How sharp a reconstruction kernel is, on a scale of its naming scheme; None where its name doesn't tell.

    Two schemes are known: letters with a two-digit number that grows with sharpness, and plain words. Common
    practice, no source.
    """
    numbered = re.match(r"[A-Za-z]{1,3}(\d{2})", name)
    if numbered:
        return float(numbered[1])
    words = [k for k, word in enumerate(KERNEL_WORDS) if word in name.upper()]
    return 10.0 * (words[0] + 1) if words else None


def _preference(item: Candidate, longest: float) -> tuple[object, ...]:
    first = item.headers[0]
    incomplete = item.extent_mm < COMPLETE * longest
    sharpness = kernel_sharpness(first.kernel)
    return (
        incomplete,
        -item.extent_mm if incomplete else 0.0,
        round(item.grid.spacing_mm[0], 2),
        50.0 if sharpness is None else sharpness,
        -len(item.headers),
        int(first.series_number) if first.series_number.lstrip("+-").isdigit() else 0,
        first.series,
    )
