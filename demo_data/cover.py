"""An invented die-cast cover with voids of known size, an inclusion and a bored hole; grey values.

The cover lies with its open side up: a plate at the bottom, a wall around it, a flange with four screw holes at the top
of the wall, and inside a bearing seat with a stepped bore, two screw bosses and ribs with fillets.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from scanner import FINE, SLAB, cells, correlated_noise, scan
from scipy.spatial import cKDTree
from shapes import Solid, blend, box, coverage, cylinder, difference, ellipsoid, rib, sphere, spheres, union

SHAPE, SPACING = (84, 152, 152), (0.25, 0.25, 0.25)
ORIGIN = (-17.0, -21.5, 40.0)
AIR, ALUMINIUM, IRON = 500.0, 1700.0, 3200.0
BLUR_MM, NOISE, NOISE_FILTER_VOX, CUPPING = 0.21, 70.0, 0.6, 0.03

#: Lower face, floor of the cavity, top of the flange; mm from the first voxel's centre, as all that follows.
BOTTOM, FLOOR, TOP = 2.9, 9.3, 15.6
CENTRE, HALF_WIDTH = (18.9, 18.9), 14.0
#: Splits of a cell along each axis: for the part, and for the small voids.
COARSE_SPLITS, FINE_SPLITS = 2, 6

SEAT = (22.4, 15.6)
BORE, COUNTERBORE = cylinder(SEAT, 2.6, 0.0, 21.0), cylinder(SEAT, 3.6, 15.2, 21.0)
FIXINGS = tuple(cylinder((x, y), 0.95, 10.0, 21.0) for x in (4.9, 32.9) for y in (4.9, 32.9))
#: Blind holes that end in the screw bosses.
BLIND_HOLES = (cylinder((12.3, 12.7), 1.1, 11.3, 21.0), cylinder((24.7, 25.7), 1.1, 11.3, 21.0))
POCKET_CENTRE, POCKET_RADIUS = (20.9, 30.0, BOTTOM + 0.45), 0.9
INCLUSION_CENTRE, INCLUSION_RADIUS = (12.3, 12.7, 8.6), 1.0


def _part() -> Solid:
    """The cover without its voids."""
    # Faces that lie in one plane would be lifted by a fillet: the body ends within the flange, inner features start
    # in the middle of the plate.
    shell = blend(
        box((4.9, 4.9, BOTTOM), (32.9, 32.9, TOP - 1.2), corner=4.5),
        box((2.3, 2.3, 13.2), (35.5, 35.5, TOP), corner=4.5),
        fillet=0.8,
    )
    pan = difference(shell, box((7.7, 7.7, FLOOR), (30.1, 30.1, 21.0), corner=2.6))
    start = BOTTOM + 3.2
    inner = union(
        rib(SEAT, (6.8, 24.6), 1.7, start, 12.4),
        rib(SEAT, (31.0, 15.6), 1.7, start, 12.4),
        rib(SEAT, (22.4, 6.8), 1.7, start, 12.4),
        rib((24.7, 25.7), (31.0, 27.6), 1.7, start, 11.6),
        rib((12.3, 12.7), (6.8, 10.3), 1.7, start, 11.6),
    )
    for boss in (
        cylinder(SEAT, 5.1, start, 17.6),
        cylinder((12.3, 12.7), 2.9, start, 14.1),
        cylinder((24.7, 25.7), 2.9, start, 14.1),
    ):
        inner = blend(inner, boss, fillet=1.0)
    whole = blend(pan, inner, fillet=0.8)
    return difference(whole, BORE, COUNTERBORE, *FIXINGS, *BLIND_HOLES, sphere(POCKET_CENTRE, POCKET_RADIUS))


PART = _part()
INCLUSION = sphere(INCLUSION_CENTRE, INCLUSION_RADIUS)

#: Closed voids: name -> the spheres (centre, radius) or the one ellipsoid (centre, half axes) that make it up.
VOIDS: dict[str, list[tuple[tuple[float, float, float], Any]]] = {
    "large sphere": [((16.6, 26.7, 6.1), 1.5)],
    "sphere 8 voxels": [((9.1, 22.4, 6.2), 1.0)],
    "sphere 6 voxels": [((18.3, 7.6, 6.0), 0.75)],
    "sphere 5 voxels": [((29.6, 21.9, 6.3), 0.625)],
    "sphere 4 voxels": [((16.1, 18.9, 6.15), 0.5)],
    "sphere 3.5 voxels": [((22.7, 19.4, 5.9), 0.4375)],
    "sphere 3 voxels": [((13.4, 23.4, 6.2), 0.375)],
    "flat ellipsoid": [((11.4, 29.1, 6.0), (1.3, 0.9, 0.6))],
    "long ellipsoid": [((28.3, 16.2, 6.1), (0.55, 1.4, 0.55))],
    "near the lower face": [((9.2, 16.1, BOTTOM + 0.75 + 0.75), 0.75)],
    "touching pair, larger": [((25.0, 29.3, 6.0), 0.8)],
    "touching pair, smaller": [((26.5, 29.3, 6.0), 0.7)],
    "branched": [((9.1, 8.9, 6.2), 0.7), ((9.9, 9.6, 6.6), 0.6), ((9.8, 8.3, 5.6), 0.6)],
    "sphere 2 voxels": [((13.1, 19.6, 6.4), 0.25)],
}
#: Narrower than the blur's full width at half its height: drawn, but listed apart, because it may well go unseen.
FAINT = ("sphere 2 voxels",)


def void(name: str) -> Solid:
    """The closed void of this name."""
    parts = VOIDS[name]
    if isinstance(parts[0][1], tuple):
        return ellipsoid(*parts[0])
    return spheres(*parts)


def draw(slices: range | None = None) -> np.ndarray:
    """Stored numbers, uint16, slices × rows × columns; all slices where none are named."""
    wanted = range(SHAPE[0]) if slices is None else slices
    share = scan(_metal, SHAPE, SPACING, BLUR_MM, slices=wanted)
    dense = scan(_iron, SHAPE, SPACING, BLUR_MM, slices=wanted)
    noise = correlated_noise(SHAPE, NOISE_FILTER_VOX, seed=2207)[wanted.start : wanted.stop]
    values = AIR + (ALUMINIUM - AIR) * (1 - cupping(wanted)) * share + (IRON - ALUMINIUM) * dense + NOISE * noise
    return np.rint(values).clip(0, 4095).astype(np.uint16)


def _metal(z: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    """The share of every cell that is metal."""
    share = coverage(PART, z, y, x, splits=COARSE_SPLITS)
    for name in VOIDS:
        share *= 1 - coverage(void(name), z, y, x, splits=FINE_SPLITS)
    return share


def _iron(z: np.ndarray, y: np.ndarray, x: np.ndarray) -> np.ndarray:
    return coverage(INCLUSION, z, y, x, splits=FINE_SPLITS)


def cupping(slices: range) -> np.ndarray:
    """The share by which metal is darker in the middle, as beam hardening makes it; 0 at the outline.

    It is the product of two parabolas over the outline, and fades from the thick plate up to the thin walls.
    """
    z, y, x = (np.arange(n) * step for n, step in zip(SHAPE, SPACING, strict=True))
    across = [np.maximum(1 - ((v - c) / HALF_WIDTH) ** 2, 0) for v, c in zip((x, y), CENTRE, strict=True)]
    upward = 1 / (1 + np.exp((z[slices.start : slices.stop] - FLOOR - 1.0) / 0.7))
    return (CUPPING * upward[:, None, None] * across[1][None, :, None] * across[0]).astype(np.float32)


def truth() -> dict[str, Any]:
    """What was drawn: positions in LPS mm, volumes in mm³."""
    outside = cKDTree(_outside_points())
    voids = [_void_truth(name, outside) for name in VOIDS]
    total = float(sum(entry["volume_mm3"] for entry in voids))
    part = _filled_volume() - total
    return {
        "unit": "grey value",
        "levels": {"air": AIR, "aluminium": ALUMINIUM, "iron-like": IRON},
        "blur_sigma_mm": BLUR_MM,
        "blur_sigma_with_voxel_mm": float(np.sqrt(BLUR_MM**2 + SPACING[0] ** 2 / 12)),
        "noise": NOISE,
        "noise_filter_sigma_voxels": NOISE_FILTER_VOX,
        "contrast_to_noise": (ALUMINIUM - AIR) / NOISE,
        "cupping": CUPPING,
        "part_volume_mm3": part,
        "part_volume_basis": f"sampled on {FINE * COARSE_SPLITS}³ points a voxel; with inclusion, less voids, pocket",
        "closed_voids": [entry for entry in voids if entry["name"] not in FAINT],
        "closed_voids_narrower_than_blur": [entry for entry in voids if entry["name"] in FAINT],
        "closed_voids_total_mm3": total,
        "closed_voids_total_basis": "all closed voids, with those narrower than the blur",
        "porosity_percent": 100 * total / (part + total),
        "touching_pair_total_mm3": sum(e["volume_mm3"] for e in voids if e["name"].startswith("touching")),
        "open_pocket": {"centre_mm": _place(POCKET_CENTRE), "radius_mm": POCKET_RADIUS, "opens_to": "lower face"},
        "bore": {"axis_through_mm": _place((*SEAT, 0.0)), "direction": [0, 0, 1], "diameter_mm": 5.2},
        "inclusion": {
            "position_mm": _place(INCLUSION_CENTRE),
            "diameter_mm": 2 * INCLUSION_RADIUS,
            "volume_mm3": INCLUSION.volume,
            "ligament_mm": round(_ligament(_surface([(INCLUSION_CENTRE, INCLUSION_RADIUS)]), outside), 3),
        },
        "lower_face_z_mm": round(BOTTOM + ORIGIN[2], 6),
    }


def _void_truth(name: str, outside: cKDTree) -> dict[str, Any]:
    parts, solid = VOIDS[name], void(name)
    entry: dict[str, Any] = {"name": name, "volume_mm3": solid.volume, "volume_basis": "closed form"}
    centre = parts[0][0]
    if len(parts) > 1:
        centre = _centroid(solid)
        entry["volume_basis"] = "closed form: spheres less the lenses they share"
    entry["position_mm"] = _place(centre)
    if len(parts) > 1:
        entry["position_basis"] = "sampled, ± 0.001 mm"
    entry["equivalent_diameter_mm"] = round(float((6 * entry["volume_mm3"] / np.pi) ** (1 / 3)), 6)
    if isinstance(parts[0][1], tuple):
        entry["half_axes_mm"] = list(parts[0][1])
    entry["ligament_mm"] = round(_ligament(_surface(parts), outside), 3)
    entry["ligament_basis"] = "nearest of sampled surface points, up to 0.01 mm too long"
    return entry


def _place(point: tuple[float, float, float]) -> list[float]:
    return [round(float(a + b), 6) for a, b in zip(point, ORIGIN, strict=True)]


def _centroid(solid: Solid) -> tuple[float, float, float]:
    axes = [np.arange(low, high, 0.02) for low, high in zip(solid.low, solid.high, strict=True)]
    share = coverage(solid, *axes[::-1], splits=1).astype(np.float64)
    shares = (share.sum((0, 1)), share.sum((0, 2)), share.sum((1, 2)))
    x, y, z = (float((axis * s).sum() / s.sum()) for axis, s in zip(axes, shares, strict=True))
    return x, y, z


def _slabs() -> Any:
    """Cell centres z, y, x of the whole grid, a slab at a time."""
    y, x = (cells(0, n, step) for n, step in zip(SHAPE[1:], SPACING[1:], strict=True))
    for start in range(0, SHAPE[0], SLAB):
        yield cells(start, min(start + SLAB, SHAPE[0]), SPACING[0]), y, x


def _filled_volume() -> float:
    """mm³ of the part with its closed voids filled."""
    shares = (float(coverage(PART, *axes, splits=COARSE_SPLITS).sum(dtype=np.float64)) for axes in _slabs())
    return sum(shares) * float(np.prod(SPACING)) / FINE**3


def _outside_points() -> np.ndarray:
    """Points on the part's outside surface (bores and the open pocket are outside), x, y, z in mm."""
    found = []
    for z, y, x in _slabs():
        far = np.abs(PART.distance(x[None, None, :], y[None, :, None], z[:, None, None]))
        k, j, i = np.nonzero(far < SPACING[0] / FINE)
        found.append(np.stack([x[i], y[j], z[k]], axis=1).astype(np.float64))
    points = np.concatenate(found)
    # Two steps down the slope of the distance bring the cells' centres onto the surface.
    for _ in range(2):
        points -= PART.distance(*points.T)[:, None] * _slope(PART.distance, points)
    return points[np.abs(PART.distance(*points.T)) < 1e-3]


def _slope(distance: Callable, points: np.ndarray) -> np.ndarray:
    step = 1e-4
    moved = [(distance(*(points + d).T) - distance(*(points - d).T)) / (2 * step) for d in np.eye(3) * step]
    return np.stack(moved, axis=1)


def _surface(parts: list[tuple[tuple[float, float, float], Any]]) -> np.ndarray:
    """Points on spheres or ellipsoids, spread evenly in the golden angle's spiral."""
    n = np.arange(20000)
    height = 1 - (2 * n + 1) / len(n)
    turn = n * np.pi * (3 - np.sqrt(5))
    flat = np.sqrt(1 - height**2)
    unit = np.stack([flat * np.cos(turn), flat * np.sin(turn), height], axis=1)
    return np.concatenate([unit * np.asarray(radii) + np.asarray(centre) for centre, radii in parts])


def _ligament(surface: np.ndarray, outside: cKDTree) -> float:
    """The shortest distance between two clouds of points."""
    distances, _ = outside.query(surface)
    return float(distances.min())
