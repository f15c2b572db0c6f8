"""Which voxels lie at or above a value: read from the stored numbers slice by slice."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Region
from tomofolio.volume import Volume

#: Codes that stand in ``regions`` only while the object is being found.
DENSE = 5  #: material of the object at or above a higher value
ATTACHED = 6  #: a support that touches the object


def at_least(volume: Volume, k: int, value: float) -> NDArray[np.bool_]:
    """Shape (rows, columns): where the values of slice ``k`` are at least ``value``; NaN never is.

    The comparison is made on the stored numbers, in their own type where they are integers.
    """
    slope, intercept, stored = volume.slope[k], volume.intercept[k], volume.stored[k]
    if slope == 0:
        return np.full(stored.shape, intercept >= value)
    cut = (value - intercept) / slope
    if not np.issubdtype(stored.dtype, np.integer):
        return stored >= cut if slope > 0 else stored <= cut
    limits = np.iinfo(stored.dtype)
    whole = np.ceil(cut) if slope > 0 else np.floor(cut)
    if slope > 0:
        above = stored >= stored.dtype.type(np.clip(whole, limits.min, limits.max))
    else:
        above = stored <= stored.dtype.type(np.clip(whole, limits.min, limits.max))
    reachable = whole <= limits.max if slope > 0 else whole >= limits.min
    return above if reachable else np.zeros_like(above)


def mark_material(volume: Volume, threshold: float | None) -> NDArray[np.uint8]:
    """``OBJECT`` at or above the threshold (everywhere for None), ``NO_DATA``, and ``OUTSIDE`` for the rest."""
    regions = np.empty(volume.shape, np.uint8)
    for k in range(volume.shape[0]):
        regions[k] = True if threshold is None else at_least(volume, k, threshold)
        if volume.no_data is not None:
            regions[k][volume.no_data[k]] = Region.NO_DATA
    return regions
