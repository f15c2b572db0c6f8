"""The object on phantoms with a closed form, and on real scans."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body import Region, find_body
from tomofolio.body.material import at_least


def index_grid(shape):
    return np.mgrid[: shape[0], : shape[1], : shape[2]].astype(float)


def counts(body):
    return np.bincount(body.regions.ravel(), minlength=5)


def codes(body):
    return [remark.code for remark in body.remarks]


def test_a_hollow_ball_encloses_its_cavity(make_volume, make_ranges):
    k, j, i = index_grid((48, 50, 52))
    r = np.sqrt((k - 24) ** 2 + (j - 25) ** 2 + (i - 26) ** 2)
    body = find_body(make_volume(100.0 * ((r <= 18) & (r > 9))), make_ranges(0, 100, boundaries=[50]))
    assert counts(body)[Region.ENCLOSED] == (r <= 9).sum()
    assert counts(body)[Region.OBJECT] == ((r <= 18) & (r > 9)).sum()
    # closed form 4/3 π r³, voxelised
    assert counts(body)[Region.ENCLOSED] == pytest.approx(4 / 3 * np.pi * 9**3, rel=0.02)
    assert body.box == (slice(6, 43), slice(7, 44), slice(8, 45))
    assert body.threshold == 50 and body.excluded == () and body.remarks == ()


@pytest.mark.parametrize("way", ["upwards", "into the first slice", "into a corner without data"])
def test_an_open_cavity_is_outside(way, make_volume, make_ranges):
    k, j, i = index_grid((40, 44, 46))
    r = np.sqrt((k - 20) ** 2 + (j - 22) ** 2 + (i - 23) ** 2)
    solid = (r <= 15) & (r > 7)
    no_data = None
    if way == "upwards":
        solid &= ~((np.hypot(k - 20, i - 23) < 2) & (j < 22))
    elif way == "into the first slice":
        solid = (np.hypot(j - 22, i - 23) <= 15) & (np.hypot(j - 22, i - 23) > 7) & (k < 30) | ((k >= 30) & (k < 34))
    else:
        no_data = (j < 22) & (np.hypot(k - 20, i - 23) < 2)
    body = find_body(make_volume(100.0 * solid, no_data=no_data), make_ranges(0, 100, boundaries=[50]))
    assert counts(body)[Region.ENCLOSED] == 0
    assert body.excluded == ()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_outside_and_enclosed_are_those_of_scipy_in_random_foam(seed, make_volume, make_ranges):
    rng = np.random.default_rng(seed)
    foam = ndimage.gaussian_filter(rng.normal(size=(30, 40, 50)), 2.0)
    foam = foam / foam.std()
    volume = make_volume(100 * foam, spacing=(2.0, 0.5, 0.5))
    body = find_body(volume, make_ranges(-100, 100, boundaries=[-60]))
    is_object = body.regions == Region.OBJECT
    labels, _ = ndimage.label(~is_object)
    edge = np.ones(foam.shape, bool)
    edge[1:-1, 1:-1, 1:-1] = False
    outside = np.isin(labels, np.unique(labels[edge & (labels > 0)]))
    np.testing.assert_array_equal(body.regions == Region.ENCLOSED, ~is_object & ~outside)
    assert (body.regions == Region.ENCLOSED).any()


def test_pieces_are_those_of_scipy_and_specks_vanish(make_volume, make_ranges):
    rng = np.random.default_rng(5)
    k, j, i = index_grid((40, 60, 60))
    block = (abs(k - 20) < 12) & (abs(j - 30) < 14) & (abs(i - 30) < 14)
    cavity = (abs(k - 20) < 5) & (abs(j - 30) < 5) & (abs(i - 30) < 5)
    specks = (rng.random(block.shape) < 0.01) & ~ndimage.binary_dilation(block, iterations=2)
    specks |= (rng.random(block.shape) < 0.02) & cavity
    body = find_body(make_volume(100.0 * ((block & ~cavity) | specks)), make_ranges(0, 100, boundaries=[50]))
    labels, _ = ndimage.label((block & ~cavity) | specks)
    sizes = np.bincount(labels.ravel())
    assert (np.sort(sizes)[:-2] < 27).all()
    assert counts(body)[Region.ENCLOSED] == pytest.approx(cavity.sum(), rel=0.03)
    np.testing.assert_array_equal(body.regions == Region.OBJECT, labels == np.argmax(np.bincount(labels[labels > 0])))
    assert body.excluded == () and codes(body) == []


def test_a_small_piece_apart_is_left_out_and_listed(make_volume, make_ranges):
    k, j, i = index_grid((40, 60, 60))
    block = (abs(k - 20) < 14) & (abs(j - 20) < 14) & (abs(i - 30) < 20)
    crumb = (abs(k - 12) < 2) & (abs(j - 50) < 2) & (abs(i - 10) < 2)
    positions = np.cumsum(np.linspace(0.5, 1.5, 40)) - 0.5
    volume = make_volume(100.0 * (block | crumb), spacing=(0, 0.5, 0.8), positions=positions, tilt_degrees=12)
    body = find_body(volume, make_ranges(0, 100, boundaries=[50]))
    (thing,) = body.excluded
    assert thing.name == "loose piece" and codes(body) == ["pieces-excluded"]
    weights = (crumb * volume.grid.voxel_volumes_mm3[:, None, None])[crumb]
    assert thing.volume_mm3 == pytest.approx(weights.sum())
    centre = weights @ volume.grid.to_mm(np.argwhere(crumb).astype(float)) / weights.sum()
    np.testing.assert_allclose(thing.position_mm, centre)
    np.testing.assert_array_equal(body.regions == Region.EXCLUDED, crumb)


def test_a_loose_piece_inside_a_closed_cavity_belongs_to_the_object(make_volume, make_ranges):
    k, j, i = index_grid((50, 50, 50))
    r = np.sqrt((k - 25) ** 2 + (j - 25) ** 2 + (i - 25) ** 2)
    crumb = (abs(k - 25) < 2) & (abs(j - 25) < 2) & (abs(i - 25) < 2)
    body = find_body(make_volume(100.0 * (((r < 22) & (r > 8)) | crumb)), make_ranges(0, 100, boundaries=[50]))
    assert body.excluded == () and (body.regions[crumb] == Region.OBJECT).all()
    assert counts(body)[Region.ENCLOSED] == ((r <= 8) & ~crumb).sum()


def test_parts_that_the_end_slices_cut_apart_all_belong_to_the_object(make_volume, make_ranges):
    _, j, i = index_grid((30, 70, 80))
    left = (np.hypot(j - 35, i - 22) < 18) & (np.hypot(j - 35, i - 22) > 10)
    right = (abs(j - 35) < 25) & (abs(i - 62) < 7)
    body = find_body(make_volume(100.0 * (left | right), blur=0.7), make_ranges(0, 100, boundaries=[50]))
    assert body.excluded == () and counts(body)[Region.EXCLUDED] == 0
    assert codes(body) == ["object-in-pieces", "object-cut"]


def limb_on_table(shape, radius, *, gap, thickness, bend=0.0, hollow=False):
    """A long tapering limb above a curved table that runs through all slices; gap in voxels at the lowest point."""
    k, j, i = index_grid(shape)
    middle = shape[2] / 2
    limb = np.hypot(j - shape[1] * 0.45, i - middle) <= radius - 0.02 * radius * k / shape[0]
    top = shape[1] * 0.45 + radius + gap - bend * (i - middle) ** 2
    table = (j >= top) & (j < top + thickness) & (abs(i - middle) < 0.46 * shape[2])
    if hollow:
        table &= ~((j >= top + 2) & (j < top + thickness - 2) & (abs(i - middle) < 0.46 * shape[2] - 3))
    return limb, table


@pytest.mark.parametrize("hollow", [False, True])
@pytest.mark.parametrize(("radius", "thickness"), [(22, 5), (30, 7)])
def test_a_table_apart_is_left_out(radius, thickness, hollow, make_volume, make_ranges):
    thickness += 4 * hollow
    limb, table = limb_on_table((40, 110, 150), radius, gap=5, thickness=thickness, bend=0.002, hollow=hollow)
    values = np.where(limb, 40.0, np.where(table, -100.0, -1000.0))
    volume = make_volume(values, blur=0.8, noise=25, spacing=(3, 0.9, 0.9))
    body = find_body(volume, make_ranges(-1000, 40, boundaries=[-500]))
    (thing,) = body.excluded
    assert thing.name == "support below the object"
    voxel = volume.grid.voxel_volumes_mm3[0]
    assert thing.volume_mm3 == pytest.approx(table.sum() * voxel, rel=0.08)
    assert counts(body)[Region.OBJECT] == pytest.approx(limb.sum(), rel=0.02)
    assert counts(body)[Region.ENCLOSED] == 0
    assert "support-excluded" in codes(body)


def test_a_table_larger_than_the_limb_on_it_is_still_the_table(make_volume, make_ranges):
    limb, table = limb_on_table((30, 80, 260), 14, gap=4, thickness=6)
    assert table.sum() > 1.5 * limb.sum()
    body = find_body(
        make_volume(np.where(limb | table, 40.0, -1000.0), blur=0.7), make_ranges(-1000, 40, boundaries=[-500])
    )
    assert counts(body)[Region.OBJECT] == pytest.approx(limb.sum(), rel=0.02)


def test_a_pocket_between_object_and_table_is_outside(make_volume, make_ranges):
    k, j, i = index_grid((30, 60, 80))
    block = (j > 10) & (j < 40) & (abs(i - 40) < 25) & (k > 3) & (k < 26)
    block &= ~((abs(k - 15) < 5) & (abs(i - 40) < 8) & (j > 30))
    plate = (j >= 42) & (j < 45)
    body = find_body(make_volume(100.0 * (block | plate)), make_ranges(0, 100, boundaries=[50]))
    assert counts(body)[Region.ENCLOSED] == 0
    np.testing.assert_array_equal(body.regions == Region.OBJECT, block)


def test_a_plate_with_flange_and_ribs_through_the_whole_scan_loses_nothing(make_volume, make_ranges):
    k, j, i = index_grid((40, 100, 140))
    part = (abs(j - 50) < 8) & (abs(i - 70) < 50)
    part |= (abs(i - 30) < 2) & (j > 50) & (j < 90)
    part |= (abs(i - 110) < 2) & (j > 50) & (j < 90) & (k > 10)
    part |= (abs(j - 90) < 2) & (abs(i - 30) < 20)
    part |= (abs(j - 30) < 2) & (i > 20) & (i < 120) & (k < 25)
    part |= (abs(i - 70) < 3) & (j > 28) & (j < 50)
    for seed, noise in ((1, 5), (2, 15)):
        volume = make_volume(100.0 * part, blur=0.8, noise=noise, seed=seed)
        body = find_body(volume, make_ranges(0, 100, boundaries=[50]))
        assert body.excluded == ()
        assert counts(body)[Region.OBJECT] == pytest.approx(part.sum(), rel=0.03)


def test_a_scan_without_background_is_object_wherever_there_is_data(make_volume, make_ranges):
    _, j, i = index_grid((6, 40, 40))
    no_data = np.hypot(j - 19.5, i - 19.5) > 18
    volume = make_volume(np.where(no_data, -2000, 500.0), noise=20, no_data=no_data)
    body = find_body(volume, make_ranges(500, boundaries=[]))
    np.testing.assert_array_equal(body.regions == Region.NO_DATA, no_data)
    np.testing.assert_array_equal(body.regions == Region.OBJECT, ~no_data)
    assert body.threshold is None and body.box == (slice(0, 6), slice(2, 38), slice(2, 38))


def test_an_object_at_the_edge_of_the_field_of_view_is_whole(make_volume, make_ranges):
    _, j, i = index_grid((12, 60, 60))
    no_data = np.hypot(j - 29.5, i - 29.5) > 29
    solid = (np.hypot(j - 20, i - 29.5) < 26) & ~no_data
    hole = np.hypot(j - 20, i - 29.5) < 5
    values = np.where(no_data, -2000.0, np.where(solid & ~hole, 40.0, -1000.0))
    body = find_body(make_volume(values, no_data=no_data), make_ranges(-1000, 40, boundaries=[-500]))
    np.testing.assert_array_equal(body.regions == Region.OBJECT, solid & ~hole)
    np.testing.assert_array_equal(body.regions == Region.NO_DATA, no_data)
    assert counts(body)[Region.ENCLOSED] == 0  # a hole through the first and the last slice is open


def test_noise_alone_is_no_object(make_volume, make_ranges):
    body = find_body(make_volume(np.zeros((8, 30, 30)), noise=20), make_ranges(0, 100, boundaries=[50]))
    assert codes(body) == ["no-object"] and counts(body)[Region.OUTSIDE] == body.regions.size


@pytest.mark.parametrize("dtype", [np.int16, np.uint16, np.int32, np.float32])
@pytest.mark.parametrize("slope", [1.0, 0.37, -2.5])
def test_material_is_where_the_values_reach_the_threshold(dtype, slope, make_volume, make_grid):
    rng = np.random.default_rng(9)
    low = 0 if dtype is np.uint16 else -2000
    stored = rng.integers(low, 3000, (3, 20, 20)).astype(dtype)
    source = make_volume(np.zeros((3, 20, 20)))
    volume = type(source)(stored, slope, [10.0, -4.0, 0.5], source.grid, source.unit)
    for value in (-1e6, -300.25, 0.0, 812.5, 1e6):
        for k in range(3):
            exact = slope * stored[k].astype(float) + volume.intercept[k] >= value
            np.testing.assert_array_equal(at_least(volume, k, value), exact)


def test_the_engine_block_is_left_whole(real_scan, make_ranges):
    volume = real_scan("engine_block")
    body = find_body(volume, make_ranges(0, 143, 220, boundaries=[70, 190]))
    labels, _ = ndimage.label(volume.stored >= 70)
    sizes = np.bincount(labels.ravel())[1:]
    assert counts(body)[Region.OBJECT] == sizes[sizes >= 27].sum()
    assert body.excluded == ()


@pytest.mark.parametrize(("first", "last"), [(8, 30), (20, 60), (66, 100)])
def test_a_section_of_the_engine_block_keeps_all_large_parts(first, last, real_scan, make_ranges, make_volume):
    stored = real_scan("engine_block").stored[first:last]
    body = find_body(make_volume(stored), make_ranges(0, 143, 220, boundaries=[70, 190]))
    assert counts(body)[Region.OBJECT] >= 0.99 * (stored >= 70).sum()
    assert not any("support" in thing.name for thing in body.excluded)


def test_both_arcs_beside_the_head_are_left_out_and_the_head_is_kept(real_scan, make_ranges):
    volume = real_scan("head_tilted_uneven")
    body = find_body(volume, make_ranges(-1000, 35, 900, boundaries=[-480, 140]))
    supports = [thing for thing in body.excluded if thing.name.startswith("support")]
    assert len(supports) == 2 and len({thing.position_mm[0] > 0 for thing in supports}) == 2
    # The arcs by hand: strips of columns and rows that hold nothing but an arc in the slices named (looked at).
    material = (volume.stored >= -480) & ~volume.no_data
    for strip in (np.s_[:3, 250:430, 50:61], np.s_[:2, 300:430, 448:462], np.s_[20:, :, 430:465], np.s_[20:, :, 45:75]):
        left = (body.regions[strip] == Region.OBJECT)[material[strip]].mean()
        assert left < 0.1, strip
    # What is left out is thin and lies in the strips of the arcs: the head is untouched but for the rim of the ears.
    out = body.regions == Region.EXCLUDED
    assert out[:, :, 105:405].sum() <= 0.001 * out.sum()
    assert 0.02 < out.sum() / material.sum() < 0.03


@pytest.mark.parametrize("slices", [1, 2, 3])
def test_a_scan_of_few_slices_is_read_without_supports(slices, make_volume, make_ranges):
    _, j, i = index_grid((slices, 60, 80))
    body_and_table = (np.hypot(j - 25, i - 40) < 15) | (j >= 50) & (j < 53)
    body = find_body(make_volume(100.0 * body_and_table), make_ranges(0, 100, boundaries=[50]))
    np.testing.assert_array_equal(body.regions == Region.OBJECT, body_and_table)


def test_a_scan_that_is_all_material_is_object_everywhere(make_volume, make_ranges):
    body = find_body(make_volume(np.full((9, 20, 30), 100.0)), make_ranges(0, 100, boundaries=[50]))
    assert (body.regions == Region.OBJECT).all() and body.box == (slice(0, 9), slice(0, 20), slice(0, 30))
