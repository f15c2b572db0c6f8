"""The canvas: pages that know how many they are, a running head and foot on each, and an outline."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

from tomofolio.report import style  # before reportlab: it names the base typeface

# isort: split
from reportlab.pdfgen.canvas import Canvas

Furniture = Callable[[Canvas, int, int], None]


class SheetCanvas(Canvas):
    """A canvas that holds back its pages until their number is known.

    Parameters
    ----------
    furniture : draws head and foot: called with the canvas, the page's number and the number of pages.
    title, subject : document information.
    created : ISO 8601 time of the run; reportlab would else take a date from the environment.
    """

    def __init__(
        self, filename: Any, *, furniture: Furniture, title: str, subject: str, created: str, **options: Any
    ) -> None:
        options |= {"invariant": 1, "pageCompression": 1, "lang": "en-GB", "initialFontName": style.REGULAR}
        super().__init__(filename, **options)
        self._furniture = furniture
        self._held: list[dict[str, Any]] = []
        self._outline: list[tuple[int, str, int]] = []
        self._facts = (title, subject)
        date = pdf_date(created)
        self.setDateFormatter(lambda *parts: date)
        # The file's identifier is a digest over its contents and, by reportlab's default, over a date of its own.
        self._doc.signature = hashlib.md5(date.encode(), usedforsecurity=False)

    def note_outline(self, title: str, level: int) -> None:
        """Put the current page into the outline; level 0 is the top."""
        self._outline.append((len(self._held), title, level))

    def showPage(self) -> None:  # noqa: N802 - reportlab's name
        self._held.append(dict(self.__dict__))
        self._startPage()

    def save(self) -> None:
        title, subject = self._facts
        held, outline = self._held, self._outline
        for index, state in enumerate(held):
            self.__dict__.update(state)
            for at, text, level in outline:
                if at == index:
                    key = f"p{index}-{len(text)}-{level}"
                    self.bookmarkPage(key)
                    self.addOutlineEntry(text, key, level, closed=level > 0)
            self._furniture(self, index + 1, len(held))
            super().showPage()
            self._doc.Pages.pages[-1].Trans = None  # else every page has an empty transition
        self.setTitle(title)
        self.setSubject(subject)
        self.setAuthor("tomofolio")
        self.setCreator("tomofolio")
        self.setProducer("tomofolio")
        self.setViewerPreference("DisplayDocTitle", "true")
        self.showOutline()
        # Everything has been shown: the base class would add an empty page if it found anything left to draw.
        self._code: list[str] = []
        super().save()
        style.forget_document(self._doc)


def pdf_date(created: str) -> str:
    """An ISO 8601 time as PDF writes it (ISO 32000-1, 7.9.4); UTC where it names no offset."""
    try:
        time = datetime.fromisoformat(created)
    except ValueError:
        time = datetime(2000, 1, 1)
    time = time.astimezone(UTC) if time.tzinfo else time
    return f"D:{time:%Y%m%d%H%M%S}+00'00'"
