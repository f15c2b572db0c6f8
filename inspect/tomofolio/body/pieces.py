"""Separate pieces of material: how large and how thick they are, and which of them are the object."""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import Enum

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.runs import Runs, shared_columns
from tomofolio.volume import Grid

Array = NDArray[np.float64]

#: A piece of fewer voxels (a cube of three) is noise: it becomes what surrounds it, without a word.
SMALLEST_PIECE_VOXELS = 27
#: Only a piece with at least this share of the largest piece's volume can be the main one.
MAIN_SHARE = 0.1
#: A piece apart from the main one is part of the object from this share of the main piece's volume.
PART_SHARE = 0.01
#: A support is at most this thick, compared with the main piece, ...
SUPPORT_THICKNESS = 1 / 3
#: ... and its outline in the slice is at least this many times as long as thick: a sheet, not a rod or an arm.
SUPPORT_LENGTH = 6.0
#: Beside a compact main piece (shorter than this many times its thickness; a disc has 3.6) a thicker sheet can be
#: told: at most this thick, and at least this many times as long.
COMPACT_LENGTH, SHEET_THICKNESS, SHEET_LENGTH = 6.0, 0.7, 15.0
#: Cross-sections vary by less than this (standard deviation / mean) in a support of any thickness, ...
CONSTANT_SECTION = 0.05
#: ... which is only told by it beside an object whose cross-sections vary by more than this.
CHANGING_SECTION = 0.15
#: In a scan of fewer slices nothing can be said to run through all of them.
FEWEST_SLICES = 4


class Role(Enum):
    """What a piece is taken for."""

    OBJECT = "object"
    SUPPORT = "support"
    LOOSE = "loose piece"


@dataclass(frozen=True)
class Pieces:
    """Figures of every piece; all arrays have the pieces along the first axis.

    ``low`` and ``high`` (shape (pieces, 3)) are the box in indices, ``high`` not included. ``thickness_mm`` is
    2 · volume / lateral surface: the thickness of a sheet, about 0.8 radii of a long cylinder. ``length_mm`` is the
    diagonal of the box in the slice. ``section_variation`` is standard deviation / mean of the area over the
    slices that the piece reaches, from one end of it to the other.
    """

    voxels: NDArray[np.int64]
    volume_mm3: Array
    position_mm: Array
    low: NDArray[np.int64]
    high: NDArray[np.int64]
    thickness_mm: Array
    length_mm: Array
    section_variation: Array

    def __len__(self) -> int:
        return len(self.voxels)

    def only(self, chosen: NDArray[np.bool_]) -> Pieces:
        """The figures of some of the pieces."""
        return Pieces(**{field.name: getattr(self, field.name)[chosen] for field in fields(self)})

    def runs_through(self, slices: int) -> NDArray[np.bool_]:
        """Shape (pieces,): whether a piece reaches from the first slice of the scan to the last."""
        through = (self.low[:, 0] == 0) & (self.high[:, 0] == slices)
        return through & (slices >= FEWEST_SLICES)


def measure_pieces(runs: Runs, grid: Grid) -> Pieces:
    """Volumes (true voxel volumes), centroids (LPS) and shapes of the components of some runs."""
    used = runs.label >= 0
    label, n = runs.label[used], runs.count
    length, start, stop = runs.length[used], runs.start[used].astype(np.int64), runs.stop[used].astype(np.int64)
    k, j = np.divmod(runs.row[used], runs.shape[1])
    weight = length * grid.voxel_volumes_mm3[k]
    volume = np.bincount(label, weight, minlength=n).astype(np.float64)

    def mean(values: NDArray) -> Array:
        return np.bincount(label, weight * values, minlength=n) / volume

    steps = np.column_stack(
        (
            mean((start + stop - 1) / 2) * grid.column_spacing_mm,
            mean(j) * grid.row_spacing_mm,
            mean(grid.slice_positions_mm[k]),
        )
    )
    low = np.tile(np.array(runs.shape, np.int64), (n, 1))
    high = np.zeros((n, 3), np.int64)
    for axis, (from_, to) in enumerate(((k, k + 1), (j, j + 1), (start, stop))):
        np.minimum.at(low[:, axis], label, from_)
        np.maximum.at(high[:, axis], label, to)
    depth = grid.voxel_volumes_mm3 / (grid.row_spacing_mm * grid.column_spacing_mm)
    faces = 2 * np.bincount(label, depth[k], minlength=n) * grid.row_spacing_mm
    between_rows = np.bincount(label, length * depth[k], minlength=n) - shared_columns(runs, depth)
    faces += 2 * between_rows * grid.column_spacing_mm
    extent = (high - low)[:, 1:] * np.array([grid.row_spacing_mm, grid.column_spacing_mm])
    return Pieces(
        voxels=np.bincount(label, length, minlength=n).astype(np.int64),
        volume_mm3=volume,
        position_mm=grid.origin_mm + steps @ grid.direction.T,
        low=low,
        high=high,
        thickness_mm=2 * volume / faces,
        length_mm=np.hypot(extent[:, 0], extent[:, 1]),
        section_variation=_section_variation(label, k, length, low, high),
    )


def _section_variation(label: NDArray, k: NDArray, length: NDArray, low: NDArray, high: NDArray) -> Array:
    """Variation of the area over the slices; from sums over (piece, slice) pairs that occur."""
    n = len(low)
    slices = int(k.max()) + 1 if len(k) else 1
    pair, inverse = np.unique(label.astype(np.int64) * slices + k, return_inverse=True)
    area = np.bincount(inverse, length)
    piece = pair // slices
    reached = (high - low)[:, 0]
    mean = np.bincount(piece, area, minlength=n) / reached
    square = np.bincount(piece, area**2, minlength=n) / reached
    return np.sqrt(np.maximum(square - mean**2, 0)) / mean


def main_piece(pieces: Pieces) -> int:
    """The piece that the object is: large and thick (volume × thickness²), so not a wide table under a small limb."""
    large = pieces.volume_mm3 >= MAIN_SHARE * pieces.volume_mm3.max()
    return int(np.argmax(np.where(large, pieces.volume_mm3 * pieces.thickness_mm**2, -1.0)))


def judge_pieces(pieces: Pieces, slices: int) -> list[Role]:
    """Which pieces are the object.

    A support runs through all slices and is a sheet much thinner than the main piece, or has the same cross-section
    in every slice beside an object whose cross-section changes. Any other piece is part of the object when it is
    not small beside the main piece (parts of a component that the end slices cut apart, limbs, fingers), else loose.
    """
    main = main_piece(pieces)
    relative, slenderness = pieces.thickness_mm / pieces.thickness_mm[main], pieces.length_mm / pieces.thickness_mm
    sheet = (relative <= SUPPORT_THICKNESS) & (slenderness >= SUPPORT_LENGTH)
    if slenderness[main] <= COMPACT_LENGTH:
        sheet |= (relative <= SHEET_THICKNESS) & (slenderness >= SHEET_LENGTH)
    constant = pieces.section_variation <= CONSTANT_SECTION
    constant &= pieces.section_variation[main] >= CHANGING_SECTION
    constant &= slenderness >= SUPPORT_LENGTH / 2
    support = pieces.runs_through(slices) & (sheet | constant)
    part = pieces.volume_mm3 >= PART_SHARE * pieces.volume_mm3[main]
    roles = [Role.SUPPORT if s else Role.OBJECT if p else Role.LOOSE for s, p in zip(support, part, strict=True)]
    roles[main] = Role.OBJECT
    return roles
