"""Phantoms on any grid, ranges made by hand and a tiny reader of real scans for the tests of this room."""

from pathlib import Path

import numpy as np
import pydicom
import pytest
from scipy import ndimage

from tomofolio.ranges.result import Histogram, Ranges, ValueRange
from tomofolio.volume import Basis, Grid, Unit, Volume

DATA = Path(__file__).resolve().parents[2] / "../shared/data"


@pytest.fixture
def make_ranges():
    def make(*peaks, boundaries):
        """Ranges with the given peaks and boundaries between them, the first is background; () is uniform."""
        ends = [None, *boundaries, None]
        items = tuple(
            ValueRange(
                f"R{n + 1}", "", "", ends[n], None, ends[n + 1], None, peak, 10.0, 0.3, bool(boundaries) and n == 0
            )
            for n, peak in enumerate(peaks)
        )
        return Ranges(items, Histogram(np.zeros(1), np.zeros(1, np.int64), 1.0), np.zeros(1))

    return make


@pytest.fixture
def make_grid():
    def make(shape, spacing=(1.0, 1.0, 1.0), positions=None, tilt_degrees=0.0):
        """A grid at an odd origin; ``positions`` along the slice axis, which leans by ``tilt_degrees``."""
        if positions is None:
            positions = np.arange(shape[0]) * spacing[0]
        tilt = np.radians(tilt_degrees)
        direction = np.column_stack(([1.0, 0, 0], [0, 1.0, 0], [0, np.sin(tilt), np.cos(tilt)]))
        return Grid(np.array([-7.0, 11.0, 3.0]), direction, spacing[1], spacing[2], positions, *shape[1:])

    return make


@pytest.fixture
def make_volume(make_grid):
    def make(values, *, blur=0.0, noise=0.0, seed=0, no_data=None, **grid):
        """Values rounded to int16, blurred and with white noise."""
        values = np.asarray(values, np.float32)
        if blur:
            values = ndimage.gaussian_filter(values, blur)
        if noise:
            values = values + np.random.default_rng(seed).normal(0, noise, values.shape)
        unit = Unit("grey value", "", Basis.IMPLIED)
        stored = np.rint(values).astype(np.int16)
        return Volume(stored, 1.0, 0.0, make_grid(stored.shape, **grid), unit, no_data)

    return make


@pytest.fixture(scope="session")
def real_scan():
    def read(name):
        folder = DATA / name
        if not folder.is_dir():
            pytest.skip(f"the real scan {name} is not there (shared/data beside the repository)")
        files = [pydicom.dcmread(path) for path in sorted(folder.iterdir())]
        along, down = np.split(np.array(files[0].ImageOrientationPatient, float), 2)
        normal = np.cross(along, down)
        files.sort(key=lambda file: normal @ np.array(file.ImagePositionPatient, float))
        origins = np.array([file.ImagePositionPatient for file in files], float)
        axis = (origins[-1] - origins[0]) / np.linalg.norm(origins[-1] - origins[0])
        stored = np.stack([file.pixel_array for file in files]).astype(np.int16)
        rows, columns = map(float, files[0].PixelSpacing)
        grid = Grid(
            origins[0],
            np.column_stack((along, down, axis)),
            rows,
            columns,
            (origins - origins[0]) @ axis,
            *stored.shape[1:],
        )
        no_data = None
        if "PixelPaddingValue" in files[0]:
            no_data = np.zeros(stored.shape, bool)
            for k, padding in enumerate(stored == int(files[0].PixelPaddingValue)):
                labels = ndimage.label(padding)[0]
                edge = np.concatenate((labels[0], labels[-1], labels[:, 0], labels[:, -1]))
                no_data[k] = np.isin(labels, edge[edge > 0])
        slopes = [float(file.RescaleSlope) for file in files]
        intercepts = [float(file.RescaleIntercept) for file in files]
        return Volume(stored, slopes, intercepts, grid, Unit("CT number", "HU", Basis.IMPLIED), no_data)

    return read
