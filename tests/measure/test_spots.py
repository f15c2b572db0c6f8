"""Voids and inclusions against closed-form shapes: drawn finely, blurred as a continuous Gaussian, then sampled."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from scipy import ndimage
from skimage.measure import regionprops

from tomofolio.body.result import Body, Region
from tomofolio.fitness.result import Fitness
from tomofolio.measure.level import level_field
from tomofolio.measure.measuring import measure
from tomofolio.measure.outside_surface import outside_points
from tomofolio.measure.sphere import blurred_sphere
from tomofolio.measure.spots import find_spots
from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.volume import Basis, Grid, Unit, Volume

AIR, METAL, DENSE = 2000.0, 12000.0, 24000.0
FINE = 3


@dataclass(frozen=True)
class Ball:
    """A sphere, or with three radii an ellipsoid along the index axes; centre and radii in voxels."""

    centre: tuple[float, float, float]
    radius: tuple[float, float, float]

    @property
    def voxels(self) -> float:
        return 4 / 3 * np.pi * float(np.prod(self.radius))


def ball(centre, radius):
    return Ball(tuple(centre), tuple(np.broadcast_to(radius, 3)))


def spread_balls(seed, shape, sizes, gap=9.0):
    """Balls at random places, apart from each other and from the faces of a block with a rim of 8 voxels."""
    rng = np.random.default_rng(seed)
    balls = []
    for radius in sizes:
        for _ in range(2000):
            low, high = 8 + radius + gap, np.array(shape) - 8 - radius - gap
            centre = rng.uniform(low, high)
            if all(np.linalg.norm(centre - b.centre) > radius + b.radius[0] + gap for b in balls):
                balls.append(ball(centre, radius))
                break
    return balls


@dataclass(frozen=True)
class Scan:
    volume: Volume
    ranges: Ranges
    body: Body
    fitness: Fitness

    @property
    def spots(self):
        field = level_field(self.volume, self.ranges, self.body)
        outside = self.volume.grid.to_mm(outside_points(self.volume, self.body))
        return find_spots(self.volume, self.ranges, self.body, self.fitness, field, outside)


def scan(
    shape, voids=(), inclusions=(), *, blur=0.8, cnr=12.0, correlation=0.6, cupping=0.0, seed=0, grid=None, fill=0.0,
    dense=DENSE, slab=None,
):  # fmt: skip
    """A block of metal in air (rim 8 voxels); ``fill`` is the voids' level as a share of the metal's."""
    share = np.zeros([n * FINE for n in shape], np.float32)
    inner = tuple(slice(8 * FINE, (n - 8) * FINE) for n in shape)
    share[inner] = 1.0
    if slab is not None:  # a second, denser material that reaches the surface
        share[slab[0] * FINE : slab[1] * FINE][:, inner[1], inner[2]] = (dense - AIR) / (METAL - AIR)
    for shapes, level in ((voids, fill), (inclusions, (dense - AIR) / (METAL - AIR))):
        for b in shapes:
            low = [max(int((c - r - 1) * FINE), 0) for c, r in zip(b.centre, b.radius, strict=True)]
            high = [int((c + r + 2) * FINE) for c, r in zip(b.centre, b.radius, strict=True)]
            box = tuple(slice(a, z) for a, z in zip(low, high, strict=True))
            axes = [(np.arange(a, z) + 0.5) / FINE - 0.5 for a, z in zip(low, high, strict=True)]
            far = sum(
                np.expand_dims(((x - c) / r) ** 2, tuple({0, 1, 2} - {n}))
                for n, (x, c, r) in enumerate(zip(axes, b.centre, b.radius, strict=True))
            )
            share[box][far[tuple(slice(0, m) for m in share[box].shape)] < 1] = level
    share = ndimage.gaussian_filter(share, blur * FINE, truncate=3.5)
    share = share.reshape(shape[0], FINE, shape[1], FINE, shape[2], FINE).mean(axis=(1, 3, 5))
    metal = METAL - AIR
    if cupping:
        distance = [np.minimum(np.arange(n) - 8, n - 9 - np.arange(n)) / (n / 2 - 8) for n in shape]
        depth = np.minimum(np.minimum(distance[0][:, None, None], distance[1][:, None]), distance[2]).clip(0, 1)
        metal = metal * (1 - cupping * depth)
    noise = np.random.default_rng(seed).normal(size=shape)
    if correlation:
        noise = ndimage.gaussian_filter(noise, correlation)
        noise /= noise.std()
    values = AIR + metal * share + noise * (METAL - AIR) / cnr
    grid = grid or Grid(np.array([3.0, -4.0, 5.0]), np.eye(3), 0.5, 0.5, 0.5 * np.arange(shape[0]), *shape[1:])
    volume = Volume(
        np.clip(values, -32768, 32767).astype(np.int16), 1, 0, grid, Unit("grey value", "GV", Basis.DECLARED)
    )
    return Scan(
        volume,
        hand_made_ranges(bool(inclusions) or slab is not None, dense),
        *body_and_fitness(volume, blur, cnr, correlation),
    )


def hand_made_ranges(with_dense, dense):
    items = [ValueRange("R1", "R1", "", None, None, 7000.0, (6990.0, 7010.0), AIR, 800, 0.5, True)]
    upper = (METAL + dense) / 2 if with_dense else None
    items.append(ValueRange("R2", "R2", "", 7000.0, (6990.0, 7010.0), upper, None, METAL, 800, 0.4, False))
    if with_dense:
        items.append(ValueRange("R3", "R3", "", upper, None, None, None, dense, 800, 0.01, False))
    return Ranges(tuple(items), Histogram(np.array([0.0]), np.array([1]), 1.0), np.array([1.0]))


def body_and_fitness(volume, blur, cnr, correlation):
    solid = volume.values(slice(None)) >= 7000
    air, _ = ndimage.label(~solid)
    regions = np.where(solid, Region.OBJECT, np.where(air == air[0, 0, 0], Region.OUTSIDE, Region.ENCLOSED))
    box = ndimage.find_objects((regions > 0).astype(int))[0]
    spacing = np.array(volume.grid.spacing_mm)
    sigma = np.sqrt(blur**2 + 1 / 12) * spacing
    fitness = Fitness(
        noise=(METAL - AIR) / cnr,
        noise_correlation_mm=tuple(correlation * spacing),
        contrast=METAL - AIR,
        cnr=cnr,
        blur_sigma_mm=float(np.prod(sigma) ** (1 / 3)),
        blur_sigma_axes_mm=tuple(sigma),
        mtf10_per_mm=None,
        detectable_diameter_mm=None,
        measurable_diameter_mm=None,
    )
    return Body(regions.astype(np.uint8), box, 7000.0), fitness


def matched(spots, balls, grid):
    """Pairs of (spot, ball) by place; every ball must have one."""
    pairs = []
    for b in balls:
        place = grid.to_mm(np.array(b.centre))
        nearest = min(spots, key=lambda s, place=place: np.linalg.norm(np.subtract(s.position_mm, place)))
        assert np.linalg.norm(np.subtract(nearest.position_mm, place)) < 1.5 * min(grid.spacing_mm), b
        pairs.append((nearest, b))
    return pairs


SIZES = (2.0, 2.5, 3.0, 3.0, 4.0, 5.0, 6.0)


@pytest.mark.parametrize(("blur", "cnr", "correlation"), [(0.8, 12, 0.6), (0.6, 10, 0.0), (1.1, 20, 0.8)])
def test_volumes_of_spheres_are_unbiased_and_intervals_hold_the_truth(blur, cnr, correlation):
    # Closed form: 4/3 π r³. Small voids are where counting voxels past half-way goes wrong.
    errors, counted, held = [], [], []
    for seed in range(4):
        balls = spread_balls(seed, (70, 80, 80), SIZES)
        found = scan((70, 80, 80), balls, blur=blur, cnr=cnr, correlation=correlation, seed=seed)
        voids, inclusions = found.spots
        assert len(voids) == len(balls) and not inclusions
        for spot, b in matched(voids, balls, found.volume.grid):
            truth = b.voxels * 0.5**3
            errors.append(spot.volume_mm3 / truth - 1)
            counted.append(spot.threshold_volume_mm3 / truth - 1)
            held.append(spot.volume_mm3_95[0] <= truth <= spot.volume_mm3_95[1])
    errors = np.array(errors)
    assert abs(errors.mean()) < 0.02 + 2 * errors.std() / np.sqrt(len(errors))
    assert np.abs(errors).mean() < 0.3 * np.abs(counted).mean()
    # 28 intervals of 95 %: fewer than 23 inside would happen by chance once in 250 times (binomial).
    assert sum(held) >= 23


def test_voids_of_three_voxels_are_found_where_the_noise_allows_it():
    balls = spread_balls(9, (60, 60, 60), (1.5,) * 8)
    found = scan((60, 60, 60), balls, cnr=20, seed=4)
    voids, _ = found.spots
    assert len(voids) == 8
    errors = [spot.volume_mm3 / (b.voxels * 0.5**3) - 1 for spot, b in matched(voids, balls, found.volume.grid)]
    assert abs(np.mean(errors)) < 0.15


def test_places_follow_an_oblique_tilted_grid():
    # The plane equation of DICOM PS3.3 C.7.6.2.1.1 gives the true places; the tilt shears the block, not the balls'
    # index places.
    turn, _ = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))
    direction = turn @ np.column_stack(([1, 0, 0], [0, 1, 0], [0, np.sin(0.2), np.cos(0.2)]))
    grid = Grid(np.array([9.0, 8.0, 7.0]), direction, 0.4, 0.4, 0.5 * np.arange(60), 64, 64)
    balls = spread_balls(5, (60, 64, 64), (4.0, 3.0))
    voids, _ = scan((60, 64, 64), balls, grid=grid, cnr=20).spots
    for spot, b in matched(voids, balls, grid):
        assert np.linalg.norm(np.subtract(spot.position_mm, grid.to_mm(np.array(b.centre)))) < 0.15 * 0.4
        truth = b.voxels * grid.voxel_volumes_mm3[0]
        assert spot.volume_mm3 == pytest.approx(truth, rel=0.1)


def test_count_past_half_way_agrees_with_regionprops():
    found = scan((60, 60, 60), [ball((30, 29, 31), 7.0)], cnr=40, correlation=0.0)
    (void,), _ = found.spots
    values = found.volume.values(slice(None))
    half = (METAL + AIR) / 2
    dark = ndimage.label((values < half) & (found.body.regions == Region.ENCLOSED))[0]
    largest = max(region.area for region in regionprops(dark))
    assert void.threshold_volume_mm3 == pytest.approx(largest * 0.5**3, rel=0.01)


def test_sphere_and_cube_have_their_sphericity_and_feret_diameter():
    # Wadell 1935: 1 for the sphere. Feret diameter: ISO 9276-6 (from memory): the longest distance of two tangents.
    (void,), _ = scan((64, 64, 64), [ball((32, 31, 30), 9.0)], cnr=30).spots
    assert void.sphericity == pytest.approx(1.0, abs=0.03)
    assert void.feret_max_mm == pytest.approx(2 * 9.0 * 0.5, rel=0.05)
    assert void.equivalent_diameter_mm == pytest.approx(2 * 9.0 * 0.5, rel=0.01)
    (void,), _ = scan((64, 64, 80), [Ball((32, 31, 40), (5.0, 5.0, 15.0))], cnr=30).spots
    # A prolate spheroid 3 : 1: surface 2πa²(1 + c/(a e) asin e), e = √(1 − a²/c²).
    e = np.sqrt(1 - 1 / 9)
    area = 2 * np.pi * 25 * (1 + 3 / e * np.arcsin(e))
    sphericity = np.pi ** (1 / 3) * (6 * 4 / 3 * np.pi * 25 * 15) ** (2 / 3) / area
    assert void.sphericity == pytest.approx(sphericity, abs=0.03)
    assert void.feret_max_mm == pytest.approx(2 * 15 * 0.5, rel=0.05)


def test_ligament_and_neighbour_distances_are_those_of_the_surfaces():
    # The block's faces lie half a voxel beyond its outermost voxel centres: at the indices 7.5 and 51.5.
    balls = [ball((16.0, 30, 30), 4.0), ball((30.0, 30, 30), 4.0)]
    voids, _ = scan((60, 60, 60), balls, cnr=25).spots
    (near, _), (far, _) = matched(voids, balls, scan((60, 60, 60)).volume.grid)
    assert near.ligament_mm == pytest.approx((16.0 - 4.0 - 7.5) * 0.5, abs=0.35 * 0.5)
    assert far.ligament_mm == pytest.approx((51.5 - 30.0 - 4.0) * 0.5, abs=0.35 * 0.5)
    assert near.nearest_mm == pytest.approx((14.0 - 8.0) * 0.5, abs=0.35 * 0.5)
    assert near.nearest_mm == far.nearest_mm


def test_ligament_is_left_out_where_void_and_outside_cannot_be_told_apart():
    (void,), _ = scan((60, 60, 60), [ball((7.5 + 5 + 1.8, 30, 30), 5.0)], cnr=25).spots
    assert void.ligament_mm is None


def test_a_touching_pair_is_shared_out_without_counting_twice():
    balls = [ball((30, 30, 24), 5.0), ball((30, 30, 33.5), 4.5)]
    voids, _ = scan((60, 60, 60), balls, cnr=20).spots
    total = sum(spot.volume_mm3 for spot in voids)
    assert total == pytest.approx(sum(b.voxels for b in balls) * 0.5**3, rel=0.05)


@pytest.mark.parametrize("correlation", [0.0, 0.6, 1.0])
def test_pure_noise_raises_no_false_call(correlation):
    voids, inclusions = scan((80, 90, 90), cnr=8, correlation=correlation, seed=11).spots
    assert not voids and not inclusions


def test_cupping_raises_no_false_call_and_hides_no_void():
    balls = spread_balls(2, (80, 80, 80), (3.0, 4.0, 5.0))
    voids, inclusions = scan((80, 80, 80), balls, cupping=0.1, cnr=15).spots
    assert len(voids) == 3 and not inclusions
    for spot, b in matched(voids, balls, scan((80, 80, 80)).volume.grid):
        assert spot.volume_mm3 == pytest.approx(b.voxels * 0.5**3, rel=0.12)


def test_a_dense_inclusion_is_found_and_measured():
    balls = [ball((30, 32, 28), 4.0)]
    voids, (inclusion,) = scan((60, 60, 60), inclusions=balls, cnr=15).spots
    assert not voids
    assert inclusion.id == "I1"
    assert inclusion.volume_mm3 == pytest.approx(balls[0].voxels * 0.5**3, rel=0.1)


def test_a_second_material_that_reaches_the_surface_is_no_inclusion():
    voids, inclusions = scan((60, 60, 60), slab=(30, 42), cnr=15).spots
    assert not inclusions
    assert not voids


def test_a_weakly_attenuating_inclusion_is_told_by_its_contrast():
    (void,), _ = scan((64, 64, 64), [ball((32, 32, 32), 7.0)], fill=0.5, cnr=25).spots
    assert void.contrast == pytest.approx(0.5, abs=0.05)
    assert void.volume_mm3 == pytest.approx(ball((0, 0, 0), 7.0).voxels * 0.5**3, rel=0.1)


def test_porosity_is_total_over_part_and_total():
    balls = spread_balls(1, (70, 80, 80), SIZES)
    found = scan((70, 80, 80), balls, cnr=20)
    findings = measure(found.volume, found.ranges, found.body, found.fitness, look_for_voids=True)
    total, block = sum(b.voxels for b in balls), 54 * 64 * 64
    assert findings.voids.porosity_percent == pytest.approx(100 * total / block, rel=0.03)
    low, high = findings.voids.porosity_percent_95
    assert low < 100 * total / block < high
    assert findings.voids.densest.porosity_percent > findings.voids.porosity_percent


def test_voids_are_left_out_where_they_are_not_looked_for():
    found = scan((40, 40, 40))
    findings = measure(found.volume, found.ranges, found.body, found.fitness, look_for_voids=False)
    assert findings.voids is None and findings.inclusions is None


def test_blurred_sphere_agrees_with_a_numerical_convolution():
    # scipy.ndimage.gaussian_filter on a fine grid.
    radius, sigma, fine = 3.0, 1.2, 6
    axis = (np.arange(-60, 61)) / fine
    far = np.sqrt(axis[:, None, None] ** 2 + axis[:, None] ** 2 + axis**2)
    blurred = ndimage.gaussian_filter((far < radius).astype(np.float32), sigma * fine)
    line = blurred[60, 60, 60::6]
    np.testing.assert_allclose(blurred_sphere(axis[60::6], radius, sigma), line, atol=4e-3)
