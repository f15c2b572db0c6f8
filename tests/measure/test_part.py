"""Volume of the part against closed forms: bias, coverage of the interval, voids, cuts and grids."""

from dataclasses import replace

import numpy as np
import pytest

from tomofolio.body import find_body
from tomofolio.measure.part import part_figures


def shapes_of(phantoms, seed):
    """Name -> (signed distance, volume), sizes and turns drawn from the seed."""
    rng, turn = np.random.default_rng(seed), phantoms.rotation(seed)
    half, radius, length, ball = rng.uniform(10, 18, 3), rng.uniform(12, 17), rng.uniform(12, 17), rng.uniform(15, 25)
    outer, bore = phantoms.cylinder(radius + 3, length, turn), phantoms.cylinder(5.3, 60, turn)
    return {
        "box": (phantoms.box(half, turn), 8 * half.prod()),
        "cylinder": (phantoms.cylinder(radius, length, turn), 2 * np.pi * radius**2 * length),
        "sphere": (phantoms.sphere(ball), 4 / 3 * np.pi * ball**3),
        "bore": (lambda x: np.minimum(outer(x), -bore(x)), 2 * np.pi * ((radius + 3) ** 2 - 5.3**2) * length),
    }


def measured(scan, **voids):
    return part_figures(*scan, **({"closed_voids_mm3": 0.0} | voids))


def test_interval_covers_the_truth_and_the_bias_is_small(phantoms):
    errors, covered, widths = [], [], []
    cases = [(0.5, 20, 0.0), (1.0, 12, 0.05), (1.5, 10, 0.02), (0.8, 15, 0.03)]
    for seed in range(101, 109):
        blur, cnr, cupping = cases[seed % len(cases)]
        for shape, truth in shapes_of(phantoms, seed).values():
            grid = phantoms.grid_of((64, 64, 64))
            scan = phantoms.scan(shape, grid, blur=blur, cnr=cnr, seed=seed, cupping=cupping, cupping_radius=20)
            part = measured(scan)
            errors.append(part.volume_mm3 / truth - 1)
            covered.append(part.volume_mm3_95[0] <= truth <= part.volume_mm3_95[1])
            widths.append((part.volume_mm3_95[1] - part.volume_mm3_95[0]) / truth)
    assert np.mean(covered) >= 0.9
    # Parts are 20 to 50 voxels wide; an interval that covers must also say something.
    assert np.median(widths) < 0.02
    assert abs(np.mean(errors)) < 0.0015


def test_plain_count_is_off_by_more_on_a_strongly_blurred_sphere(phantoms):
    """Blurred by σ, a sphere's half-way surface lies σ² / R within the true one (Taylor expansion, our own)."""
    grid, truth = phantoms.grid_of((56, 56, 56)), 4 / 3 * np.pi * 18.3**3
    scan = phantoms.scan(phantoms.sphere(18.3), grid, blur=1.5, cnr=100, seed=3)
    counted = np.count_nonzero(scan[2].regions == 1)
    assert counted / truth - 1 == pytest.approx(-3 * (1.5**2 + 1 / 12) / 18.3**2, abs=0.004)
    assert measured(scan).volume_mm3 == pytest.approx(truth, rel=0.002)


@pytest.mark.parametrize(
    "geometry",
    [{"spacing": (1.8, 0.7, 0.9)}, {"spacing": (1.4, 1.0, 1.0), "tilt_degrees": 20}],
    ids=["unequal", "tilted"],
)
def test_holds_on_other_grids(phantoms, geometry):
    grid = phantoms.grid_of([int(60 / s) for s in geometry["spacing"]], **geometry)
    scan = phantoms.scan(phantoms.sphere(17.7), grid, blur=0.8, cnr=20, seed=2)
    part, truth = measured(scan), 4 / 3 * np.pi * 17.7**3
    assert part.volume_mm3 == pytest.approx(truth, rel=0.004)
    assert part.volume_mm3_95[0] <= truth <= part.volume_mm3_95[1]


