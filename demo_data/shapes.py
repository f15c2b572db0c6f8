"""Closed-form solids, sampled on a grid finer than the voxels and blurred there."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

#: Samples per voxel and axis.
FINE = 3

Array = NDArray[np.float32]
#: Takes x, y, z in mm (arrays that broadcast) and says where the solid is.
Solid = Callable[[Array, Array, Array], NDArray[np.bool_]]


def ellipsoid(centre: tuple[float, float, float], radii: tuple[float, float, float]) -> Solid:
    """Centre and half axes (x, y, z) in mm; volume 4/3 π a b c."""
    (cx, cy, cz), (a, b, c) = centre, radii
    return lambda x, y, z: ((x - cx) / a) ** 2 + ((y - cy) / b) ** 2 + ((z - cz) / c) ** 2 <= 1


def sphere(centre: tuple[float, float, float], radius: float) -> Solid:
    """Volume 4/3 π r³."""
    return ellipsoid(centre, (radius, radius, radius))


def cylinder(centre: tuple[float, float], radius: float, low: float, high: float) -> Solid:
    """Upright along z, from low to high."""
    return lambda x, y, z: ((x - centre[0]) ** 2 + (y - centre[1]) ** 2 <= radius**2) & (z >= low) & (z <= high)


def box(low: tuple[float, float, float], high: tuple[float, float, float], corner: float = 0.0) -> Solid:
    """Axis-parallel, its upright edges rounded with the radius ``corner``."""
    (x0, y0, z0), (x1, y1, z1) = low, high

    def inside(x: Array, y: Array, z: Array) -> NDArray[np.bool_]:
        over_x = np.maximum(np.maximum(x0 + corner - x, x - x1 + corner), 0)
        over_y = np.maximum(np.maximum(y0 + corner - y, y - y1 + corner), 0)
        return (
            (over_x**2 + over_y**2 <= corner**2) & (x >= x0) & (x <= x1) & (y >= y0) & (y <= y1) & (z >= z0) & (z <= z1)
        )

    return inside


def fine_axes(shape: tuple[int, int, int], spacing: tuple[float, float, float]) -> tuple[Array, Array, Array]:
    """z, y, x in mm of the fine samples; voxel (0, 0, 0) has its centre at 0."""
    z, y, x = (((np.arange(n * FINE) + 0.5) / FINE - 0.5) * s for n, s in zip(shape, spacing, strict=True))
    return z.astype(np.float32), y.astype(np.float32), x.astype(np.float32)


def blurred(fine: Array, sigma_mm: float, spacing: tuple[float, float, float]) -> Array:
    """A Gaussian blur of the fine samples, then the mean over every voxel's box."""
    for axis, step in enumerate(spacing):
        fine = ndimage.gaussian_filter1d(fine, sigma_mm / step * FINE, axis=axis, truncate=4.0, mode="nearest")
    slices, rows, columns = (n // FINE for n in fine.shape)
    return (
        fine.reshape(slices, FINE, rows, FINE, columns, FINE).mean(axis=(1, 3, 5), dtype=np.float64).astype(np.float32)
    )


def correlated_noise(shape: tuple[int, int, int], sigma_vox: float, seed: int) -> Array:
    """White noise filtered by a Gaussian, scaled to the standard deviation 1."""
    noise = ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=shape), sigma_vox, mode="wrap")
    return (noise / noise.std()).astype(np.float32)
