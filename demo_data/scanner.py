"""What a scanner makes of a drawn thing: blur, one value a voxel, noise."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

#: Cells per voxel and axis on which shapes are drawn and blurred.
FINE = 2
#: Reach of the blur in standard deviations.
REACH = 4.0
#: Slices drawn at a time: few enough for little memory.
SLAB = 16

Array = NDArray[np.float32]
#: Takes z, y, x of cell centres in mm and returns the picture on these cells.
Drawing = Callable[[Array, Array, Array], Array]


def cells(first: int, last: int, spacing: float) -> Array:
    """Centres of the fine cells of the voxels first ≤ n < last, in mm from the centre of voxel 0."""
    n = np.arange(first * FINE, last * FINE)
    return (((n + 0.5) / FINE - 0.5) * spacing).astype(np.float32)


def scan(
    drawing: Drawing,
    shape: tuple[int, int, int],
    spacing: tuple[float, float, float],
    blur_mm: float,
    *,
    slices: range | None = None,
) -> Array:
    """Draw, blur with a Gaussian of ``blur_mm`` and average over each voxel's box, a slab of slices at a time.

    Parameters
    ----------
    shape, spacing : slice, row, column; mm.
    slices : which slices are wanted, all where left out; each comes out the same whichever others are drawn with it.

    Returns
    -------
    len(slices) × rows × columns
    """
    wanted = range(shape[0]) if slices is None else slices
    halo = int(np.ceil(REACH * blur_mm / spacing[0])) + 1
    y, x = (cells(0, n, step) for n, step in zip(shape[1:], spacing[1:], strict=True))
    sigmas = [blur_mm / step * FINE for step in spacing]
    result = np.empty((len(wanted), *shape[1:]), np.float32)
    for start in range(wanted.start, wanted.stop, SLAB):
        stop = min(start + SLAB, wanted.stop)
        fine = drawing(cells(start - halo, stop + halo, spacing[0]), y, x)
        fine = ndimage.gaussian_filter(fine, sigmas, mode="nearest", truncate=REACH)
        fine = fine[halo * FINE : -halo * FINE]
        blocks = fine.reshape(stop - start, FINE, shape[1], FINE, shape[2], FINE)
        result[start - wanted.start : stop - wanted.start] = blocks.mean(axis=(1, 3, 5), dtype=np.float64)
    return result


def correlated_noise(shape: tuple[int, int, int], sigma_vox: float, seed: int) -> Array:
    """White noise filtered by a Gaussian, scaled to the standard deviation 1."""
    noise = ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=shape), sigma_vox, mode="wrap")
    return (noise / noise.std()).astype(np.float32)
