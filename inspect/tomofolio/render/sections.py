"""Section and projection views: planes across the object and across its largest void, and maximum projections."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from skimage import measure

from tomofolio.measure.result import Spot
from tomofolio.ranges.result import Ranges
from tomofolio.render.camera import Camera
from tomofolio.render.colours import GROUND
from tomofolio.render.field import RayField
from tomofolio.render.marks import direction_letters, orientation_letters, scale_bar
from tomofolio.render.plane import project_maximum, section
from tomofolio.render.view import Key, Mark, Stroke, View
from tomofolio.render.window import apply_window, window_from_ranges
from tomofolio.volume import Kind, Unit

#: The long side of a grey picture, without its margins, is within these limits (pixels).
SMALLEST, LARGEST = 640, 1100
MARGIN, FOOT = 48, 64


@dataclass(frozen=True)
class Plane:
    """One standard plane: id and name for patients, id and name for components, sight and up in LPS, fixed axis."""

    patient: tuple[str, str]
    component: tuple[str, str]
    sight: tuple[float, float, float]
    up: tuple[float, float, float]
    axis: int

    def named(self, kind: Kind) -> tuple[str, str]:
        return self.component if kind is Kind.COMPONENT else self.patient


# Display conventions (common practice, no source): axial seen from the feet, coronal from the front, sagittal from the
# patient's left. For components the axis that points away from the viewer is the one the plane is across.
PLANES = (
    Plane(("axial", "Axial"), ("xy", "XY"), (0.0, 0.0, 1.0), (0.0, -1.0, 0.0), 2),
    Plane(("coronal", "Coronal"), ("xz", "XZ"), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0), 1),
    Plane(("sagittal", "Sagittal"), ("yz", "YZ"), (-1.0, 0.0, 0.0), (0.0, 0.0, 1.0), 0),
)


def section_views(
    field: RayField, box_mm: NDArray[np.float64], ranges: Ranges, unit: Unit, kind: Kind
) -> tuple[View, ...]:
    """Three orthogonal sections through the middle of a box.

    Parameters
    ----------
    box_mm : shape (2, 3), smallest and largest LPS coordinates of the object.
    """
    window = window_from_ranges(ranges)
    centre = box_mm.mean(axis=0)
    views = []
    for plane in PLANES:
        slug, name = plane.named(kind)
        camera = plane_camera(field, plane, centre, box_mm)
        values = section(field, camera)
        title = f"{name} section"
        caption = f"{title} at {_place(plane, centre, kind)}, {_seen_from(plane, kind)}. "
        caption += f"{window_text(window, unit)} {_scale_text(camera)}"
        views.append(_grey_view(f"section-{slug}", "section", title, caption, values, camera, window, kind))
    return tuple(views)


def projection_views(
    field: RayField, box_mm: NDArray[np.float64], ranges: Ranges, unit: Unit, kind: Kind
) -> tuple[View, ...]:
    """Maximum intensity projections along the three axes; what is excluded from the object takes no part."""
    window = window_from_ranges(ranges)
    background = ranges.background
    empty = background.peak if background is not None else ranges.items[0].peak
    centre = box_mm.mean(axis=0)
    views = []
    for plane in PLANES:
        slug, _ = plane.named(kind)
        camera = plane_camera(field, plane, centre, box_mm)
        values = project_maximum(field, camera, empty)
        seen = projection_window(values, window)
        axis = "XYZ"[plane.axis] if kind is Kind.COMPONENT else ("left–right", "front–back", "head–feet")[plane.axis]
        title = f"Maximum projection, {axis}"
        caption = (
            f"Largest value along every line of sight, {_seen_from(plane, kind)}; what was left out of the object "
        )
        caption += f"takes no part. {window_text(seen, unit)} {_scale_text(camera)}"
        views.append(_grey_view(f"projection-{slug}", "projection", title, caption, values, camera, seen, kind))
    return tuple(views)


def projection_window(values: NDArray[np.float32], window: tuple[float, float]) -> tuple[float, float]:
    """The window of the sections, opened upwards so that only the brightest 0.2 % of a projection are white."""
    low, high = window[0] - 0.5 - (window[1] - 1) / 2, window[0] - 0.5 + (window[1] - 1) / 2
    bright = values[values > low]  # false for NaN
    if len(bright):
        high = max(float(np.percentile(bright, 99.8)), low + 1.0)
    return (low + high) / 2 + 0.5, high - low + 1.0


def void_views(field: RayField, void: Spot, ranges: Ranges, unit: Unit, kind: Kind) -> tuple[View, ...]:
    """Three sections through a void, with its outline where the value is half-way between material and void."""
    window = window_from_ranges(ranges)
    centre = np.array(void.position_mm)
    reach = 3.0 * max(void.equivalent_diameter_mm, 0.6 * (void.feret_max_mm or 0.0))
    reach = max(reach, 12 * float(field.spacing_mm.min()))
    box = np.stack((centre - reach, centre + reach))
    views = []
    for plane in PLANES:
        slug, name = plane.named(kind)
        camera = plane_camera(field, plane, centre, box)
        values = section(field, camera)
        level = half_way_level(ranges, void)
        outlines = void_outlines(values, camera, void, level)
        title = f"Largest void, {name} section"
        caption = f"{name} section through void {void.id} at {_place(plane, centre, kind)}, {_seen_from(plane, kind)}. "
        if outlines:
            caption += (
                f"The line follows the value {_number(level)}{_symbol(unit)}, half-way between material and void. "
            )
        caption += f"{window_text(window, unit)} {_scale_text(camera)}"
        views.append(_grey_view(f"void-{slug}", "section", title, caption, values, camera, window, kind, outlines))
    return tuple(views)


def half_way_level(ranges: Ranges, void: Spot) -> float:
    """The value half-way between the main material and the void, by the void's own contrast where it is known."""
    main, background = ranges.main, ranges.background
    empty = background.peak if background is not None else ranges.items[0].peak
    contrast = min(max(void.contrast, 0.2), 1.0) if void.contrast is not None else 1.0
    return main.peak - 0.5 * contrast * (main.peak - empty)


