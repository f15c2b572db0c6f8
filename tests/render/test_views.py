"""Views, sections and projections against nibabel, SciPy, NumPy, and the geometry they are drawn from."""

from __future__ import annotations

import nibabel
import numpy as np
import pytest
from scipy import ndimage

from tomofolio.render import Camera, Caption, Stroke, make_field, make_tables, standard_views
from tomofolio.render.marks import direction_letters, round_length_mm, scale_bar
from tomofolio.render.plane import project_maximum
from tomofolio.volume import Kind

ALL = ("directions", "oblique", "sections", "projections")


@pytest.fixture(scope="module")
def views_of(marker_phantom, make):
    volume, ranges, body = marker_phantom
    table = make_tables(ranges, body=body, volume=volume)

    def render(kind=Kind.PATIENT, wanted=ALL, **options):
        views = standard_views(volume, ranges, body, make.findings(), table, kind=kind, wanted=wanted, **options)
        return {view.id: view for view in views}

    return render


@pytest.fixture(scope="module")
def patient_views(views_of):
    return views_of()


def letters(view):
    """The four letters by side."""
    w = view.pixels.shape[1]
    found = [mark for mark in view.marks if isinstance(mark, Caption) and mark.role == "letter"]
    by_x, by_y = sorted(found, key=lambda m: m.at[0]), sorted(found, key=lambda m: m.at[1])
    assert by_x[0].at[0] < 0.1 * w and by_x[-1].at[0] > 0.9 * w
    return {"left": by_x[0].text, "right": by_x[-1].text, "top": by_y[0].text, "bottom": by_y[-1].text}


def ball_centre(view):
    """Where the ball is in a picture, as fractions of width and height: the brightest part of a grey picture, the
    part of strongest colour in a rendered one."""
    pixels = view.pixels.astype(float)
    if pixels.ndim == 2:
        inner = pixels[48:-112, 48:-48]
        y, x = np.nonzero(inner >= 250)
        return x.mean() / inner.shape[1], y.mean() / inner.shape[0]
    warm = pixels[..., 0] - pixels[..., 2]
    y, x = np.nonzero(warm > 0.6 * warm.max())
    return x.mean() / pixels.shape[1], y.mean() / (pixels.shape[0] - 68)


def test_patients_left_is_on_the_right_in_axial_and_anterior_pictures(patient_views):
    """The ball lies at x > 0 (LPS: the patient's Left), y < 0 (Anterior), z > 0 (Superior).

    Axial, seen from the feet: the viewer looks along +z with anterior up, so to the viewer's right is
    sight × up = (0,0,1) × (0,−1,0) = (1,0,0) = Left. Anterior, looking along +y with superior up: (0,1,0) × (0,0,1) =
    (1,0,0) = Left. Left view, looking along −x: (−1,0,0) × (0,0,1) = (0,1,0), so posterior is on the right.
    """
    views = patient_views
    for name, wanted in {
        "projection-axial": (1, -1), "projection-coronal": (1, -1), "projection-sagittal": (-1, -1),
        "render-anterior": (1, -1), "render-posterior": (-1, -1), "render-left": (-1, -1), "render-right": (1, -1),
        "render-superior": (-1, -1), "render-inferior": (1, -1),
    }.items():  # fmt: skip
        x, y = ball_centre(views[name])
        assert np.sign(x - 0.5) == wanted[0] and abs(x - 0.5) > 0.08, name
        assert np.sign(y - 0.5) == wanted[1] and abs(y - 0.5) > 0.05, name
    assert letters(views["section-axial"]) == {"left": "R", "right": "L", "top": "A", "bottom": "P"}
    assert letters(views["render-anterior"]) == {"left": "R", "right": "L", "top": "S", "bottom": "I"}
    assert letters(views["section-sagittal"]) == {"left": "A", "right": "P", "top": "S", "bottom": "I"}
    assert letters(views["render-superior"]) == {"left": "L", "right": "R", "top": "A", "bottom": "P"}
    assert "patient's left is on the right" in views["section-axial"].caption


def test_components_are_named_by_axes(views_of):
    views = views_of(Kind.COMPONENT)
    assert letters(views["render-minus-y"]) == {"left": "−X", "right": "+X", "top": "+Z", "bottom": "−Z"}
    assert letters(views["render-plus-z"]) == {"left": "−X", "right": "+X", "top": "+Y", "bottom": "−Y"}
    assert "section-xy" in views and "Z = " in views["section-xy"].caption
    assert all(not (set(view.caption) & set("\t\n")) for view in views.values())


