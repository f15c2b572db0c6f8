"""What the scan can bear: all figures of this room put together."""

from __future__ import annotations

import numpy as np

from tomofolio.body.result import Body
from tomofolio.fitness.artefacts import find_clipping, find_cupping, find_truncation
from tomofolio.fitness.blur import Blur, measure_blur
from tomofolio.fitness.limits import SphereLimits
from tomofolio.fitness.noise import Noise, measure_noise
from tomofolio.fitness.result import Fitness
from tomofolio.fitness.words import (
    EDGES_CUT,
    about_artefacts,
    about_blur,
    about_geometry,
    about_limits,
    about_noise,
)
from tomofolio.ranges.result import Ranges
from tomofolio.remarks import Remark
from tomofolio.volume import Grid, Volume

#: Frequency times σ where a Gaussian's transfer function exp(−2π²σ²f²) is 10 %: √(ln 10 / 2) / π.
_MTF10 = float(np.sqrt(np.log(10) / 2) / np.pi)


def assess(volume: Volume, ranges: Ranges, body: Body) -> Fitness:
    """Noise, contrast, blur and artefacts of the scan, from the object itself.

    Parameters
    ----------
    volume, ranges, body : the scan, its value ranges, and what of it is the object.

    Returns
    -------
    figures the scan does not bear are None, with a remark that says why.
    """
    main, background = ranges.main, ranges.background
    noise = measure_noise(volume, body, main)
    contrast = None if background is None else abs(main.peak - background.peak)
    cnr = contrast / noise.sd if noise is not None and noise.sd > 0 and contrast is not None else None
    clipping = find_clipping(volume, ranges, body)
    blur = None
    if contrast:
        correlation = noise.correlation if noise is not None else (0.0, 0.0, 0.0)
        blur = measure_blur(volume, body, contrast, correlation, clipping.cleared if clipping.cut > EDGES_CUT else None)
    blur_mm = None if blur is None else blur.mean_mm
    margin = 4 * float(np.sqrt(volume.grid.row_spacing_mm * volume.grid.column_spacing_mm))
    cupping = find_cupping(volume, ranges, body, max(margin, 3 * (blur_mm or 0)), clipping.step)
    detectable, measurable = _limits(volume.grid, noise, blur, cnr)
    spacing = volume.grid.spacing_mm
    remarks: list[Remark] = [
        *about_noise(noise, contrast, cnr, clipping.step),
        *about_blur(blur, contrast, clipping, volume.grid),
        *about_artefacts(clipping, find_truncation(volume, body), cupping, contrast),
        *about_geometry(volume.grid, body),
        *about_limits(detectable, measurable, cnr, blur),
    ]
    return Fitness(
        noise=None if noise is None else noise.sd,
        noise_correlation_mm=None if noise is None else _triple(np.array(noise.correlation) * np.array(spacing)),
        contrast=contrast,
        cnr=cnr,
        blur_sigma_mm=blur_mm,
        blur_sigma_axes_mm=None if blur is None else blur.axes_mm,
        mtf10_per_mm=None if blur_mm is None else _MTF10 / blur_mm,
        detectable_diameter_mm=detectable,
        measurable_diameter_mm=measurable,
        remarks=tuple(remarks),
    )


def _triple(values: np.ndarray) -> tuple[float, float, float]:
    return float(values[0]), float(values[1]), float(values[2])


def _limits(grid: Grid, noise: Noise | None, blur: Blur | None, cnr: float | None) -> tuple[float | None, float | None]:
    """Detectable and measurable diameter in mm, where everything they rest on is known."""
    if noise is None or blur is None or cnr is None:
        return None, None
    spacing = grid.spacing_mm
    blur_vox = [sigma / step for sigma, step in zip(blur.axes_mm, spacing, strict=True)]
    limits = SphereLimits(blur_vox, noise.correlation, cnr, spacing)
    detectable, measurable = limits.detectable_diameter(), limits.measurable_diameter()
    # Below a voxel across, the model of a sphere in a sea of voxels means nothing.
    smallest = float(np.prod(spacing) ** (1 / 3))
    return (
        None if detectable is None else max(detectable, smallest),
        None if measurable is None else max(measurable, smallest),
    )
