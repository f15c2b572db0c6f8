"""Headers into series: what belongs together by patient, study, series and frame of reference."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from tomofolio.intake.headers import Header

Key = tuple[str, str, str, str]


@dataclass(frozen=True)
class Group:
    """The objects of one series. ``conflict`` says that the series' UID is shared with another group, and how."""

    headers: tuple[Header, ...]
    conflict: str = ""


def group(headers: Iterable[Header]) -> list[Group]:
    """Group headers by patient, study, series and frame of reference, in the order of first appearance.

    A series has one patient, one study and one frame of reference by the standard. Where the objects under one
    series UID disagree on them they come as several groups, each with the conflict named: using one of them could
    silently leave slices out.
    """
    found: dict[Key, list[Header]] = defaultdict(list)
    for header in headers:
        found[_key(header)].append(header)
    by_series: dict[str, list[Key]] = defaultdict(list)
    for key in found:
        by_series[key[2]].append(key)
    return [Group(tuple(members), _conflict(by_series[key[2]])) for key, members in found.items()]


def _key(header: Header) -> Key:
    return header.patient, header.study, header.series, header.frame_of_reference


def _conflict(keys: Sequence[Key]) -> str:
    if len(keys) == 1 or not keys[0][2]:
        return ""
    for place, name in ((0, "patients"), (1, "studies"), (3, "frames of reference")):
        count = len({key[place] for key in keys})
        if count > 1:
            return f"the files under this Series Instance UID belong to {count} {name}"
    return ""
