"""Surface of a spot to sub-voxel accuracy: Feret diameter and sphericity."""

from __future__ import annotations

from contextlib import suppress
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import ConvexHull, QhullError
from scipy.spatial.distance import pdist
from skimage.measure import marching_cubes, mesh_surface_area

from tomofolio.measure.estimate import Estimate
from tomofolio.measure.patches import Patch
from tomofolio.volume import Grid

Array = NDArray[np.float64]

#: Spots with fewer voxels past half-way have no shape of their own: they are taken for spheres.
SMALLEST_SHAPED_VOXELS = 30
SMOOTHING_VOXELS = 0.8


@dataclass(frozen=True)
class Shape:
    """``points_mm`` (n, 3) lie on the surface; ``sphericity`` is None where the spot is too small to have a shape."""

    points_mm: Array
    feret_mm: float
    sphericity: float | None


def shape_of(patch: Patch, found: Estimate, grid: Grid, volume_mm3: float) -> Shape:
    """Half-way surface of the spot, scaled about its centre to the estimated volume.

    Sphericity is π^(1/3) (6 V)^(2/3) / A (Wadell 1935) with volume and area of the same mesh.
    """
    centre = grid.to_mm(found.centre)
    radius = (3 * volume_mm3 / (4 * np.pi)) ** (1 / 3)
    ball = Shape(centre + radius * _directions(), 2 * radius, None)
    if int(patch.core.sum()) < SMALLEST_SHAPED_VOXELS:
        return ball
    # What belongs to a neighbour is plain material for this surface.
    field = np.where(patch.own | patch.core, patch.darkness - found.offset, 0.0)
    # A little smoothing keeps the noise out of the surface; the scaling to the volume takes its shrinking back.
    field = gaussian_filter(np.pad(field, 2), SMOOTHING_VOXELS).astype(np.float32)
    try:
        vertices, faces, _, _ = marching_cubes(field, 0.5 * found.own_contrast, allow_degenerate=False)
    except (ValueError, RuntimeError):
        return ball
    vertices, faces = _largest_piece(vertices, faces)
    points = grid.to_mm(vertices - 2 + patch.start)
    corners = points[faces]
    a, b, c = (corners[:, n] - centre for n in range(3))
    mesh_volume = abs(float((a * np.cross(b, c)).sum())) / 6  # divergence theorem
    if mesh_volume <= 0:
        return ball
    area = float(mesh_surface_area(points, faces))
    sphericity = float(np.pi ** (1 / 3) * (6 * mesh_volume) ** (2 / 3) / area)
    scaled = centre + (points - centre) * (volume_mm3 / mesh_volume) ** (1 / 3)
    return Shape(scaled, _feret(scaled), min(sphericity, 1.0))


def _largest_piece(vertices: Array, faces: NDArray) -> tuple[Array, NDArray]:
    """The connected piece of the mesh with the most vertices: specks of noise are no part of the surface."""
    edges = np.concatenate((faces[:, :2], faces[:, 1:]))
    links = coo_matrix((np.ones(len(edges), np.int8), (edges[:, 0], edges[:, 1])), shape=(len(vertices),) * 2)
    count, piece = connected_components(links, directed=False)
    if count == 1:
        return vertices, faces
    largest = np.argmax(np.bincount(piece))
    number = np.cumsum(piece == largest) - 1
    return vertices[piece == largest], number[faces[piece[faces[:, 0]] == largest]]


def _feret(points: Array) -> float:
    with suppress(QhullError):
        points = points[ConvexHull(points).vertices]
    return float(pdist(points).max())


def _directions(count: int = 60) -> Array:
    """Evenly spread unit vectors (Fibonacci lattice)."""
    k = np.arange(count) + 0.5
    polar, turn = np.arccos(1 - 2 * k / count), np.pi * (1 + 5**0.5) * k
    return np.column_stack((np.cos(turn) * np.sin(polar), np.sin(turn) * np.sin(polar), np.cos(polar)))
