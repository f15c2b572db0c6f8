"""An invented forearm-like training phantom in CT numbers, on a curved table, with a marker on its left side.

Every slice is a set of ellipses whose size and centre change smoothly along the arm, from the thin end at the first
slice to the thick end at the last. Their areas are known, so the volumes are integrals over the height (Cavalieri).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scanner import FINE, SLAB, cells, correlated_noise, scan
from shapes import Solid, box, coverage, difference, intersection, sphere

SHAPE, SPACING = (72, 160, 160), (1.25, 0.625, 0.625)
ORIGIN = (-50.0, -62.0, -310.0)
HU = {"air": -1000.0, "fat-like": -100.0, "muscle-like": 55.0, "marrow-like": -60.0, "dense wall": 1300.0}
HU |= {"table": 120.0, "marker": 2200.0}
BLUR_MM, NOISE, NOISE_FILTER_VOX = 0.6, 20.0, 0.6
#: The files hold 12 bits from this number up, as scanners do: air and noise below it are cut off.
LOWEST = -1024
SPLITS = 3

#: Outer faces of the end slices and the length between them, mm from the first slice's centre.
START, LENGTH = -SPACING[0] / 2, SHAPE[0] * SPACING[0]
AXIS = (50.0, 44.0)
SKIN, CORE = (35.0, 29.0), (30.0, 24.0)
#: Size at the thin end as a share of that at the thick end.
THIN = 0.84


@dataclass(frozen=True)
class Bone:
    """A hollow bone: centre at both ends and bow to the left between them; outer and inner radius at both ends, mm.

    The cross-section is an ellipse of the area π r² with half axes r·OVAL and r/OVAL, turned by ``turn`` (radians).
    """

    starts: tuple[float, float]
    ends: tuple[float, float]
    bow: float
    outer: tuple[float, float]
    inner: tuple[float, float]
    turn: float


OVAL = 1.12
BONES = (
    Bone((38.5, 41.5), (37.0, 42.0), -2.5, (7.9, 6.8), (4.9, 3.7), 0.5),
    Bone((60.0, 45.0), (62.5, 46.5), 1.0, (5.8, 7.3), (3.1, 4.3), -0.4),
)

BEAD_RADIUS = 2.0
#: Beads on the skin at the patient's left, three along the arm and one to the front beside the last: an L.
BEADS = ((20.0, 0.0), (40.0, 0.0), (60.0, 0.0), (60.0, -0.5))
TABLE_CENTRE, TABLE_RADIUS, TABLE_THICKNESS, TABLE_HALF_WIDTH = (50.0, -40.0), 121.0, 3.0, 42.0


def share(z: Any) -> Any:
    """How far along the arm, 0 at the outer face of the first slice to 1 at that of the last; it goes on beyond."""
    return (z - START) / LENGTH


def size(z: Any) -> Any:
    """Half axes at height z as a share of those at the thick end."""
    return THIN + (1 - THIN) * share(z)


def ellipse_along(half_axes: tuple[float, float]) -> Solid:
    """The tapering body with these half axes at the thick end."""
    a, b = half_axes

    def distance(x: Any, y: Any, z: Any) -> Any:
        return _to_ellipse(x - AXIS[0], y - AXIS[1], a * size(z), b * size(z))

    return Solid(distance, *_everywhere(), float(np.pi * a * b * LENGTH * mean_square(THIN, 1.0)))


def bone_along(bone: Bone, radii: tuple[float, float]) -> Solid:
    """The outer or inner surface of a bone; volume π L times the mean square of the radius."""

    def distance(x: Any, y: Any, z: Any) -> Any:
        u = share(z)
        radius = radii[0] + (radii[1] - radii[0]) * u
        dx = x - (bone.starts[0] + (bone.ends[0] - bone.starts[0]) * u + bone.bow * 4 * u * (1 - u))
        dy = y - (bone.starts[1] + (bone.ends[1] - bone.starts[1]) * u)
        c, s = float(np.cos(bone.turn)), float(np.sin(bone.turn))
        return _to_ellipse(c * dx + s * dy, c * dy - s * dx, radius * OVAL, radius / OVAL)

    return Solid(distance, *_everywhere(), float(np.pi * LENGTH * mean_square(*radii)))


def mean_square(first: float, last: float) -> float:
    """Mean of the square of what grows linearly from first to last."""
    return (first**2 + first * last + last**2) / 3


def _to_ellipse(x: Any, y: Any, a: Any, b: Any) -> Any:
    level = np.sqrt((x / a) ** 2 + (y / b) ** 2)
    slope = np.sqrt((x / a**2) ** 2 + (y / b**2) ** 2)
    return (level - 1) * level / np.maximum(slope, 1e-9)


def _everywhere() -> tuple[tuple[float, float, float], tuple[float, float, float]]:
    return (-1e3, -1e3, -1e3), (1e3, 1e3, 1e3)


def bead_centres() -> list[tuple[float, float, float]]:
    """Just outside the skin: z along the arm, angle in radians from the patient's left towards the back."""
    a, b = SKIN
    return [
        (
            AXIS[0] + (a * size(z) + BEAD_RADIUS) * float(np.cos(angle)),
            AXIS[1] + (b * size(z) + BEAD_RADIUS) * float(np.sin(angle)),
            z,
        )
        for z, angle in BEADS
    ]