def test_closed_voids_are_taken_off_once_and_widen_the_interval(phantoms):
    grid = phantoms.grid_of((56, 56, 56))
    outer, void = phantoms.sphere(22.3), phantoms.sphere(5.2)
    scan = phantoms.scan(lambda x: np.minimum(outer(x), -void(x)), grid, blur=0.8, cnr=20, seed=1)
    missing = 4 / 3 * np.pi * 5.2**3
    part = measured(scan, closed_voids_mm3=missing)
    assert part.volume_mm3 == pytest.approx(4 / 3 * np.pi * 22.3**3 - missing, rel=0.003)
    wider = measured(scan, closed_voids_mm3=missing, closed_voids_sd_mm3=500.0)
    assert wider.volume_mm3_95[0] == pytest.approx(part.volume_mm3 - 1.96 * 500, rel=0.01)


def test_object_cut_by_the_scan_ends_at_the_border(phantoms):
    grid = phantoms.grid_of((30, 64, 64))
    scan = phantoms.scan(phantoms.cylinder(20.3, 100), grid, blur=1.0, cnr=20, seed=4)
    assert measured(scan).volume_mm3 == pytest.approx(np.pi * 20.3**2 * 30, rel=0.003)


def test_cleared_background_does_not_shrink_the_part(phantoms):
    grid, truth = phantoms.grid_of((64, 64, 64)), 4 / 3 * np.pi * 24.4**3
    volume, ranges, body, fitness = phantoms.scan(phantoms.sphere(24.4), grid, blur=1.0, cnr=40, seed=5)
    stored = np.where(volume.stored < 1000 + 2500, 1000, volume.stored).astype(np.int16)
    assert measured((replace(volume, stored=stored), ranges, body, fitness)).volume_mm3 == pytest.approx(
        truth, rel=0.005
    )


def test_denser_sleeve_at_the_surface_is_left_to_the_count_and_widens_the_interval(phantoms):
    """A bore with a sleeve twice as dense: the sum over the band alone would count the sleeve twice."""
    grid, spacing = phantoms.grid_of((64, 64, 64)), 10000
    outer, bore, sleeve = (phantoms.cylinder(r, 22.5) for r in (26.2, 8.2, 13.2))
    share = phantoms.share_of(grid, lambda x: np.minimum(outer(x), -bore(x)), 0.8)
    lining = phantoms.share_of(grid, lambda x: np.minimum(sleeve(x), -bore(x)), 0.8)
    noise = np.random.default_rng(3).normal(0, 400, grid.shape)
    volume = phantoms.volume_of(1000 + spacing * (share + lining) + noise, grid)
    ranges = phantoms.ranges_of(1000, 11000, 21000, spread=400)
    fitness = phantoms.scan(phantoms.sphere(8), phantoms.grid_of((24, 24, 24)), blur=0.8, cnr=25, seed=1)[3]
    # On the finer voxels of the drawing the ends lie between voxels.
    truth = 2 * np.pi * (26.2**2 - 8.2**2) * 22.5
    part = measured((volume, ranges, find_body(volume, ranges), fitness))
    assert part.volume_mm3 == pytest.approx(truth, rel=0.03)  # half-way is 0.67 σ off at the sleeve
    assert part.volume_mm3_95[0] <= truth <= part.volume_mm3_95[1]


def test_scan_without_background_counts_all_data(phantoms):
    volume = phantoms.volume_of(np.full((6, 7, 8), 500.0))
    ranges = phantoms.ranges_of(500, background=False)
    fitness = phantoms.scan(phantoms.sphere(8), phantoms.grid_of((24, 24, 24)), blur=0.5, cnr=20, seed=1)[3]
    part = measured((volume, ranges, find_body(volume, ranges), fitness))
    assert (part.volume_mm3, part.volume_mm3_95, part.surface_mm2) == (6 * 7 * 8, None, None)


def test_unknown_blur_and_noise_still_give_an_interval(phantoms):
    grid, truth = phantoms.grid_of((48, 48, 48)), 4 / 3 * np.pi * 16.4**3
    *scan, fitness = phantoms.scan(phantoms.sphere(16.4), grid, blur=0.8, cnr=20, seed=6)
    unknown = replace(fitness, blur_sigma_axes_mm=None, blur_sigma_mm=None, noise=None, noise_correlation_mm=None)
    low, high = measured((*scan, unknown)).volume_mm3_95
    assert low <= truth <= high


def test_same_input_gives_the_same_figures(phantoms):
    scan = phantoms.scan(phantoms.sphere(14.4), phantoms.grid_of((40, 40, 40)), blur=0.8, cnr=10, seed=7)
    assert measured(scan) == measured(scan)
