"""Voids and inclusions: find them, measure each, and add them up."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from tomofolio.body.result import Body
from tomofolio.body.runs import Runs
from tomofolio.fitness.result import Fitness
from tomofolio.measure.densest import densest_pocket
from tomofolio.measure.estimate import Estimate, estimate
from tomofolio.measure.level import LevelField
from tomofolio.measure.patches import Patch, patches
from tomofolio.measure.result import Spot, Spots
from tomofolio.measure.seeds import Noise, noise_of, seed_runs
from tomofolio.measure.shape import Shape, shape_of
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Volume

Array = NDArray[np.float64]

#: An estimate must be this many of its standard deviations above nothing to be reported.
SMALLEST_SIGNIFICANCE = 2.5
#: A spot whose core (past half of its own peak) is so many times larger than its volume is no spot.
DIFFUSE_RATIO = 2.5
#: A dark region this faint that lies at the outside is another material, not a void.
FAINT_CONTRAST = 0.75
#: Below this many blur σ a spot's surface and the outside cannot be told apart.
SEPARABLE_SIGMA = 3.0
#: About so many points of a spot's surface are enough to find its shortest distance to the outside.
LIGAMENT_POINTS = 600


@dataclass(frozen=True)
class _Surroundings:
    """What all spots of a run share; ``outside`` is a tree of the points on the outside surface (LPS mm)."""

    volume: Volume
    ranges: Ranges
    body: Body
    field: LevelField
    outside: cKDTree | None
    noise: Noise
    contrast: float


@dataclass(frozen=True)
class _Measured:
    patch: Patch
    found: Estimate
    shape: Shape
    spot: Spot
    sd_mm3: float


def find_spots(
    volume: Volume,
    ranges: Ranges,
    body: Body,
    fitness: Fitness,
    field: LevelField,
    outside: Array,
) -> tuple[tuple[Spot, ...], tuple[Spot, ...]]:
    """Voids (darker than the material) and inclusions (brighter) in the part, each largest first.

    Parameters
    ----------
    field : level of the main material.
    outside : shape (n, 3), points on the outside surface, LPS mm.
    """
    background = ranges.background
    if background is None:
        return (), ()
    contrast = ranges.main.peak - background.peak
    noise = noise_of(fitness, volume.grid.spacing_mm, contrast)
    dark, bright = seed_runs(volume, body, field, contrast, noise)
    tree = cKDTree(outside, balanced_tree=False, compact_nodes=False) if len(outside) else None
    surroundings = _Surroundings(volume, ranges, body, field, tree, noise, contrast)
    return _measure_all(surroundings, dark, +1), _measure_all(surroundings, bright, -1)


def _measure_all(around: _Surroundings, runs: Runs, sign: int) -> tuple[Spot, ...]:
    if not runs.count:
        return ()
    volume, ranges, noise = around.volume, around.ranges, around.noise
    background = ranges.background
    assert background is not None, "without background there are no seeds"
    spacing = np.array(volume.grid.spacing_mm)
    spacing_vox = spacing / spacing.min()
    measured = []
    for patch in patches(volume, around.body, runs, around.field, around.contrast, noise, sign=sign):
        local = patch.level - background.peak if sign > 0 else _brightness(patch, ranges)
        found = estimate(patch, noise, local, spacing_vox, contrast_known=sign > 0)
        if _is_spot(patch, found, noise, sign):
            measured.append(_measure_one(volume, patch, found))
    measured.sort(key=lambda one: (-one.spot.volume_mm3, one.spot.position_mm))
    blur_mm = float(np.prod(noise.blur_vox * spacing) ** (1 / 3))
    ligaments = _ligaments(measured, around.outside, SEPARABLE_SIGMA * blur_mm, float(spacing.min()))
    nearest = _nearest(measured)
    letter = "V" if sign > 0 else "I"
    return tuple(
        replace(one.spot, id=f"{letter}{n}", ligament_mm=ligament, nearest_mm=neighbour)
        for n, (one, ligament, neighbour) in enumerate(zip(measured, ligaments, nearest, strict=True), start=1)
    )


def sum_up(items: tuple[Spot, ...], part_mm3: float, body: Body, volume: Volume) -> Spots:
    """Count, total and share of the closed ones; their uncertainties are taken as independent (GUM, JCGM 100)."""
    closed = [item for item in items if not item.open]
    total = sum(item.volume_mm3 for item in closed)
    sd = total_sd_mm3(items)
    interval = (max(total - 2 * sd, 0.0), total + 2 * sd)
    whole = part_mm3 + total
    percent = tuple(100 * end / whole for end in interval) if whole > 0 else None
    return Spots(
        count=len(closed),
        total_mm3=total,
        total_mm3_95=interval,
        porosity_percent=100 * total / whole if whole > 0 else None,
        porosity_percent_95=percent,  # type: ignore[arg-type]
        densest=densest_pocket(closed, body, volume) if closed else None,
        items=items,
    )


def total_sd_mm3(items: tuple[Spot, ...]) -> float:
    """Standard uncertainty of the closed spots' total: random parts add in squares, levels shift all together."""
    sds = [
        (item.volume_mm3_95[1] - item.volume_mm3_95[0]) / 4 for item in items if not item.open and item.volume_mm3_95
    ]
    common = 0.01 * sum(item.volume_mm3 for item in items if not item.open)
    return float(np.sqrt(np.square(sds).sum() + common**2))


