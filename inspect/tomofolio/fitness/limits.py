"""What noise and blur leave of a small spherical void: a limit in theory, not a promise about one void.

A sphere of air in even material, blurred by a Gaussian, lies in noise that is white noise filtered by a Gaussian.
Over the frequencies up to half a cycle per voxel the blurred sphere's spectrum F and the noise's power spectrum S give

* the information about its diameter and contrast, ∫ ∂F ∂F / S (Fisher information; the Cramér–Rao bound says that no
  unbiased estimate varies less). Its place is unknown too, but that costs nothing: by symmetry the place does not
  correlate with size and contrast;
* the variance of its volume when the sphere is fitted by plain least squares, as one who does not know the noise's
  spectrum would do;
* the mean of 3 × 3 × 3 voxels at the sphere and its standard deviation, which decide whether it is found
  (`tomofolio.fitness.detection`).

References
----------
C. R. Rao, Bull. Calcutta Math. Soc. 37 (1945) 81; H. Cramér, Mathematical Methods of Statistics (1946).
J. W. Goodman, Introduction to Fourier Optics (1968): box averages and sampling as products of spectra.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from tomofolio.fitness.detection import FALSE_CALL_DEVIATIONS, SMALLEST_SHARE

Array = NDArray[np.float64]

#: Standard normal quantile: 95 % of the voids found.
_FOUND = 1.645
#: Half width of the 95 % interval of a volume that still counts as measured, and the normal quantile.
_TOLERANCE, _QUANTILE_95 = 0.25, 1.96
_NODES = 32


def volume_limit(
    diameter_vox: float, blur_vox: float, noise_corr_vox: float, cnr: float, contrast_known: bool = True
) -> float:
    """Smallest possible relative standard deviation of one void's volume, on a cubic grid.

    Parameters
    ----------
    diameter_vox : diameter of the sphere in voxels.
    blur_vox : σ of the blur before the values are averaged over the voxel, in voxels.
    noise_corr_vox : σ of the Gaussian filter that makes the noise from white noise, in voxels; 0 for white noise.
    cnr : difference between material and void, over the noise's standard deviation.
    contrast_known : whether the void is known to be air; else its contrast is estimated along with its size.
    """
    blur = float(np.sqrt(blur_vox**2 + 1 / 12))
    return SphereLimits((blur,) * 3, (noise_corr_vox,) * 3, cnr).volume_error(diameter_vox, contrast_known)


class SphereLimits:
    """Limits for one scan.

    Parameters
    ----------
    blur_vox : σ of the whole edge response (the voxel's own width included) per axis [slice, row, column], in voxels.
    noise_corr_vox : σ of the filter that makes the noise from white noise, per axis, in voxels.
    cnr : contrast-to-noise ratio.
    spacing : size of a voxel per axis; diameters are in its unit.
    """

    def __init__(
        self,
        blur_vox: Sequence[float],
        noise_corr_vox: Sequence[float],
        cnr: float,
        spacing: Sequence[float] = (1.0, 1.0, 1.0),
    ) -> None:
        at, weight = _nodes()
        transfer = [np.exp(-4 * np.pi**2 * sigma**2 * at**2) for sigma in blur_vox]
        noise = [_filtered_power(at, weight, sigma) for sigma in noise_corr_vox]
        self._weight = _outer(weight, weight, weight)
        self._transfer = _outer(*transfer)
        self._noise = _outer(*noise)
        mean_of_three = (1 + 2 * np.cos(2 * np.pi * at)) / 3
        self._box = _outer(mean_of_three, mean_of_three, mean_of_three)
        self._place = _outer(np.sinc(at), np.sinc(at), np.sinc(at))
        squares = [(at / s) ** 2 for s in spacing]
        self._frequency = np.sqrt(squares[0][:, None, None] + squares[1][:, None] + squares[2])
        self._cnr = cnr
        self._voxel = float(np.prod(spacing))
        self._smallest = 0.2 * min(spacing)
        self._largest = 40.0 * max(spacing)

    def volume_error(self, diameter: float, contrast_known: bool = True) -> float:
        """Smallest possible relative standard deviation of the volume."""
        sphere, growth = self._sphere(diameter / 2)
        density = self._weight * self._transfer / self._noise * self._cnr**2
        size = float(np.sum(density * growth * growth))
        if not contrast_known:
            both = float(np.sum(density * growth * sphere))
            size -= both**2 / float(np.sum(density * sphere * sphere))
        return float(3 / (diameter / 2) / np.sqrt(max(size, 1e-300)))

    def fitted_volume_error(self, diameter: float) -> float:
        """Relative standard deviation of an air void's volume fitted by plain least squares."""
        _, growth = self._sphere(diameter / 2)
        power = self._weight * self._transfer * growth * growth
        variance = float(np.sum(power * self._noise)) / (self._cnr * float(np.sum(power))) ** 2
        return float(3 / (diameter / 2) * np.sqrt(variance))

    def mean_of_27(self, diameter: float) -> tuple[float, float]:
        """Mean of the 3 × 3 × 3 voxels around a void, as a share of the contrast, and its standard deviation.

        The void's place in the voxel is left to chance: the mean is averaged over all of them.
        """
        sphere, _ = self._sphere(diameter / 2)
        signal = float(np.sum(self._weight * np.sqrt(self._transfer) * self._box * self._place * sphere))
        variance = float(np.sum(self._weight * self._noise * self._box**2))
        return signal, float(np.sqrt(variance)) / self._cnr

    def detectable_diameter(self) -> float | None:
        """Diameter that the rule of `detection` finds with 95 % probability; None beyond 40 voxels."""

        def surplus(diameter: float) -> float:
            signal, sd = self.mean_of_27(diameter)
            return signal - _FOUND * sd - max(FALSE_CALL_DEVIATIONS * sd, SMALLEST_SHARE)

        return self._crossing(surplus)

    def measurable_diameter(self) -> float | None:
        """Diameter of an air void from which the 95 % interval of its fitted volume lies within ±25 %."""
        return self._crossing(lambda d: _TOLERANCE - _QUANTILE_95 * self.fitted_volume_error(d))

    def _sphere(self, radius: float) -> tuple[Array, Array]:
        """Spectrum of a sphere of contrast 1 in voxels, and its derivative by the radius."""
        x = 2 * np.pi * self._frequency * radius
        sphere = 4 * np.pi * radius**3 * (np.sin(x) - x * np.cos(x)) / x**3
        return sphere / self._voxel, 4 * np.pi * radius**2 * np.sin(x) / x / self._voxel

    def _crossing(self, surplus: Callable[[float], float]) -> float | None:
        """Where a rising function passes nought, to a thousandth."""
        low, high = self._smallest, self._largest
        if surplus(high) < 0:
            return None
        while high / low > 1.001:
            middle = float(np.sqrt(low * high))
            if surplus(middle) < 0:
                low = middle
            else:
                high = middle
        return high


@lru_cache(maxsize=1)
def _nodes() -> tuple[Array, Array]:
    """Gauss–Legendre nodes between 0 and ½ cycle per voxel, weights for −½ to ½."""
    at, weight = np.polynomial.legendre.leggauss(_NODES)
    return (at + 1) / 4, weight / 2


def _filtered_power(at: Array, weight: Array, sigma: float) -> Array:
    """Power spectrum, along one axis, of white noise filtered by a sampled Gaussian; its integral is 1."""
    if sigma < 0.2:
        return np.ones_like(at)
    reach = np.arange(1, int(np.ceil(5 * sigma)) + 1)
    kernel = np.exp(-(reach**2) / (2 * sigma**2))
    response = 1 + 2 * np.cos(2 * np.pi * at[:, None] * reach) @ kernel
    # A floor: no scanner's noise is free of a white share, and nothing may be read out of a spectrum's zero.
    power = response**2 / (1 + 2 * kernel.sum()) ** 2 + 1e-4
    return power / float(weight @ power)


def _outer(k: Array, j: Array, i: Array) -> Array:
    return k[:, None, None] * j[:, None] * i
