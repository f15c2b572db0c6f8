"""Encoding, windows, tables and files against the standards they follow."""

from __future__ import annotations

import numpy as np
import pytest
from PIL import Image

from tomofolio.render import (
    Caption,
    Key,
    Stroke,
    View,
    apply_window,
    cast_rays,
    make_tables,
    window_from_ranges,
    write_png,
)
from tomofolio.render.camera import Camera
from tomofolio.render.colours import PALETTE, decode_srgb, encode_srgb, on_ground, ordered_colours


def test_srgb_encoding_is_that_of_iec_61966_2_1():
    """0.5 and 0.2140 as in the standard's curve: 0.2140 linear is 0.5 encoded; the toe is straight (from memory)."""
    assert encode_srgb(0.21404114) == pytest.approx(0.5, abs=1e-6)
    assert encode_srgb(0.0031308) == pytest.approx(0.0031308 * 12.92, abs=1e-9)
    assert encode_srgb([0.0, 1.0, 2.0, -1.0]) == pytest.approx([0.0, 1.0, 1.0, 0.0])
    levels = np.arange(256) / 255
    assert np.array_equal(np.rint(encode_srgb(decode_srgb(levels)) * 255), np.arange(256))


def test_clear_pixels_show_the_ground_and_half_opaque_black_halves_its_light():
    rgba = np.zeros((1, 2, 4), np.float32)
    rgba[0, 1, 3] = 0.5
    ground, half = on_ground(rgba)[0].astype(int)
    assert tuple(ground) == (250, 249, 246)
    assert np.abs(half - encode_srgb(decode_srgb(ground / 255) / 2) * 255).max() <= 0.51


def dicom_window(x, c, w):
    """PS3.3 C.11.2.1.2.1, as the standard writes it, one value at a time."""
    if x <= c - 0.5 - (w - 1) / 2:
        return 0
    if x > c - 0.5 + (w - 1) / 2:
        return 255
    return ((x - (c - 0.5)) / (w - 1) + 0.5) * 255


@pytest.mark.parametrize(("centre", "width"), [(2048, 4096), (40, 400), (0, 100), (0, 1), (-0.5, 2), (300.5, 1500.25)])
def test_window_follows_the_standard_to_the_grey_level(centre, width):
    x = np.concatenate((np.arange(-2100, 4300), np.linspace(-3, 3, 601)))
    expected = np.array([np.rint(dicom_window(float(v), centre, width)) for v in x])
    assert np.array_equal(apply_window(x, centre, width), expected)


@pytest.mark.parametrize(
    "peaks",
    [
        ((0.0, 20.0, 0.5), (1000.0, 30.0, 0.5)),
        ((-1000.0, 8.0, 0.4), (-95.0, 18.0, 0.1), (40.0, 14.0, 0.4), (800.0, 300.0, 0.1)),
        ((0.0, 500.0, 0.6), (9000.0, 600.0, 0.38), (30000.0, 900.0, 0.02)),
    ],
)
def test_window_tells_every_range_from_the_next(make, peaks):
    grey = apply_window([peak for peak, _, _ in peaks], *window_from_ranges(make.ranges(*peaks))).astype(int)
    assert np.diff(grey).min() >= 12
    assert grey[0] == 0


def test_colours_are_ordered_in_lightness_and_told_apart_without_red_or_green():
    for count in range(2, 7):
        linear = decode_srgb(np.array(ordered_colours(count)) / 255)
        luminance = linear @ np.array([0.2126, 0.7152, 0.0722])
        assert np.all(np.diff(luminance) < -0.005), count
    # red-blind view by Viénot, Brettel & Mollon 1999 (from memory): what remains of red and green is their mixture
    linear = decode_srgb(np.array(PALETTE) / 255)
    mixed = np.column_stack((linear[:, :2] @ np.array([0.112, 0.888]), linear[:, 2]))
    gaps = np.linalg.norm(encode_srgb(mixed)[1:] - encode_srgb(mixed)[:-1], axis=1)
    assert gaps.min() > 0.1


def test_background_is_clear_and_rarer_matter_is_stronger(make):
    table = make_tables(make.ranges((0.0, 20.0, 0.7), (1000.0, 30.0, 0.25), (3000.0, 60.0, 0.05)))
    values = np.linspace(table.first, table.last, len(table.density_per_mm))

    def density(value):
        return table.density_per_mm[np.argmin(np.abs(values - value))]

    assert table.density_per_mm[values < 60].max() == 0
    assert 0 < density(1000) < 0.1 * density(3000)
    assert density(500) > 3 * density(1000)  # the surface between background and material
    assert table.density_per_mm.min() >= 0
    plateau = table.density_per_mm[(values > 900) & (values < 1100)]
    assert np.ptp(plateau) == 0  # noise in the bulk does not flicker


@pytest.mark.parametrize("mm", [0.01, 1.0, 25.0])
def test_the_picture_does_not_depend_on_the_unit_of_length(make, mm):
    def ball(p):
        return 1000 / (1 + np.exp((np.linalg.norm(p / mm, axis=-1) - 10) * 2))

    grid = make.grid((32, 32, 32), (mm, mm, mm))
    volume = make.volume(make.grid((32, 32, 32), (mm, mm, mm), -grid.centre_mm), ball)
    ranges = make.ranges((0.0, 10.0, 0.8), (1000.0, 20.0, 0.2))
    table = make_tables(ranges, body=make.body(volume, 500.0), volume=volume)
    camera = Camera((0.0, 1.0, 0.0), (0.0, 0.0, 1.0), (0.0, 0.0, 0.0), 0.5 * mm, 64, 64)
    picture = on_ground(cast_rays(volume, None, table, camera)).astype(int)
    assert picture[32, 32].max() < 225 and picture[0, 0].min() > 240
    assert picture[32, 32].tolist() == pytest.approx([157, 181, 190], abs=40)


@pytest.fixture
def little_view():
    marks = (
        Stroke(((20.0, 90.0), (60.0, 90.0)), "scale"),
        Stroke(((40.0, 30.0), (60.0, 30.0), (60.0, 50.0), (40.0, 50.0)), "outline", closed=True),
        Caption((10.0, 50.0), "−X", "letter"),
    )
    pixels = np.full((100, 120), 200, np.uint8)
    return View("section-xy", "section", "XY section", "Seen from −Z. 0.1 mm²", pixels, 0.1, marks, Key((100, 50)))


def test_png_holds_marks_caption_and_resolution_and_is_the_same_every_time(little_view, tmp_path):
    write_png(little_view, tmp_path / "a.png", dpi=300)
    write_png(little_view, tmp_path / "b.png", dpi=300)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()
    with Image.open(tmp_path / "a.png") as image:
        image.load()
        assert image.size == (120, 100)
        assert image.info["Description"] == little_view.caption
        assert image.info["dpi"][0] == pytest.approx(300, abs=0.1)
        pixels = np.asarray(image.convert("RGB")).astype(int)
    assert pixels[90, 40].max() < 120  # the scale bar
    orange = (pixels[..., 0] - pixels[..., 2]) > 60
    assert orange[29:32, 45:56].any() and not orange[36:45, 45:55].any()  # the outline, and nothing inside it
    assert pixels[70, 100].tolist() == [200, 200, 200]
