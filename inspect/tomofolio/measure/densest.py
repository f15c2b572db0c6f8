"""The densest pocket of voids: where a reference volume moved through the part holds the most."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.spatial import cKDTree

from tomofolio.body.result import Body, Region
from tomofolio.measure.result import Densest, Spot
from tomofolio.volume import Volume

#: The reference volume is a sphere that holds this share of the object's box, at most, and at least this many of the
#: largest void.
SHARE_OF_BOX, LARGEST_VOIDS = 1 / 64, 8


def densest_pocket(closed: Sequence[Spot], body: Body, volume: Volume) -> Densest:
    """Largest share of void in a sphere centred on a void; the sphere's volume is stated with it.

    A void counts as a whole when its centre lies in the sphere; the share is of the sphere's volume inside the
    object, sampled on a lattice of voxels.
    """
    grid = volume.grid
    spacing = np.array(grid.spacing_mm)
    extent = np.array([part.stop - part.start for part in body.box]) * spacing
    reference = max(float(extent.prod()) * SHARE_OF_BOX, LARGEST_VOIDS * max(item.volume_mm3 for item in closed))
    radius = (3 * reference / (4 * np.pi)) ** (1 / 3)
    centres = np.array([item.position_mm for item in closed])
    sizes = np.array([item.volume_mm3 for item in closed])
    held = np.array([sizes[near].sum() for near in cKDTree(centres).query_ball_point(centres, radius)])
    # Only the fullest spheres can win: what the object fills of a sphere is at least what its voids fill.
    best, winner = -1.0, 0
    for n in np.argsort(-held, kind="stable")[:20]:
        percent = 100 * held[n] / max(reference * _inside(centres[n], radius, body, volume), held[n])
        if percent > best:
            best, winner = percent, int(n)
    position = tuple(float(x) for x in centres[winner])
    return Densest(porosity_percent=best, reference_volume_mm3=reference, position_mm=position)  # type: ignore[arg-type]


def _inside(centre: np.ndarray, radius: float, body: Body, volume: Volume) -> float:
    """Share of a sphere that lies in the object, on a lattice of 21³ points."""
    line = np.linspace(-1, 1, 21)
    ball = np.stack(np.meshgrid(line, line, line, indexing="ij"), -1).reshape(-1, 3)
    ball = ball[(ball**2).sum(axis=1) <= 1] * radius
    index = np.rint(volume.grid.to_index(centre + ball)).astype(int)
    valid = np.all((index >= 0) & (index < np.array(volume.shape)), axis=1)
    codes = body.regions[tuple(index[valid].T)]
    return float(np.isin(codes, (Region.OBJECT, Region.ENCLOSED)).sum()) / len(ball)
