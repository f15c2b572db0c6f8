"""Phantoms with closed-form truth, and ranges made by hand, for the tests of this room."""

import itertools
from types import SimpleNamespace

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body import find_body
from tomofolio.fitness.result import Fitness
from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.volume import Basis, Grid, Unit, Volume

AIR, METAL = 1000.0, 11000.0


def grid_of(shape, spacing=(1.0, 1.0, 1.0), positions=None, tilt_degrees=0.0, direction=None):
    """A grid at an odd origin; ``positions`` along the slice axis, which leans by ``tilt_degrees``."""
    positions = np.arange(shape[0]) * spacing[0] if positions is None else np.asarray(positions, float)
    tilt = np.radians(tilt_degrees)
    leaning = np.column_stack(([1.0, 0, 0], [0, 1.0, 0], [0, np.sin(tilt), np.cos(tilt)]))
    direction = leaning if direction is None else direction
    return Grid(np.array([-7.0, 11.0, 3.0]), direction, spacing[1], spacing[2], positions, *shape[1:])


def volume_of(values, grid=None, slope=1.0, intercept=0.0, dtype=np.int16, no_data=None):
    """Values stored as whole numbers, so that value = slope · stored + intercept."""
    grid = grid_of(values.shape) if grid is None else grid
    per_slice = [np.broadcast_to(np.asarray(x, float), values.shape[:1])[:, None, None] for x in (slope, intercept)]
    stored = np.rint((values - per_slice[1]) / per_slice[0]).astype(dtype)
    return Volume(stored, slope, intercept, grid, Unit("grey value", "", Basis.IMPLIED), no_data)


def ranges_of(*peaks, boundaries=None, half_width=0.0, background=True, spread=100.0):
    """Ranges with the given peaks; boundaries half-way unless given, with intervals where ``half_width`` > 0."""
    boundaries = [(a + b) / 2 for a, b in itertools.pairwise(peaks)] if boundaries is None else boundaries
    ends = [None, *boundaries, None]
    intervals = [None, *[(b - half_width, b + half_width) if half_width else None for b in boundaries], None]
    items = tuple(
        ValueRange(
            f"R{n + 1}",
            f"R{n + 1}",
            "",
            ends[n],
            intervals[n],
            ends[n + 1],
            intervals[n + 1],
            peak,
            spread,
            0.3,
            background and n == 0,
        )
        for n, peak in enumerate(peaks)
    )
    return Ranges(items, Histogram(np.zeros(1), np.zeros(1, np.int64), 1.0), np.zeros(1))


def rotation(seed):
    """A rotation drawn evenly from all (QR of a normal matrix)."""
    q, r = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))
    q = q * np.sign(np.diag(r))
    return q if np.linalg.det(q) > 0 else -q


def share_of(grid, signed_distance, blur=0.0, fine=2):
    """Share of material in every voxel: shape (> 0 inside; mm from the grid's centre) drawn finer, then blurred.

    ``blur`` is σ in voxels per axis, of a continuous Gaussian; the voxel's own width comes on top. Even gaps only.
    """
    steps = [(np.arange(n * fine) + 0.5) / fine - 0.5 - (n - 1) / 2 for n in grid.shape]
    to_mm = grid.to_mm(np.eye(3)) - grid.to_mm(np.zeros(3))
    solid = np.empty([len(s) for s in steps], np.float32)
    j, i = np.meshgrid(steps[1], steps[2], indexing="ij")
    for n, k in enumerate(steps[0]):
        solid[n] = signed_distance(k * to_mm[0] + j[..., None] * to_mm[1] + i[..., None] * to_mm[2]) > 0
    for axis, sigma in enumerate(np.broadcast_to(blur, 3)):
        if sigma > 0:
            solid = ndimage.gaussian_filter1d(solid, sigma * fine, axis=axis, mode="nearest")
        solid = solid.reshape(*solid.shape[:axis], -1, fine, *solid.shape[axis + 1 :]).mean(axis=axis + 1)
    return solid


def box(half, turn=None):
    turn = np.eye(3) if turn is None else turn
    return lambda x: np.min(np.asarray(half) - np.abs(x @ turn), axis=-1)


def sphere(radius, centre=(0, 0, 0)):
    return lambda x: radius - np.linalg.norm(x - np.asarray(centre), axis=-1)


def cylinder(radius, half_length, turn=None):
    turn = np.eye(3) if turn is None else turn

    def distance(x):
        x = x @ turn
        return np.minimum(radius - np.hypot(x[..., 0], x[..., 1]), half_length - np.abs(x[..., 2]))

    return distance


def scan(signed_distance, grid, *, blur, cnr, seed, cupping=0.0, cupping_radius=1.0, correlation=0.5):
    """Volume, ranges, body and fitness of a blurred noisy shape; cupping is parabolic about the slice axis."""
    share = share_of(grid, signed_distance, blur)
    index = np.stack(np.meshgrid(*(np.arange(n) for n in grid.shape), indexing="ij"), axis=-1)
    r = np.linalg.norm((grid.to_mm(index) - grid.centre_mm) @ grid.direction[:, :2], axis=-1)
    material = (METAL - AIR) * (1 - cupping * np.clip(1 - (r / cupping_radius) ** 2, 0, None))
    noise = np.random.default_rng(seed).normal(size=grid.shape)
    if correlation:
        noise = ndimage.gaussian_filter(noise, correlation, mode="wrap")
        noise /= noise.std()
    sd = (METAL - AIR) / cnr
    volume = volume_of(AIR + material * share + sd * noise, grid)
    # The peak of a cupped histogram lies between the levels of its middle and its rim.
    ranges = ranges_of(AIR, METAL * (1 - cupping / 2) + AIR * cupping / 2, spread=sd)
    spacing = np.array(grid.spacing_mm)
    blur_mm = tuple(np.sqrt(np.broadcast_to(blur, 3) ** 2 + 1 / 12) * spacing)
    fitness = Fitness(
        noise=sd,
        noise_correlation_mm=tuple(correlation * spacing),
        contrast=METAL - AIR,
        cnr=cnr,
        blur_sigma_mm=float(np.prod(blur_mm) ** (1 / 3)),
        blur_sigma_axes_mm=blur_mm,
        mtf10_per_mm=None,
        detectable_diameter_mm=None,
        measurable_diameter_mm=None,
    )
    return volume, ranges, find_body(volume, ranges), fitness


@pytest.fixture(scope="session")
def phantoms():
    """The functions above as one namespace (test modules cannot import this file)."""
    functions = (grid_of, volume_of, ranges_of, rotation, share_of, box, sphere, cylinder, scan)
    return SimpleNamespace(AIR=AIR, METAL=METAL, **{f.__name__: f for f in functions})
