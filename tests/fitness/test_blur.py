"""Blur of the edge response against closed form: total σ² = Gaussian blur σ² + voxel width² / 12, per axis."""

from dataclasses import replace

import numpy as np
import pytest

from tomofolio.fitness.blur import measure_blur

TILTED = np.eye(3)
TILTED[:, 2] = [0, np.sin(0.3), np.cos(0.3)]

# shape, grid, direction, blur in voxels, contrast-to-noise, noise correlation, cupping, seed
CASES = {
    "turned box": ("box", (64, 64, 64), (1, 1, 1), None, 0.8, 10, 0.6, 0.0, 1),
    "turned box, slightly blurred": ("box", (64, 64, 64), (1, 1, 1), None, 0.5, 20, 0.0, 0.0, 2),
    "upright cylinder, cupping of 10 %": ("cylinder", (64, 64, 64), (1, 1, 1), None, 1.0, 10, 0.6, 0.1, 3),
    "sphere, strongly blurred": ("sphere", (64, 64, 64), (1, 1, 1), None, 1.5, 10, 0.6, 0.0, 4),
    "sphere, different along the axes": ("sphere", (64, 64, 64), (1, 1, 1), None, (0.6, 1.0, 1.3), 20, 0.0, 0.0, 5),
    "ribs": ("ribs", (72, 72, 72), (1, 1, 1), None, 0.8, 20, 0.0, 0.0, 6),
    "low contrast": ("sphere", (64, 64, 64), (1, 1, 1), None, 1.0, 4, 0.0, 0.0, 7),
    "flat voxels": ("sphere", (32, 70, 70), (0.8, 0.36, 0.36), None, 0.8, 10, 0.0, 0.0, 8),
    "oblique grid": ("box", (60, 60, 60), (0.5, 0.45, 0.4), "turned", 0.9, 10, 0.6, 0.0, 9),
    "tilted slices": ("sphere", (60, 60, 60), (0.5, 0.5, 0.5), "tilted", 0.9, 10, 0.0, 0.0, 10),
}


def _phantom(phantoms, name):
    kind, shape, spacing, direction, blur, cnr, correlation, cupping, seed = CASES[name]
    turn = {"turned": phantoms.rotation(99), "tilted": TILTED}.get(direction)
    grid = phantoms.grid_of(shape, spacing, turn)
    size = min(n * s for n, s in zip(shape, spacing, strict=True)) / 2
    drawing = {
        "box": lambda: phantoms.box(np.array([0.6, 0.54, 0.63]) * size, phantoms.rotation(seed)),
        "cylinder": lambda: phantoms.cylinder(0.55 * size, 0.75 * size),
        "sphere": lambda: phantoms.sphere(0.74 * size),
        "ribs": lambda: phantoms.ribs(np.array([0.68, 0.6, 0.6]) * size, 12, 26, phantoms.rotation(seed)),
    }[kind]()
    return phantoms.make(
        grid, drawing, blur=blur, cnr=cnr, correlation=correlation, cupping=cupping, cupping_radius=size, seed=seed
    ), correlation


@pytest.mark.parametrize("name", CASES)
def test_blur_is_that_put_in(phantoms, name):
    phantom, correlation = _phantom(phantoms, name)
    blur = measure_blur(phantom.volume, phantom.body, 10000.0, (correlation,) * 3)
    assert blur.mean_mm == pytest.approx(np.prod(phantom.blur_mm) ** (1 / 3), rel=0.08)
    if "sphere" in name and CASES[name][5] >= 10:
        assert blur.axes_mm == pytest.approx(tuple(phantom.blur_mm), rel=0.1)


def test_axis_that_no_edge_faces_is_taken_from_the_others_and_marked(phantoms):
    grid = phantoms.grid_of((40, 60, 60))
    phantom = phantoms.make(grid, phantoms.cylinder(18, 300), blur=0.8, cnr=15, seed=21)
    blur = measure_blur(phantom.volume, phantom.body, 10000.0, (0.0, 0.0, 0.0))
    assert blur.measured == (False, True, True)
    assert blur.axes_mm == pytest.approx(tuple(phantom.blur_mm), rel=0.08)


def test_no_blur_where_thick_slices_have_no_edges(phantoms):
    grid = phantoms.grid_of((16, 60, 60), (4, 1, 1))
    phantom = phantoms.make(grid, phantoms.cylinder(18, 300), blur=0.8, cnr=15, seed=23)
    assert measure_blur(phantom.volume, phantom.body, 10000.0, (0.0, 0.0, 0.0)) is None


def test_an_object_of_a_few_voxels_has_no_blur(phantoms):
    phantom = phantoms.make(phantoms.grid_of((30, 30, 30)), phantoms.sphere(2), blur=0.8, cnr=20, seed=22)
    assert measure_blur(phantom.volume, phantom.body, 10000.0, (0.0, 0.0, 0.0)) is None


def test_edges_whose_foot_was_cleared_still_give_the_blur(phantoms):
    phantom = phantoms.make(phantoms.grid_of((56, 56, 56)), phantoms.sphere(20), blur=0.8, cnr=20, seed=24)
    stored = np.where(phantom.volume.stored < 3000, 1000, phantom.volume.stored).astype(np.int16)
    volume = replace(phantom.volume, stored=stored)
    blur = measure_blur(volume, phantom.body, 10000.0, (0.0, 0.0, 0.0), 1000.0)
    assert blur.mean_mm == pytest.approx(phantom.blur_mm[0], rel=0.08)
