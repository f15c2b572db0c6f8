"""A blurred sphere: closed form, and its fit to the voxels around a small spot."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import erf

Array = NDArray[np.float64]


def blurred_sphere(distance: Array, radius: float, sigma: float) -> Array:
    """Share of the sphere's contrast that is left at a distance from its centre after a Gaussian blur.

    The convolution of a ball with an isotropic Gaussian, in closed form (all lengths in one unit):
    ½ [erf((r+d)/√2σ) + erf((r−d)/√2σ)] − σ/(√(2π) d) · [exp(−(d−r)²/2σ²) − exp(−(d+r)²/2σ²)].
    """
    d = np.maximum(np.asarray(distance, float), 1e-6 * sigma)
    root = np.sqrt(2) * sigma
    step = 0.5 * (erf((radius + d) / root) + erf((radius - d) / root))
    tail = np.exp(-((d - radius) ** 2) / (2 * sigma**2)) - np.exp(-((d + radius) ** 2) / (2 * sigma**2))
    return step - sigma / (np.sqrt(2 * np.pi) * d) * tail


def fit_sphere(
    points: Array, share: Array, start: Array, radius: float, sigma: float, steps: int = 25
) -> tuple[Array, float, float, Array, Array]:
    """Least-squares centre, radius and base line of a blurred sphere of contrast 1 (Gauss–Newton, Levenberg damping).

    Parameters
    ----------
    points : shape (n, 3), places in units in which the blur is isotropic.
    share : shape (n,), measured share of the contrast at each.
    start, radius, sigma : first guess of centre and radius; σ of the blur.

    Returns
    -------
    centre (3,), radius, base line, Jacobian (n, 5) with the columns centre, radius, base line, and residuals (n,).
    """
    p = np.array([*start, radius, 0.0])
    damping = 1e-3
    residual, jacobian = _model(points, share, p, sigma)
    for _ in range(steps):
        normal = jacobian.T @ jacobian
        move = np.linalg.solve(normal + damping * np.diag(np.diag(normal) + 1e-12), jacobian.T @ residual)
        move[:4] = np.clip(move[:4], -0.5 * sigma - 0.3 * p[3], 0.5 * sigma + 0.3 * p[3])
        trial = p + move
        trial[3] = max(trial[3], 0.05 * sigma)
        new_residual, new_jacobian = _model(points, share, trial, sigma)
        if new_residual @ new_residual <= residual @ residual:
            settled = np.abs(move[:4]).max() < 1e-5 * sigma
            p, residual, jacobian, damping = trial, new_residual, new_jacobian, damping / 5
            if settled:
                break
        else:
            damping *= 8
            if damping > 1e6:
                break
    return p[:3], float(p[3]), float(p[4]), jacobian, residual


def _model(points: Array, share: Array, p: Array, sigma: float) -> tuple[Array, Array]:
    offset = points - p[:3]
    distance = np.linalg.norm(offset, axis=1)
    radius = p[3]
    value = blurred_sphere(distance, radius, sigma)
    h = 1e-4 * sigma
    slope_d = (blurred_sphere(distance + h, radius, sigma) - blurred_sphere(np.abs(distance - h), radius, sigma)) / (
        2 * h
    )
    slope_r = (blurred_sphere(distance, radius + h, sigma) - blurred_sphere(distance, radius - h, sigma)) / (2 * h)
    jacobian = np.empty((len(points), 5))
    jacobian[:, :3] = -slope_d[:, None] * offset / np.maximum(distance, 1e-9)[:, None]
    jacobian[:, 3] = slope_r
    jacobian[:, 4] = 1.0
    return share - value - p[4], jacobian
