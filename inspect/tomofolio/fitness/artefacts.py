"""What went wrong before the scan came here, as far as its values show it: clipping, truncation, cupping."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body, Region
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Volume

#: A value that is this many times as frequent as its neighbours was clipped or filled in, not measured.
_PILE = 6.0
#: Smallest share of the object, or of its outline, that a remark is made for.
_SHARE = 1e-3


@dataclass(frozen=True)
class Clipping:
    """Shares (0 to 1) that lie at the ends of the stored numbers: of the object high up, of the outside low down.

    ``cleared`` is the one value of an outside that has no spread (else None), ``cut`` up to where it was cleared, as
    a share of the way from there to the main material (0 where nothing is missing); ``step`` is the distance between
    neighbouring values in the unit of the scan.
    """

    high: float
    low: float
    cleared: float | None
    cut: float
    step: float


def find_clipping(volume: Volume, ranges: Ranges, body: Body) -> Clipping:
    """Look at every seventh voxel or so of the ends of the values."""
    stride = max(1, round((volume.stored.size / 3e6) ** (1 / 3)))
    pick = (slice(None, None, stride),) * 3
    stored, regions = volume.stored[pick], body.regions[pick]
    ends = [(volume.stored[k].min(), volume.stored[k].max()) for k in range(0, volume.shape[0], stride)]
    lowest, highest = min(low for low, _ in ends), max(high for _, high in ends)
    solid = stored[(regions == Region.OBJECT) | (regions == Region.ENCLOSED)]
    air = stored[regions == Region.OUTSIDE]
    slope = float(np.median(volume.slope))
    different = np.unique(stored[:: max(1, len(stored) // 8)])
    step = float(np.diff(different).min()) * abs(slope) if len(different) > 1 else 0.0
    if slope < 0:
        lowest, highest = highest, lowest
    high, low = _piled(solid, highest, step, slope), _piled(air, lowest, step, slope)
    offset = float(np.median(volume.intercept))
    fill = _fill_value(air) if ranges.background is not None and len(air) else None
    if fill is None:
        return Clipping(high, low, None, 0.0, step)
    return Clipping(high, low, fill * slope + offset, _cut(air * slope + offset, ranges), step)


def _cut(air: NDArray, ranges: Ranges) -> float:
    """How far up the values were cleared, as a share of the way from background to main material.

    The values near the object's edges start again above the level of clearing: read as the 2nd percentile of those
    that differ from the cleared value.
    """
    assert ranges.background is not None
    height = ranges.main.peak - ranges.background.peak
    share = (air - np.median(air)) / height
    left = share[np.abs(share) > 1e-6]
    return float(np.clip(np.percentile(left, 2), 0, 1)) if len(left) >= 50 and height != 0 else 0.0


def _piled(stored: NDArray, end: float, step: float, slope: float) -> float:
    """Share of the voxels at ``end``, where far more lie there than at the next values; else 0."""
    if not len(stored) or step == 0:
        return 0.0
    there = int(np.count_nonzero(stored == end))
    width = 10 * step / abs(slope)
    near = int(np.count_nonzero(np.abs(stored.astype(np.float64) - float(end)) <= width)) - there
    return there / len(stored) if there > _PILE * max(near / 10, 2.0) and there / len(stored) > _SHARE else 0.0


def _fill_value(air: NDArray) -> float | None:
    """The value of nearly all of the air, where there is one; what is left is the foot of the object's edges."""
    values, counts = np.unique(air, return_counts=True)
    return float(values[np.argmax(counts)]) if counts.max() > 0.8 * len(air) else None


@dataclass(frozen=True)
class Truncation:
    """How much of the object's outline per slice lies at the side of the scan or at the rim of what was scanned.

    ``sides`` share of the slices' object voxels that lie on the lateral border, ``rim`` of those beside no data or on
    the inscribed circle; ``first`` and ``last`` share of the end slices that is object.
    """

    sides: float
    rim: float
    first: float
    last: float


