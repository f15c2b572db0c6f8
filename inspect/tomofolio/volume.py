"""The scan as it stands in space: ``Grid`` (index to millimetres), ``Unit`` and ``Volume``.

Positions are millimetres in the DICOM patient coordinate system: x grows to the patient's Left, y to the
Posterior, z to the Superior side (LPS). Indices are always in the order (slice, row, column).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from enum import StrEnum
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Grid:
    """Where the centre of every voxel is.

    The voxel (k, j, i) lies at
    ``origin_mm + direction @ (i · column_spacing_mm, j · row_spacing_mm, slice_positions_mm[k])``,
    the plane equation of DICOM PS3.3 C.7.6.2.1.1 with the slices along one straight axis. The axis need not be
    perpendicular to the slices (tilted gantry) and the gaps need not be equal.

    Parameters
    ----------
    origin_mm : shape (3,), centre of the voxel (0, 0, 0).
    direction : shape (3, 3), columns are the unit vectors of increasing column, row and slice index.
    row_spacing_mm, column_spacing_mm : distance between rows and between columns.
    slice_positions_mm : shape (slices,), strictly increasing along ``direction[:, 2]``, the first is 0.
    rows, columns : size of one slice.
    """

    origin_mm: Array
    direction: Array
    row_spacing_mm: float
    column_spacing_mm: float
    slice_positions_mm: Array
    rows: int
    columns: int

    def __post_init__(self) -> None:
        for name, shape in (("origin_mm", (3,)), ("direction", (3, 3)), ("slice_positions_mm", (-1,))):
            array = np.array(getattr(self, name), dtype=np.float64).reshape(shape)
            array.setflags(write=False)
            object.__setattr__(self, name, array)
        if np.any(np.diff(self.slice_positions_mm) <= 0):
            raise ValueError("slice positions must increase strictly")

    @property
    def shape(self) -> tuple[int, int, int]:
        """(slices, rows, columns)."""
        return len(self.slice_positions_mm), self.rows, self.columns

    @cached_property
    def spacing_mm(self) -> tuple[float, float, float]:
        """[slice, row, column]; the slice spacing is the median step along the slice axis."""
        steps = np.diff(self.slice_positions_mm)
        return float(np.median(steps)) if len(steps) else 1.0, self.row_spacing_mm, self.column_spacing_mm

    @cached_property
    def normal(self) -> Array:
        """Unit vector perpendicular to the slices, on the side of increasing slice index."""
        normal = np.cross(self.direction[:, 0], self.direction[:, 1])
        normal /= np.linalg.norm(normal)
        return normal if normal @ self.direction[:, 2] >= 0 else -normal

    @cached_property
    def tilt_degrees(self) -> float:
        """Angle between the slice axis and the perpendicular of the slices; 0 for an upright gantry."""
        return float(np.degrees(np.arccos(np.clip(self.normal @ self.direction[:, 2], -1.0, 1.0))))

    @cached_property
    def slice_distances_mm(self) -> Array:
        """Shape (slices − 1,): perpendicular distance between neighbouring slices."""
        return np.diff(self.slice_positions_mm) * float(self.normal @ self.direction[:, 2])

    @cached_property
    def is_even(self) -> bool:
        """Whether all gaps are equal, to a thousandth of the pixel spacing and a hundredth of the gap."""
        steps = np.diff(self.slice_positions_mm)
        if len(steps) < 2:
            return True
        tolerance = max(1e-3 * min(self.row_spacing_mm, self.column_spacing_mm), 1e-2 * float(np.median(steps)))
        return bool(np.ptp(steps) <= tolerance)

    @cached_property
    def voxel_volumes_mm3(self) -> Array:
        """Shape (slices,): volume that one voxel of each slice stands for.

        A slice reaches half-way to each neighbour; the first and the last reach as far outwards as inwards.
        """
        area = self.row_spacing_mm * self.column_spacing_mm
        area *= float(np.linalg.norm(np.cross(self.direction[:, 0], self.direction[:, 1])))
        gaps = self.slice_distances_mm
        if not len(gaps):
            return np.array([area])
        before, after = np.concatenate(([gaps[0]], gaps)), np.concatenate((gaps, [gaps[-1]]))
        return area * (before + after) / 2

    def to_mm(self, index: Array) -> Array:
        """Positions of (possibly fractional) indices.

        Parameters
        ----------
        index : shape (..., 3), in the order (slice, row, column). Beyond the ends the last gap goes on.

        Returns
        -------
        shape (..., 3), LPS millimetres.
        """
        index = np.asarray(index, dtype=np.float64)
        steps = np.stack(
            (
                index[..., 2] * self.column_spacing_mm,
                index[..., 1] * self.row_spacing_mm,
                _interpolate_on(index[..., 0], np.arange(self.shape[0], dtype=float), self.slice_positions_mm),
            ),
            axis=-1,
        )
        return self.origin_mm + steps @ self.direction.T

    def to_index(self, position_mm: Array) -> Array:
        """Fractional indices (slice, row, column) of positions: the inverse of `to_mm`, same shapes."""
        steps = (np.asarray(position_mm, dtype=np.float64) - self.origin_mm) @ np.linalg.inv(self.direction).T
        slices = _interpolate_on(steps[..., 2], self.slice_positions_mm, np.arange(self.shape[0], dtype=float))
        return np.stack((slices, steps[..., 1] / self.row_spacing_mm, steps[..., 0] / self.column_spacing_mm), axis=-1)

    @cached_property
    def centre_mm(self) -> Array:
        """Middle of the box of voxel centres."""
        return (self.to_mm(np.zeros(3)) + self.to_mm(np.array(self.shape) - 1.0)) / 2

    @cached_property
    def corners_mm(self) -> Array:
        """Shape (8, 3): corners of the box of voxel centres."""
        ends = np.array([(k, j, i) for k in (0, 1) for j in (0, 1) for i in (0, 1)], dtype=float)
        return self.to_mm(ends * (np.array(self.shape) - 1.0))


def _interpolate_on(at: Array, knots: Array, values: Array) -> Array:
    """Piecewise linear like `numpy.interp`, but going on with the last slope beyond the ends."""
    if len(knots) == 1:
        return values[0] + (at - knots[0])
    inside = np.interp(at, knots, values)
    first = (values[1] - values[0]) / (knots[1] - knots[0])
    last = (values[-1] - values[-2]) / (knots[-1] - knots[-2])
    inside = np.where(at < knots[0], values[0] + (at - knots[0]) * first, inside)
    return np.where(at > knots[-1], values[-1] + (at - knots[-1]) * last, inside)


class Kind(StrEnum):
    """What was scanned. ``UNKNOWN`` is treated as a patient wherever that is the safer way."""

    PATIENT = "patient"
    COMPONENT = "component"
    UNKNOWN = "unknown"


class Basis(StrEnum):
    """Where the unit comes from."""

    DECLARED = "declared"
    IMPLIED = "implied"
    CALIBRATED = "calibrated"


@dataclass(frozen=True)
class Unit:
    """What a value means: ``quantity`` is "CT number", "density", "grey value" or "other"."""

    quantity: str
    symbol: str
    basis: Basis


@dataclass(frozen=True)
class Volume:
    """The stored numbers with everything that is needed to read them.

    Parameters
    ----------
    stored : shape (slices, rows, columns), C order, as decoded. dtype int16 wherever the stored numbers fit it
        (so that kernels are compiled once), else uint16, int32 or float32.
    slope, intercept : shape (slices,), value = slope · stored + intercept.
    grid, unit : where the voxels are, what the values mean.
    no_data : same shape as ``stored``, bool, True where there is no data (padding connected to the border);
        None where every voxel is data.
    """

    stored: NDArray
    slope: Array
    intercept: Array
    grid: Grid
    unit: Unit
    no_data: NDArray[np.bool_] | None = None

    def __post_init__(self) -> None:
        if self.stored.shape != self.grid.shape:
            raise ValueError(f"stored numbers {self.stored.shape} do not fit the grid {self.grid.shape}")
        for name in ("slope", "intercept"):
            array = np.broadcast_to(np.asarray(getattr(self, name), dtype=np.float64), self.grid.shape[:1]).copy()
            array.setflags(write=False)
            object.__setattr__(self, name, array)

    @property
    def shape(self) -> tuple[int, int, int]:
        return self.grid.shape

    def values(self, slices: slice | int) -> NDArray[np.float32]:
        """Values of some slices (never ask for all of a large scan at once), float32."""
        slope = self.slope[slices].astype(np.float32)
        intercept = self.intercept[slices].astype(np.float32)
        stored = self.stored[slices].astype(np.float32)
        if isinstance(slices, slice):
            slope, intercept = slope[:, None, None], intercept[:, None, None]
        stored *= slope
        stored += intercept
        return stored

    def values_in(self, box: tuple[slice, slice, slice]) -> NDArray[np.float32]:
        """Values of a box of voxels, float32; reads no more than the box."""
        stored = self.stored[box].astype(np.float32)
        stored *= self.slope[box[0], None, None].astype(np.float32)
        stored += self.intercept[box[0], None, None].astype(np.float32)
        return stored

    def slabs(self, depth: int = 16) -> Iterator[slice]:
        """Slices that cut the volume into slabs of at most ``depth``."""
        for first in range(0, self.shape[0], depth):
            yield slice(first, min(first + depth, self.shape[0]))

    @cached_property
    def value_limits(self) -> tuple[float, float]:
        """Smallest and largest value of all voxels, no data included."""
        low, high = np.inf, -np.inf
        for k in range(self.shape[0]):
            ends = self.slope[k] * np.array([self.stored[k].min(), self.stored[k].max()], float) + self.intercept[k]
            low, high = min(low, ends.min()), max(high, ends.max())
        return float(low), float(high)
