"""Phantoms whose ranges are known, and the real scans."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pydicom
import pytest
from scipy import ndimage

from tomofolio.volume import Basis, Grid, Unit, Volume

SHARED = Path(__file__).resolve().parents[3] / "shared" / "data"


def to_volume(stored, slope=1.0, intercept=0.0, no_data=None) -> Volume:
    grid = Grid(np.zeros(3), np.eye(3), 1.0, 1.0, np.arange(stored.shape[0], dtype=float), *stored.shape[1:])
    return Volume(stored, np.asarray(slope), np.asarray(intercept), grid, Unit("other", "u", Basis.DECLARED), no_data)


def balls_in(shape, centres: Sequence, radii: Sequence[float]) -> np.ndarray:
    """Share (0 to 1) of every voxel inside any of some balls; two samples per axis."""
    z, y, x = np.ogrid[tuple(slice(0, 2 * n) for n in shape)]
    inside = np.zeros([2 * n for n in shape], bool)
    for (k, j, i), radius in zip(centres, radii, strict=True):
        inside |= (z / 2 - 0.25 - k) ** 2 + (y / 2 - 0.25 - j) ** 2 + (x / 2 - 0.25 - i) ** 2 <= radius**2
    return inside.reshape(shape[0], 2, shape[1], 2, shape[2], 2).mean(axis=(1, 3, 5))


def grainy(shape, seed: int, sigma: float = 0.6) -> np.ndarray:
    """Noise of standard deviation 1, alike in neighbours (Gaussian kernel of ``sigma`` voxels)."""
    noise = ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=shape), sigma, mode="wrap")
    return noise / noise.std()


def draw(
    shares: Sequence[np.ndarray],
    values: Sequence[float],
    noise: float | Sequence[float],
    seed: int,
    *,
    blur: float = 0.8,
    correlation: float = 0.6,
    cupping: float = 0.0,
) -> np.ndarray:
    """Values of materials laid over each other: ``values[0]`` everywhere, each share replaces what is below it.

    Blur and noise come on top; with ``cupping`` the middle of the slice is darker by that part of the contrast.
    """
    shape = shares[0].shape
    truth = np.full(shape, float(values[0]))
    spread = np.full(shape, np.atleast_1d(noise)[0], float)
    for n, share in enumerate(shares):
        truth += share * (values[n + 1] - truth)
        if np.ndim(noise):
            spread += share * (noise[n + 1] - spread)
    if cupping:
        y, x = np.ogrid[: shape[1], : shape[2]]
        radius2 = ((y - shape[1] / 2) ** 2 + (x - shape[2] / 2) ** 2) / (min(shape[1:]) / 2) ** 2
        truth = values[0] + (truth - values[0]) * (1 - cupping * np.clip(1 - radius2 / 0.6, 0, 1))
    return ndimage.gaussian_filter(truth, blur) + spread * grainy(shape, seed, correlation)


def part_in_air(seed: int, shape=(64, 96, 96)) -> np.ndarray:
    """Share of a plate with a bore and a boss; placed and turned a little differently by every seed."""
    random = np.random.default_rng(1000 + seed)
    k0, j0, i0 = (np.array(shape) / 2 + random.uniform(-2, 2, 3)).tolist()
    z, y, x = np.ogrid[tuple(slice(0, 2 * n) for n in shape)]
    z, y, x = z / 2 - 0.25 - k0, y / 2 - 0.25 - j0, x / 2 - 0.25 - i0
    turn, lean = random.uniform(0.1, 0.3, 2)
    z, x = z * np.cos(lean) - x * np.sin(lean), x * np.cos(lean) + z * np.sin(lean)
    y, x = y * np.cos(turn) - x * np.sin(turn), x * np.cos(turn) + y * np.sin(turn)
    plate = (np.abs(z) < 18) & (np.abs(y) < 30) & (np.abs(x) < 32)
    boss = ((y - 10) ** 2 + (x + 12) ** 2 < 14**2) & (np.abs(z) < 26)
    bore = (y + 8) ** 2 + (x - 8) ** 2 < 11**2
    solid = (plate | boss) & ~bore
    return solid.reshape(shape[0], 2, shape[1], 2, shape[2], 2).mean(axis=(1, 3, 5))


def read_scan(folder: Path) -> Volume:
    """A plain reader of a CT series: enough for the scans in the tests, none of the project's own."""
    files = [pydicom.dcmread(p) for p in sorted(folder.rglob("*.dcm"))]
    rows = np.array(files[0].ImageOrientationPatient, float)
    normal = np.cross(rows[:3], rows[3:])
    files.sort(key=lambda d: float(normal @ np.array(d.ImagePositionPatient, float)))
    positions = np.array([d.ImagePositionPatient for d in files], float)
    axis = (positions[-1] - positions[0]) / np.linalg.norm(positions[-1] - positions[0])
    stored = np.stack([d.pixel_array for d in files])
    if stored.max() <= 32767:
        stored = stored.astype(np.int16)
    spacing = [float(v) for v in files[0].PixelSpacing]
    direction = np.stack([rows[:3], rows[3:], axis], axis=1)
    grid = Grid(positions[0], direction, *spacing, (positions - positions[0]) @ axis, *stored.shape[1:])
    slope = np.array([float(d.get("RescaleSlope", 1)) for d in files])
    intercept = np.array([float(d.get("RescaleIntercept", 0)) for d in files])
    volume = Volume(stored, slope, intercept, grid, Unit("other", "u", Basis.IMPLIED))
    padding = files[0].get("PixelPaddingValue")
    return volume if padding is None else replace(volume, no_data=stored == padding)


def _scan(folder: Path) -> Volume:
    if not any(folder.rglob("*.dcm")):
        pytest.skip(f"the scan {folder.name} is not here")
    return read_scan(folder)


@pytest.fixture(scope="session")
def engine() -> Volume:
    return _scan(SHARED / "engine_block")


@pytest.fixture(scope="session")
def head() -> Volume:
    return _scan(SHARED / "head_tilted_uneven")


class Phantoms:
    """What the tests draw with."""

    to_volume = staticmethod(to_volume)
    balls_in = staticmethod(balls_in)
    grainy = staticmethod(grainy)
    draw = staticmethod(draw)
    part_in_air = staticmethod(part_in_air)


@pytest.fixture(scope="session")
def phantoms() -> type[Phantoms]:
    return Phantoms
