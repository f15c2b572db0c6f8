"""Grid against DICOM's plane equation and nibabel's affine; Volume's rescale."""

import nibabel.affines
import numpy as np
import pytest

from tomofolio.volume import Basis, Grid, Unit, Volume


def tilted_grid() -> Grid:
    """Rows tilted by 18.5° about the patient's left-right axis, table travel along z, uneven gaps."""
    tilt = np.radians(18.5)
    direction = np.column_stack(([1, 0, 0], [0, np.cos(tilt), -np.sin(tilt)], [0, 0, 1]))
    return Grid(np.array([-10.0, 5.0, 2.0]), direction, 0.5, 0.4, np.array([0.0, 1.0, 3.0, 4.5]), 6, 7)


def test_position_follows_the_plane_equation():
    # DICOM PS3.3 C.7.6.2.1.1 (from memory): P = S + X·Δcolumn·i + Y·Δrow·j, S the slice's Image Position.
    grid = tilted_grid()
    k, j, i = 2, 3, 5
    slice_position = np.array([-10.0, 5.0, 2.0 + 3.0])
    row_cosines, column_cosines = grid.direction[:, 0], grid.direction[:, 1]
    expected = slice_position + row_cosines * 0.4 * i + column_cosines * 0.5 * j
    np.testing.assert_allclose(grid.to_mm(np.array([k, j, i])), expected, atol=1e-12)


def test_position_agrees_with_an_affine_from_nibabel_on_an_even_oblique_grid():
    rng = np.random.default_rng(5)
    direction, _ = np.linalg.qr(rng.normal(size=(3, 3)))
    grid = Grid(np.array([1.0, -2.0, 3.0]), direction, 0.7, 0.3, 1.1 * np.arange(5), 8, 9)
    affine = np.eye(4)
    affine[:3, :3] = direction @ np.diag([0.3, 0.7, 1.1])
    affine[:3, 3] = grid.origin_mm
    index = rng.uniform(0, 4, size=(20, 3))
    np.testing.assert_allclose(grid.to_mm(index), nibabel.affines.apply_affine(affine, index[:, ::-1]), atol=1e-12)


def test_index_is_the_inverse_of_position_also_beyond_the_ends():
    index = np.random.default_rng(1).uniform(-3, 9, size=(50, 3))
    grid = tilted_grid()
    np.testing.assert_allclose(grid.to_index(grid.to_mm(index)), index, atol=1e-9)


def test_tilt_and_perpendicular_distances_are_told_apart_from_steps_along_the_axis():
    grid = tilted_grid()
    assert grid.tilt_degrees == pytest.approx(18.5)
    np.testing.assert_allclose(grid.slice_distances_mm, np.array([1.0, 2.0, 1.5]) * np.cos(np.radians(18.5)))
    assert not grid.is_even


def test_voxel_volumes_add_up_to_the_sheared_box():
    # Cavalieri: a sheared box has the volume of the upright one, area × perpendicular height. The end slices reach
    # outwards by half their own gap.
    grid = tilted_grid()
    height = (4.5 + 0.5 * 1.0 + 0.5 * 1.5) * np.cos(np.radians(18.5))
    assert grid.voxel_volumes_mm3.sum() == pytest.approx(0.4 * 0.5 * height)


def test_slice_positions_must_increase():
    with pytest.raises(ValueError, match="increase"):
        Grid(np.zeros(3), np.eye(3), 1, 1, np.array([0.0, 0.0]), 2, 2)


def test_value_is_slope_times_stored_plus_intercept_slice_by_slice():
    # DICOM PS3.3 C.11.1.1.2 (from memory).
    grid = Grid(np.zeros(3), np.eye(3), 1, 1, np.arange(2.0), 2, 2)
    stored = np.arange(8, dtype=np.int16).reshape(2, 2, 2)
    volume = Volume(stored, np.array([2.0, 3.0]), np.array([-1.0, 5.0]), grid, Unit("other", "X", Basis.DECLARED))
    np.testing.assert_array_equal(volume.values(slice(0, 2))[0], 2 * stored[0] - 1)
    np.testing.assert_array_equal(volume.values(1), 3 * stored[1] + 5)
    assert volume.value_limits == (-1.0, 26.0)
