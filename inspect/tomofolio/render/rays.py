"""Casting rays: emission and absorption along parallel rays, front to back.

The optical model is that of Levoy (IEEE CG&A 8(3) 1988) and Max (IEEE TVCG 1(2) 1995): along a length Δ of density τ
a ray gains C ← C + T·α·c and keeps T ← T·(1 − α) with α = 1 − exp(−τΔ). Between two samples the value is taken as
linear and the table is integrated exactly (Engel, Kraus & Ertl, Graphics Hardware 2001, with one running integral),
so that thin peaks of the table are neither missed nor dependent on the step. Blocks that the table makes clear are
leapt over, and blocks in which table entries are all alike are crossed in one exact step.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from tomofolio.body.result import Body
from tomofolio.render.camera import Camera
from tomofolio.render.casting import cast_rows
from tomofolio.render.colours import linear_ground
from tomofolio.render.field import RayField, make_field
from tomofolio.render.stepping import FARTHEST, THIN, TILE, UNIFORM, VISIBLE_WITH_HIDDEN
from tomofolio.render.tables import TransferTable
from tomofolio.threads import over_parts
from tomofolio.volume import Volume

#: Direction to the light in the picture's axes (right, down, away): over the viewer's left shoulder.
LIGHT = (-0.36, -0.48, -0.80)
AMBIENT, DIFFUSE, SPECULAR = 0.34, 0.70, 0.16
#: Mean of |n·l| that matter without a direction gets.
MEAN_LIT = 0.62
#: How much the far end of the object fades into the ground: the depth cue of a print.
FADE = 0.34


def cast_rays(
    volume: Volume | RayField,
    body: Body | None,
    table: TransferTable,
    camera: Camera,
    *,
    step: float = 0.5,
    shaded: bool = True,
) -> NDArray[np.float32]:
    """A picture of the volume through a camera.

    Parameters
    ----------
    volume : the scan, or the field made from it by `make_field` (then ``body`` is already in it).
    body : what is excluded and where there is no data; both stay clear.
    table : colour and opacity for every value.
    camera : the view.
    step : distance of samples in voxels, measured in index space along the ray.
    shaded : False leaves out light and depth cue: pure emission and absorption.

    Returns
    -------
    shape (height, width, 4), float32: linear-light RGB, premultiplied by opacity, and opacity.
    """
    field = volume if isinstance(volume, RayField) else make_field(volume, body)
    entries = len(table.density_per_mm)
    per_value = (entries - 1) / (table.last - table.first)
    scale = (field.slope * per_value).astype(np.float32)
    offset = ((field.intercept - table.first) * per_value).astype(np.float32)
    empty_value = table.first if table.empty is None else table.empty
    empty = np.float32((empty_value - table.first) * per_value)
    integrals, plateau = running_integrals(table), _plateaus(table, shaded)
    blocks, block_plateau = _block_codes(field, table, plateau, per_value, float(empty), shaded)

    along = field.mm_to_index @ camera.axes[2]
    step_mm = step / float(np.linalg.norm(along))
    starts = (camera.first_pixel_mm - field.origin_mm) @ field.mm_to_index.T
    right, down = field.mm_to_index @ camera.axes[0], field.mm_to_index @ camera.axes[1]
    geometry = np.stack((starts, right * camera.mm_per_pixel, down * camera.mm_per_pixel, along * step_mm))
    # a gradient in index space becomes one in the picture's axes by the inverse transpose of the steps
    normal = (camera.axes @ field.mm_to_index.T).astype(np.float32) * np.float32(1.0 / per_value)
    light = light_numbers(field, table, camera, step_mm, shaded)
    out = np.zeros((camera.height, camera.width, 4), np.float32)

    def part(rows: slice) -> None:
        cast_rows(
            field.stored, field.hidden, field.hidden_from, *field.shape, scale, offset, empty, field.knots,
            field.finder, field.refine, field.even, blocks, block_plateau, integrals, plateau, geometry,
            np.float32(step_mm), normal, light, rows.start, rows.stop, out,
        )  # fmt: skip

    over_parts(part, camera.height, TILE)
    return out


def running_integrals(table: TransferTable) -> NDArray[np.float32]:
    """Shape (entries, 4): integrals of density and of density × colour from the first entry, in steps of the table."""
    density = table.density_per_mm.astype(np.float64)
    parts = np.column_stack((density, density[:, None] * table.colour.astype(np.float64)))
    sums = np.zeros_like(parts)
    np.cumsum((parts[1:] + parts[:-1]) / 2, axis=0, out=sums[1:])
    return sums.astype(np.float32)


def _block_codes(
    field: RayField, table: TransferTable, plateau: NDArray[np.int32], per_value: float, empty: float, shaded: bool
) -> tuple[NDArray[np.uint8], NDArray[np.int32]]:
    """What each block is under this table (see the constants in `stepping`), and its plateau, both flat."""
    entries = len(table.density_per_mm)
    low = np.clip((field.lowest - np.float32(table.first)) * np.float32(per_value), -1, entries)
    high = np.clip((field.highest - np.float32(table.first)) * np.float32(per_value), -1, entries)
    low = np.where(field.has_hidden, np.minimum(low, empty), low)
    high = np.where(field.has_hidden, np.maximum(high, empty), high)
    first = np.clip(np.floor(low - 1e-3), 0, entries - 1).astype(np.int64)
    last = np.clip(np.ceil(high + 1e-3), 0, entries - 1).astype(np.int64)
    shown = np.concatenate(([0], np.cumsum(table.density_per_mm > 0)))
    clear = shown[last + 1] == shown[first]
    uniform = ~clear & (plateau[first] >= 0) & (plateau[first] == plateau[last]) & ~field.has_hidden
    codes = np.minimum(_distance(clear), FARTHEST).astype(np.uint8)
    codes[~clear & field.has_hidden] = VISIBLE_WITH_HIDDEN
    if shaded:
        dense = np.concatenate(([0], np.cumsum(table.density_per_mm > table.surface_from_per_mm)))
        codes[~clear & ~field.has_hidden & (dense[last + 1] == dense[first])] = THIN
    for number in np.unique(plateau[first][uniform]):
        alike = uniform & (plateau[first] == number)
        codes[alike] = UNIFORM + np.minimum(_distance(alike), FARTHEST)[alike]
    return codes.reshape(-1), plateau[first].reshape(-1)


def _distance(inside: NDArray[np.bool_]) -> NDArray[np.int32]:
    """Chessboard distance to the nearest block that is not inside, 0 there; FARTHEST where all are inside."""
    if inside.all():
        return np.full(inside.shape, FARTHEST, np.int32)
    distance: NDArray[np.int32] = ndimage.distance_transform_cdt(inside, metric="chessboard")
    return distance


def _plateaus(table: TransferTable, shaded: bool) -> NDArray[np.int32]:
    """Shape (entries,): first entry of the run of equal entries that an entry and its next lie in, else −1."""
    entries = len(table.density_per_mm)
    packed = np.column_stack((table.density_per_mm, table.colour))
    same = np.all(packed[1:] == packed[:-1], axis=1)
    if shaded:
        same &= table.density_per_mm[1:] <= table.surface_from_per_mm
    first = np.arange(entries - 1)
    first[same & np.concatenate(([False], same[:-1]))] = 0
    first = np.maximum.accumulate(first)
    return np.append(np.where(same, first, -1), first[-1] if same[-1] else -1).astype(np.int32)


def light_numbers(
    field: RayField, table: TransferTable, camera: Camera, step_mm: float, shaded: bool
) -> NDArray[np.float32]:
    """Numbers of the light for the kernel.

    Returns
    -------
    shape (18,): direction to the light (3), half-way direction (3), ambient, diffuse, specular, weak and full edge,
    fade per step, fade at the plane through the camera's centre, ground (3), light on matter without a direction,
    density from which matter is shaped by light.
    """
    to_light = np.array(LIGHT) / np.linalg.norm(LIGHT)
    half = to_light + np.array([0.0, 0.0, -1.0])
    half /= np.linalg.norm(half)
    ends = np.array([(z, y, x) for z in (0, 1) for y in (0, 1) for x in (0, 1)], dtype=float) * field.size
    depths = (ends @ field.index_to_mm.T + field.origin_mm - np.array(camera.centre_mm)) @ camera.axes[2]
    near, far = float(depths.min()), float(depths.max())
    fade = (FADE if shaded else 0.0) / max(far - near, 1e-9)
    soft, full = table.edge_per_mm if table.edge_per_mm is not None else (0.0, 1e-6)
    return np.array(
        [
            *to_light, *half, AMBIENT, DIFFUSE, SPECULAR, soft, max(full, soft * 1.001 + 1e-6),
            fade * step_mm, -fade * near, *linear_ground(),
            AMBIENT + MEAN_LIT * DIFFUSE if shaded else 1.0, table.surface_from_per_mm if shaded else np.inf,
        ],
        dtype=np.float32,
    )  # fmt: skip
