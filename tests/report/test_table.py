"""Tables line numbers up on the decimal point and run over pages whole."""

from __future__ import annotations

import io
import re

import pypdf
from reportlab.pdfgen.canvas import Canvas
from reportlab.platypus import SimpleDocTemplate

from tomofolio.report import style
from tomofolio.report.table import Column, DataTable, before_point

NUMBERS = ["0.567", "12.31", "1234.5", "−350.2", "7", "–", "12\u2009345.75"]


class Recorder(Canvas):
    """A canvas that remembers what was written where."""

    def __init__(self, *args, **options):
        super().__init__(*args, **options)
        self.written: list[tuple[float, float, str]] = []

    def drawString(self, x, y, text, *args, **options):  # noqa: N802
        self.written.append((x, y, text))
        super().drawString(x, y, text, *args, **options)


def drawn(table: DataTable, width: float = 400) -> list[tuple[float, float, str]]:
    canvas = Recorder(io.BytesIO(), initialFontName=style.REGULAR)
    table.wrap(width, 1000)
    table.drawOn(canvas, 0, 0)
    return canvas.written


def test_decimal_points_of_a_column_stand_under_each_other():
    table = DataTable([Column("No.", align="left"), Column("Volume", "mm³")], [["V", text] for text in NUMBERS])
    points = []
    for x, _, text in drawn(table):
        if text in NUMBERS and any(c.isdigit() for c in text):
            points.append(x + style.width_of(text.partition(".")[0], style.SIZE_TABLE))
    assert len(points) == 6
    assert max(points) - min(points) < 1e-6


def test_digits_of_the_typeface_are_equally_wide():
    for font in (style.REGULAR, style.SEMIBOLD):
        assert len({round(style.width_of(d, 10, font), 6) for d in "0123456789"}) == 1


def test_what_is_no_number_counts_as_a_whole():
    assert [before_point(t) for t in ("12.3", "7", "–", "n.a.")] == ["12", "7", "–", "n.a."]


def test_nothing_is_wider_than_the_table():
    columns = [Column("Name", align="left", most=120), *(Column(f"Figure {n}", "mm³") for n in range(4))]
    rows = [["a very long name that cannot fit into its column " * 3, *("12345.678",) * 4] for _ in range(5)]
    for x, _, text in drawn(DataTable(columns, rows)):
        cell = "…" in text or text == "12345.678"
        assert x >= -1e-6
        assert x + style.width_of(text, style.SIZE_TABLE if cell else style.SIZE_TABLE - 0.5) <= 400 + 1


def test_three_thousand_rows_run_over_pages_each_with_its_head():
    out = io.BytesIO()
    rows = [[f"V{n}", f"{n * 0.37:.2f}"] for n in range(3000)]
    table = DataTable([Column("No.", align="left"), Column("Volume", "mm³")], rows)
    SimpleDocTemplate(out, initialFontName=style.REGULAR).build([table])
    pages = [page.extract_text() for page in pypdf.PdfReader(out).pages]
    assert len(pages) > 20
    assert all("Volume" in text and "mm³" in text for text in pages)
    found = re.findall(r"V\d+", " ".join(pages))
    assert found == [f"V{n}" for n in range(3000)]


def test_no_page_begins_with_one_lonely_row():
    table = DataTable([Column("No.", align="left")], [[f"V{n}"] for n in range(10)])
    table.wrap(300, 1000)
    first, second = table.split(300, table.height - 1)
    assert len(second._rows) >= 3 and len(first._rows) + len(second._rows) == 10
