"""Phantoms with closed-form truth, and hand-made ranges and bodies, so that this room is tested on its own."""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body.result import Body, Region
from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.volume import Basis, Grid, Unit, Volume

AIR, METAL = 1000.0, 11000.0


@dataclass(frozen=True)
class Phantom:
    volume: Volume
    ranges: Ranges
    body: Body
    noise: float
    blur_mm: np.ndarray


def rotation(seed):
    """A rotation drawn evenly from all (QR of a normal matrix)."""
    q, r = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))
    q = q * np.sign(np.diag(r))
    return q if np.linalg.det(q) > 0 else -q


def grid_of(shape, spacing=(1.0, 1.0, 1.0), direction=None, positions=None):
    positions = np.arange(shape[0]) * spacing[0] if positions is None else positions
    direction = np.eye(3) if direction is None else direction
    return Grid(np.array([-7.0, 11.0, 3.0]), direction, spacing[1], spacing[2], positions, shape[1], shape[2])


def drawn(grid, signed_distance, blur):
    """The shape blurred by a Gaussian of ``blur`` voxels per axis and averaged over every voxel's box.

    Drawn on voxels two or three times finer per axis, so that the blur is that of a continuous Gaussian.
    Signed distance in mm from the grid's centre, > 0 inside. Even slice gaps only.
    """
    fine = 2 if np.min(blur) >= 0.8 else 3
    steps = [((np.arange(n * fine) + 0.5) / fine - 0.5).astype(np.float32) for n in grid.shape]
    to_mm = grid.to_mm(np.eye(3)) - grid.to_mm(np.zeros(3))
    middle = (np.array(grid.shape) - 1) / 2
    solid = np.empty([len(s) for s in steps], dtype=np.float32)
    for n, k in enumerate(steps[0]):
        j, i = np.meshgrid(steps[1] - middle[1], steps[2] - middle[2], indexing="ij")
        solid[n] = signed_distance((k - middle[0]) * to_mm[0] + j[..., None] * to_mm[1] + i[..., None] * to_mm[2]) > 0
    for axis, sigma in enumerate(np.broadcast_to(blur, 3)):
        solid = ndimage.gaussian_filter1d(solid, sigma * fine, axis=axis, mode="nearest")
        solid = solid.reshape(*solid.shape[:axis], -1, fine, *solid.shape[axis + 1 :]).mean(axis=axis + 1)
    return solid


def box(half, turn=None):
    turn = np.eye(3) if turn is None else turn
    return lambda x: np.min(np.asarray(half) - np.abs(x @ turn), axis=-1)


def sphere(radius):
    return lambda x: radius - np.linalg.norm(x, axis=-1)


def cylinder(radius, half_length, turn=None):
    turn = np.eye(3) if turn is None else turn

    def distance(x):
        x = x @ turn
        return np.minimum(radius - np.hypot(x[..., 0], x[..., 1]), half_length - np.abs(x[..., 2]))

    return distance


def ribs(half, thickness, pitch, turn=None):
    """A base plate with upright ribs."""
    turn = np.eye(3) if turn is None else turn
    half = np.asarray(half)

    def distance(x):
        x = x @ turn
        block = np.min(half - np.abs(x), axis=-1)
        plate = -half[2] + thickness - x[..., 2]
        phase = np.abs((x[..., 0] + pitch / 2) % pitch - pitch / 2)
        return np.minimum(block, np.maximum(plate, thickness / 2 - phase))

    return distance


def noise_field(shape, sd, correlation, seed):
    """White noise filtered by a sampled Gaussian of ``correlation`` voxels per axis, scaled to its exact deviation."""
    field = np.random.default_rng(seed).normal(size=shape)
    if np.any(np.asarray(correlation) > 0):
        gain = 1.0
        for axis, sigma in enumerate(np.broadcast_to(correlation, 3)):
            if sigma > 0:
                impulse = np.zeros(101)
                impulse[50] = 1
                gain *= np.sqrt(np.sum(ndimage.gaussian_filter1d(impulse, sigma) ** 2))
                field = ndimage.gaussian_filter1d(field, sigma, axis=axis, mode="wrap")
        field /= gain
    return field * sd


