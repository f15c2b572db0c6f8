"""The demo scans are what their script draws, and what they say of themselves."""

from __future__ import annotations

import importlib
import json
import sys
from pathlib import Path

import numpy as np
import pydicom
import pytest
import SimpleITK as sitk  # noqa: N813 - the library's own usual name
from scipy import ndimage

DEMO = Path(__file__).resolve().parents[2] / "demo_data"
NAMES = ("cover", "forearm")


@pytest.fixture(scope="module")
def drawing():
    """The drawing scripts as modules."""
    sys.path.insert(0, str(DEMO))
    try:
        yield {name: importlib.import_module(name) for name in (*NAMES, "shapes")}
    finally:
        sys.path.remove(str(DEMO))


def stored(name):
    return np.stack([pydicom.dcmread(path).pixel_array for path in sorted((DEMO / name).glob("*.dcm"))])


def truth(name):
    return json.loads((DEMO / f"{name}-truth.json").read_text(encoding="utf-8"))


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMES)
def test_files_hold_what_the_script_draws(drawing, name):
    pixels, facts = drawing[name].draw()
    np.testing.assert_array_equal(stored(name), pixels)
    assert json.loads(json.dumps(facts)) == truth(name)


@pytest.mark.parametrize("name", NAMES)
def test_scans_are_small_and_losslessly_compressed(name):
    paths = list((DEMO / name).glob("*.dcm"))
    assert sum(path.stat().st_size for path in paths) < 4_000_000
    assert pydicom.dcmread(paths[0]).file_meta.TransferSyntaxUID == pydicom.uid.JPEGLSLossless


@pytest.mark.parametrize("name", NAMES)
def test_simpleitk_reads_the_same_values_at_the_same_places(drawing, name):
    reader = sitk.ImageSeriesReader()
    reader.SetFileNames(reader.GetGDCMSeriesFileNames(str(DEMO / name)))
    image = reader.Execute()
    np.testing.assert_array_equal(sitk.GetArrayFromImage(image), stored(name))
    np.testing.assert_allclose(image.GetSpacing(), drawing[name].SPACING[::-1])
    np.testing.assert_allclose(image.GetOrigin(), drawing[name].ORIGIN)


@pytest.mark.parametrize("name", NAMES)
def test_noise_in_air_is_what_the_truth_says(name):
    corner = stored(name)[2:-2, :9, :9].astype(float)
    facts = truth(name)
    assert corner.mean() == pytest.approx(facts["levels"]["air"], abs=0.1 * facts["noise"] + 0.5)
    if name == "cover":
        assert corner.std() == pytest.approx(facts["noise"], rel=0.08)


def test_total_of_the_voids_is_the_sum_of_closed_forms():
    # 4/3 π a b c for every void of one piece; the two tables must agree to a thousandth.
    facts = truth("cover")
    assert facts["closed_voids_total_mm3"] == pytest.approx(sum(v["volume_mm3"] for v in facts["closed_voids"]))
    (large,) = [v for v in facts["closed_voids"] if v["name"] == "large sphere"]
    assert large["volume_mm3"] == pytest.approx(4 / 3 * np.pi * 1.5**3)


def test_sampled_volume_of_the_dense_walls_agrees_with_the_closed_form():
    # A tapering tube: π (R² − r²) L times the mean square of the taper.
    facts = truth("forearm")
    assert facts["sampled_volumes_mm3"]["dense wall"] == pytest.approx(facts["dense_wall_volume_mm3"], rel=0.005)


def test_marker_lies_on_the_patients_left():
    # LPS: x grows to the patient's left, so the beads have the larger x; columns run along +x in the files.
    facts = truth("forearm")
    bright = stored("forearm") > 1800
    _, _, columns = ndimage.center_of_mass(bright)
    first = pydicom.dcmread(DEMO / "forearm" / "slice-001.dcm")
    assert [float(c) for c in first.ImageOrientationPatient] == [1, 0, 0, 0, 1, 0]
    x = float(first.ImagePositionPatient[0]) + columns * float(first.PixelSpacing[1])
    assert facts["marker_side"] == "left"
    assert x == pytest.approx(np.mean([c[0] for c in facts["marker_centres_mm"]]), abs=1.0)
    assert x > float(first.ImagePositionPatient[0]) + 0.7 * 143 * float(first.PixelSpacing[1])