@pytest.mark.parametrize("seed", range(5))
def test_first_letter_agrees_with_nibabel_for_any_direction(seed):
    """nibabel.aff2axcodes names the axis of RAS+ that each voxel axis is closest to; LPS is RAS with x and y turned."""
    rotation = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    affine = np.eye(4)
    affine[:3, :3] = np.diag([-1, -1, 1]) @ rotation
    names = nibabel.aff2axcodes(affine)
    ours = [direction_letters(rotation[:, axis], Kind.PATIENT) for axis in range(3)]
    # nibabel gives every axis a letter of its own; compare where the closest axis is unambiguous
    closest = np.argmax(np.abs(rotation), axis=0)
    if len(set(closest)) == 3:
        assert [name[0] for name in ours] == list(names)


def test_oblique_directions_get_two_letters():
    assert direction_letters((1.0, -0.9, 0.0), Kind.PATIENT) == "LA"
    assert direction_letters((-0.1, 0.0, 1.0), Kind.PATIENT) == "S"
    assert direction_letters((1.0, 0.0, -0.5), Kind.COMPONENT) == "+X −Z"


@pytest.mark.parametrize(("longest", "expected"), [(1.0, 1.0), (9.99, 5.0), (0.049, 0.02), (260, 200), (3.2, 2.0)])
def test_scale_lengths_are_round(longest, expected):
    assert round_length_mm(longest) == pytest.approx(expected)


def test_scale_bar_is_as_long_in_the_picture_as_it_says():
    camera = Camera((0.3, 0.9, 0.1), (0.0, 0.0, 1.0), (5.0, 6.0, 7.0), 0.137, 900, 700)
    bar, text = scale_bar(camera, 50, 60)
    assert isinstance(bar, Stroke) and isinstance(text, Caption)
    length = bar.points[2][0] - bar.points[1][0]
    ends = np.array([[0.0, 0.0, 0.0], camera.axes[0] * float(text.text.split()[0])])
    assert np.ptp(camera.to_pixel(ends), axis=0)[0] == pytest.approx(length, abs=1e-6)


