"""What may be printed while identity is hidden.

The header's identifying facts are never printed then. Free texts (job sheet, remarks, captions) are ours to print,
but a person may have typed a name into them; whatever repeats an identifying fact is blanked.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from functools import cached_property

from tomofolio.series import Series

WITHHELD = "(withheld)"

#: What de-identified files hold in place of a name: it names nobody.
PLACEHOLDERS = frozenset(
    {
        *("anon", "anonym", "anonymous", "anonymized", "anonymised", "deidentified", "de-identified"),
        *("removed", "withheld", "hidden", "unknown", "none", "null", "empty", "test", "sample"),
        *("patient", "person", "subject", "component", "phantom", "specimen"),
    }
)

#: Shorter facts ("M", "47") cannot be told from ordinary text.
SHORTEST = 4


class Discretion:
    """Decides what of the free texts is shown.

    Parameters
    ----------
    series : whose ``identity``, ``uid`` and ``description`` must not appear.
    keep : True shows everything.
    """

    def __init__(self, series: Series, keep: bool) -> None:
        self.keep = keep
        self._series = series

    @cached_property
    def _pattern(self) -> re.Pattern[str] | None:
        marks = sorted(_telling(self._facts()), key=lambda text: (-len(text), text))
        if not marks:
            return None
        return re.compile(r"(?<!\w)(?:" + "|".join(map(re.escape, marks)) + r")(?!\w)", re.IGNORECASE)

    def _facts(self) -> Iterable[tuple[str, str]]:
        yield from self._series.identity.items()
        yield "uid", self._series.uid
        yield "description", self._series.description

    def shown(self, text: str) -> str:
        """The text as it may be printed."""
        if self.keep or self._pattern is None:
            return text
        return self._pattern.sub(WITHHELD, text)

    def identity(self) -> Mapping[str, str]:
        """The header's identifying facts that may be printed: all of them or none."""
        return dict(self._series.identity) if self.keep else {}

    def description(self) -> str:
        """The series description, where it may be printed."""
        return self._series.description if self.keep else ""


def _telling(facts: Iterable[tuple[str, str]]) -> set[str]:
    """Every fact that is long enough, and the parts of names ("Family^Given")."""
    marks: set[str] = set()
    for label, fact in facts:
        fact = fact.strip()
        pieces = [fact]
        if "^" in fact or re.search(r"name|physician|operator|person", label, re.IGNORECASE):
            parts = [part for part in re.split(r"[\^=\\,;\s]+", fact) if part]
            pieces += parts
            pieces += [" ".join(parts), " ".join(parts[::-1])]
        marks.update(piece for piece in pieces if len(piece) >= SHORTEST and piece.lower() not in PLACEHOLDERS)
    return marks
