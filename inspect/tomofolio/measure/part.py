"""The part: volume of its material without closed voids, surface, and their uncertainty."""

from __future__ import annotations

import numpy as np

from tomofolio.body.result import Body, Region
from tomofolio.fitness.result import Fitness
from tomofolio.measure.level import LevelField
from tomofolio.measure.result import PartFigures
from tomofolio.measure.surface import surface_area_mm2
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Volume

#: Relative standard uncertainty of the place of the half-way value that no voxel tells (scatter, beam hardening), as
#: a share of the blur σ.
PLACE_SIGMA = 0.05


def part_figures(
    volume: Volume,
    ranges: Ranges,
    body: Body,
    fitness: Fitness,
    field: LevelField | None,
    outside_index: np.ndarray,
    *,
    closed_voids_mm3: float,
    closed_voids_sd_mm3: float,
) -> PartFigures:
    """Volume of the object with all it encloses, less its closed voids.

    The threshold counts voxels right where the blurred edge passes half-way between background and the material at
    that place. Where the material is brighter or darker at the rim than its peak (cupping), the threshold sits beside
    half-way, and the surface is off by Δ = σ · √(2π) · (threshold − half-way) / contrast for a Gaussian blur: the
    mean of that over the surface, times the surface, is taken off.

    Parameters
    ----------
    field : local level of the main material; None leaves the correction out.
    outside_index : shape (n, 3), indices of points on the outside surface.
    """
    grid = volume.grid
    filled = np.zeros(grid.shape[0], np.int64)
    for k in range(grid.shape[0]):
        codes = body.regions[k]
        filled[k] = np.count_nonzero((codes == Region.OBJECT) | (codes == Region.ENCLOSED))
    gross = float(filled @ grid.voxel_volumes_mm3)
    surface = surface_area_mm2(body, grid) if body.threshold is not None else None
    if surface is None or body.threshold is None or ranges.background is None:
        return PartFigures(volume_mm3=gross - closed_voids_mm3, volume_mm3_95=None, surface_mm2=surface)
    blur = fitness.blur_sigma_mm or min(grid.spacing_mm)
    background = ranges.background
    contrast = ranges.main.peak - background.peak
    shift, shift_sd = 0.0, 0.0
    if field is not None and len(outside_index):
        level = field.at(outside_index[:: max(len(outside_index) // 20000, 1)])
        half_way = (level + background.peak) / 2
        steps = blur * np.sqrt(2 * np.pi) * (body.threshold - half_way) / (level - background.peak)
        shift = float(np.clip(np.mean(steps), -blur, blur))
        shift_sd = abs(shift) / 3
    bounds = background.upper_95
    if bounds is not None:
        shift_sd = float(np.hypot(shift_sd, (bounds[1] - bounds[0]) / 4 * blur * np.sqrt(2 * np.pi) / contrast))
    shift_sd = float(np.hypot(shift_sd, PLACE_SIGMA * blur))
    mm3 = gross + shift * surface - closed_voids_mm3
    sd = float(np.hypot(shift_sd * surface, closed_voids_sd_mm3))
    return PartFigures(volume_mm3=mm3, volume_mm3_95=(max(mm3 - 2 * sd, 0.0), mm3 + 2 * sd), surface_mm2=surface)
