"""Positions against DICOM's plane equation, highdicom and SimpleITK."""

import numpy as np
import pytest
import SimpleITK
from highdicom.spatial import ImageToReferenceTransformer
from scipy.spatial.transform import Rotation

from tomofolio.errors import InputError
from tomofolio.intake import read_series

AXIAL = np.array([1.0, 0, 0, 0, 1, 0])


def plane_equation(data, j, i):
    """Centre of the pixel (row j, column i): DICOM PS3.3 C.7.6.2.1.1, P = S + X·Δcolumn·i + Y·Δrow·j (from memory)."""
    cosines = np.array(data.ImageOrientationPatient, float)
    between_rows, between_columns = (float(x) for x in data.PixelSpacing)
    return (
        np.array(data.ImagePositionPatient, float) + cosines[:3] * between_columns * i + cosines[3:] * between_rows * j
    )


def oblique(seed):
    matrix = Rotation.random(random_state=seed).as_matrix()
    return np.concatenate((matrix[:, 0], matrix[:, 1])), matrix[:, 2]


def cases():
    rng = np.random.default_rng(4)
    even, uneven = 1.3 * np.arange(5), np.array([0.0, 0.7, 2.1, 2.9, 6.0])
    tilt = np.radians(-21.0)
    tilted = np.array([1, 0, 0, 0, np.cos(tilt), np.sin(tilt)])
    yield pytest.param(AXIAL, np.outer(even, [0, 0, 1]), id="axial")
    yield pytest.param(AXIAL, np.outer(even, [0, 0, -1]), id="written feet last")
    yield pytest.param(np.array([-1.0, 0, 0, 0, 1, 0]), np.outer(even, [0, 0, 1]), id="mirrored rows")
    yield pytest.param(np.array([0.0, 1, 0, 0, 0, -1]), np.outer(even, [1, 0, 0]), id="sagittal")
    yield pytest.param(np.array([1.0, 0, 0, 0, 0, -1]), np.outer(even, [0, 1, 0]), id="coronal")
    yield pytest.param(tilted, np.outer(even, [0, 0, 1]), id="tilted gantry")
    yield pytest.param(tilted, np.outer(uneven, [0, 0, 1]), id="tilted and uneven")
    for seed in range(3):
        cosines, normal = oblique(seed)
        yield pytest.param(cosines, rng.normal(size=3) + np.outer(uneven, normal), id=f"oblique {seed}")


@pytest.mark.parametrize(("orientation", "positions"), list(cases()))
def test_every_voxel_lies_where_the_plane_equation_says(
    tmp_path, make_series, make_slice, make_stored, orientation, positions
):
    stored = make_stored(seed=7)
    make_series(tmp_path, stored, positions=positions, orientation=orientation)
    volume, _ = read_series(tmp_path)
    written = [make_slice(pixels, k, position=positions[k], orientation=orientation) for k, pixels in enumerate(stored)]
    to_reference = [
        ImageToReferenceTransformer(
            [float(x) for x in data.ImagePositionPatient],
            [float(x) for x in data.ImageOrientationPatient],
            [float(x) for x in data.PixelSpacing],
        )
        for data in written
    ]
    found = []
    for k in range(volume.shape[0]):
        source = next(s for s in range(len(stored)) if np.array_equal(stored[s], volume.stored[k]))
        found.append(source)
        for j, i in ((0, 0), (2, 5), (5, 1)):
            position = volume.grid.to_mm(np.array([k, j, i]))
            np.testing.assert_allclose(position, plane_equation(written[source], j, i), atol=2e-6)
            # highdicom counts image coordinates from the pixel's corner: the centre of pixel 0 is at 0.5.
            other = to_reference[source](np.array([[i + 0.5, j + 0.5]]))[0]
            np.testing.assert_allclose(position, other, atol=2e-6)
    assert sorted(found) == list(range(len(stored)))


@pytest.mark.parametrize(("orientation", "positions"), list(cases()))
def test_slices_advance_along_the_cross_product_of_rows_and_columns(
    tmp_path, make_series, make_stored, orientation, positions
):
    make_series(tmp_path, make_stored(), positions=positions, orientation=orientation)
    grid = read_series(tmp_path)[0].grid
    right_handed = np.cross(orientation[:3], orientation[3:])
    assert np.all(np.diff(grid.slice_positions_mm) > 0)
    assert grid.direction[:, 2] @ right_handed > 0.5
    np.testing.assert_allclose(np.linalg.norm(grid.direction, axis=0), 1.0, atol=1e-9)


