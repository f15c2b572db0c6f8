"""Where the object is darker or brighter than its local level by more than noise can be."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.body.runs import Runs, find_runs
from tomofolio.fitness.detection import FALSE_CALL_DEVIATIONS, SMALLEST_SHARE
from tomofolio.fitness.result import Fitness
from tomofolio.measure.level import CELL, LevelField
from tomofolio.threads import over_parts
from tomofolio.volume import Volume

Array = NDArray[Any]

_DARK, _BRIGHT = 1, 2


@dataclass(frozen=True)
class Noise:
    """What the measurements need to know of noise and blur, in voxels [slice, row, column] and in the scan's unit."""

    sd: float
    correlation_vox: NDArray[np.float64]
    blur_vox: NDArray[np.float64]

    @property
    def correlated_voxels(self) -> float:
        """Sum of the autocorrelation over all lags: so many voxels carry one independent value."""
        per_axis = np.maximum(np.sqrt(4 * np.pi) * self.correlation_vox, 1.0)
        return float(per_axis.prod())

    def autocorrelation(self, lag: NDArray[np.float64]) -> NDArray[np.float64]:
        """Correlation of two voxels ``lag`` (…, 3) apart: Gaussian-filtered white noise."""
        lag = np.asarray(lag, float)
        with np.errstate(divide="ignore", invalid="ignore"):
            exponent = np.where(lag == 0, 0.0, lag**2 / (4 * self.correlation_vox**2))
        return np.exp(-np.minimum(exponent, 700.0).sum(axis=-1))

    @property
    def sd_of_mean_of_27(self) -> float:
        """Standard deviation of the mean of 3 × 3 × 3 voxels."""
        steps = np.array([(k, j, i) for k in range(3) for j in range(3) for i in range(3)], float)
        return self.sd * float(np.sqrt(self.autocorrelation(steps[:, None] - steps[None]).mean()))


def noise_of(fitness: Fitness, spacing_mm: tuple[float, float, float], contrast: float) -> Noise:
    """The noise as the scan's fitness gives it; where it is unknown, cautious stand-ins."""
    spacing = np.array(spacing_mm)
    sd = fitness.noise if fitness.noise is not None else 0.05 * contrast
    correlation = np.array(fitness.noise_correlation_mm or 0.6 * spacing) / spacing
    if fitness.blur_sigma_axes_mm is not None:
        blur = np.array(fitness.blur_sigma_axes_mm) / spacing
    else:
        blur = (fitness.blur_sigma_mm or float(spacing.min())) / spacing
    return Noise(max(sd, 1e-6 * contrast), correlation, np.clip(blur, 0.3, 4.0))


def seed_runs(volume: Volume, body: Body, field: LevelField, contrast: float, noise: Noise) -> tuple[Runs, Runs]:
    """Runs and components of the dark seeds and of the bright seeds.

    A seed lies in the object or in what it encloses, and farther from the outside than its blurred edge reaches
    (2 σ + 1 voxels), since there the outside itself makes the object darker. The same distance is kept from the
    border of the scan, where it is not known what lies beyond.
    """
    threshold = max(FALSE_CALL_DEVIATIONS * noise.sd_of_mean_of_27, SMALLEST_SHARE * contrast)
    reach = np.ceil(2 * noise.blur_vox + 1).astype(np.int64)
    flags = np.zeros(volume.shape, np.uint8)
    box = np.array([(part.start, part.stop) for part in body.box])
    voxels = (volume.stored, volume.slope, volume.intercept, body.regions)
    arguments = (*voxels, field.cells, np.array(field.start), box, float(threshold), reach)
    first, last = max(box[0, 0], reach[0]), min(box[0, 1], volume.shape[0] - reach[0])
    count = max(int(last - first), 0)
    over_parts(lambda part: _flag(*arguments, first + part.start, first + part.stop, flags), count, 8)
    return find_runs(flags, [_DARK]), find_runs(flags, [_BRIGHT])


@njit(cache=True)
def _level(cells: Array, start: Array, k: int, j: int, i: int) -> float:
    z = min(max((k - start[0] - (CELL - 1) / 2) / CELL, 0.0), cells.shape[0] - 1.0)
    y = min(max((j - start[1] - (CELL - 1) / 2) / CELL, 0.0), cells.shape[1] - 1.0)
    x = min(max((i - start[2] - (CELL - 1) / 2) / CELL, 0.0), cells.shape[2] - 1.0)
    a, b, c = int(z), int(y), int(x)
    a1, b1, c1 = min(a + 1, cells.shape[0] - 1), min(b + 1, cells.shape[1] - 1), min(c + 1, cells.shape[2] - 1)
    z, y, x = z - a, y - b, x - c
    low = (cells[a, b, c] * (1 - x) + cells[a, b, c1] * x) * (1 - y) + (
        cells[a, b1, c] * (1 - x) + cells[a, b1, c1] * x
    ) * y
    high = (cells[a1, b, c] * (1 - x) + cells[a1, b, c1] * x) * (1 - y) + (
        cells[a1, b1, c] * (1 - x) + cells[a1, b1, c1] * x
    ) * y
    return low * (1 - z) + high * z


@njit(cache=True)
def _near_outside(regions: Array, k: int, j: int, i: int, reach: Array) -> bool:
    for a in range(max(k - reach[0], 0), min(k + reach[0] + 1, regions.shape[0])):
        for b in range(max(j - reach[1], 0), min(j + reach[1] + 1, regions.shape[1])):
            for c in range(max(i - reach[2], 0), min(i + reach[2] + 1, regions.shape[2])):
                code = regions[a, b, c]
                if code != 1 and code != 2:
                    distance = ((a - k) / reach[0]) ** 2 + ((b - j) / reach[1]) ** 2 + ((c - i) / reach[2]) ** 2
                    if distance <= 1.0:
                        return True
    return False


@njit(cache=True, nogil=True)
def _flag(
    stored: Array,
    slope: Array,
    intercept: Array,
    regions: Array,
    cells: Array,
    start: Array,
    box: Array,
    threshold: float,
    reach: Array,
    first: int,
    last: int,
    flags: Array,
) -> None:
    _, rows, columns = stored.shape
    j0, j1 = max(box[1, 0], reach[1]), min(box[1, 1], rows - reach[1])
    i0, i1 = max(box[2, 0], reach[2]), min(box[2, 1], columns - reach[2])
    # Between these no voxel can be a seed, whatever its own level: most voxels need no look at the field.
    lowest, highest = cells.max() - threshold, cells.min() + threshold
    sums = np.empty(columns, np.float32)
    for k in range(first, last):
        for j in range(j0, j1):
            # Sum over 3 × 3 slices and rows first: three of them make the mean of 27.
            for i in range(i0 - 1, i1 + 1):
                total = 0.0
                for a in range(k - 1, k + 2):
                    part = float(stored[a, j - 1, i]) + float(stored[a, j, i]) + float(stored[a, j + 1, i])
                    total += slope[a] * part + 3.0 * intercept[a]
                sums[i] = total
            for i in range(i0, i1):
                mean = (sums[i - 1] + sums[i] + sums[i + 1]) / 27.0
                if lowest <= mean <= highest or (regions[k, j, i] != 1 and regions[k, j, i] != 2):
                    continue
                difference = _level(cells, start, k, j, i) - mean
                if abs(difference) > threshold and not _near_outside(regions, k, j, i, reach):
                    flags[k, j, i] = _DARK if difference > 0 else _BRIGHT
