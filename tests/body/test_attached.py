"""Supports that touch the object, and flanges that only look like supports."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body import Region, find_body


def index_grid(shape):
    return np.mgrid[: shape[0], : shape[1], : shape[2]].astype(float)


def lying(shape, radius, *, sunk, thickness, bend=0.0):
    """A round body whose radius changes along the scan, lying on a curved table of constant section."""
    k, j, i = index_grid(shape)
    middle = shape[2] / 2
    body = np.hypot(j - 0.45 * shape[1], i - middle) <= radius * (0.97 + 0.03 * np.sin(k / 7))
    top = 0.45 * shape[1] + radius - sunk - bend * (i - middle) ** 2
    table = (j >= top) & (j < top + thickness) & (abs(i - middle) < 0.46 * shape[2])
    return body, table


@pytest.mark.parametrize("turned", [False, True])
@pytest.mark.parametrize(
    ("radius", "sunk", "thickness", "bend", "table_value", "blur", "noise"),
    [
        (36, 1, 5, 0.0, 40, 0.8, 20),  # the same values: told by shape
        (40, 1.5, 6, 0.0015, 40, 1.2, 60),
        (48, 0.5, 7, -0.001, 20, 0.6, 10),
        (40, -1, 5, 0.001, 40, 1.0, 30),  # a gap of one voxel that blur closes
        (40, 0, 4, 0.001, 600, 1.0, 30),  # a denser sheet: told by value
    ],
)
def test_a_touching_table_is_taken_off(
    turned, radius, sunk, thickness, bend, table_value, blur, noise, make_volume, make_ranges
):
    body, table = lying((40, 130, 180), radius, sunk=sunk, thickness=thickness, bend=bend)
    values = np.where(table, table_value, np.where(body, 40.0, -1000.0))
    if turned:
        body, table, values = (np.swapaxes(a, 1, 2) for a in (body, table, values))
    volume = make_volume(values, blur=(0, blur, blur), noise=noise, seed=radius + turned, spacing=(3, 0.9, 0.9))
    boundaries, peaks = ([-480], (-1000, 40)) if table_value < 100 else ([-480, 300], (-1000, 40, 600))
    found = find_body(volume, make_ranges(*peaks, boundaries=boundaries))
    out = found.regions == Region.EXCLUDED
    voxel = volume.grid.voxel_volumes_mm3[0]
    total = sum(thing.volume_mm3 for thing in found.excluded)
    # the table alone, as large as the threshold shows it (SciPy's blur, no noise)
    alone = ndimage.gaussian_filter(np.where(table, float(table_value), -1000.0), (0, blur, blur)) >= -480
    assert total == pytest.approx(alone.sum() * voxel, rel=0.08)
    assert (out & table).sum() > 0.9 * table.sum()
    assert (found.regions == Region.OBJECT)[body & ~table].mean() > 0.985
    assert any(thing.name.startswith("support") and "touches" in thing.reason for thing in found.excluded)
    if not turned:
        assert found.excluded[0].name == "support below the object"


def part(name, shape=(40, 130, 180)):
    """Components of one piece that run through the whole scan and look a little like a body on a table."""
    _, j, i = index_grid(shape)
    sheet = (j >= 90) & (j < 96) & (abs(i - 90) < 80)
    fillets = {"block with fillets": 12, "block on its base": 0}
    if name in fillets:
        block = (abs(i - 90) < 30) & (j > 40) & (j < 91)
        r = fillets[name]
        beside = abs(i - 90) - 30
        fillet = (beside >= 0) & (beside < r) & (j >= 90 - r) & (j < 90)
        fillet &= (beside - r) ** 2 + (j - (90 - r)) ** 2 > r**2
        return sheet | block | fillet
    if name == "shaft with fins":
        shaft = np.hypot(j - 65, i - 90) < 35
        fins = ((abs(j - 65) < 3) & (abs(i - 90) < 80)) | ((abs(i - 90) < 3) & (j > 5) & (j < 125))
        return shaft | fins
    if name == "shaft with one fin":
        return (np.hypot(j - 65, i - 60) < 35) | ((abs(j - 65) < 3) & (i > 60) & (i < 170))
    if name == "bar with flange at its edge":
        return ((abs(j - 65) < 30) & (abs(i - 60) < 30)) | ((abs(j - 92) < 3) & (i > 30) & (i < 170))
    if name == "T profile":
        return sheet | ((abs(i - 90) < 4) & (j > 10) & (j < 91))
    if name == "shaft through a plate":
        return sheet | (np.hypot(j - 93, i - 90) < 30)
    if name == "pipe on feet":
        pipe = (np.hypot(j - 50, i - 90) < 35) & (np.hypot(j - 50, i - 90) > 22)
        return sheet | pipe | ((abs(abs(i - 90) - 12) < 3) & (j > 75) & (j < 91))
    raise ValueError(name)


NAMES = [
    "block on its base",
    "block with fillets",
    "shaft with fins",
    "shaft with one fin",
    "bar with flange at its edge",
    "T profile",
    "shaft through a plate",
    "pipe on feet",
]


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize(("blur", "noise", "seed"), [(0.7, 4, 1), (1.5, 12, 2)])
def test_flanges_fins_and_base_plates_stay(name, blur, noise, seed, make_volume, make_ranges):
    solid = part(name)
    volume = make_volume(100.0 * solid, blur=blur, noise=noise, seed=seed, spacing=(0.5, 0.4, 0.4))
    found = find_body(volume, make_ranges(0, 100, boundaries=[50]))
    assert found.excluded == ()
    assert (found.regions == Region.OBJECT).sum() == pytest.approx(solid.sum(), rel=0.03)


def test_a_dense_insert_in_a_light_part_stays(make_volume, make_ranges):
    _, j, i = index_grid((30, 90, 120))
    light = (abs(j - 45) < 25) & (abs(i - 60) < 45)
    on_a_face = (j >= 66) & (j < 70) & (abs(i - 60) < 40)
    inside = (abs(j - 40) < 2) & (abs(i - 60) < 30)
    volume = make_volume(np.where(on_a_face | inside, 300.0, 100.0 * light), blur=0.8, noise=5)
    found = find_body(volume, make_ranges(0, 100, 300, boundaries=[50, 200]))
    assert found.excluded == ()
