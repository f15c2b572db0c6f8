"""Surface area against closed forms, on even, uneven and tilted grids."""

import numpy as np
import pytest

from tomofolio.body.result import Body
from tomofolio.measure.surface import surface_area_mm2


def body_of(grid, share):
    filled = share >= 0.5
    ends = [np.flatnonzero(filled.any(axis=tuple(a for a in range(3) if a != axis))) for axis in range(3)]
    return Body(filled.astype(np.uint8), tuple(slice(int(e[0]), int(e[-1]) + 1) for e in ends), 0.5)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_turned_bodies_are_within_two_percent(phantoms, seed):
    grid, turn = phantoms.grid_of((96, 96, 96)), phantoms.rotation(seed)
    outer, bore = phantoms.cylinder(30.3, 25.2, turn), phantoms.cylinder(12.1, 60, turn)
    shapes = {
        "sphere": (phantoms.sphere(37.4), 4 * np.pi * 37.4**2),
        "cylinder": (outer, 2 * np.pi * 30.3 * (30.3 + 50.4)),
        "bore": (
            lambda x: np.minimum(outer(x), -bore(x)),
            2 * np.pi * (30.3**2 - 12.1**2 + 50.4 * (30.3 + 12.1)),
        ),
    }
    for name, (shape, area) in shapes.items():
        assert surface_area_mm2(body_of(grid, phantoms.share_of(grid, shape)), grid) == pytest.approx(area, rel=0.02), (
            name
        )


@pytest.mark.parametrize("turn", [None, 4, 5], ids=["along-the-axes", "turned", "turned-otherwise"])
def test_box_misses_no_more_than_its_edges(phantoms, turn):
    grid, half = phantoms.grid_of((96, 96, 96)), np.array([32.0, 28.0, 22.0])
    shape = phantoms.box(half, None if turn is None else phantoms.rotation(turn))
    area, edges = 8 * (half[0] * half[1] + half[1] * half[2] + half[0] * half[2]), 8 * half.sum()
    measured = surface_area_mm2(body_of(grid, phantoms.share_of(grid, shape)), grid)
    assert area - edges < measured < area * 1.01


@pytest.mark.parametrize(
    "geometry",
    [
        {"spacing": (2.0, 0.8, 0.8)},
        {"spacing": (1.5, 1.0, 1.0), "tilt_degrees": 25},
        {"spacing": (1.0, 0.6, 1.3)},
    ],
    ids=["thick-slices", "tilted", "uneven-pixels"],
)
def test_sphere_on_other_grids(phantoms, geometry):
    spacing = geometry["spacing"]
    grid = phantoms.grid_of([int(90 / s) for s in spacing], **geometry)
    measured = surface_area_mm2(body_of(grid, phantoms.share_of(grid, phantoms.sphere(29.3))), grid)
    assert measured == pytest.approx(4 * np.pi * 29.3**2, rel=0.03)


def test_sphere_in_slices_that_stand_unevenly(phantoms):
    positions = np.cumsum(1 + 0.6 * np.sin(np.arange(90) / 5))
    grid = phantoms.grid_of((90, 80, 80), positions=positions)
    index = np.stack(np.meshgrid(*map(np.arange, grid.shape), indexing="ij"), -1)
    inside = np.linalg.norm(grid.to_mm(index) - grid.centre_mm, axis=-1) < 30.4
    assert surface_area_mm2(body_of(grid, inside), grid) == pytest.approx(4 * np.pi * 30.4**2, rel=0.03)


def test_the_cut_at_the_border_of_the_scan_is_no_surface(phantoms):
    grid = phantoms.grid_of((40, 80, 80))
    share = phantoms.share_of(grid, phantoms.cylinder(30.3, 100))  # runs through all slices
    assert surface_area_mm2(body_of(grid, share), grid) == pytest.approx(2 * np.pi * 30.3 * 40, rel=0.015)


def test_enclosed_voids_and_faces_to_things_left_out_are_no_surface(phantoms):
    grid = phantoms.grid_of((60, 60, 60))
    whole = body_of(grid, phantoms.share_of(grid, phantoms.box((20, 20, 20))))
    plain = surface_area_mm2(whole, grid)
    regions = whole.regions.copy()
    regions[28:33, 28:33, 28:33] = 2
    assert surface_area_mm2(Body(regions, whole.box, 0.5), grid) == plain
    regions[:10][regions[:10] == 0] = 3  # a table against the first face
    rest = surface_area_mm2(Body(regions, whole.box, 0.5), grid)
    assert rest == pytest.approx(plain - 40 * 40, rel=0.02)


@pytest.mark.parametrize("seed", [1, 2])
def test_noise_at_the_edge_does_not_feign_surface(phantoms, seed):
    grid = phantoms.grid_of((72, 72, 72))
    _, _, body, _ = phantoms.scan(phantoms.sphere(26.2), grid, blur=1.0, cnr=10, seed=seed)
    assert surface_area_mm2(body, grid) == pytest.approx(4 * np.pi * 26.2**2, rel=0.02)


def test_nothing_has_no_surface(phantoms):
    grid = phantoms.grid_of((5, 5, 5))
    assert surface_area_mm2(Body(np.zeros((5, 5, 5), np.uint8), (slice(0, 0),) * 3, 0.5), grid) == 0
