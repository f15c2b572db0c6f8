"""Volume of one spot from its missing (or surplus) grey value, with an interval."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.special import ndtr

from tomofolio.measure.patches import Patch
from tomofolio.measure.seeds import Noise
from tomofolio.measure.sphere import fit_sphere

Array = NDArray[np.float64]

#: Up to this equivalent diameter (in finest spacings) a compact spot is fitted as a blurred sphere.
LARGEST_FITTED_VOX = 9.0
#: The fit stands when its residuals are no larger than the noise makes them, times this.
LARGEST_MISFIT = 1.6
#: … and when it departs from the summed deficit by no more than so many of the sum's standard uncertainties.
LARGEST_DEPARTURE = 3.0
#: Relative standard uncertainties that no voxel tells: level of the void, blur, shape of the model.
LEVEL_RELATIVE, MODEL_RELATIVE = 0.01, 0.02
#: A plateau is taken where at least this many voxels lie deeper than the blur reaches.
SMALLEST_PLATEAU_VOXELS = 8
QUANTILE_95 = 1.96


@dataclass(frozen=True)
class Estimate:
    """Volume in voxels (of the patch's mean voxel volume), its relative standard uncertainty, and what it rests on.

    ``centre`` is the centroid weighted by the deficit, in voxel indices of the scan; ``contrast`` of the spot over
    that of the material (1 for air), None where the spot is too small for a plateau.
    """

    voxels: float
    relative_sd: float
    centre: Array
    contrast: float | None
    own_contrast: float
    offset: float
    fitted: bool
    spread_vox: float

    def interval(self, volume: float) -> tuple[float, float]:
        """95 % interval of a volume with this relative uncertainty: log-normal, so it never reaches below 0."""
        factor = float(np.exp(QUANTILE_95 * self.relative_sd))
        return volume / factor, volume * factor


def estimate(patch: Patch, noise: Noise, contrast: float, spacing_vox: Array, *, contrast_known: bool) -> Estimate:
    """Missing grey value over the spot's contrast, summed over its own voxels; small ones are fitted.

    Parameters
    ----------
    contrast : material minus background at this place (voids), or a first guess of the spot's (inclusions).
    spacing_vox : spacing [slice, row, column] in units of the finest.
    contrast_known : True for voids: without a plateau the spot is taken for air.
    """
    offset, offset_sd = _offset(patch, noise, contrast)
    darkness = patch.darkness - offset
    blur = float(np.prod(noise.blur_vox * spacing_vox) ** (1 / 3))
    plateau, plateau_sd = _plateau(patch, darkness, noise, blur, spacing_vox)
    own_contrast = contrast
    if plateau is not None:
        deviates = abs(plateau - contrast) > max(0.04 * contrast, 3 * plateau_sd)
        own_contrast = plateau if (deviates or not contrast_known) and plateau > 0 else contrast
    halo = ndtr(-(patch.edge_vox - 0.5) / blur) * (contrast / own_contrast) if contrast_known else 0.0
    share = darkness / own_contrast - halo
    count = int(patch.own.sum())
    total = float(share[patch.own].sum())
    total = max(total, 0.5)
    variance = (noise.sd / own_contrast) ** 2 * count * noise.correlated_voxels
    variance += (count * offset_sd / own_contrast) ** 2
    relative = np.sqrt(variance) / total
    centre, fitted = _centroid(share, patch), False
    diameter = (6 * total * float(spacing_vox.prod()) / np.pi) ** (1 / 3)
    if diameter <= LARGEST_FITTED_VOX:
        fit = _fit(patch, share, noise, own_contrast, spacing_vox, blur, diameter, centre)
        # A ball may fit one of two spots that touch: then it holds less than what is missing.
        if fit is not None and abs(fit[0] - total) <= LARGEST_DEPARTURE * relative * total:
            total, relative, centre = fit
            fitted = True
    model = MODEL_RELATIVE if fitted else 0.5 * MODEL_RELATIVE
    relative = float(np.sqrt(relative**2 + LEVEL_RELATIVE**2 + model**2))
    return Estimate(
        voxels=total,
        relative_sd=relative,
        centre=centre + patch.start,
        contrast=None if plateau is None else plateau / contrast,
        own_contrast=own_contrast,
        offset=offset,
        fitted=fitted,
        spread_vox=blur,
    )


def _offset(patch: Patch, noise: Noise, contrast: float) -> tuple[float, float]:
    """Mean difference of the plain shell from the level field, and its standard uncertainty."""
    values = patch.darkness[patch.shell]
    if len(values) < 30:
        return 0.0, 0.01 * contrast
    middle = float(np.median(values))
    kept = values[np.abs(values - middle) < 3.5 * noise.sd + 1e-6 * contrast]
    if len(kept) < 30:
        return middle, 0.02 * contrast
    independent = max(len(kept) / noise.correlated_voxels, 4.0)
    return float(kept.mean()), max(noise.sd, float(kept.std())) / float(np.sqrt(independent))


def _plateau(
    patch: Patch, darkness: NDArray, noise: Noise, blur: float, spacing_vox: Array
) -> tuple[float | None, float]:
    """Mean of the voxels so deep inside that the blur does not reach them, and its standard uncertainty."""
    depth = ndimage.distance_transform_edt(np.pad(patch.core, 1), sampling=spacing_vox)[1:-1, 1:-1, 1:-1]
    deep = depth > 2.2 * blur + 0.5
    count = int(deep.sum())
    if count < SMALLEST_PLATEAU_VOXELS:
        return None, np.inf
    return float(darkness[deep].mean()), noise.sd / float(np.sqrt(max(count / noise.correlated_voxels, 1.0)))


def _centroid(share: Array, patch: Patch) -> Array:
    weight = np.where(patch.own & (patch.distance_vox <= 2.0), np.maximum(share, 0), 0)
    index = np.indices(weight.shape).reshape(3, -1)
    return (index * weight.ravel()).sum(axis=1) / max(float(weight.sum()), 1e-9)


def _fit(
    patch: Patch,
    share: Array,
    noise: Noise,
    own_contrast: float,
    spacing_vox: Array,
    blur: float,
    diameter: float,
    centre: Array,
) -> tuple[float, float, Array] | None:
    """Volume in voxels, relative uncertainty and centre of the blurred sphere; None where it does not describe it."""
    used = patch.own | patch.shell
    points = np.argwhere(used) * spacing_vox
    place, radius, _, jacobian, residual = fit_sphere(points, share[used], centre * spacing_vox, diameter / 2, blur)
    own = patch.own[used]
    sd = noise.sd / own_contrast
    near = np.linalg.norm(points - place, axis=1) < radius + 1.5 * blur
    if not (near & own).any() or np.linalg.norm(place - centre * spacing_vox) > radius + 2 * blur:
        return None
    misfit = max(float((residual[near & own] ** 2).mean()), float((residual[own] ** 2).mean()))
    if misfit > (LARGEST_MISFIT * sd) ** 2 + 0.03**2:
        return None
    # Least squares that ignores the correlation, with the covariance that the correlated noise gives it (sandwich).
    inverse = np.linalg.inv(jacobian.T @ jacobian + 1e-12 * np.eye(5))
    smeared = np.empty_like(jacobian)
    scale = noise.correlated_voxels
    for column in range(5):
        full = np.zeros(used.shape)
        full[used] = jacobian[:, column]
        smeared[:, column] = (
            scale
            * ndimage.gaussian_filter(full, np.sqrt(2) * noise.correlation_vox, mode="constant", truncate=4.0)[used]
        )
    covariance = sd**2 * inverse @ (jacobian.T @ smeared) @ inverse
    relative = 3 * float(np.sqrt(max(covariance[3, 3], 0))) / radius
    voxels = 4 / 3 * np.pi * radius**3 / float(spacing_vox.prod())
    return voxels, relative, place / spacing_vox