@pytest.mark.parametrize("seed", range(3))
def test_position_agrees_with_simpleitk_on_an_even_oblique_grid(tmp_path, make_series, make_stored, seed):
    cosines, normal = oblique(seed + 10)
    positions = np.array([3.0, -2.0, 7.0]) + np.outer(0.8 * np.arange(5), normal)
    make_series(tmp_path, make_stored(), positions=positions, orientation=cosines)
    volume, _ = read_series(tmp_path)
    image = itk_image(tmp_path)
    for index in ((0, 0, 0), (4, 5, 6), (2, 3, 1)):
        expected = image.TransformIndexToPhysicalPoint(tuple(int(n) for n in reversed(index)))
        np.testing.assert_allclose(volume.grid.to_mm(np.array(index)), expected, atol=1e-5)
    np.testing.assert_array_equal(volume.values(slice(None)), SimpleITK.GetArrayFromImage(image))


def itk_image(folder):
    reader = SimpleITK.ImageSeriesReader()
    reader.SetFileNames(reader.GetGDCMSeriesFileNames(str(folder)))
    return reader.Execute()


def test_tilted_grid_shears_where_simpleitk_makes_a_box(tmp_path, make_series, make_stored):
    # SimpleITK's image has one perpendicular frame, so a tilted series is placed wrongly by it: at the last slice the
    # difference is the sideways shift of the slices, height · tan(tilt) in closed form.
    tilt = np.radians(20.0)
    orientation = np.array([1, 0, 0, 0, np.cos(tilt), -np.sin(tilt)])
    positions = np.outer(2.0 * np.arange(5), [0, 0, 1])
    make_series(tmp_path, make_stored(), positions=positions, orientation=orientation)
    volume, _ = read_series(tmp_path)
    assert volume.grid.tilt_degrees == pytest.approx(20.0, abs=1e-4)
    last = volume.grid.to_mm(np.array([4, 0, 0]))
    np.testing.assert_allclose(last, positions[4], atol=1e-6)
    itk_last = np.array(itk_image(tmp_path).TransformIndexToPhysicalPoint((0, 0, 4)))
    assert np.linalg.norm(last - itk_last) > 0.5 * 8.0 * np.sin(tilt)


def test_order_follows_positions_and_not_names_or_instance_numbers(tmp_path, make_slice, save_slice, make_stored):
    stored = make_stored(seed=1, shape=(9, 4, 5))
    for seed in range(3):
        names, numbers = np.random.default_rng(seed).permutation(9), np.random.default_rng(seed + 9).permutation(9)
        folder = tmp_path / str(seed)
        for k in range(9):
            data = make_slice(stored[k], k, position=(0, 0, 1.5 * k), InstanceNumber=int(numbers[k]))
            save_slice(data, folder / ["a", "b/c"][k % 2] / f"IM{names[k]}")
        volume, _ = read_series(folder)
        np.testing.assert_array_equal(volume.stored, stored)


def test_nothing_depends_on_the_order_of_files_where_headers_differ_in_the_last_digits(
    tmp_path, make_slice, save_slice, make_stored
):
    stored = make_stored()
    for folder, names in (("a", "01234"), ("b", "43210")):
        for k, name in enumerate(names):
            orientation = (1, 0, 0, 0, 1, 4e-6 * k)
            save_slice(make_slice(stored[k], k, orientation=orientation, KVP=str(100 + k)), tmp_path / folder / name)
    one, other = read_series(tmp_path / "a"), read_series(tmp_path / "b")
    np.testing.assert_array_equal(one[0].grid.direction, other[0].grid.direction)
    np.testing.assert_array_equal(one[0].stored, other[0].stored)
    assert one[1] == other[1]


def test_slices_off_the_straight_axis_are_refused(tmp_path, make_series, make_stored):
    positions = np.outer(np.arange(5.0), [0, 0, 1])
    positions[2, 0] += 0.5
    paths = make_series(tmp_path, make_stored(), positions=positions)
    with pytest.raises(InputError, match=r"not on one straight axis.*0\.5 mm") as caught:
        read_series(tmp_path)
    assert caught.value.file == str(paths[2])


def test_slices_that_slide_more_than_they_advance_are_refused(tmp_path, make_series, make_stored):
    make_series(tmp_path, make_stored(), positions=np.outer(np.arange(5.0), [3, 0, 1]))
    with pytest.raises(InputError, match="slide sideways"):
        read_series(tmp_path)


def test_positions_rounded_to_a_hundredth_of_a_millimetre_are_accepted(tmp_path, make_series, make_stored):
    cosines, normal = oblique(2)
    positions = np.round(np.outer(0.7 * np.arange(5), normal), 2)
    make_series(tmp_path, make_stored(), positions=positions, orientation=np.round(cosines, 5))
    np.testing.assert_allclose(read_series(tmp_path)[0].grid.spacing_mm[0], 0.7, atol=0.02)
