"""What the scan can bear. A figure that cannot be had from this scan is None, and a remark says why."""

from __future__ import annotations

from dataclasses import dataclass

from tomofolio.remarks import Remark


@dataclass(frozen=True)
class Fitness:
    """Image quality read off the object itself.

    ``noise`` is the standard deviation in the main material after slow trends are taken off, in the scan's unit;
    ``noise_correlation_mm`` the σ_f of the Gaussian filter that makes such noise from white noise, per axis [slice,
    row, column]: the autocorrelation at distance d is exp(−d²/(4·σ_f²)), 0 stands for white noise; ``contrast`` the
    absolute difference between the peaks of main material and background; ``blur_sigma_axes_mm`` the σ of the
    Gaussian that fits the whole edge response, the voxel's own width included, along [slice, row, column], and
    ``blur_sigma_mm`` their geometric mean; ``mtf10_per_mm`` the spatial frequency where the modulation transfer
    function falls to 10 %; ``detectable_diameter_mm`` and ``measurable_diameter_mm`` are theoretical limits for a lone
    spherical air void: found with 95 % probability by the rule of `detection`, and its volume's 95 % interval
    within ±25 % (see `tomofolio.fitness.limits`).
    """

    noise: float | None
    noise_correlation_mm: tuple[float, float, float] | None
    contrast: float | None
    cnr: float | None
    blur_sigma_mm: float | None
    blur_sigma_axes_mm: tuple[float, float, float] | None
    mtf10_per_mm: float | None
    detectable_diameter_mm: float | None
    measurable_diameter_mm: float | None
    remarks: tuple[Remark, ...] = ()