def make(grid, shape, blur=0.8, cnr=10.0, correlation=0.0, seed=1, cupping=0.0, cupping_radius=None, dtype=np.int16):
    """Make a phantom: shape, Gaussian blur of ``blur`` voxels per axis, voxel boxes, cupping, noise.

    The truth of the edge response's σ along each axis is √(blur² + 1/12) voxels: blur and the voxel's own width.
    """
    blurred = drawn(grid, shape, blur)
    material = np.full(grid.shape, METAL - AIR)
    if cupping:
        index = np.stack(np.meshgrid(*(np.arange(n) for n in grid.shape), indexing="ij"), axis=-1)
        x = (grid.to_mm(index) - grid.centre_mm) @ grid.direction[:, :2]
        material *= 1 - cupping * np.clip(1 - np.sum(x**2, axis=-1) / cupping_radius**2, 0, None)
    noise = (METAL - AIR) / cnr
    values = AIR + material * blurred + noise_field(grid.shape, noise, correlation, seed)
    stored = np.rint(values).astype(dtype)
    volume = Volume(stored, np.array(1.0), np.array(0.0), grid, Unit("grey value", "", Basis.IMPLIED))
    blur_mm = np.sqrt(np.broadcast_to(blur, 3) ** 2 + 1 / 12) * np.array(grid.spacing_mm)
    return Phantom(volume, two_ranges(volume, noise), body_of(volume), noise, blur_mm)


def two_ranges(volume, noise, air=AIR, metal=METAL):
    """Ranges as a perfect histogram stage would give them."""
    middle = (air + metal) / 2
    data = volume.stored[:: max(1, volume.shape[0] // 16)].ravel().astype(float)
    counts, edges = np.histogram(data, 256)
    share = float(np.mean(data >= middle))
    low = ValueRange("R1", "R1", "", None, None, middle, None, air, noise, 1 - share, True)
    high = ValueRange("R2", "R2", "", middle, None, None, None, metal, noise, share, False)
    histogram = Histogram((edges[1:] + edges[:-1]) / 2, counts, float(edges[1] - edges[0]))
    return Ranges((low, high), histogram, counts.astype(float))


def body_of(volume, threshold=(AIR + METAL) / 2):
    """Object = largest 6-connected part above the threshold; outside = background that reaches the border."""
    solid = volume.stored > threshold
    labels, _ = ndimage.label(solid)
    sizes = np.bincount(labels.ravel())
    sizes[0] = 0
    regions = np.full(volume.shape, Region.EXCLUDED, dtype=np.uint8)
    regions[labels == np.argmax(sizes)] = Region.OBJECT
    air, _ = ndimage.label(~solid)
    rim = np.zeros(volume.shape, bool)
    for axis in range(3):
        face = np.moveaxis(rim, axis, 0)
        face[0] = face[-1] = True
    outer = np.isin(air, np.unique(air[rim & (air > 0)])) & ~solid
    regions[outer] = Region.OUTSIDE
    regions[~solid & ~outer] = Region.ENCLOSED
    if volume.no_data is not None:
        regions[volume.no_data] = Region.NO_DATA
    return Body(regions, ndimage.find_objects((regions == Region.OBJECT).astype(int))[0], threshold)


@pytest.fixture(scope="session")
def phantoms():
    """The functions above as one namespace (test modules cannot import this file)."""
    from types import SimpleNamespace

    return SimpleNamespace(
        **{
            f.__name__: f
            for f in (rotation, grid_of, drawn, box, sphere, cylinder, ribs, noise_field, make, two_ranges, body_of)
        }
    )
