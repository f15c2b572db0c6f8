"""An invented die-cast cover with voids of known size, an inclusion and a bored hole; grey values."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy import ndimage
from shapes import FINE, Array, Solid, blurred, box, correlated_noise, cylinder, ellipsoid, fine_axes, sphere

SHAPE, SPACING = (80, 140, 140), (0.25, 0.25, 0.25)
ORIGIN = (-17.0, -21.5, 40.0)
AIR, ALUMINIUM, IRON = 300.0, 1500.0, 3000.0
BLUR_MM, NOISE, NOISE_FILTER_VOX, CUPPING = 0.21, 70.0, 0.6, 0.03

BOTTOM, TOP = 3.0, 9.5
#: Base plate, wall around the rim, bosses and ribs; mm from the first voxel's centre, x, y, z.
SOLIDS: tuple[Solid, ...] = (
    box((3.5, 3.5, BOTTOM), (31.5, 31.5, TOP), corner=4.0),
    cylinder((11.0, 11.0), 3.6, BOTTOM, 17.0),
    cylinder((24.5, 12.6), 4.5, BOTTOM, 15.5),
    cylinder((23.6, 23.6), 3.6, BOTTOM, 17.0),
    box((8.0, 16.6, BOTTOM), (27.0, 18.4, 13.0)),
    box((11.0, 10.0, BOTTOM), (24.5, 11.8, 12.5)),
)
RIM_OUTER, RIM_INNER = (
    box((3.5, 3.5, BOTTOM), (31.5, 31.5, 15.0), corner=4.0),
    box((6.5, 6.5, BOTTOM), (28.5, 28.5, 16.0), corner=2.5),
)
#: Through the plate and its boss, and two screw holes from above that end in the bosses.
HOLES: tuple[Solid, ...] = (
    cylinder((24.5, 12.6), 2.2, 0.0, 20.0),
    cylinder((11.0, 11.0), 1.2, 13.0, 20.0),
    cylinder((23.6, 23.6), 1.2, 13.0, 20.0),
)

#: name -> (spheres or ellipsoids that make it up: centre, half axes in mm), closed voids.
VOIDS: dict[str, list[tuple[tuple[float, float, float], tuple[float, float, float]]]] = {
    "large sphere": [((17.0, 24.5, 6.2), (1.5, 1.5, 1.5))],
    "sphere 8 voxels": [((9.0, 21.0, 6.3), (1.0, 1.0, 1.0))],
    "sphere 6 voxels": [((18.5, 7.5, 6.1), (0.75, 0.75, 0.75))],
    "sphere 5 voxels": [((28.0, 20.5, 6.4), (0.625, 0.625, 0.625))],
    "sphere 4 voxels": [((14.5, 14.2, 6.2), (0.5, 0.5, 0.5))],
    "sphere 3.5 voxels": [((22.0, 15.0, 6.0), (0.4375, 0.4375, 0.4375))],
    "flat ellipsoid": [((12.5, 28.0, 6.2), (1.3, 0.9, 0.6))],
    "long ellipsoid": [((21.5, 20.8, 6.3), (0.55, 1.4, 0.55))],
    "near the lower face": [((8.0, 14.0, BOTTOM + 0.75 + 0.75), (0.75, 0.75, 0.75))],
    "touching pair, larger": [((25.0, 28.3, 6.2), (0.8, 0.8, 0.8))],
    "touching pair, smaller": [((26.5, 28.3, 6.2), (0.7, 0.7, 0.7))],
    "branched": [
        ((6.9, 8.2, 6.2), (0.7, 0.7, 0.7)),
        ((7.7, 8.9, 6.6), (0.6, 0.6, 0.6)),
        ((7.6, 7.6, 5.6), (0.6, 0.6, 0.6)),
    ],
}
POCKET = ((20.5, 28.0, BOTTOM + 0.5), 0.9)
INCLUSION = ((11.0, 11.0, 9.0), 1.0)


def draw() -> tuple[np.ndarray, dict[str, Any]]:
    """Stored numbers (uint16, slices × rows × columns) and the truth."""
    z, y, x = fine_axes(SHAPE, SPACING)
    grid = (x[None, None, :], y[None, :, None], z[:, None, None])
    solid = np.zeros([n * FINE for n in SHAPE], bool)
    for shape in SOLIDS:
        solid |= shape(*grid)
    solid |= RIM_OUTER(*grid) & ~RIM_INNER(*grid)
    for hole in HOLES:
        solid &= ~hole(*grid)
    closed = solid.copy()
    void = np.zeros_like(solid)
    for parts in VOIDS.values():
        for centre, radii in parts:
            void |= ellipsoid(centre, radii)(*grid)
    solid &= ~void
    solid &= ~sphere(*POCKET)(*grid)
    dense = sphere(*INCLUSION)(*grid)
    share = blurred(solid.astype(np.float32), BLUR_MM, SPACING)
    dense_share = blurred(dense.astype(np.float32), BLUR_MM, SPACING)
    # Beam hardening makes the middle of thick places darker: a very wide blur of the part stands in for thickness.
    thickness = ndimage.gaussian_filter(share, 14)
    level = (ALUMINIUM - AIR) * (1 - CUPPING * thickness / thickness.max())
    values = AIR + level * share + (IRON - ALUMINIUM) * dense_share
    values += NOISE * correlated_noise(SHAPE, NOISE_FILTER_VOX, seed=2207)
    return np.rint(values).clip(0, 4095).astype(np.uint16), _truth(closed & ~sphere(*POCKET)(*grid), void, solid)


def _truth(closed: np.ndarray, void: np.ndarray, solid: np.ndarray) -> dict[str, Any]:
    cell = float(np.prod(SPACING)) / FINE**3
    to_outside = _distance_to_outside(closed)
    z, y, x = fine_axes(SHAPE, SPACING)
    voids = []
    for name, parts in VOIDS.items():
        entry: dict[str, Any] = {"name": name}
        mask = np.zeros_like(void)
        for centre, radii in parts:
            mask |= ellipsoid(centre, radii)(x[None, None, :], y[None, :, None], z[:, None, None])
        place = np.nonzero(mask)
        if len(parts) == 1:
            centre, radii = parts[0]
            entry["volume_mm3"] = 4 / 3 * np.pi * float(np.prod(radii))
            entry["volume_basis"] = "closed form"
        else:
            centre = (float(x[place[2]].mean()), float(y[place[1]].mean()), float(z[place[0]].mean()))
            entry["volume_mm3"] = float(mask.sum()) * cell
            entry["volume_basis"] = f"sampled on {FINE}³ points a voxel"
        entry["position_mm"] = [round(a + b, 6) for a, b in zip(centre, ORIGIN, strict=True)]
        entry["ligament_mm"] = round(float(to_outside[place].min()), 2)
        entry["ligament_basis"] = f"sampled, ± {SPACING[0] / FINE:.2f} mm"
        voids.append(entry)
    total = float(sum(entry["volume_mm3"] for entry in voids))
    part = float(solid.sum()) * cell
    return {
        "unit": "grey value",
        "levels": {"air": AIR, "aluminium": ALUMINIUM, "iron-like": IRON},
        "blur_sigma_mm": BLUR_MM,
        "blur_sigma_with_voxel_mm": float(np.sqrt(BLUR_MM**2 + SPACING[0] ** 2 / 12)),
        "noise": NOISE,
        "noise_filter_sigma_voxels": NOISE_FILTER_VOX,
        "cupping": CUPPING,
        "part_volume_mm3": part,
        "part_volume_basis": f"sampled on {FINE}³ points a voxel; with the inclusion, without voids and pocket",
        "closed_voids": voids,
        "closed_voids_total_mm3": total,
        "porosity_percent": 100 * total / (part + total),
        "open_pocket": {
            "centre_mm": [a + b for a, b in zip(POCKET[0], ORIGIN, strict=True)],
            "radius_mm": POCKET[1],
        },
        "inclusion": {
            "position_mm": [a + b for a, b in zip(INCLUSION[0], ORIGIN, strict=True)],
            "diameter_mm": 2 * INCLUSION[1],
            "volume_mm3": 4 / 3 * np.pi * INCLUSION[1] ** 3,
        },
    }


def _distance_to_outside(filled: np.ndarray) -> np.ndarray:
    """mm from every fine sample inside to the nearest one outside, less half a sample."""
    step = SPACING[0] / FINE
    return np.maximum(ndimage.distance_transform_edt(filled).astype(np.float32) - 0.5, 0) * step


__all__ = ["ORIGIN", "SHAPE", "SPACING", "Array", "draw"]
