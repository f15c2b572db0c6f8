"""The canvas: pages that know how many they are, a running head and foot on each, and an outline."""

from __future__ import annotations

from collections.abc import Callable
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
    """

    def __init__(self, filename: Any, *, furniture: Furniture, title: str, subject: str, **options: Any) -> None:
        options |= {"invariant": 1, "pageCompression": 1, "lang": "en-GB", "initialFontName": style.REGULAR}
        super().__init__(filename, **options)
        self._furniture = furniture
        self._held: list[dict[str, Any]] = []
        self._outline: list[tuple[int, str, int]] = []
        self._facts = (title, subject)

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
