"""Fixtures of the render room: volumes from functions of position, plain tables, hand-made ranges and findings."""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np
import pytest

from tomofolio.body.result import Body, Region
from tomofolio.measure.result import Findings, Spot, Spots
from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.render import TransferTable
from tomofolio.volume import Basis, Grid, Unit, Volume


def grid_of(shape, spacing=(1.0, 1.0, 1.0), origin=(0.0, 0.0, 0.0), direction=None, positions=None) -> Grid:
    """A grid by shape and spacing (slice, row, column)."""
    positions = np.arange(shape[0]) * spacing[0] if positions is None else positions
    return Grid(np.array(origin), np.eye(3) if direction is None else direction, spacing[1], spacing[2], positions,
                shape[1], shape[2])  # fmt: skip


def volume_on(grid: Grid, value_at: Callable[[np.ndarray], np.ndarray], slope: float = 1.0) -> Volume:
    """Sample a function of LPS positions on a grid; slope is the value of one stored step."""
    index = np.stack(np.meshgrid(*(np.arange(n) for n in grid.shape), indexing="ij"), axis=-1).astype(float)
    values = value_at(grid.to_mm(index))
    stored = np.rint(values / slope).astype(np.int16)
    return Volume(stored, slope, 0.0, grid, Unit("grey value", "GV", Basis.DECLARED))


def plain_table(first, last, density, colour=(0.5, 0.5, 0.5), entries=4096) -> TransferTable:
    """A table from a function of the value, in one colour or with a function for it."""
    values = np.linspace(first, last, entries)
    colours = colour(values) if callable(colour) else np.broadcast_to(np.array(colour), (entries, 3))
    densities = np.asarray(density(values), dtype=np.float32)
    return TransferTable(first, last, densities, np.array(colours, dtype=np.float32), ())


def ranges_of(*peaks: tuple[float, float, float]) -> Ranges:
    """Ranges from (peak, spread, share); the first is the background, boundaries lie half-way."""
    items = []
    bounds = [(a[0] + b[0]) / 2 for a, b in itertools.pairwise(peaks)]
    for n, (peak, spread, share) in enumerate(peaks):
        lower, upper = ([None, *bounds][n], [*bounds, None][n])
        items.append(ValueRange(f"R{n + 1}", f"R{n + 1}", "", lower, None, upper, None, peak, spread, share, n == 0))
    centres = np.linspace(peaks[0][0] - 5 * peaks[0][1], peaks[-1][0] + 5 * peaks[-1][1], 64)
    counts = np.ones(64, np.int64)
    return Ranges(tuple(items), Histogram(centres, counts, float(centres[1] - centres[0])), counts.astype(float))


def whole_body(volume: Volume, threshold: float) -> Body:
    """Everything above the threshold is the object."""
    regions = np.where(volume.values(slice(None)) >= threshold, Region.OBJECT, Region.OUTSIDE).astype(np.uint8)
    solid = np.argwhere(regions == Region.OBJECT)
    box = tuple(slice(int(a), int(b) + 1) for a, b in zip(solid.min(axis=0), solid.max(axis=0), strict=True))
    return Body(regions, box, threshold)


def spot_at(position, radius_mm) -> Spot:
    volume = 4 / 3 * np.pi * radius_mm**3
    return Spot("V1", volume, None, volume, 2 * radius_mm, 2 * radius_mm, 1.0, tuple(position), None, None, 1.0, False,
                ((0, 1), (0, 1), (0, 1)))  # fmt: skip


def findings_of(*spots: Spot) -> Findings:
    return Findings((), None, Spots(len(spots), 0.0, None, None, None, None, spots), None)


@pytest.fixture(scope="session")
def make():
    """The makers above under one name."""

    class Makers:
        grid = staticmethod(grid_of)
        volume = staticmethod(volume_on)
        table = staticmethod(plain_table)
        ranges = staticmethod(ranges_of)
        body = staticmethod(whole_body)
        spot = staticmethod(spot_at)
        findings = staticmethod(findings_of)

    return Makers


@pytest.fixture(scope="session")
def marker_phantom():
    """A block with a ball only at the patient's left, anterior, superior corner; spacing 1.0, 0.9, 0.8 mm.

    Air 0, block 1000, ball 3000. Returned with its ranges and its body.
    """

    def value_at(p):
        block = np.all(np.abs(p) < np.array([24.0, 22.0, 20.0]), axis=-1)
        ball = np.linalg.norm(p - np.array([14.0, -12.0, 10.0]), axis=-1) < 6.0
        return np.where(ball, 3000.0, np.where(block, 1000.0, 0.0))

    shape = (56, 64, 80)
    spacing = (1.0, 0.9, 0.8)
    origin = [-(n - 1) / 2 * s for n, s in zip(shape[::-1], spacing[::-1], strict=True)]
    volume = volume_on(grid_of(shape, spacing, origin), value_at)
    ranges = ranges_of((0.0, 20.0, 0.7), (1000.0, 30.0, 0.28), (3000.0, 60.0, 0.02))
    return volume, ranges, whole_body(volume, 500.0)
