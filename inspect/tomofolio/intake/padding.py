"""No data: padding outside the reconstructed field (DICOM PS3.3 C.7.5.1.1.2, Pixel Padding Value)."""

from __future__ import annotations

from threading import Lock

import cc3d
import numpy as np
from numpy.typing import NDArray


class Padding:
    """Gathers the mask of voxels that hold no data, slice by slice.

    Padding is data where it is enclosed by data: a void clipped to the padding value is a void. A voxel holds no
    data where its stored number is padding and a path of such voxels, by shared faces and inside its own slice, leads
    to the border of the slice. Paths through other slices don't count: the scanner pads each slice by itself, outside
    a circle; the first and the last slice are no border, or a void cut by them would be lost.

    Parameters
    ----------
    shape : (slices, rows, columns).
    """

    def __init__(self, shape: tuple[int, int, int]) -> None:
        self._shape = shape
        self._lock = Lock()
        self._mask: NDArray[np.bool_] | None = None

    def look(self, k: int, stored: NDArray[np.integer], limits: tuple[int, int] | None) -> None:
        """Look at slice k. ``limits`` are the lowest and highest stored number that is padding, None for no padding.

        May be called from several threads, for different slices.
        """
        if limits is None:
            return
        low, high = limits
        mask = stored == low if low == high else (stored >= low) & (stored <= high)
        outside = reached_from_border(mask)
        if outside is not None:
            with self._lock:
                if self._mask is None:
                    self._mask = np.zeros(self._shape, dtype=bool)
            self._mask[k] = outside

    @property
    def no_data(self) -> NDArray[np.bool_] | None:
        """The mask, shape (slices, rows, columns); None where no voxel is without data."""
        return self._mask


def reached_from_border(mask: NDArray[np.bool_]) -> NDArray[np.bool_] | None:
    """The part of a plane's mask that is 4-connected to the plane's border; None where there is none.

    Parameters
    ----------
    mask : shape (rows, columns).
    """
    if not (mask[0].any() or mask[-1].any() or mask[:, 0].any() or mask[:, -1].any()):
        return None
    labels = cc3d.connected_components(mask, connectivity=4)
    at_border = np.zeros(int(labels.max()) + 1, dtype=bool)
    for side in (labels[0], labels[-1], labels[:, 0], labels[:, -1]):
        at_border[side] = True
    at_border[0] = False
    return at_border[labels]
