"""The hash that names the input: over the rescaled values and the geometry, not over the files."""

from __future__ import annotations

import hashlib

from tomofolio.volume import Grid, Volume

#: Geometry is hashed to this many decimals of a millimetre, so that a rewritten decimal string does not matter.
GEOMETRY_DECIMALS = 5


def pixels_sha256(volume: Volume) -> str:
    """SHA-256 over the geometry as text, then the value of every voxel as little-endian float32, slice by slice."""
    digest = hashlib.sha256(_geometry_text(volume.grid).encode())
    for k in range(volume.shape[0]):
        digest.update(volume.values(k).astype("<f4", copy=False).data)
    return digest.hexdigest()


def _geometry_text(grid: Grid) -> str:
    # Adding 0.0 turns −0.0 into 0.0, which prints alike.
    numbers = [
        *grid.origin_mm,
        *grid.direction.ravel(),
        grid.row_spacing_mm,
        grid.column_spacing_mm,
        *grid.slice_positions_mm,
    ]
    shape = " ".join(str(n) for n in grid.shape)
    return shape + "\n" + " ".join(f"{round(float(x), GEOMETRY_DECIMALS) + 0.0:.{GEOMETRY_DECIMALS}f}" for x in numbers)
