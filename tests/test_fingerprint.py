"""The input's hash sees values and geometry, not how they were stored."""

from dataclasses import replace

import numpy as np

from tomofolio.fingerprint import pixels_sha256
from tomofolio.volume import Basis, Grid, Unit, Volume


def volume(stored, slope, intercept, origin=(0.0, 0.0, 0.0)):
    grid = Grid(np.array(origin), np.eye(3), 1, 1, np.arange(3.0), 4, 5)
    return Volume(stored, np.array(slope), np.array(intercept), grid, Unit("grey value", "GV", Basis.DECLARED))


STORED = np.random.default_rng(2).integers(0, 1000, size=(3, 4, 5))


def test_the_same_values_stored_in_another_way_have_the_same_hash():
    plain = volume(STORED.astype(np.int16), 1.0, -1024.0)
    shifted = volume((STORED + 24).astype(np.uint16), 1.0, -1048.0)
    halved = volume((STORED * 2).astype(np.int32), [0.5, 0.5, 0.5], [-1024.0, -1024.0, -1024.0])
    assert pixels_sha256(plain) == pixels_sha256(shifted) == pixels_sha256(halved)


def test_one_changed_voxel_or_position_changes_the_hash():
    plain = volume(STORED.astype(np.int16), 1.0, 0.0)
    changed = STORED.astype(np.int16)
    changed[1, 2, 3] += 1
    moved = replace(plain, grid=volume(plain.stored, 1.0, 0.0, origin=(0.001, 0, 0)).grid)
    assert len({pixels_sha256(plain), pixels_sha256(volume(changed, 1.0, 0.0)), pixels_sha256(moved)}) == 3


def test_rounding_noise_in_the_geometry_does_not_matter():
    plain = volume(STORED.astype(np.int16), 1.0, 0.0)
    noisy = volume(STORED.astype(np.int16), 1.0, 0.0, origin=(-1e-9, 1e-9, 0))
    assert pixels_sha256(plain) == pixels_sha256(noisy)
