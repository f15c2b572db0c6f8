"""Tables that turn a value into colour and opacity, made from the ranges of the scan."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class TransferTable:
    """Colour and opacity for values on an equal-step axis.

    Parameters
    ----------
    first, last : values of the first and the last entry, in the scan's unit.
    density_per_mm : shape (entries,): opacity of a length L is 1 − exp(−density · L).
    colour : shape (entries, 3): linear-light RGB, 0 to 1.
    range_colours : (range id, sRGB 0..255) for the key.
    """

    first: float
    last: float
    density_per_mm: NDArray[np.float32]
    colour: NDArray[np.float32]
    range_colours: tuple[tuple[str, tuple[int, int, int]], ...]