def void_outlines(values: NDArray[np.float32], camera: Camera, void: Spot, level: float) -> tuple[Stroke, ...]:
    """Closed sub-pixel lines around the void in a section, in picture coordinates; () where the plane misses it.

    Only the hollow nearest to the void's position is outlined, so that neighbours and the outside stay unmarked.
    """
    hollow = np.nan_to_num(values, nan=np.inf) <= level
    parts = measure.label(hollow, connectivity=1)
    if not parts.any():
        return ()
    x, y = camera.to_pixel(np.array(void.position_mm)) - 0.5
    rows, columns = np.nonzero(parts)
    distance = np.hypot(rows - y, columns - x)
    nearest = int(np.argmin(distance))
    if distance[nearest] * camera.mm_per_pixel > void.equivalent_diameter_mm:
        return ()
    chosen = parts == parts[rows[nearest], columns[nearest]]
    if chosen[0].any() or chosen[-1].any() or chosen[:, 0].any() or chosen[:, -1].any():
        return ()
    others = hollow & ~chosen
    alone = np.where(others | ~np.isfinite(values), np.float32(level + abs(level) + 1), values)
    strokes = []
    for line in measure.find_contours(alone, level):
        if len(line) > 8 and np.allclose(line[0], line[-1]):
            points = tuple((float(column) + 0.5, float(row) + 0.5) for row, column in line[:-1])
            strokes.append(Stroke(points, "outline", closed=True))
    return tuple(strokes)


def plane_camera(field: RayField, plane: Plane, centre: NDArray[np.float64], box_mm: NDArray[np.float64]) -> Camera:
    """A camera on a plane that shows the box, with pixels of the finest spacing or a whole fraction of it."""
    probe = Camera(plane.sight, plane.up, _triple(centre), 1.0, 2, 2)
    extent = np.abs(probe.axes[:2]) @ (box_mm[1] - box_mm[0])
    finest = float(field.spacing_mm.min())
    pixels = extent.max() / finest
    divisor = float(np.ceil(SMALLEST / pixels)) if pixels < SMALLEST else 1.0
    mm_per_pixel = max(finest / divisor, float(extent.max()) / LARGEST)
    width, height = (max(int(np.ceil(e / mm_per_pixel)) + 1, 16) for e in extent)
    return Camera(plane.sight, plane.up, _triple(centre), mm_per_pixel, width, height)


def _grey_view(
    view_id: str,
    view_kind: str,
    title: str,
    caption: str,
    values: NDArray[np.float32],
    camera: Camera,
    window: tuple[float, float],
    kind: Kind,
    strokes: tuple[Stroke, ...] = (),
) -> View:
    """Set a grey picture on the ground with margins, where its letters and its scale bar stand clear of it.

    What lies outside the scan is ground too, so that nobody takes it for air.
    """
    paper = round(sum(GROUND) / 3)
    height, width = values.shape
    picture = np.where(np.isfinite(values), apply_window(values, *window), paper).astype(np.uint8)
    pixels = np.full((height + 2 * MARGIN + FOOT, width + 2 * MARGIN), paper, np.uint8)
    pixels[MARGIN : MARGIN + height, MARGIN : MARGIN + width] = picture
    framed = camera.framed(MARGIN, FOOT)
    marks: list[Mark] = [
        Stroke(tuple((x + MARGIN, y + MARGIN) for x, y in stroke.points), stroke.role, stroke.closed)
        for stroke in strokes
    ]
    marks += orientation_letters(framed, kind, MARGIN, FOOT)
    marks += scale_bar(framed, MARGIN, FOOT)
    return View(
        id=view_id,
        kind="projection" if view_kind == "projection" else "section",
        title=title,
        caption=caption,
        pixels=pixels,
        mm_per_pixel=camera.mm_per_pixel,
        marks=tuple(marks),
        key=Key(window=window),
    )


def _place(plane: Plane, centre: NDArray[np.float64], kind: Kind) -> str:
    axis = "XYZ"[plane.axis] if kind is Kind.COMPONENT else "xyz"[plane.axis]
    return f"{axis} = {_signed(float(centre[plane.axis]))} mm"


def _seen_from(plane: Plane, kind: Kind) -> str:
    if kind is Kind.COMPONENT:
        return f"seen from {direction_letters(-np.array(plane.sight), kind)}"
    where = {2: "the feet", 1: "the front", 0: "the left"}[plane.axis]
    return f"seen from {where}" + ("; the patient's left is on the right of the picture" if plane.axis else "")


def window_text(window: tuple[float, float], unit: Unit) -> str:
    """The window as a sentence."""
    low, high = window[0] - window[1] / 2, window[0] + window[1] / 2
    return f"Black is {_number(low)}{_symbol(unit)} and less, white is {_number(high)}{_symbol(unit)} and more."


def _scale_text(camera: Camera) -> str:
    return f"{camera.mm_per_pixel:.3g} mm per pixel."


def _number(value: float) -> str:
    digits = f"{value:.0f}" if abs(value) >= 100 else f"{value:.3g}"
    return digits.replace("-", "−")


def _signed(value: float) -> str:
    return f"{value:.1f}".replace("-", "−")


def _symbol(unit: Unit) -> str:
    return f" {unit.symbol}" if unit.symbol else ""


def _triple(vector: NDArray[np.float64]) -> tuple[float, float, float]:
    return float(vector[0]), float(vector[1]), float(vector[2])
