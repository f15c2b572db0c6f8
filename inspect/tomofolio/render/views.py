"""All views of a report, from one field made once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from tomofolio.body.result import Body
from tomofolio.measure.result import Findings
from tomofolio.ranges.result import Ranges
from tomofolio.render.camera import Camera
from tomofolio.render.colours import on_ground
from tomofolio.render.field import RayField, make_field
from tomofolio.render.marks import direction_letters, orientation_letters, scale_bar
from tomofolio.render.rays import cast_rays
from tomofolio.render.sections import projection_views, section_views, void_views
from tomofolio.render.tables import TransferTable
from tomofolio.render.view import Key, View
from tomofolio.volume import Kind, Volume

Vector = tuple[float, float, float]

#: Long side of a rendered picture in pixels, and the margins that keep letters and scale bar off the object.
RENDER_SIZE, MARGIN, FOOT = 760, 46, 60

#: Step of the rays in voxels: with the table integrated between samples a finer one changes no pixel visibly.
STEP = 1.0

#: id, title, seen from, direction of sight, up
PATIENT_DIRECTIONS: tuple[tuple[str, str, str, Vector, Vector], ...] = (
    ("anterior", "Anterior view", "the front", (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)),
    ("posterior", "Posterior view", "the back", (0.0, -1.0, 0.0), (0.0, 0.0, 1.0)),
    ("left", "Left view", "the patient's left", (-1.0, 0.0, 0.0), (0.0, 0.0, 1.0)),
    ("right", "Right view", "the patient's right", (1.0, 0.0, 0.0), (0.0, 0.0, 1.0)),
    ("superior", "Superior view", "above the head", (0.0, 0.0, -1.0), (0.0, -1.0, 0.0)),
    ("inferior", "Inferior view", "below the feet", (0.0, 0.0, 1.0), (0.0, -1.0, 0.0)),
)
COMPONENT_DIRECTIONS: tuple[tuple[str, str, str, Vector, Vector], ...] = (
    ("plus-x", "View from +X", "+X", (-1.0, 0.0, 0.0), (0.0, 0.0, 1.0)),
    ("minus-x", "View from −X", "−X", (1.0, 0.0, 0.0), (0.0, 0.0, 1.0)),
    ("plus-y", "View from +Y", "+Y", (0.0, -1.0, 0.0), (0.0, 0.0, 1.0)),
    ("minus-y", "View from −Y", "−Y", (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)),
    ("plus-z", "View from +Z", "+Z", (0.0, 0.0, -1.0), (0.0, 1.0, 0.0)),
    ("minus-z", "View from −Z", "−Z", (0.0, 0.0, 1.0), (0.0, 1.0, 0.0)),
)
#: From the front, a little from the left and from above.
OBLIQUE: Vector = (-0.55, 0.75, -0.42)


def standard_views(
    volume: Volume,
    ranges: Ranges,
    body: Body,
    findings: Findings,
    tables: TransferTable,
    *,
    kind: Kind,
    wanted: tuple[str, ...],
    oblique_direction: Vector | None = None,
    progress: Callable[[float], None] | None = None,
) -> tuple[View, ...]:
    """Render the views that a preset wants, in the preset's order.

    Parameters
    ----------
    volume, ranges, body, findings, tables : of the scan.
    kind : COMPONENT names axes, anything else is shown by the conventions for patients.
    wanted : entries of `tomofolio.preset.VIEWS`.
    oblique_direction : direction of sight of the oblique view, LPS.
    progress : told how much is done, 0 to 1.
    """
    field = make_field(volume, body)
    corners = object_corners_mm(volume, body)
    box_mm = np.stack((corners.min(axis=0), corners.max(axis=0)))
    void = findings.voids.items[0] if findings.voids is not None and findings.voids.items else None
    directions = COMPONENT_DIRECTIONS if kind is Kind.COMPONENT else PATIENT_DIRECTIONS
    sight = oblique_direction or OBLIQUE
    counts = {"directions": 6, "oblique": 1, "sections": 1, "largest-void": 1, "projections": 2}
    total = sum(counts[name] for name in wanted) or 1
    done = 0
    views: list[View] = []

    def step(count: int = 1) -> None:
        nonlocal done
        done += count
        if progress is not None:
            progress(done / total)

    up = _upwards(sight)
    seen = [d[3:] for d in directions] if "directions" in wanted else []
    mm_per_pixel = _render_scale(corners, [*seen, (sight, up)] if "oblique" in wanted else seen)
    names = {item.id: item.name for item in ranges.items}
    for name in wanted:
        if name == "directions":
            for direction in directions:
                views.append(_render(field, corners, tables, names, kind, mm_per_pixel, *direction))
                step()
            continue
        if name == "oblique":
            where = direction_letters(-np.array(sight), kind)
            view = ("oblique", "Oblique view", where, sight, up)
            views.append(_render(field, corners, tables, names, kind, mm_per_pixel, *view))
        elif name == "sections":
            views += section_views(field, box_mm, ranges, volume.unit, kind)
        elif name == "projections":
            views += projection_views(field, box_mm, ranges, volume.unit, kind)
        elif name == "largest-void" and void is not None:
            views += void_views(field, void, ranges, volume.unit, kind)
        step(counts[name])
    return tuple(views)


def object_corners_mm(volume: Volume, body: Body) -> NDArray[np.float64]:
    """Shape (8, 3): corners of the index box of the object, half a voxel outside its outermost voxels, LPS."""
    ends = [(part.start - 0.5, part.stop - 0.5) for part in body.box]
    return volume.grid.to_mm(np.array([(k, j, i) for k in ends[0] for j in ends[1] for i in ends[2]]))


def _upwards(sight: Vector) -> Vector:
    """Upward direction for a free direction of sight: superior, or anterior where the sight is nearly along it."""
    return (0.0, 0.0, 1.0) if abs(sight[2]) < 0.95 * float(np.linalg.norm(sight)) else (0.0, -1.0, 0.0)


def _extent_mm(corners: NDArray[np.float64], sight: Vector, up: Vector) -> NDArray[np.float64]:
    """Width and height that the corners take up in a picture, mm."""
    return np.ptp(corners @ Camera(sight, up, (0.0, 0.0, 0.0), 1.0, 2, 2).axes[:2].T, axis=0)


def _render_scale(corners: NDArray[np.float64], seen: list[tuple[Vector, Vector]]) -> float:
    """One scale for all rendered views: the largest of them fills the picture."""
    longest = max((float(_extent_mm(corners, sight, up).max()) for sight, up in seen), default=1.0)
    return longest / (RENDER_SIZE - 2 * MARGIN)


def _render(
    field: RayField,
    corners: NDArray[np.float64],
    table: TransferTable,
    names: dict[str, str],
    kind: Kind,
    mm_per_pixel: float,
    slug: str,
    title: str,
    seen_from: str,
    sight: Vector,
    up: Vector,
) -> View:
    centre = (corners.min(axis=0) + corners.max(axis=0)) / 2
    place = (float(centre[0]), float(centre[1]), float(centre[2]))
    width, height = (max(int(np.ceil(e / mm_per_pixel)), 240) for e in _extent_mm(corners, sight, up))
    camera = Camera(sight, up, place, mm_per_pixel, width, height).framed(MARGIN, FOOT)
    pixels = on_ground(cast_rays(field, None, table, camera, step=STEP))
    caption = f"Seen from {seen_from}, parallel projection, {mm_per_pixel:.3g} mm per pixel at every depth. "
    caption += "The object's middle is at x {}, y {}, z {} mm.".format(*(f"{c:.1f}".replace("-", "−") for c in place))
    marks = orientation_letters(camera, kind, MARGIN, FOOT) + scale_bar(camera, MARGIN, FOOT)
    return View(
        id=f"render-{slug}",
        kind="render",
        title=title,
        caption=caption,
        pixels=pixels,
        mm_per_pixel=mm_per_pixel,
        marks=marks,
        key=Key(colours=tuple((names.get(range_id, range_id), c) for range_id, c in table.range_colours)),
    )
