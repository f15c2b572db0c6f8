"""Pictures reach the file as they are, with their marks as text and lines on top."""

from __future__ import annotations

import io

import numpy as np
import pikepdf
import pypdf
import pytest

from tomofolio.render.view import Caption, Key, Stroke, View
from tomofolio.report import report_bytes
from tomofolio.report.picture import level_scales

NOISE = np.random.default_rng(4).integers(0, 256, (200, 240), dtype=np.uint8)
SMOOTH = np.zeros((200, 240), np.uint8)
SMOOTH[60:140, 80:160] = 200


def view(pixels: np.ndarray, kind: str = "section") -> View:
    marks = (
        Stroke(((10.0, 190.0), (60.0, 190.0)), "scale"),
        Caption((35.0, 193.0), "13 mm", "scale", "centre-top"),
        Caption((3.0, 100.0), "+X −Y", "letter", "left-middle"),
        Stroke(((90.0, 90.0), (110.0, 90.0), (100.0, 110.0)), "outline", closed=True),
    )
    return View(f"{kind}-one", kind, "One view", "Seen from somewhere.", pixels, 0.26, marks, Key(window=(0.0, 500.0)))


def embedded(case_of, pixels: np.ndarray) -> tuple[np.ndarray, str, str]:
    """The picture as another library reads it from the file, its filter, and the text of its page."""
    data = report_bytes(case_of(views=(view(pixels),)))
    with pikepdf.open(io.BytesIO(data)) as pdf:
        image = next(iter(pdf.pages[0].Resources.XObject.values()))
        found = np.asarray(pikepdf.PdfImage(image).as_pil_image().convert("RGB" if pixels.ndim == 3 else "L"))
        return found, str(image.Filter), pypdf.PdfReader(io.BytesIO(data)).pages[0].extract_text()


def test_smooth_grey_picture_is_kept_without_loss(case_of):
    found, how, _ = embedded(case_of, SMOOTH)
    assert "FlateDecode" in how
    assert np.array_equal(found, SMOOTH)


def test_noisy_picture_is_a_jpeg_close_to_the_pixels(case_of):
    found, how, _ = embedded(case_of, NOISE)
    assert "DCTDecode" in how
    assert np.abs(found.astype(int) - NOISE).mean() < 6


def test_colours_survive(case_of):
    pixels = np.zeros((200, 240, 3), np.uint8)
    pixels[:, :120], pixels[:, 120:] = (96, 150, 172), (196, 112, 44)
    found, _, _ = embedded(case_of, pixels)
    assert np.abs(found[:, 20:100].astype(int) - (96, 150, 172)).max() <= 4
    assert np.abs(found[:, 140:220].astype(int) - (196, 112, 44)).max() <= 4


def test_marks_are_text_on_the_page(case_of):
    _, _, text = embedded(case_of, SMOOTH)
    assert "13\u2009mm" in text and "+X" in text and "−Y" in text


def test_level_pictures_have_one_height_and_fill_the_width():
    views = [view(np.zeros(shape, np.uint8)) for shape in ((200, 240), (300, 300), (100, 90))]
    scales = level_scales(views, 480.0, 1e9, 12.0)
    heights = [v.pixels.shape[0] * s for v, s in zip(views, scales, strict=True)]
    assert heights == pytest.approx([heights[0]] * 3)
    assert sum(v.pixels.shape[1] * s for v, s in zip(views, scales, strict=True)) + 24 == pytest.approx(480)
