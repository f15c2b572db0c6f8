"""Value ranges as the rest of the house sees them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.remarks import Remark

Interval = tuple[float, float]


@dataclass(frozen=True)
class Histogram:
    """Counts of the voxels that are data, in bins of equal width.

    ``centres`` and ``counts`` have the shape (bins,), ``width`` is in the unit of the values.
    """

    centres: NDArray[np.float64]
    counts: NDArray[np.int64]
    width: float


@dataclass(frozen=True)
class ValueRange:
    """One range of values that the histogram shows as a material or tissue of its own.

    A value v lies in the range when lower <= v < upper; None is open-ended. ``peak`` and ``spread`` are mean and
    standard deviation of the pure component. ``pure_share`` is the share of the voxels that the model gives to
    the pure component. ``named_by`` says who gave the name: "" for R1, R2 ...
    """

    id: str
    name: str
    named_by: str
    lower: float | None
    lower_95: Interval | None
    upper: float | None
    upper_95: Interval | None
    peak: float
    spread: float
    pure_share: float
    background: bool


@dataclass(frozen=True)
class Ranges:
    """All ranges in ascending order, and the histogram they come from.

    ``model`` (shape (bins,)) is the number of voxels that the fitted model expects in every bin of the histogram.
    """

    items: tuple[ValueRange, ...]
    histogram: Histogram
    model: NDArray[np.float64]
    remarks: tuple[Remark, ...] = ()

    @property
    def boundaries(self) -> NDArray[np.float64]:
        """Shape (ranges − 1,), ascending: the values that part neighbouring ranges."""
        return np.array([item.lower for item in self.items[1:]], dtype=np.float64)

    @property
    def background(self) -> ValueRange | None:
        """The range of what surrounds the object, where the scan shows one."""
        return next((item for item in self.items if item.background), None)

    @property
    def main(self) -> ValueRange:
        """The largest range that is not background; the only one of a uniform scan."""
        return max(
            (item for item in self.items if not item.background), key=lambda r: r.pure_share, default=self.items[0]
        )
