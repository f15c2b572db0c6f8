"""Rays against closed forms (Levoy 1988; Max 1995; Beer–Lambert), a plain Python twin, and each other."""

from __future__ import annotations

import math

import numba
import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body.result import Body, Region
from tomofolio.render import Camera, cast_rays, make_field, make_tables
from tomofolio.render.colours import on_ground
from tomofolio.render.stepping import jitter_of, opacity
from tomofolio.volume import Grid, Volume

LEVEL = 1 / 255


def along_y(width=24, height=24, mm=1.0, centre=(15.5, 15.5, 15.5)):
    return Camera((0.0, 1.0, 0.0), (0.0, 0.0, 1.0), centre, mm, width, height)


def ball_volume(make, shape=(40, 40, 40), spacing=(1.0, 1.0, 1.0), radius=12.0, sharp=1.5):
    """A ball of 1000 in 0 with a smooth edge, in the middle."""
    grid = make.grid(shape, spacing)
    middle = grid.centre_mm
    return make.volume(
        grid, lambda p: 1000 / (1 + np.exp(-(radius - np.linalg.norm(p - middle, axis=-1)) / (sharp / 2))), slope=0.05
    )


@pytest.mark.parametrize("step", [0.1, 0.37, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("density", [0.003, 0.05, 0.4])
def test_homogeneous_slab_transmits_by_beer_lambert_for_any_step(make, density, step):
    volume = make.volume(make.grid((32, 32, 32), (1.0, 0.7, 1.0)), lambda p: np.full(p.shape[:-1], 500.0))
    table = make.table(0, 1000, lambda v: np.full_like(v, density))
    picture = cast_rays(volume, None, table, along_y(centre=(15.5, 10.85, 15.5)), step=step, shaded=False)
    length = 31 * 0.7  # between the outermost voxel centres
    assert np.abs(picture[..., 3] - (1 - math.exp(-density * length))).max() < LEVEL / 4
    assert np.allclose(picture[..., :3], 0.5 * picture[..., 3:], atol=1e-4)  # colour is premultiplied


def test_values_that_vary_slab_by_slab_follow_the_integral_of_the_density(make):
    volume = make.volume(make.grid((16, 64, 16)), lambda p: 10 * p[..., 1])  # 0 … 630 along the ray
    table = make.table(0, 1000, lambda v: np.where((v > 200) & (v < 260), 0.05, 0.01))
    picture = cast_rays(volume, None, table, along_y(8, 8, centre=(7.5, 31.5, 7.5)), shaded=False)
    expected = 1 - math.exp(-(0.05 * 6.0 + 0.01 * (63.0 - 6.0)))
    assert np.abs(picture[..., 3] - expected).max() < LEVEL / 2


def test_ball_is_as_opaque_as_its_chord_is_long(make):
    radius, density = 12.0, 0.03
    volume = ball_volume(make, radius=radius, sharp=0.8)
    table = make.table(0, 1000, lambda v: np.where(v > 500, density, 0.0))
    camera = along_y(40, 40, centre=tuple(volume.grid.centre_mm))
    picture = cast_rays(volume, None, table, camera, shaded=False)
    y, x = np.mgrid[:40, :40] - 19.5
    offset = np.hypot(x, y)
    chord = 2 * np.sqrt(np.maximum(radius**2 - offset**2, 0))
    inside = offset < radius - 2
    assert np.abs(picture[..., 3] - (1 - np.exp(-density * chord)))[inside].max() < 2 * LEVEL
    assert picture[..., 3][offset > radius + 2].max() == 0


def test_front_layer_covers_the_back_layer(make):
    """Two layers: C = α1 c1 + (1 − α1) α2 c2, and the other way round from behind (Porter & Duff 1984, over)."""
    volume = make.volume(
        make.grid((16, 64, 16)),
        lambda p: np.where(np.abs(p[..., 1] - 16) < 8, 400.0, np.where(np.abs(p[..., 1] - 46) < 8, 800.0, 0.0)),
    )

    def colours(v):
        return np.where((v > 600)[:, None], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0])

    density = 0.05
    table = make.table(
        0, 1000, lambda v: np.where((np.abs(v - 400) < 50) | (np.abs(v - 800) < 50), density, 0.0), colours
    )
    front = cast_rays(volume, None, table, along_y(4, 4, centre=(7.5, 31.5, 7.5)), shaded=False)[2, 2]
    behind = Camera((0.0, -1.0, 0.0), (0.0, 0.0, 1.0), (7.5, 31.5, 7.5), 1.0, 4, 4)
    back = cast_rays(volume, None, table, behind, shaded=False)[2, 2]
    # the layers are 14 voxels of full value; their edges pass the table's band over 2 × 1/8 and 2 × 1/16 of a voxel
    a_red = 1 - math.exp(-density * 14)
    a_blue = a_red
    assert front[0] == pytest.approx(a_red, abs=0.02)
    assert front[2] == pytest.approx((1 - a_red) * a_blue, abs=0.02)
    assert back[2] == pytest.approx(a_blue, abs=0.02)
    assert back[0] == pytest.approx((1 - a_blue) * a_red, abs=0.02)


SHARP = [
    ("smooth", lambda v: 0.08 * np.clip((v - 300) / 400, 0, 1)),
    ("sharp", lambda v: np.where(v > 500, 0.6, 0.0)),
    ("thin shell", lambda v: np.where(np.abs(v - 500) < 12, 3.0, 0.0)),
]


@pytest.mark.parametrize(("name", "density"), SHARP, ids=[name for name, _ in SHARP])
@pytest.mark.parametrize("shaded", [False, True])
def test_halving_the_step_changes_no_pixel(make, name, density, shaded):
    volume = ball_volume(make, sharp=3.0)
    table = make.table(0, 1000, density, (0.2, 0.4, 0.5))
    camera = Camera((0.3, 0.9, -0.2), (0.0, 0.0, 1.0), tuple(volume.grid.centre_mm), 0.5, 80, 80)
    coarse, fine = (
        on_ground(cast_rays(volume, None, table, camera, step=step, shaded=shaded)).astype(int) for step in (0.5, 0.25)
    )
    assert np.abs(coarse - fine).max() <= 2


def twin(volume, table, camera, step):
    """Emission and absorption in plain Python: equal fine steps, map_coordinates, no skipping, no light."""
    values = volume.values(slice(None)).astype(float)
    entries = np.linspace(table.first, table.last, len(table.density_per_mm))
    out = np.zeros((camera.height, camera.width, 4))
    right, down, away = camera.axes
    reach = 200.0
    for py in range(camera.height):
        for px in range(camera.width):
            start = camera.first_pixel_mm + camera.mm_per_pixel * (px * right + py * down) - reach / 2 * away
            t = np.arange(0, reach, step) + step / 2
            index = volume.grid.to_index(start + t[:, None] * away)
            inside = np.all((index >= 0) & (index <= np.array(volume.shape) - 1), axis=1)
            v = ndimage.map_coordinates(values, index[inside].T, order=1)
            through = 1.0
            for value in v:
                density = np.interp(value, entries, table.density_per_mm)
                alpha = 1 - math.exp(-density * step)
                colour = [np.interp(value, entries, table.colour[:, c]) for c in range(3)]
                out[py, px, :3] += through * alpha * np.array(colour)
                through *= 1 - alpha
            out[py, px, 3] = 1 - through
    return out


@pytest.mark.parametrize(
    "positions", [None, [0.0, 1.0, 1.6, 4.0, 5.0, 5.5, 8.0, 9.0, 10.5, 11.0]], ids=["even", "uneven"]
)
def test_kernel_agrees_with_a_plain_twin_on_a_tilted_grid(make, positions):
    rng = np.random.default_rng(7)
    tilt = np.radians(18.5)
    direction = np.column_stack(([1.0, 0, 0], [0, np.cos(tilt), np.sin(tilt)], [0.0, 0.0, 1.0]))
    grid = make.grid((10, 12, 11), (1.1, 0.9, 0.8), (3.0, -2.0, 5.0), direction, positions)
    smooth = ndimage.gaussian_filter(rng.uniform(0, 1, grid.shape), 1.5)
    stored = np.rint((smooth - smooth.min()) / np.ptp(smooth) * 1000).astype(np.int16)
    slope = np.where(np.arange(10) % 2, 1.0, 0.98)
    even = make.volume(grid, lambda p: np.zeros(p.shape[:-1]))
    volume = Volume(stored, slope, np.linspace(0, 5, 10), grid, even.unit)
    table = make.table(
        0, 1100, lambda v: 0.2 * np.clip((v - 300) / 500, 0, 1),
        lambda v: np.column_stack((v / 1100, 1 - v / 1100, np.full_like(v, 0.3))),
    )  # fmt: skip
    camera = Camera((0.4, 0.8, -0.3), (0.1, 0.0, 1.0), tuple(grid.centre_mm), 1.7, 9, 8)
    expected = twin(volume, table, camera, 0.02)
    assert expected[..., 3].max() > 0.2
    assert np.abs(cast_rays(volume, None, table, camera, step=0.25, shaded=False) - expected).max() < LEVEL


def scene(p):
    """A smooth ellipsoid with a denser ball beside its middle, anywhere in space."""
    body = 1 / (1 + np.exp((np.sqrt(((p / np.array([16.0, 13.0, 11.0])) ** 2).sum(-1)) - 1) * 8))
    ball = 1 / (1 + np.exp((np.linalg.norm(p - np.array([6.0, -3.0, 2.0]), axis=-1) - 5) * 1.2))
    return 600 * body + 1200 * ball


def grids(make):
    def centred(shape, spacing, direction=None, positions=None):
        grid = make.grid(shape, spacing, (0, 0, 0), direction, positions)
        return make.grid(shape, spacing, -grid.centre_mm, direction, positions)

    c, s = np.cos(0.5), np.sin(0.5)
    turned = np.column_stack(([c, s, 0], [-s, c, 0], [0.0, 0.0, 1.0]))
    tilt = np.radians(18.5)
    tilted = np.column_stack(([1.0, 0, 0], [0, np.cos(tilt), np.sin(tilt)], [0.0, 0.0, 1.0]))
    sagittal = np.column_stack(([0, 1.0, 0], [0, 0, -1.0], [-1.0, 0, 0]))
    steps = np.tile([0.4, 1.2, 0.8, 0.6], 14)
    return {
        "unequal spacing": centred((46, 62, 75), (0.8, 0.65, 0.6)),
        "oblique": centred((50, 66, 66), (0.7, 0.7, 0.7), turned),
        "sagittal": centred((64, 50, 60), (0.7, 0.7, 0.7), sagittal),
        "tilted": centred((56, 66, 64), (0.7, 0.7, 0.7), tilted),
        "uneven": centred((57, 62, 62), (1.0, 0.7, 0.7), None, np.concatenate(([0.0], np.cumsum(steps)))),
    }


@pytest.mark.parametrize("name", ["unequal spacing", "oblique", "sagittal", "tilted", "uneven"])
def test_the_same_thing_looks_the_same_on_every_grid(make, name):
    table = make.table(0, 2000, lambda v: 0.12 * np.clip((v - 250) / 900, 0, 1), (0.3, 0.35, 0.5))
    camera = Camera((-0.5, 0.8, -0.4), (0.0, 0.0, 1.0), (0.0, 0.0, 0.0), 0.6, 70, 60)
    fine = make.grid((80, 90, 100), (0.45, 0.45, 0.45))
    fine = make.grid((80, 90, 100), (0.45, 0.45, 0.45), -fine.centre_mm)
    expected = on_ground(cast_rays(make.volume(fine, scene), None, table, camera)).astype(int)
    picture = on_ground(cast_rays(make.volume(grids(make)[name], scene), None, table, camera)).astype(int)
    assert np.ptp(expected) > 60
    assert np.abs(picture - expected).max() <= 5


def test_excluded_and_no_data_voxels_are_clear(make):
    volume = make.volume(make.grid((32, 32, 32)), lambda p: np.full(p.shape[:-1], 800.0))
    regions = np.full(volume.shape, Region.OBJECT, np.uint8)
    regions[:, :, :12] = Region.EXCLUDED
    regions[:, :, 20:] = Region.NO_DATA
    body = Body(regions, (slice(0, 32), slice(0, 32), slice(12, 20)), None)
    table = make.table(0, 1000, lambda v: np.where(v > 700, 0.5, 0.0))
    shown = cast_rays(volume, body, table, along_y(32, 32), shaded=False)[..., 3]
    assert shown[:, 13:19].min() > 0.99
    assert shown[:, :11].max() == 0 and shown[:, 21:].max() == 0
    masked = Volume(volume.stored, 1.0, 0.0, volume.grid, volume.unit, regions != Region.OBJECT)
    assert np.array_equal(cast_rays(masked, None, table, along_y(32, 32), shaded=False)[..., 3], shown)


def test_blurred_edge_of_something_excluded_leaves_no_ghost(make):
    """A plate beside the block is excluded; its soft edge is OUTSIDE by its value, and must not be seen."""
    volume = make.volume(
        make.grid((32, 48, 32)),
        lambda p: (
            1000 / (1 + np.exp((np.abs(p[..., 0] - 10) - 5) * 2))
            + 1000 / (1 + np.exp((np.abs(p[..., 0] - 24) - 2) * 1.2))
        ),
    )
    regions = np.where(volume.stored > 500, Region.OBJECT, Region.OUTSIDE).astype(np.uint8)
    regions[(regions == Region.OBJECT) & (np.arange(32) > 18)] = Region.EXCLUDED
    body = Body(regions, (slice(0, 32), slice(0, 48), slice(5, 16)), 500.0)
    table = make.table(0, 1100, lambda v: np.where(v > 100, 0.2, 0.0))
    shown = cast_rays(volume, body, table, along_y(32, 32), shaded=False)[..., 3]
    assert shown[:, 20:].max() == 0
    assert shown[:, 7:14].min() > 0.9


def test_nothing_is_seen_outside_the_scan(make):
    volume = make.volume(make.grid((8, 8, 8)), lambda p: np.full(p.shape[:-1], 800.0))
    table = make.table(0, 1000, lambda v: np.full_like(v, 0.5))
    picture = cast_rays(volume, None, table, along_y(40, 40, centre=(3.5, 3.5, 3.5)), shaded=False)[..., 3]
    y, x = np.mgrid[:40, :40] - 19.5
    inside = (np.abs(x) <= 3.5) & (np.abs(y) <= 3.5)
    assert picture[inside].min() > 0.9 and picture[~inside].max() == 0


def test_optical_depths_add_up_so_opacity_is_one_minus_the_product_of_transmissions():
    depths = np.random.default_rng(3).uniform(0, 0.4, 60).astype(np.float32)
    alphas = [opacity(d) for d in depths]
    assert 1 - np.prod([1 - a for a in alphas]) == pytest.approx(1 - math.exp(-float(depths.sum())), abs=1e-5)


def test_block_skipping_changes_nothing(make):
    """The same picture where one far voxel row forces every block to be visible is pixel for pixel alike."""
    volume = ball_volume(make)
    table = make.table(0, 1000, lambda v: 0.2 * np.clip((v - 400) / 200, 0, 1))
    hazy = make.table(0, 1000, lambda v: 0.2 * np.clip((v - 400) / 200, 0, 1) + 1e-9 * (1 + v))
    camera = along_y(60, 60, 0.7, tuple(volume.grid.centre_mm))
    skipped, walked = cast_rays(volume, None, table, camera), cast_rays(volume, None, hazy, camera)
    assert np.abs(skipped - walked).max() < LEVEL / 4


def test_same_bytes_from_run_to_run_and_on_one_and_two_threads(marker_phantom):
    volume, ranges, body = marker_phantom
    table = make_tables(ranges, body=body, volume=volume)
    camera = Camera((-0.5, 0.8, -0.3), (0.0, 0.0, 1.0), (0.0, 0.0, 0.0), 0.6, 120, 100)
    before = numba.get_num_threads()
    try:
        pictures = []
        for threads in (1, min(2, before), min(2, before)):
            numba.set_num_threads(threads)
            pictures.append(cast_rays(volume, body, table, camera).tobytes())
    finally:
        numba.set_num_threads(before)
    assert pictures[0] == pictures[1] == pictures[2]


def test_memory_beyond_the_volume_is_small(make):
    volume = make.volume(make.grid((64, 128, 128)), lambda p: p[..., 0])
    field = make_field(volume)
    assert np.shares_memory(field.stored, volume.stored)
    extra = field.lowest.nbytes + field.highest.nbytes + field.has_hidden.nbytes + field.finder.nbytes
    assert extra < 0.05 * volume.stored.nbytes


def test_jitter_is_fixed_and_even():
    values = np.array([[jitter_of(x, y) for x in range(64)] for y in range(64)])
    assert values.min() >= 0 and values.max() < 1
    assert np.histogram(values, 8, (0, 1))[0].min() > 0.8 * 64 * 64 / 8
    assert abs(np.corrcoef(values[:, :-1].ravel(), values[:, 1:].ravel())[0, 1]) < 0.06


def test_surfaces_are_shaded_smoothly_without_facets(make):
    """On a ball the brightness follows |n·l|: it must not jump from voxel to voxel."""
    volume = ball_volume(make, radius=14.0, sharp=2.5)
    table = make.table(0, 1000, lambda v: np.where(v > 500, 5.0, 0.0))
    camera = along_y(240, 240, 0.125, tuple(volume.grid.centre_mm))
    grey = on_ground(cast_rays(volume, None, table, camera))[..., 1].astype(float)
    y, x = (np.mgrid[:240, :240] - 119.5) * 0.125
    face = np.hypot(x, y) < 9
    second = np.abs(np.diff(grey, 2, axis=1))[:, :][face[:, 1:-1]]
    assert np.ptp(grey[face]) > 20
    assert np.percentile(second, 99) <= 3


def test_a_single_slice_and_a_missed_scan_give_a_clear_picture(make):
    volume = make.volume(make.grid((1, 16, 16)), lambda p: np.full(p.shape[:-1], 0.0))
    table = make.table(0, 1000, lambda v: np.where(v > 500, 1.0, 0.0))
    assert cast_rays(volume, None, table, along_y(8, 8, centre=(7.5, 7.5, 0.0))).max() == 0
    assert cast_rays(volume, None, table, along_y(8, 8, centre=(500.0, 0.0, 0.0))).max() == 0


def test_unsigned_and_read_only_volumes_are_read_alike(make):
    volume = ball_volume(make, shape=(24, 24, 24), radius=7)
    table = make.table(0, 1000, lambda v: np.where(v > 500, 1.0, 0.0))
    camera = along_y(20, 20, centre=tuple(volume.grid.centre_mm))
    expected = cast_rays(volume, None, table, camera)
    frozen = volume.stored.copy()
    frozen.setflags(write=False)
    grid: Grid = volume.grid
    assert np.array_equal(cast_rays(Volume(frozen, 0.05, 0.0, grid, volume.unit), None, table, camera), expected)
