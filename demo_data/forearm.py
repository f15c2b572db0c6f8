"""An invented forearm-like training phantom in CT numbers, on a table, with a marker on its left side."""

from __future__ import annotations

from typing import Any

import numpy as np
from shapes import FINE, blurred, correlated_noise, fine_axes, sphere

SHAPE, SPACING = (64, 144, 144), (1.25, 0.7, 0.7)
ORIGIN = (-50.0, -62.0, -310.0)
HU = {"air": -1000.0, "fat-like": -100.0, "muscle-like": 55.0, "marrow-like": -60.0, "dense wall": 1300.0}
HU |= {"table": 120.0, "marker": 2200.0}
BLUR_MM, NOISE, NOISE_FILTER_VOX = 0.6, 20.0, 0.6
LENGTH = SHAPE[0] * SPACING[0]
AXIS = (50.0, 44.0)
#: centre x, y, outer and inner radius in mm at the first slice; the bones taper by a tenth over the scan.
BONES = ((38.0, 42.0, 7.5, 4.2), (61.5, 46.0, 6.2, 3.4))
#: Beads on the skin at the patient's left, three along the arm and one to the front of the last: an L.
BEAD_RADIUS = 2.0
BEADS = ((20.0, 0.0), (40.0, 0.0), (60.0, 0.0), (60.0, -0.5))
TABLE = {"centre": (50.0, -40.0), "radius": 121.0, "thickness": 3.0, "half_width": 42.0}


def taper(z: Any) -> Any:
    """Size at height z, as a share of that at the first slice."""
    return 1.0 - 0.12 * z / LENGTH


def bead_centres() -> list[tuple[float, float, float]]:
    """On the skin: z along the arm, angle in radians from the patient's left towards the back."""
    centres = []
    for z, angle in BEADS:
        a, b = 35.0 * taper(z) + BEAD_RADIUS, 29.0 * taper(z) + BEAD_RADIUS
        centres.append((AXIS[0] + a * float(np.cos(angle)), AXIS[1] + b * float(np.sin(angle)), z))
    return centres


def draw() -> tuple[np.ndarray, dict[str, Any]]:
    """Stored numbers (int16 CT numbers, slices × rows × columns) and the truth."""
    z, y, x = fine_axes(SHAPE, SPACING)
    fine = np.empty([n * FINE for n in SHAPE], np.float32)
    counts = dict.fromkeys(HU, 0)
    beads = [sphere(centre, BEAD_RADIUS) for centre in bead_centres()]
    for n, height in enumerate(z):
        fine[n] = _slice(x[None, :], y[:, None], height, beads)
        for name, value in HU.items():
            counts[name] += int(np.count_nonzero(fine[n] == np.float32(value)))
    values = blurred(fine, BLUR_MM, SPACING) + NOISE * correlated_noise(SHAPE, NOISE_FILTER_VOX, seed=911)
    cell = float(np.prod(SPACING)) / FINE**3
    return np.rint(values).clip(-1024, 3071).astype(np.int16), _truth({n: c * cell for n, c in counts.items()})


def _slice(x: np.ndarray, y: np.ndarray, z: float, beads: list) -> np.ndarray:
    size = taper(z)
    dx, dy = x - AXIS[0], y - AXIS[1]
    picture = np.full(np.broadcast_shapes(x.shape, y.shape), HU["air"], np.float32)
    from_table = np.hypot(x - TABLE["centre"][0], y - TABLE["centre"][1]) - TABLE["radius"]
    picture[(np.abs(from_table) <= TABLE["thickness"] / 2) & (np.abs(dx) <= TABLE["half_width"]) & (dy > 0)] = HU[
        "table"
    ]
    picture[(dx / (35.0 * size)) ** 2 + (dy / (29.0 * size)) ** 2 <= 1] = HU["fat-like"]
    picture[(dx / (30.0 * size)) ** 2 + (dy / (24.0 * size)) ** 2 <= 1] = HU["muscle-like"]
    for bx, by, outer, inner in BONES:
        far = np.hypot(x - bx, y - by)
        picture[far <= outer * size] = HU["dense wall"]
        picture[far <= inner * size] = HU["marrow-like"]
    for bead in beads:
        picture[bead(x, y, np.float32(z))] = HU["marker"]
    return picture


def _truth(sampled: dict[str, float]) -> dict[str, Any]:
    # Volume of a tapering tube of radius r (1 − q z / L): π r² L (1 − q + q²/3), from the outside of the end voxels.
    start, end = taper(-SPACING[0] / 2), taper(LENGTH - SPACING[0] / 2)
    mean_square = (start**2 + start * end + end**2) / 3
    wall = sum(np.pi * (outer**2 - inner**2) for _, _, outer, inner in BONES) * LENGTH * mean_square
    return {
        "unit": "HU",
        "levels": HU,
        "blur_sigma_mm": BLUR_MM,
        "noise": NOISE,
        "noise_filter_sigma_voxels": NOISE_FILTER_VOX,
        "sampled_volumes_mm3": sampled,
        "dense_wall_volume_mm3": float(wall),
        "dense_wall_volume_basis": "closed form",
        "arm_volume_mm3": float(np.pi * 35.0 * 29.0 * LENGTH * mean_square),
        "arm_volume_basis": "closed form, without the marker's beads",
        "marker_side": "left",
        "marker_centres_mm": [[a + b for a, b in zip(c, ORIGIN, strict=True)] for c in bead_centres()],
    }
