"""What every page needs to know: the case, the grid, the vocabulary, and what may be shown."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from functools import cached_property

from tomofolio.case import Case
from tomofolio.remarks import Remark, Severity
from tomofolio.report.frame import SHORT_HASH, Running
from tomofolio.report.numbers import MINUS, with_unit
from tomofolio.report.privacy import Discretion
from tomofolio.report.style import Sheet, printable, sheet
from tomofolio.report.words import Words, relevant, words_for

#: Heaviest first.
WEIGHT = {Severity.STOP: 0, Severity.CAUTION: 1, Severity.NOTE: 2}


#: Codes of remarks that quote a library's message, which may repeat what stands in the header.
QUOTING = frozenset({"decoder-warning"})


@dataclass(frozen=True)
class Setting:
    """One report being set."""

    case: Case
    sheet: Sheet
    words: Words
    discretion: Discretion

    @classmethod
    def of(cls, case: Case) -> Setting:
        """The setting of a case; the job sheet's page size before the preset's."""
        discretion = Discretion(case.series, case.keep_identity)
        return cls(
            case=_with_discreet_names(case, discretion),
            sheet=sheet(case.job.page_size or case.preset.page_size),
            words=words_for(case.kind),
            discretion=discretion,
        )

    def free_text(self, text: str) -> str:
        """A text that a person typed, as it may be printed."""
        return self.discretion.shown(text).strip()

    def sentence(self, text: str) -> str:
        """A sentence of another room, in this report's words and signs.

        Nothing is blanked in our own sentences: a gap in the middle of one would tell which word the hidden name is.
        """
        return self.words.reword(_with_minus(text))

    def _remark(self, remark: Remark) -> Remark:
        """A remark in this report's words; one that quotes what others typed is blanked like their texts."""
        typed = [item.name for item in self.case.ranges.items if item.named_by]
        quotes = remark.code in QUOTING or any(name in remark.text for name in typed)
        text = self.free_text(remark.text) if quotes else remark.text
        return Remark(remark.code, remark.severity, self.sentence(text))

    @property
    def title(self) -> str:
        return printable(self.free_text(self.case.job.title) or self.case.preset.title)

    @property
    def reviewer(self) -> str:
        """Name and qualification of the reviewer, "" where none is named."""
        name = self.free_text(self.case.job.reviewer_name)
        qualification = self.free_text(self.case.job.reviewer_qualification)
        return printable(", ".join(part for part in (name, qualification) if part)) if name else ""

    @property
    def running(self) -> Running:
        """The texts of head and foot."""
        return Running(
            title=self.title,
            number=printable(self.free_text(self.case.job.number)),
            short_hash=self.case.provenance.pixels_sha256[:SHORT_HASH],
            reviewer=self.reviewer,
        )

    @property
    def measures_voids(self) -> bool:
        """Whether voids were looked for."""
        return self.case.findings.voids is not None or self.case.findings.inclusions is not None

    @property
    def symbol(self) -> str:
        return self.case.volume.unit.symbol

    def valued(self, text: str) -> str:
        """A number in the unit of the scan's values."""
        return with_unit(text, self.symbol)

    @cached_property
    def remarks(self) -> list[Remark]:
        """All remarks, heaviest first, each matter once.

        Two rooms may notice the same thing and give it the same code: the first and heavier one is kept. Within one
        room a code may come several times, for several ranges.
        """
        case = self.case
        kept: list[Remark] = []
        for stage in (case.series, case.ranges, case.body, case.fitness, case.findings):
            known = {remark.code for remark in kept}
            kept += [remark for remark in stage.remarks if remark.code not in known]
        kept = relevant(kept, self.measures_voids)
        kept = [self._remark(remark) for remark in kept]
        return sorted(kept, key=lambda remark: WEIGHT[remark.severity])

    def reason(self, *codes: str) -> str:
        """Why a figure does not exist: the first remark with one of the codes."""
        for code in codes:
            for remark in self.remarks:
                if remark.code == code:
                    return remark.text
        return "The scan does not give this figure."


def _with_discreet_names(case: Case, discretion: Discretion) -> Case:
    """The case with the names of ranges, which a person typed, as they may be printed; also in the keys of pictures."""
    items = tuple(replace(item, name=discretion.shown(item.name)) for item in case.ranges.items)
    views = tuple(
        replace(
            view, key=replace(view.key, colours=tuple((discretion.shown(label), c) for label, c in view.key.colours))
        )
        for view in case.views
    )
    return replace(case, ranges=replace(case.ranges, items=items), views=views)


def _with_minus(text: str) -> str:
    """The text with a typographic minus before negative numbers; hyphens in dates and codes stay."""
    return re.sub(r"(?<![\w-])-(?=\d)", MINUS, text)
