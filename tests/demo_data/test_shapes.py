"""Drawn shapes fill the cells that geometry says."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate

#: Cells of 0.125 mm, as the cover is drawn on.
STEP = 0.125


def filled(shapes, solid, splits=4, shift=0.0):
    axes = [
        np.arange(low - 3 * STEP + shift, high + 3 * STEP, STEP)
        for low, high in zip(solid.low, solid.high, strict=True)
    ]
    return float(shapes.coverage(solid, *axes[::-1], splits=splits).sum(dtype=float)) * STEP**3


#: name -> how to make it, and its volume from school geometry.
FORMULAS = {
    "sphere": (lambda s: s.sphere((0.03, 0.4, -0.2), 0.9), 4 / 3 * np.pi * 0.9**3),
    "ellipsoid": (lambda s: s.ellipsoid((1.0, 0.05, 0.3), (1.3, 0.9, 0.6)), 4 / 3 * np.pi * 1.3 * 0.9 * 0.6),
    "capsule": (lambda s: s.capsule((0, 0, 0), (1.0, 2.0, 2.0), 0.6), np.pi * 0.36 * 3 + 4 / 3 * np.pi * 0.6**3),
    "cylinder": (lambda s: s.cylinder((0.2, 0.1), 1.1, 0.33, 2.7), np.pi * 1.21 * 2.37),
    "box": (lambda s: s.box((0.01, 0.02, 0.03), (1.5, 2.5, 3.1)), 1.49 * 2.48 * 3.07),
    "rounded box": (lambda s: s.box((0, 0, 0), (4.1, 3.3, 2.0), corner=1.0), (4.1 * 3.3 - (4 - np.pi)) * 2.0),
    "rib": (lambda s: s.rib((0, 0), (3.0, 4.0), 1.7, 0.2, 1.9), (5 * 1.7 + np.pi * 0.85**2) * 1.7),
}


@pytest.mark.parametrize("name", FORMULAS)
@pytest.mark.parametrize("shift", [0.0, 0.031, 0.0625])
def test_shape_fills_its_closed_form_volume_wherever_the_grid_lies(shapes, name, shift):
    make, volume = FORMULAS[name]
    solid = make(shapes)
    assert solid.volume == pytest.approx(volume, rel=1e-9)
    assert filled(shapes, solid, shift=shift) == pytest.approx(volume, rel=0.002)


@pytest.mark.parametrize("face", [0.0, 0.02, 0.0625, 0.1])
def test_flat_face_is_exact_wherever_it_lies_in_its_cell(shapes, face):
    solid = shapes.box((0.0, 0.0, face), (2.0, 2.0, face + 1.0))
    axis = np.arange(-4, 24) * STEP
    column = shapes.coverage(solid, axis, axis, axis, splits=2)[:, 12, 12]
    # Overlap of [face, face + 1] with every cell, as a share of the cell.
    low, high = axis - STEP / 2, axis + STEP / 2
    expected = np.clip(np.minimum(high, face + 1) - np.maximum(low, face), 0, None) / STEP
    np.testing.assert_allclose(column, expected, atol=1e-5)


def test_lens_of_two_spheres_agrees_with_integrated_sections(shapes):
    # Area of the smaller section of the two spheres, integrated along the line of centres (SciPy's quadrature).
    first, second, apart = 0.7, 0.6, 1.1

    def section(t):
        return np.pi * max(min(first**2 - t**2, second**2 - (t - apart) ** 2), 0.0)

    expected, _ = integrate.quad(section, apart - second, first, points=[0.6], limit=200)
    assert shapes.lens_volume(first, second, apart) == pytest.approx(expected, rel=1e-6)


def test_overlapping_spheres_have_their_volume_once(shapes):
    parts = (((0.0, 0.0, 0.0), 0.7), ((0.8, 0.7, 0.4), 0.6), ((0.7, -0.6, -0.6), 0.6))
    solid = shapes.spheres(*parts)
    assert filled(shapes, solid) == pytest.approx(solid.volume, rel=0.002)
    assert solid.volume < sum(4 / 3 * np.pi * radius**3 for _, radius in parts)


@pytest.mark.parametrize(
    "parts",
    [
        (((0, 0, 0), 1.0), ((0.2, 0, 0), 0.5)),
        (((0, 0, 0), 1.0), ((1, 0, 0), 1.0), ((0.5, 0.8, 0), 1.0)),
    ],
    ids=["one within another", "three at one place"],
)
def test_spheres_without_a_formula_are_refused(shapes, parts):
    with pytest.raises(ValueError, match="sphere"):
        shapes.spheres(*parts)


def test_difference_and_intersection_share_a_shape_out(shapes):
    whole, cutter = shapes.box((0, 0, 0), (3, 3, 3)), shapes.cylinder((1.5, 1.5), 1.0, -1, 4)
    cut, core = shapes.difference(whole, cutter), shapes.intersection(whole, cutter)
    assert filled(shapes, cut) == pytest.approx(27 - 3 * np.pi, rel=0.001)
    assert filled(shapes, core) == pytest.approx(3 * np.pi, rel=0.001)


def test_blend_fills_the_corner_and_leaves_faces_alone(shapes):
    floor, post = shapes.box((0, 0, 0), (8, 8, 3)), shapes.box((3, 3, 1.5), (5, 5, 7))
    blended = shapes.blend(floor, post, 1.0)
    corner, top, under = (5.2, 4.0, 3.2), (4.0, 4.0, 6.9), (4.0, 4.0, -0.02)
    assert shapes.union(floor, post).distance(*corner) > 0 > blended.distance(*corner)
    assert blended.distance(*top) == pytest.approx(post.distance(*top), abs=1e-6)
    assert blended.distance(*under) > 0


def test_shape_away_from_the_grid_fills_nothing(shapes):
    axis = np.arange(8) * STEP
    assert not shapes.coverage(shapes.sphere((50, 50, 50), 1.0), axis, axis, axis).any()


def test_slab_of_a_scan_is_the_same_as_in_the_whole(drawing):
    scanner, shapes = drawing.scanner, drawing.shapes
    ball = shapes.sphere((2.0, 2.2, 3.1), 1.4)

    def draw(z, y, x):
        return shapes.coverage(ball, z, y, x)

    whole = scanner.scan(draw, (40, 20, 20), (0.25, 0.25, 0.25), 0.2)
    part = scanner.scan(draw, (40, 20, 20), (0.25, 0.25, 0.25), 0.2, slices=range(7, 19))
    np.testing.assert_array_equal(part, whole[7:19])
    assert whole.sum(dtype=float) * 0.25**3 == pytest.approx(ball.volume, rel=0.005)


def test_blur_of_a_scan_widens_a_ball_by_the_variances_of_blur_and_voxel(drawing):
    # Second moment along an axis: r² / 5 of a ball + σ² of the blur + step² / 12 of the voxel, in closed form.
    scanner, shapes = drawing.scanner, drawing.shapes
    radius, sigma, spacing = 1.4, 0.33, (0.5, 0.25, 0.3)
    ball = shapes.sphere((3.0, 3.1, 4.9), radius)
    picture = scanner.scan(lambda z, y, x: shapes.coverage(ball, z, y, x, splits=4), (20, 24, 20), spacing, sigma)
    for axis, step in enumerate(spacing):
        profile = picture.sum(axis=tuple(a for a in range(3) if a != axis), dtype=float)
        place = np.arange(len(profile)) * step
        mean = (profile * place).sum() / profile.sum()
        variance = (profile * (place - mean) ** 2).sum() / profile.sum()
        assert variance == pytest.approx(radius**2 / 5 + sigma**2 + step**2 / 12, rel=0.01)
