"""From the planes of the slices to the grid of the volume (DICOM PS3.3 C.7.6.2.1.1)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.errors import InputError
from tomofolio.intake.headers import Header
from tomofolio.volume import Grid

#: Direction cosines of two slices, or of rows and columns with a right angle, may differ by this (0.006°): half a
#: voxel's shift at the far side of an image of 5000 columns.
ORIENTATION_TOLERANCE = 1e-4

#: Direction cosines are written with few digits by some scanners: their length may be off by this.
LENGTH_TOLERANCE = 1e-2

#: The origins of the slices may lie beside their straight line by this share of a pixel.
LINE_TOLERANCE_PIXELS = 0.1

#: Two slices are at the same place where their distance is below this share of the median distance.
SAME_PLACE = 0.02

#: The slice axis may lean by this much. Gantries tilt by up to 30°.
LARGEST_TILT_DEGREES = 60.0


@dataclass(frozen=True)
class Arrangement:
    """The order of the slices, and where they are: ``order[k]`` is the index of slice k among the headers given."""

    order: tuple[int, ...]
    grid: Grid


def arrange(headers: Sequence[Header]) -> Arrangement:
    """Sort slices along their normal and put them on one grid.

    File names, instance numbers and slice locations play no part. Slices are ordered so that their position grows
    along the cross product of the row and the column direction; index order is thus right-handed.

    Raises
    ------
    InputError : positions, orientation or spacing are missing or impossible, two slices are at one place, or the
        origins are not on one straight line.
    """
    origins = np.array([_position(header) for header in headers])
    depth = origins @ np.cross(*row_and_column_directions(headers[0]))
    order = np.argsort(depth, kind="stable")
    origins, depth = origins[order], depth[order]
    # The first slice speaks for all, so that nothing depends on the order in which the files were found.
    rows_along, columns_along = row_and_column_directions(headers[order[0]])
    row_spacing, column_spacing = _spacing(headers[order[0]])
    normal = np.cross(rows_along, columns_along)
    _refuse_double(headers, order, depth, min(row_spacing, column_spacing))
    if len(headers) == 1:
        along, positions = normal, np.zeros(1)
    else:
        along, positions = _slice_axis(headers, order, origins, min(row_spacing, column_spacing))
    if along @ normal < np.cos(np.radians(LARGEST_TILT_DEGREES)):
        raise InputError(
            "the slices slide sideways more than they advance, so they are no stack",
            file=headers[0].source.label,
            remedy="Check Image Position and Image Orientation",
        )
    grid = Grid(
        origin_mm=origins[0],
        direction=np.column_stack((rows_along, columns_along, along)),
        row_spacing_mm=row_spacing,
        column_spacing_mm=column_spacing,
        slice_positions_mm=positions,
        rows=headers[0].pixels.rows,
        columns=headers[0].pixels.columns,
    )
    return Arrangement(tuple(int(k) for k in order), grid)


def row_and_column_directions(header: Header) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Unit vectors of increasing column and of increasing row index, from Image Orientation (Patient).

    Raises
    ------
    InputError : it is missing, or is not two unit vectors at right angles.
    """
    cosines = np.array(header.orientation or (), dtype=float)
    if cosines.shape != (6,) or not np.isfinite(cosines).all():
        raise InputError(
            "Image Orientation (Patient) is missing or broken",
            file=header.source.label,
            remedy="Export the series again, with positions and orientation",
        )
    pair = cosines.reshape(2, 3)
    lengths = np.linalg.norm(pair, axis=1)
    if np.any(np.abs(lengths - 1) > LENGTH_TOLERANCE):
        raise InputError(
            f"Image Orientation (Patient) {_printed(cosines)} is not made of unit vectors",
            file=header.source.label,
            remedy="Export the series again",
        )
    pair = pair / lengths[:, None]
    if abs(float(pair[0] @ pair[1])) > LENGTH_TOLERANCE:
        raise InputError(
            f"rows and columns of Image Orientation (Patient) {_printed(cosines)} are not at right angles",
            file=header.source.label,
            remedy="Export the series again",
        )
    return pair[0], pair[1]


def _spacing(header: Header) -> tuple[float, float]:
    spacing = header.pixel_spacing_mm or ()
    if len(spacing) != 2 or not all(np.isfinite(step) and step > 0 for step in spacing):
        raise InputError(
            "Pixel Spacing is missing or not above zero",
            file=header.source.label,
            remedy="Export the series again, with its spacing",
        )
    return float(spacing[0]), float(spacing[1])


def _position(header: Header) -> tuple[float, float, float]:
    position = header.position_mm or ()
    if len(position) != 3 or not all(np.isfinite(part) for part in position):
        raise InputError(
            "Image Position (Patient) is missing or broken",
            file=header.source.label,
            remedy="Export the series again, with positions and orientation",
        )
    return position[0], position[1], position[2]


def _refuse_double(
    headers: Sequence[Header], order: NDArray[np.intp], depth: NDArray[np.float64], pixel_mm: float
) -> None:
    gaps = np.diff(depth)
    if not len(gaps):
        return
    same = gaps <= max(SAME_PLACE * float(np.median(gaps)), 1e-3 * pixel_mm)
    if not same.any():
        return
    first = int(np.argmax(same))
    one, other = headers[order[first]], headers[order[first + 1]]
    places = f"{int(same.sum())} places hold" if same.sum() > 1 else "one place holds"
    if one.sop_instance and one.sop_instance == other.sop_instance:
        why, remedy = "copies of the same image", "Remove the copies"
    elif len(acquisitions := {header.acquisition for header in headers}) > 1:
        why = f"the series has {len(acquisitions)} acquisitions"
        remedy = "Export one acquisition at a time"
    else:
        why, remedy = "images of different times or kinds in one series", "Export one image per place"
    raise InputError(
        f"{places} more than one slice ({why}); one pair is {one.source.label} and {other.source.label}",
        remedy=remedy,
    )


def _slice_axis(
    headers: Sequence[Header], order: NDArray[np.intp], origins: NDArray[np.float64], pixel_mm: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Unit vector from the first to the last origin, and the position of each origin along it."""
    from_first = origins - origins[0]
    along = from_first[-1] / np.linalg.norm(from_first[-1])
    positions = from_first @ along
    beside = np.linalg.norm(from_first - positions[:, None] * along, axis=1)
    if beside.max() > LINE_TOLERANCE_PIXELS * pixel_mm or np.any(np.diff(positions) <= 0):
        worst = int(np.argmax(beside))
        raise InputError(
            f"the slices are not on one straight axis: the origin of one lies {beside[worst]:.3g} mm beside it",
            file=headers[order[worst]].source.label,
            remedy="Check that all files are from one scan",
        )
    return along, positions


def _printed(cosines: NDArray[np.float64]) -> str:
    return "\\".join(f"{value:g}" for value in cosines)
