"""Volume and surface of the part: the material of the object with its inclusions, without its closed voids."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import norm

from tomofolio.body.result import Body
from tomofolio.fitness.artefacts import find_clipping
from tomofolio.fitness.result import Fitness
from tomofolio.measure.result import PartFigures
from tomofolio.measure.rim import ASIDE, BAND_IN, BAND_OUT, DEEP, DEEPER, OUTER, rim_sums
from tomofolio.measure.surface import surface_area_mm2
from tomofolio.ranges.result import Ranges
from tomofolio.volume import Volume

#: The rim's level is carried from the shells out to the band along a straight line, by at most this share of the
#: contrast: more is no trend of one material.
LARGEST_TREND = 0.05
#: What a trend is expected to add before a look at the values (one standard deviation, share of the contrast), so that
#: noise is not carried along.
EXPECTED_TREND = 0.01
#: Standard uncertainty of the rim's level: this share of what the trend adds, and this share of the contrast.
TREND_UNSURE, LEVEL_UNSURE = 0.3, 0.002
#: Standard uncertainty of where the sampled surface lies, in voxels, all over.
PLACE_UNSURE_VOX = 0.006
#: … of the surface where the count stands, in σ of the blur: at a material twice as dense half-way lies 0.67 σ off.
ASIDE_UNSURE = 0.67
#: … and of the correction itself, for edges that are not as the model of one even blur has them, as a share of it.
CORRECTION_UNSURE = 0.2
#: A tile's own level weighs as much as the mean of all from this number of voxels on.
FEW_VOXELS = 500.0
QUANTILE_95 = 1.96


def part_figures(
    volume: Volume,
    ranges: Ranges,
    body: Body,
    fitness: Fitness,
    *,
    closed_voids_mm3: float,
    closed_voids_sd_mm3: float = 0.0,
) -> PartFigures:
    """Volume of the filled object less the closed voids, and its outside surface.

    The filled object (object and enclosed voxels past the threshold) is counted; in a band around its outside surface
    the voxels count by the material they hold instead (`tomofolio.measure.rim`), so that neither the curvature of the
    surface nor a threshold between levels that the rim does not have moves it. Where the blur or the background is
    unknown the count stands as it is.

    Parameters
    ----------
    closed_voids_mm3, closed_voids_sd_mm3 : best estimate of all closed voids and its standard uncertainty.

    Returns
    -------
    The interval is None where there is no background to tell an edge by; so is the surface.
    """
    counted = _filled_mm3(volume, body)
    if body.threshold is None or ranges.background is None or counted == 0:
        return PartFigures(max(counted - closed_voids_mm3, 0.0), None, None)
    surface = surface_area_mm2(body, volume.grid)
    spacing = np.array(volume.grid.spacing_mm)
    blur = _blur_vox(fitness, spacing)
    correction, sd = _edge_correction(volume, ranges, body, fitness, blur, surface)
    filled = counted + correction
    half = QUANTILE_95 * float(np.hypot(sd, closed_voids_sd_mm3))
    part = max(filled - closed_voids_mm3, 0.0)
    return PartFigures(part, (max(part - half, 0.0), part + half), surface)


def _filled_mm3(volume: Volume, body: Body) -> float:
    """Volume of the object with what it encloses, by the threshold."""
    # Codes 1 and 2 alone stay below 2 when 1 is taken off (0 turns into 255).
    counts = [np.count_nonzero(body.regions[k] - np.uint8(1) < 2) for k in range(volume.shape[0])]
    return float(np.dot(counts, volume.grid.voxel_volumes_mm3))


def _blur_vox(fitness: Fitness, spacing: NDArray[np.float64]) -> NDArray[np.float64]:
    if fitness.blur_sigma_axes_mm is not None:
        return np.array(fitness.blur_sigma_axes_mm) / spacing
    if fitness.blur_sigma_mm is not None:
        return fitness.blur_sigma_mm / spacing
    return np.ones(3)


def _edge_correction(
    volume: Volume,
    ranges: Ranges,
    body: Body,
    fitness: Fitness,
    blur_vox: NDArray[np.float64],
    surface_mm2: float,
) -> tuple[float, float]:
    """What the band's material differs from its count by, and the standard uncertainty of the filled volume, in mm³."""
    assert ranges.background is not None
    rim = rim_sums(volume, body, blur_vox, ranges.main.upper)
    table = rim.table
    mean_spacing = float(volume.grid.voxel_volumes_mm3.mean() ** (1 / 3))
    blur_mm = float(np.prod(blur_vox) ** (1 / 3)) * mean_spacing
    outside = _mean(table[OUTER], ranges.background.peak)
    noise = fitness.noise if fitness.noise is not None else ranges.main.spread
    together = 1.0
    if fitness.noise_correlation_mm is not None:
        filter_vox = np.array(fitness.noise_correlation_mm) / np.array(volume.grid.spacing_mm)
        together = float(np.maximum(np.sqrt(4 * np.pi) * filter_vox, 1.0).prod())
    level, level_sd = _rim_level(table, ranges.main.peak, outside, noise * float(np.sqrt(together)))
    contrast = level - outside
    in_band, held = table[BAND_IN], table[BAND_IN] + table[BAND_OUT]
    correction = float((held[2] - held[1] * outside) / contrast - in_band[1])
    aside = float(table[ASIDE, 1] / max(held[1] + table[ASIDE, 1], 1e-300))
    correction += (1 - aside) * surface_mm2 * blur_mm * _cleared_foot(volume, ranges, body)
    from_noise = noise / contrast * mean_spacing**3 * np.sqrt(held[0] * together)
    from_level = level_sd / contrast * in_band[1]
    from_unlike = _unlike_places(rim.tiles, outside, contrast)
    threshold_sd = 0.0
    if ranges.background.upper_95 is not None:
        threshold_sd = (ranges.background.upper_95[1] - ranges.background.upper_95[0]) / (2 * QUANTILE_95)
    from_threshold = threshold_sd / abs(contrast) * np.sqrt(2 * np.pi) * blur_mm * surface_mm2
    from_place = PLACE_UNSURE_VOX * mean_spacing * surface_mm2
    from_aside = ASIDE_UNSURE * blur_mm * aside * surface_mm2
    from_model = CORRECTION_UNSURE * correction
    parts = np.array([from_noise, from_level, from_unlike, from_threshold, from_place, from_aside, from_model])
    return correction, float(np.sqrt(np.square(parts).sum()))


