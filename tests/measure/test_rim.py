"""The sums around the surface against SciPy's exact distance transform."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body.result import Body
from tomofolio.measure.rim import ASIDE, BAND_IN, BAND_OUT, BAND_SIGMAS, DEEP, DEEPER, OUTER, rim_sums


@pytest.mark.parametrize("seed", range(4))
def test_agrees_with_the_exact_distance_transform(phantoms, seed):
    shape, blur = (41, 50, 61), np.array([[0.8, 0.8, 0.8], [0.5, 1.1, 1.4], [1.5, 0.7, 0.9], [2.0, 2.0, 2.0]])[seed]
    rng = np.random.default_rng(seed)
    grid = phantoms.grid_of(shape, positions=np.cumsum(rng.uniform(0.7, 1.3, shape[0])))
    filled = ndimage.gaussian_filter(rng.normal(size=shape), 5) > 0
    regions = filled.astype(np.uint8)
    regions[filled & (rng.random(shape) < 0.003)] = 2  # lone specks: noise, part of the filled object
    regions[10:13, 20:23, 30:33] = 2 * filled[10:13, 20:23, 30:33]  # a void
    regions[:, :4] = 3
    filled = (regions == 1) | (regions == 2)
    values = rng.normal(500, 200, shape)
    values[20:24, 30:34, 40:46] += 600  # something denser
    volume = phantoms.volume_of(values, grid)
    ends = [np.flatnonzero(filled.any(axis=tuple(a for a in range(3) if a != axis))) for axis in range(3)]
    box = tuple(slice(int(e[0]), int(e[-1]) + 1) for e in ends)
    table = rim_sums(volume, Body(regions, box, 500.0), blur, 950.0).table

    def away(flags):
        """Distance to the nearest flagged voxel in half widths of the band."""
        return ndimage.distance_transform_edt(~flags, sampling=1 / (BAND_SIGMAS * blur + 0.5))

    plus = ndimage.generate_binary_structure(3, 1).astype(int)

    def clustered(flags):
        """Flagged voxels of which three of the six neighbours are flagged too."""
        return flags & (ndimage.convolve(flags.astype(int), plus, mode="constant") >= 4)

    apart = (regions == 3) | clustered(regions == 2) | (clustered(volume.stored >= 950) & (regions == 1))
    alone = away(apart) > 1
    inwards, outwards = away(regions == 0), away(filled)
    rows = {
        BAND_IN: filled & alone & (inwards <= 1),
        BAND_OUT: (regions == 0) & alone & (outwards <= 1),
        DEEP: filled & alone & (inwards > 1) & (inwards <= 1.5),
        DEEPER: filled & alone & (inwards > 1.5) & (inwards <= 2),
        OUTER: (regions == 0) & alone & (outwards > 1) & (outwards <= 1.5),
        ASIDE: ~alone & ((filled & (inwards <= 1)) | ((regions == 0) & (outwards <= 1))),
    }
    weight = np.broadcast_to(grid.voxel_volumes_mm3[:, None, None], shape)
    for row, members in rows.items():
        # Squared distances are kept to 1 / 1024 of the half width squared: a few voxels may fall to the other side.
        expected = [members.sum(), weight[members].sum(), (weight * volume.stored)[members].sum()]
        assert table[row] == pytest.approx(expected, rel=0.01, abs=10), row