def test_scale_bar_agrees_with_the_grid_in_a_section(patient_views):
    """The block is 48 mm wide: measured in pixels between its edges, it must be 48 mm by the scale bar."""
    view = patient_views["section-axial"]
    bar = next(mark for mark in view.marks if isinstance(mark, Stroke) and mark.role == "scale")
    text = next(mark for mark in view.marks if isinstance(mark, Caption) and mark.role == "scale")
    mm = float(text.text.split()[0]) / (bar.points[2][0] - bar.points[1][0])
    row = view.pixels[(view.pixels.shape[0] - 64) // 2, 48:-48].astype(float)
    inside = np.nonzero(row > row.max() / 2)[0]
    assert (inside[-1] - inside[0] + 1) * mm == pytest.approx(48.0, abs=1.0)
    assert mm == pytest.approx(view.mm_per_pixel)


def test_section_values_agree_with_map_coordinates(make):
    rng = np.random.default_rng(5)
    grid = make.grid((9, 14, 11), (1.3, 0.7, 0.9), (2.0, 1.0, -4.0))
    noise = rng.integers(-900, 900, grid.shape).astype(float)
    lookup = iter([noise])
    volume = make.volume(grid, lambda p: next(lookup))
    index = rng.uniform(0, np.array(grid.shape) - 1, (500, 3))
    ours = make_field(volume).values_at(grid.to_mm(index))
    assert np.allclose(ours, ndimage.map_coordinates(noise, index.T, order=1), atol=0.05)
    assert np.isnan(make_field(volume).values_at(grid.to_mm(np.array([[-0.5, 3.0, 3.0]])))).all()


@pytest.mark.parametrize("axis", [0, 1, 2])
def test_projection_along_the_grid_is_the_maximum_of_numpy(make, axis):
    rng = np.random.default_rng(axis)
    noise = np.rint(ndimage.gaussian_filter(rng.normal(size=(21, 26, 37)), 1.0) * 3000)
    lookup = iter([noise])
    volume = make.volume(make.grid(noise.shape), lambda p: next(lookup))
    sight, up, expected = {
        0: ((0.0, 0.0, 1.0), (0.0, -1.0, 0.0), noise.max(axis=0)),
        1: ((0.0, 1.0, 0.0), (0.0, 0.0, 1.0), noise.max(axis=1)[::-1]),
        2: ((-1.0, 0.0, 0.0), (0.0, 0.0, 1.0), noise.max(axis=2)[::-1]),
    }[axis]
    height, width = expected.shape
    camera = Camera(sight, up, tuple(volume.grid.centre_mm), 1.0, width, height)
    assert np.array_equal(project_maximum(make_field(volume), camera, -1e4), expected.astype(np.float32))


def test_projection_leaves_out_what_is_excluded(make):
    from tomofolio.body.result import Body, Region

    volume = make.volume(make.grid((16, 16, 16)), lambda p: np.where(p[..., 0] > 12, 3000.0, 500.0))
    regions = np.where(volume.stored > 2000, Region.EXCLUDED, Region.OBJECT).astype(np.uint8)
    body = Body(regions, (slice(0, 16), slice(0, 16), slice(0, 13)), None)
    camera = Camera((-1.0, 0.0, 0.0), (0.0, 0.0, 1.0), (7.5, 7.5, 7.5), 1.0, 12, 12)
    assert np.array_equal(project_maximum(make_field(volume, body), camera, 0.0), np.full((12, 12), 500.0))


def test_largest_void_is_outlined_at_its_measured_place_to_a_part_of_a_voxel(make):
    centre, radius = np.array([3.0, -2.0, 1.5]), 4.0

    def value_at(p):
        solid = 1 / (1 + np.exp((np.abs(p).max(axis=-1) - 18) * 4))
        hollow = 1 / (1 + np.exp((np.linalg.norm(p - centre, axis=-1) - radius) * 4))
        return 1000 * solid * (1 - hollow)

    grid = make.grid((48, 48, 48))
    volume = make.volume(make.grid((48, 48, 48), origin=-grid.centre_mm), value_at)
    ranges = make.ranges((0.0, 15.0, 0.6), (1000.0, 20.0, 0.4))
    body = make.body(volume, 500.0)
    views = standard_views(
        volume, ranges, body, make.findings(make.spot(centre, radius)), make_tables(ranges),
        kind=Kind.COMPONENT, wanted=("largest-void",),
    )  # fmt: skip
    assert [view.id for view in views] == ["void-xy", "void-xz", "void-yz"]
    for view in views:
        (line,) = [mark for mark in view.marks if isinstance(mark, Stroke) and mark.role == "outline"]
        points = np.array(line.points) * view.mm_per_pixel
        distances = np.linalg.norm(points - points.mean(axis=0), axis=1)
        assert distances.mean() == pytest.approx(radius, abs=0.1)
        assert np.ptp(distances) < 0.3
        h, w = view.pixels.shape[:2]
        middle = np.array([w / 2, (h - 64) / 2]) * view.mm_per_pixel
        assert np.linalg.norm(points.mean(axis=0) - middle) < 0.1


def test_no_void_views_without_voids(views_of):
    assert views_of(wanted=("largest-void",)) == {}


def test_renders_share_one_scale_and_marks_stay_off_the_middle(patient_views):
    views = [view for view in patient_views.values() if view.kind == "render"]
    assert len(views) == 7 and len({view.mm_per_pixel for view in views}) == 1
    assert max(max(view.pixels.shape[:2]) for view in views) <= 1100
    for view in views:
        h, w = view.pixels.shape[:2]
        for mark in view.marks:
            points = mark.points if isinstance(mark, Stroke) else (mark.at,)
            assert all(not (0.2 * w < x < 0.8 * w and 0.2 * h < y < 0.8 * h) for x, y in points)
        assert view.pixels[0, 0].min() > 240  # light ground
        assert [name for name, _ in view.key.colours] == ["R2", "R3"]


def test_outside_of_the_scan_is_ground_and_not_air(make):
    tilt = np.radians(20)
    direction = np.column_stack(([1.0, 0, 0], [0, np.cos(tilt), np.sin(tilt)], [0.0, 0.0, 1.0]))
    volume = make.volume(
        make.grid((30, 40, 40), direction=direction), lambda p: np.where(np.abs(p[..., 0] - 20) < 9, 900.0, 0.0)
    )
    ranges = make.ranges((0.0, 10.0, 0.5), (900.0, 10.0, 0.5))
    views = standard_views(
        volume, ranges, make.body(volume, 450.0), make.findings(), make_tables(ranges),
        kind=Kind.PATIENT, wanted=("sections",),
    )  # fmt: skip
    sagittal = next(view for view in views if view.id == "section-sagittal")
    assert sagittal.pixels[60, 60] > 240  # a corner that the tilted slices do not reach
    assert (sagittal.pixels < 5).any() or (sagittal.pixels > 200).any()


def test_progress_runs_to_the_end(views_of):
    seen: list[float] = []
    views_of(wanted=("sections", "largest-void"), progress=seen.append)
    assert seen == sorted(seen) and seen[-1] == pytest.approx(1.0)