def _mean(sums: NDArray[np.float64], otherwise: float) -> float:
    return float(sums[2] / sums[1]) if sums[1] > 0 else otherwise


def _unlike_places(tiles: NDArray[np.float64], outside: float, contrast: float) -> float:
    """How much the correction would differ if every tile were held against its own level, in mm³.

    Next to nothing in one material; more where levels vary and thin walls, which have no shells, are none of the mean.
    """
    mean = _mean(tiles[:, DEEP].sum(axis=0), outside + contrast)
    count = tiles[:, DEEP, 0]
    local = tiles[:, DEEP, 2] / np.maximum(tiles[:, DEEP, 1], 1e-300)
    # A tile's own level counts by its number of voxels; the mean stands in where there are few.
    step = count / (count + FEW_VOXELS) * (local - mean)
    material = tiles[:, BAND_IN] + tiles[:, BAND_OUT]
    held = material[:, 2] - material[:, 1] * outside
    return abs(float((held / (contrast + np.where(count > 0, step, 0.0))).sum() - held.sum() / contrast))


def _rim_level(table: NDArray[np.float64], fallback: float, outside: float, noise: float) -> tuple[float, float]:
    """Level of the material in the band and its standard uncertainty, from the two shells within.

    ``noise`` is that of independent voxels.
    """
    deep = _mean(table[DEEP], outside)
    if (deep - outside) * (fallback - outside) <= 0:
        return fallback, 0.02 * abs(fallback - outside)
    contrast = abs(deep - outside)
    deep_sd = noise / np.sqrt(table[DEEP, 0])
    if table[DEEPER, 0] == 0:
        return deep, float(np.hypot(deep_sd, EXPECTED_TREND * contrast))
    deeper = _mean(table[DEEPER], deep)
    # In half widths of the band the shells' middles lie 1 1/4 and 1 3/4 deep, the band's 1/2: so 3/2 of their step.
    trend_sd = 1.5 * float(np.hypot(deep_sd, noise / np.sqrt(table[DEEPER, 0])))
    expected = EXPECTED_TREND * contrast
    certain = expected**2 / (expected**2 + trend_sd**2)
    trend = float(np.clip(1.5 * (deep - deeper), -LARGEST_TREND * contrast, LARGEST_TREND * contrast))
    parts = (deep_sd, np.sqrt(certain) * trend_sd, TREND_UNSURE * trend, LEVEL_UNSURE * contrast)
    return deep + certain * trend, float(np.sqrt(np.square(parts).sum()))


def _cleared_foot(volume: Volume, ranges: Ranges, body: Body) -> float:
    """What a background that was cleared takes from an edge, per area and in units of the blur.

    ∫ Φ(t) dt up to the place where Φ reaches the share that was cleared.
    """
    cut = find_clipping(volume, ranges, body).cut
    if cut <= 0:
        return 0.0
    place = norm.ppf(min(cut, 0.5))
    return float(norm.pdf(place) + place * min(cut, 0.5))
