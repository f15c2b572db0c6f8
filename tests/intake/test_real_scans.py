"""The real scans beside the repository, against SimpleITK's reader and the figures of their description."""

import numpy as np
import pydicom
import pytest
import SimpleITK

from tomofolio.intake import read_series, survey
from tomofolio.volume import Basis, Kind


def itk_values(folder):
    reader = SimpleITK.ImageSeriesReader()
    reader.SetFileNames(reader.GetGDCMSeriesFileNames(str(folder)))
    return SimpleITK.GetArrayFromImage(reader.Execute())


def test_head_has_the_geometry_of_its_description(head_folder):
    # Tilt 18.5°, slice distances 1.08 to 6.99 mm (perpendicular): the description of the data set.
    volume, series = read_series(head_folder)
    grid = volume.grid
    assert volume.shape == (28, 512, 512)
    assert grid.tilt_degrees == pytest.approx(18.5, abs=0.05)
    assert grid.tilt_degrees == pytest.approx(
        float(series.acquisition["Gantry tilt as recorded"].rstrip("°")), abs=0.05
    )
    assert grid.slice_distances_mm.min() == pytest.approx(1.08, abs=0.01)
    assert grid.slice_distances_mm.max() == pytest.approx(6.99, abs=0.01)
    assert {"slice-gaps-uneven", "gantry-tilted"} <= {remark.code for remark in series.remarks}
    assert "slices-missing" not in {remark.code for remark in series.remarks}


def test_head_voxels_lie_where_the_plane_equation_says(head_folder):
    # DICOM PS3.3 C.7.6.2.1.1 (from memory). SimpleITK has no frame for a tilted, uneven series: it is not asked.
    grid = read_series(head_folder)[0].grid
    files = sorted(head_folder.glob("*.dcm"), key=lambda path: float(pydicom.dcmread(path).ImagePositionPatient[2]))
    for k in (0, 13, 14, 27):
        data = pydicom.dcmread(files[k], stop_before_pixels=True)
        cosines, spacing = np.array(data.ImageOrientationPatient, float), np.array(data.PixelSpacing, float)
        for j, i in ((0, 0), (100, 400), (511, 511)):
            expected = np.array(data.ImagePositionPatient, float)
            expected += cosines[:3] * spacing[1] * i + cosines[3:] * spacing[0] * j
            np.testing.assert_allclose(grid.to_mm(np.array([k, j, i])), expected, atol=2e-4)


def test_head_values_agree_with_simpleitk(head_folder):
    volume, _ = read_series(head_folder)
    np.testing.assert_array_equal(volume.values(slice(None)), itk_values(head_folder))


def test_head_is_a_patient_in_implied_hounsfield_units(head_folder):
    volume, series = read_series(head_folder)
    assert (volume.unit.quantity, volume.unit.symbol, volume.unit.basis) == ("CT number", "HU", Basis.IMPLIED)
    assert series.kind is Kind.PATIENT
    assert survey(head_folder)[0].recommended


def test_head_padding_is_the_corners_outside_the_reconstruction_circle(head_folder):
    # The circle inscribed in the square leaves 1 − π/4 of it: closed form. The scanner's circle is not wider.
    volume, _ = read_series(head_folder)
    share = volume.no_data.mean()
    assert 1 - np.pi / 4 - 0.005 < share < 0.26
    assert np.all(volume.stored[volume.no_data] == -1500)
    assert np.array_equal(volume.no_data, volume.stored == -1500)


def test_engine_block_is_grey_values_without_padding(engine_folder):
    volume, series = read_series(engine_folder)
    assert (volume.unit.quantity, volume.unit.basis) == ("grey value", Basis.DECLARED)
    assert volume.no_data is None and volume.stored.dtype == np.int16
    assert series.kind is Kind.UNKNOWN
    np.testing.assert_array_equal(volume.values(slice(None)), itk_values(engine_folder))