def find_truncation(volume: Volume, body: Body) -> Truncation:
    """Look where the object ends: at its own surface, or at the end of the scan."""
    regions = body.regions
    slices, rows, columns = volume.shape
    picked = range(0, slices, max(1, slices // 48))
    object_rows = 0
    sides = rim = 0
    circle = _circle(rows, columns)
    for k in picked:
        plane = regions[k]
        solid = plane == Region.OBJECT
        if not solid.any():
            continue
        # Outline voxels: object with a neighbour in the plane that is not, or the border.
        outline = int(np.count_nonzero(solid[:, 1:] != solid[:, :-1]) + np.count_nonzero(solid[1:] != solid[:-1]))
        border = int(solid[0].sum() + solid[-1].sum() + solid[:, 0].sum() + solid[:, -1].sum())
        object_rows += outline + border
        sides += border
        empty = plane == Region.NO_DATA
        beside = int(np.count_nonzero(solid[:, 1:] & empty[:, :-1]) + np.count_nonzero(solid[:, :-1] & empty[:, 1:]))
        beside += int(np.count_nonzero(solid[1:] & empty[:-1]) + np.count_nonzero(solid[:-1] & empty[1:]))
        inner, outer = circle
        on_circle = solid[inner] & ~solid[outer]
        along = int(np.count_nonzero(on_circle)) if np.count_nonzero(solid[outer]) < 0.05 * on_circle.sum() else 0
        rim += max(beside, along)
    ends = []
    for k in (0, slices - 1):
        solid = (regions[k] == Region.OBJECT) | (regions[k] == Region.ENCLOSED)
        ends.append(float(solid.mean()))
    total = max(1, object_rows)
    return Truncation(sides / total, rim / total, ends[0], ends[1])


def _circle(rows: int, columns: int) -> tuple[tuple[NDArray, NDArray], tuple[NDArray, NDArray]]:
    """Pixels just inside and just outside the largest circle of a slice."""
    radius = min(rows, columns) / 2
    angle = np.arange(0, 2 * np.pi, 1 / radius)
    rings = []
    for r in (0.985 * radius - 1, 1.015 * radius + 1):
        j = np.rint((rows - 1) / 2 + r * np.sin(angle)).astype(np.int64)
        i = np.rint((columns - 1) / 2 + r * np.cos(angle)).astype(np.int64)
        inside = (j >= 0) & (j < rows) & (i >= 0) & (i < columns)
        rings.append((np.where(inside, j, 0), np.where(inside, i, 0)))
    return rings[0], rings[1]


@dataclass(frozen=True)
class Cupping:
    """Rise of the main material's value from the deepest inside to the rim, in the unit of the scan."""

    rise: float
    error: float


def find_cupping(volume: Volume, ranges: Ranges, body: Body, margin_mm: float, step: float) -> Cupping | None:
    """Trend of the main material with its depth below the outer surface, measured in the plane of the slices.

    A parabola in depth is fitted to medians over shells; for a round body with a parabolic dip that is exact. None
    where the object is too thin to tell.

    Parameters
    ----------
    margin_mm : depth to stay away from the surface, where blur still shows.
    step : distance between neighbouring values.
    """
    from scipy.ndimage import distance_transform_edt

    main = ranges.main
    grid = volume.grid
    low = [cut.start for cut in body.box]
    high = [cut.stop for cut in body.box]
    stride = max(1, -(-max(high[1] - low[1], high[2] - low[2]) // 128))
    picked = np.unique(np.linspace(low[0], high[0] - 1, min(20, high[0] - low[0])).round().astype(int))
    cuts = tuple(slice(max(0, low[a] - stride), high[a] + stride, stride) for a in (1, 2))
    depths, values = [], []
    for k in picked:
        labels = body.regions[k][cuts]
        inside = np.pad((labels == Region.OBJECT) | (labels == Region.ENCLOSED), 1)
        depth = distance_transform_edt(inside, sampling=(grid.row_spacing_mm * stride, grid.column_spacing_mm * stride))
        depth = depth[1:-1, 1:-1]
        value = volume.stored[k][cuts] * volume.slope[k] + volume.intercept[k]
        used = (labels == Region.OBJECT) & (depth > margin_mm)
        if main.lower is not None:
            used &= value >= main.lower
        if main.upper is not None:
            used &= value < main.upper
        depths.append(depth[used])
        values.append(value[used])
    depth, value = np.concatenate(depths), np.concatenate(values)
    if len(depth) < 500:
        return None
    deepest = float(np.percentile(depth, 99))
    thin = stride * max(grid.row_spacing_mm, grid.column_spacing_mm)
    if deepest < margin_mm + 4 * thin:
        return None
    edges = np.linspace(margin_mm, deepest, 13)
    shell = np.digitize(depth, edges)
    at, middle, error = [], [], []
    for n in range(1, 13):
        part = value[shell == n]
        if len(part) >= 25:
            at.append(float(np.mean(depth[shell == n])))
            middle.append(float(np.median(part)))
            # 1.2533: a median scatters more than a mean; it cannot be known better than the values' own step allows.
            error.append(1.2533 * float(np.std(part)) / np.sqrt(len(part)) + 0.3 * step)
    if len(at) < 5:
        return None
    x, weight = np.array(at) / deepest, 1 / np.array(error)
    design = np.stack((np.ones_like(x), x, x * x), axis=1) * weight[:, None]
    fitted, *_ = np.linalg.lstsq(design, np.array(middle) * weight, rcond=None)
    misfit = float(np.sum((design @ fitted - np.array(middle) * weight) ** 2)) / (len(x) - 3)
    covariance = np.linalg.pinv(design.T @ design) * max(1.0, misfit)
    # Up to the surface only where the margin is a small part of the depth; else a parabola would be stretched too far.
    start = 0.0 if deepest > 5 * margin_mm else margin_mm / deepest
    span = np.array([0.0, start - 1.0, start**2 - 1.0])
    return Cupping(float(span @ fitted), float(np.sqrt(span @ covariance @ span)))