def _brightness(patch: Patch, ranges: Ranges) -> float:
    """First guess of an inclusion's own contrast: the next brighter range where the spot reaches it, else its peak."""
    peak = float(np.percentile(patch.darkness[patch.core], 90))
    brighter = [item.peak - patch.level for item in ranges.items if item.peak > ranges.main.peak]
    reached = [step for step in brighter if peak > 0.4 * step]
    return max(reached) if reached else peak


def _is_spot(patch: Patch, found: Estimate, noise: Noise, sign: int) -> bool:
    if found.relative_sd > 1 / SMALLEST_SIGNIFICANCE or found.own_contrast <= 0:
        return False
    if not found.fitted and patch.core.sum() > DIFFUSE_RATIO * found.voxels:
        return False  # wide and faint: a crevice of the outside or structure of the material, no spot of its own
    if not found.fitted and found.contrast is None and patch.past_half.sum() < 0.1 * found.voxels:
        return False
    at_outside = float(patch.edge_vox[patch.core].min()) < 1.5 + found.spread_vox
    if sign < 0:
        return not at_outside
    faint = found.contrast is not None and found.contrast < FAINT_CONTRAST
    return not (faint and at_outside)


def _measure_one(volume: Volume, patch: Patch, found: Estimate) -> _Measured:
    grid = volume.grid
    inside = np.flatnonzero(patch.own.any(axis=(1, 2))) + patch.start[0]
    voxel = float(grid.voxel_volumes_mm3[inside].mean()) if len(inside) else float(grid.voxel_volumes_mm3.mean())
    mm3 = found.voxels * voxel
    past = patch.past_half.sum(axis=(1, 2)) @ grid.voxel_volumes_mm3[patch.start[0] : patch.start[0] + len(patch.core)]
    shape = shape_of(patch, found, grid, mm3)
    box = [(int(w.min() + s), int(w.max() + s) + 1) for w, s in zip(np.nonzero(patch.core), patch.start, strict=True)]
    spot = Spot(
        id="",
        volume_mm3=mm3,
        volume_mm3_95=found.interval(mm3),
        threshold_volume_mm3=float(past),
        equivalent_diameter_mm=float((6 * mm3 / np.pi) ** (1 / 3)),
        feret_max_mm=shape.feret_mm,
        sphericity=shape.sphericity,
        position_mm=tuple(float(x) for x in grid.to_mm(found.centre)),  # type: ignore[arg-type]
        ligament_mm=None,
        nearest_mm=None,
        contrast=found.contrast,
        open=False,
        box=(box[0], box[1], box[2]),
    )
    return _Measured(patch, found, shape, spot, found.relative_sd * mm3)


def _ligaments(
    measured: list[_Measured], outside: cKDTree | None, separable_mm: float, finest_mm: float
) -> list[float | None]:
    """Shortest distance from each spot's surface to the outside; None where the two cannot be told apart."""
    if outside is None:
        return [None] * len(measured)
    gaps: list[float | None] = []
    for one in measured:
        points = one.shape.points_mm[:: 1 + len(one.shape.points_mm) // LIGAMENT_POINTS]
        distances = outside.query(points)[0]
        first = distances.min()
        # Noise moves every surface point, and the smallest of many noisy distances is too small: so the outside's
        # points around the gap are replaced by local means, which stay on a plane surface.
        near = points[distances <= first + finest_mm]
        around = sorted(set().union(*outside.query_ball_point(near, first + finest_mm)))
        means = outside.query_ball_point(outside.data[around], 2.5 * finest_mm)
        smooth = np.array([outside.data[n].mean(axis=0) for n in means])
        distance = float(cKDTree(smooth).query(near)[0].min())
        gaps.append(distance if distance >= separable_mm else None)
    return gaps


def _nearest(measured: list[_Measured]) -> list[float | None]:
    """Surface to surface distance to the nearest other spot; 0 where surfaces meet."""
    if len(measured) < 2:
        return [None] * len(measured)
    points = np.concatenate([one.shape.points_mm for one in measured])
    owner = np.repeat(np.arange(len(measured)), [len(one.shape.points_mm) for one in measured])
    centres = cKDTree(np.array([one.spot.position_mm for one in measured]))
    size = np.array([np.linalg.norm(one.shape.points_mm - one.spot.position_mm, axis=1).max() for one in measured])
    trees: dict[int, cKDTree] = {}
    starts = np.searchsorted(owner, np.arange(len(measured) + 1))
    gaps: list[float | None] = []
    for n, one in enumerate(measured):
        best = np.inf
        distances, others = centres.query(one.spot.position_mm, k=min(len(measured), 12))
        for distance, other in zip(distances, others, strict=True):
            if other == n or distance - size[n] - size[other] > best:
                continue
            if other not in trees:
                trees[int(other)] = cKDTree(points[starts[other] : starts[other + 1]])
            best = min(best, float(trees[int(other)].query(one.shape.points_mm)[0].min()))
        gaps.append(best if np.isfinite(best) else None)
    return gaps
