"""Noise in the main material and how far it hangs together.

Small blocks are read deep inside the main material. In each, a second-order polynomial is fitted and taken off, so
that cupping and shading do not count as noise. The fit also takes off a little of the noise, more so where
neighbouring voxels hang together; that loss is worked out from the noise's own autocorrelation and put back.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations_with_replacement

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body, Region
from tomofolio.fitness.samples import hashed_order, read_boxes
from tomofolio.ranges.result import ValueRange
from tomofolio.volume import Volume

_BLOCK = 16
_BLOCKS = 224
_BATCH = 32
#: So many blocks' worth of main material are enough; thin walls need more blocks for it.
_ENOUGH = 96
#: A block with fewer usable voxels than this cannot carry a trend of ten terms.
_FEWEST_VOXELS = 150
#: Local means and single voxels that stray further than this many standard deviations are voids or inclusions.
_STRAY_MEAN, _STRAY_VOXEL = 4.5, 6.0


@dataclass(frozen=True)
class Noise:
    """Standard deviation in the unit of the scan, filter σ per axis in voxels, and the number of voxels behind them.

    ``correlation`` is σ_f of the Gaussian filter that makes such noise from white noise: the autocorrelation
    at a distance of d voxels along an axis is exp(−d²/(4·σ_f²)).
    """

    sd: float
    correlation: tuple[float, float, float]
    voxels: int


def measure_noise(volume: Volume, body: Body, main: ValueRange) -> Noise | None:
    """Noise of the main material; None where no part of it is thick enough.

    Blocks keep away from everything else by four voxels (fewer across slices that are far apart); where that
    leaves too little, by two, then by one.
    """
    shape = tuple(min(_BLOCK, n) for n in volume.shape)
    origins = _choose_blocks(volume, body, main, shape)
    if not len(origins):
        return None
    best: _Pieces | None = None
    for margin in (4, 2, 1):
        pieces = _collect(volume, body, main, origins, shape, margin)
        if best is None or pieces.count > 2 * best.count:
            best = pieces
        if best.count >= 40_000:
            break
    return None if best is None or best.count < 500 else _estimate(best)


@dataclass(frozen=True)
class _Pieces:
    """Detrended blocks: residual (0 where unused) and mask, shape (blocks, k, j, i)."""

    residual: NDArray[np.float32]
    used: NDArray[np.bool_]

    @property
    def count(self) -> int:
        return int(self.used.sum())


def _choose_blocks(volume: Volume, body: Body, main: ValueRange, shape: tuple[int, ...]) -> NDArray[np.int64]:
    """First voxels of the blocks that hold most of the main material, shape (blocks, 3)."""
    starts = []
    for cut, length, n in zip(body.box, shape, volume.shape, strict=True):
        room = cut.stop - cut.start
        parts = max(1, room // length)
        first = cut.start + (room - parts * length) // 2
        starts.append(np.clip(first + length * np.arange(parts), 0, n - length))
    grid = np.stack(np.meshgrid(*starts, indexing="ij"), axis=-1).reshape(-1, 3)
    share = np.zeros(len(grid))
    steps = [np.arange(0, length, max(1, length // 4)) for length in shape]
    per_slice = len(starts[1]) * len(starts[2])
    rows = (starts[1][:, None] + steps[1]).ravel()
    columns = (starts[2][:, None] + steps[2]).ravel()
    for n, start in enumerate(starts[0]):
        for k in start + steps[0]:
            at = np.ix_(rows, columns)
            value = volume.stored[k][at] * volume.slope[k] + volume.intercept[k]
            inside = _within(value, main) & (body.regions[k][at] == Region.OBJECT)
            tiles = inside.reshape(len(starts[1]), len(steps[1]), len(starts[2]), len(steps[2]))
            share[n * per_slice : (n + 1) * per_slice] += tiles.mean(axis=(1, 3)).ravel() / len(steps[0])
    enough = np.flatnonzero(share > 0.15)
    order = enough[hashed_order(grid[enough])]
    order = order[np.argsort(-np.minimum(np.round(share[order] * 8), 7), kind="stable")]
    enough_voxels = int(np.searchsorted(np.cumsum(share[order]), _ENOUGH)) + 1
    return grid[order[: min(_BLOCKS, enough_voxels)]]


def _within(values: NDArray, main: ValueRange) -> NDArray[np.bool_]:
    inside = np.ones(values.shape, dtype=bool)
    if main.lower is not None:
        inside &= values >= main.lower
    if main.upper is not None:
        inside &= values < main.upper
    return inside


def _reach(volume: Volume, margin: int) -> tuple[tuple[int, int, int], tuple[int, int, int]]:
    """Voxels to keep away, and width of the smoothing, per axis."""
    slices, rows, columns = volume.grid.spacing_mm
    ratio = slices / np.sqrt(rows * columns)
    if volume.shape[0] == 1:
        return (0, margin, margin), (1, 5, 5)
    if ratio < 1.5:
        return (margin, margin, margin), (5, 5, 5)
    if ratio < 3:
        return (max(1, margin - 1), margin, margin), (3, 5, 5)
    return (1, margin, margin), (1, 5, 5)


def _collect(
    volume: Volume, body: Body, main: ValueRange, origins: NDArray[np.int64], shape: tuple[int, ...], margin: int
) -> _Pieces:
    """Read the blocks with a rim, keep what is deep inside the main material, take the trend off."""
    from scipy.ndimage import minimum_filter1d, uniform_filter1d

    keep_away, width = _reach(volume, margin)
    rim = tuple(m + w // 2 for m, w in zip(keep_away, width, strict=True))
    core = tuple(slice(r, r + n) for r, n in zip(rim, shape, strict=True))
    basis = _polynomials(shape)
    residuals, masks = [], []
    for first in range(0, len(origins), _BATCH):
        after = [r + n - 1 for r, n in zip(rim, shape, strict=True)]
        boxes = read_boxes(volume, body.regions, origins[first : first + _BATCH], rim, after)
        # Smoothed, so that single noisy voxels beyond the range's ends do not punch holes.
        smooth = boxes.values
        for axis, size in enumerate(width, start=1):
            smooth = uniform_filter1d(smooth, size, axis=axis, mode="nearest")
        inside = _within(smooth, main)
        inside &= (boxes.labels != Region.EXCLUDED) & (boxes.labels != Region.NO_DATA)
        inside = inside.astype(np.uint8)
        for axis, m in enumerate(keep_away, start=1):
            inside = minimum_filter1d(inside, 2 * m + 1, axis=axis, mode="nearest")
        used = inside[(slice(None), *core)].astype(bool)
        used &= boxes.labels[(slice(None), *core)] == Region.OBJECT if main.lower is None else True
        enough = used.reshape(len(used), -1).sum(axis=1) >= _FEWEST_VOXELS
        if enough.any():
            residual, used = _detrend_without_strays(boxes.values[(slice(None), *core)][enough], used[enough], basis)
            residuals.append(residual)
            masks.append(used)
    if not residuals:
        return _Pieces(np.zeros((0, *shape), np.float32), np.zeros((0, *shape), bool))
    return _Pieces(np.concatenate(residuals), np.concatenate(masks))


def _polynomials(shape: tuple[int, ...]) -> NDArray[np.float32]:
    """Shape (terms, voxels): all products of up to two coordinates; axes of one voxel give no terms."""
    axes = [np.linspace(-1, 1, n) if n > 1 else np.zeros(1) for n in shape]
    coordinates = [c.ravel() for c in np.meshgrid(*axes, indexing="ij")]
    terms = [np.ones(coordinates[0].shape)]
    varying = [n for n in range(3) if shape[n] > 1]
    terms += [coordinates[n] for n in varying]
    terms += [coordinates[a] * coordinates[b] for a, b in combinations_with_replacement(varying, 2)]
    return np.array(terms, dtype=np.float32)


def _gram_inverse(used: NDArray[np.bool_], basis: NDArray[np.float32]) -> NDArray[np.float64]:
    """Shape (blocks, terms, terms): inverse of the normal matrices of the masked fits."""
    products = (basis[:, None, :] * basis[None, :, :]).reshape(-1, basis.shape[1])
    gram = used.reshape(len(used), -1).astype(np.float32) @ products.T
    gram = gram.astype(np.float64).reshape(len(used), len(basis), len(basis))
    return np.asarray(np.linalg.pinv(gram, rcond=1e-6, hermitian=True), dtype=np.float64)


def _detrend(values: NDArray[np.float32], used: NDArray[np.bool_], basis: NDArray[np.float32]) -> NDArray[np.float32]:
    """Values less the fitted polynomial, 0 where unused."""
    flat, mask = values.reshape(len(values), -1), used.reshape(len(used), -1)
    middle = (flat * mask).sum(axis=1, dtype=np.float64) / np.maximum(mask.sum(axis=1), 1)
    flat = (flat - middle[:, None].astype(np.float32)) * mask
    fitted = np.einsum("bts,bs->bt", _gram_inverse(used, basis), (flat @ basis.T).astype(np.float64))
    return ((flat - fitted.astype(np.float32) @ basis) * mask).reshape(values.shape)


def _detrend_without_strays(
    values: NDArray[np.float32], used: NDArray[np.bool_], basis: NDArray[np.float32]
) -> tuple[NDArray[np.float32], NDArray[np.bool_]]:
    """Detrend, leave out what looks like small voids or inclusions, detrend again."""
    from scipy.ndimage import maximum_filter1d, uniform_filter1d

    residual = _detrend(values, used, basis)
    local, weight = residual, used.astype(np.float32)
    for axis in (1, 2, 3):
        local = uniform_filter1d(local, 3, axis=axis, mode="constant")
        weight = uniform_filter1d(weight, 3, axis=axis, mode="constant")
    local = np.where(used, local / np.maximum(np.sqrt(weight), 0.2), 0)
    stray = np.abs(local) > _STRAY_MEAN * _robust_sd(local[used])
    stray |= np.abs(residual) > _STRAY_VOXEL * _robust_sd(residual[used])
    if not stray.any():
        return residual, used
    grown = stray.astype(np.uint8)
    for axis in (1, 2, 3):
        grown = maximum_filter1d(grown, 5, axis=axis, mode="constant")
    used = used & (grown == 0)
    return _detrend(values, used, basis), used


def _robust_sd(values: NDArray) -> float:
    """Standard deviation of a normal distribution with the same quartiles; of all where they coincide."""
    if not len(values):
        return 0.0
    quarter, three_quarters = np.percentile(values, (25, 75))
    return float((three_quarters - quarter) / 1.349) or float(values.std())


def _estimate(pieces: _Pieces) -> Noise:
    """Pool the blocks, put back what the trends took off, read the correlation."""
    residual, used = pieces.residual, pieces.used
    counts = used.reshape(len(used), -1).sum(axis=1)
    squares = np.square(residual, dtype=np.float32).reshape(len(used), -1).sum(axis=1, dtype=np.float64)
    kept = counts >= _FEWEST_VOXELS
    variance = squares[kept] / counts[kept]
    middle = np.median(variance)
    spread = 1.4826 * np.median(np.abs(variance - middle))
    kept[kept] = np.abs(variance - middle) <= 4 * spread + 1e-9 * middle
    residual, used, counts = residual[kept], used[kept], counts[kept]
    voxels = int(counts.sum())
    raw = float(squares[kept].sum() / voxels)
    if raw == 0:
        return Noise(0.0, (0.0, 0.0, 0.0), voxels)
    lags = np.array([[_lagged(residual, used, axis, d) for d in (1, 2)] for axis in (1, 2, 3)])
    correlation = np.zeros(3)
    total = raw
    for _ in range(6):
        loss = _share_lost(used, correlation)
        total = raw / (1 - loss)
        # A smooth trend takes the same power off at lags 0, 1 and 2.
        rho = (lags + loss * total) / total
        correlation = np.array([filter_sigma(*pair) for pair in rho])
    return Noise(float(np.sqrt(total)), (float(correlation[0]), float(correlation[1]), float(correlation[2])), voxels)


def _lagged(residual: NDArray[np.float32], used: NDArray[np.bool_], axis: int, lag: int) -> float:
    """Mean product of voxels ``lag`` apart along ``axis``; NaN where there are too few."""
    size = residual.shape[axis]
    if size <= lag:
        return float("nan")
    head = tuple(slice(0, size - lag) if a == axis else slice(None) for a in range(4))
    tail = tuple(slice(lag, size) if a == axis else slice(None) for a in range(4))
    pairs = np.count_nonzero(used[head] & used[tail])
    if pairs < 100:
        return float("nan")
    return float(np.einsum("bkji,bkji->b", residual[head], residual[tail]).sum(dtype=np.float64) / pairs)


def filter_sigma(first: float, second: float) -> float:
    """σ_f of the Gaussian filter whose noise has the autocorrelations ``first`` and ``second`` at lags 1 and 2.

    Least squares on ρ(d) = exp(−d²/(4·σ_f²)); 0 for white noise. NaN stands for a lag that was not measured.
    """
    if not np.isfinite(first) or first <= 0:
        return 0.0
    sigma = np.exp(np.linspace(np.log(0.15), np.log(8.0), 800))
    misfit = (np.exp(-1 / (4 * sigma**2)) - first) ** 2
    if np.isfinite(second):
        misfit += (np.exp(-1 / sigma**2) - second) ** 2
    best = int(np.argmin(misfit))
    # Less than a quarter of a voxel is white noise to within the scatter of any estimate.
    return 0.0 if sigma[best] < 0.25 else float(sigma[best])


def _share_lost(used: NDArray[np.bool_], correlation: NDArray[np.float64]) -> float:
    """Share of the noise's variance that the trends take off: trace(H·R) / voxels.

    H is the projection on the polynomials, R the noise's correlation matrix. A few blocks stand for all.
    """
    from scipy.ndimage import correlate1d

    some = used[:: max(1, len(used) // 12)]
    basis = _polynomials(used.shape[1:])
    inverse = _gram_inverse(some, basis)
    terms = some[:, None] * basis.reshape(1, len(basis), *used.shape[1:])
    spread = terms
    for axis, sigma in enumerate(correlation, start=2):
        if sigma > 0.15:
            reach = min(int(np.ceil(6 * sigma)), 3 * _BLOCK)
            kernel = np.exp(-(np.arange(-reach, reach + 1) ** 2) / (4 * sigma**2))
            spread = correlate1d(spread, kernel, axis=axis, mode="constant")
    flat = (len(some), len(basis), -1)
    inner = np.einsum("btv,bsv->bts", terms.reshape(flat), spread.reshape(flat), dtype=np.float64, casting="unsafe")
    lost = np.einsum("bts,bts->b", inverse, inner)
    return float(min(lost.sum() / some.sum(), 0.6))