def _table() -> Solid:
    def ring(radius: float) -> Solid:
        cx, cy = TABLE_CENTRE
        return Solid(lambda x, y, z: np.sqrt((x - cx) ** 2 + (y - cy) ** 2) + 0 * z - radius, *_everywhere())

    half = TABLE_THICKNESS / 2
    window = box(
        (AXIS[0] - TABLE_HALF_WIDTH, AXIS[1], -1e3),
        (AXIS[0] + TABLE_HALF_WIDTH, TABLE_CENTRE[1] + TABLE_RADIUS + 5, 1e3),
    )
    return intersection(window, difference(ring(TABLE_RADIUS + half), ring(TABLE_RADIUS - half)))


def layers() -> list[tuple[str, Solid]]:
    """What is painted over what: the name of the level and where it goes."""
    painted = [("table", _table()), ("fat-like", ellipse_along(SKIN)), ("muscle-like", ellipse_along(CORE))]
    for bone in BONES:
        painted += [("dense wall", bone_along(bone, bone.outer)), ("marrow-like", bone_along(bone, bone.inner))]
    return painted + [("marker", sphere(centre, BEAD_RADIUS)) for centre in bead_centres()]


def draw(slices: range | None = None) -> np.ndarray:
    """CT numbers, int16, slices × rows × columns; all slices where none are named."""
    wanted = range(SHAPE[0]) if slices is None else slices
    noise = correlated_noise(SHAPE, NOISE_FILTER_VOX, seed=911)[wanted.start : wanted.stop]
    values = scan(_levels, SHAPE, SPACING, BLUR_MM, slices=wanted) + NOISE * noise
    return np.rint(values).clip(LOWEST, LOWEST + 4095).astype(np.int16)


def _levels(z: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    picture = np.full((len(z), len(y), len(x)), HU["air"], np.float32)
    for name, solid in layers():
        picture += coverage(solid, z, y, x, splits=SPLITS) * (HU[name] - picture)
    return picture


def sampled_volumes() -> dict[str, float]:
    """mm³ of every level between the outer faces of the end slices, from the shares of the drawn cells."""
    volumes = dict.fromkeys(HU, 0.0)
    y, x = (cells(0, n, step) for n, step in zip(SHAPE[1:], SPACING[1:], strict=True))
    for start in range(0, SHAPE[0], SLAB):
        z = cells(start, min(start + SLAB, SHAPE[0]), SPACING[0])
        rest = {"air": np.ones((len(z), len(y), len(x)), np.float32)}
        for name, solid in layers():
            part = coverage(solid, z, y, x, splits=SPLITS)
            rest = {other: left * (1 - part) for other, left in rest.items()}
            rest[name] = rest.get(name, 0) + part
        for name, left in rest.items():
            volumes[name] += float(left.sum(dtype=np.float64)) * float(np.prod(SPACING)) / FINE**3
    return volumes


def truth() -> dict[str, Any]:
    """What was drawn: positions in LPS mm, volumes in mm³ between the outer faces of the end slices."""
    outer = [bone_along(bone, bone.outer).volume or 0.0 for bone in BONES]
    inner = [bone_along(bone, bone.inner).volume or 0.0 for bone in BONES]
    return {
        "unit": "HU",
        "levels": HU,
        "blur_sigma_mm": BLUR_MM,
        "blur_sigma_with_voxel_mm": [float(np.sqrt(BLUR_MM**2 + step**2 / 12)) for step in SPACING],
        "noise": NOISE,
        "noise_filter_sigma_voxels": NOISE_FILTER_VOX,
        "cut_off_below": LOWEST,
        "sampled_volumes_mm3": {name: round(v, 3) for name, v in sampled_volumes().items()},
        "sampled_volumes_basis": f"sampled on {FINE * SPLITS}³ points a voxel",
        "dense_wall_volume_mm3": sum(outer) - sum(inner),
        "dense_wall_volume_basis": "closed form",
        "marrow_volume_mm3": sum(inner),
        "marrow_volume_basis": "closed form",
        "arm_volume_mm3": ellipse_along(SKIN).volume,
        "arm_volume_basis": "closed form, without the marker's beads",
        "bones": [
            {
                "first_slice_centre_mm": _place((*bone.starts, START)),
                "last_slice_centre_mm": _place((*bone.ends, START + LENGTH)),
                "mean_outer_diameters_mm": [2 * r for r in bone.outer],
                "mean_inner_diameters_mm": [2 * r for r in bone.inner],
            }
            for bone in BONES
        ],
        "marker_side": "left",
        "marker_diameter_mm": 2 * BEAD_RADIUS,
        "marker_centres_mm": [_place(centre) for centre in bead_centres()],
        "table_thickness_mm": TABLE_THICKNESS,
        "table_gap_mm": round(TABLE_CENTRE[1] + TABLE_RADIUS - TABLE_THICKNESS / 2 - AXIS[1] - SKIN[1], 6),
    }


def _place(point: tuple[float, float, float]) -> list[float]:
    return [round(float(a + b), 6) for a, b in zip(point, ORIGIN, strict=True)]
