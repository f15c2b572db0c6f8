"""What the truth files say holds for the shapes as drawn and for the voxels in the files."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

#: Voxels of noise that carry one independent value between them: (2 √π σ)³ for white noise through a Gaussian of σ.
PER_VALUE = (2 * np.sqrt(np.pi) * 0.6) ** 3

#: Boxes without any edge near: slices, rows, columns.
PLAIN = {"cover": (slice(60, 84), slice(0, 152), slice(0, 8)), "forearm": (slice(2, 70), slice(85, 100), slice(70, 90))}


def void_named(scan, name):
    every = [*scan.truth["closed_voids"], *scan.truth["closed_voids_narrower_than_blur"]]
    (void,) = [v for v in every if v["name"] == name]
    return void


def test_volumes_of_single_voids_are_those_of_spheres_and_ellipsoids(drawing, cover):
    single = {name: parts[0] for name, parts in drawing.cover.VOIDS.items() if len(parts) == 1}
    assert len(single) >= 8
    for name, (_, radii) in single.items():
        a, b, c = np.broadcast_to(radii, 3)
        assert void_named(cover, name)["volume_mm3"] == pytest.approx(4 / 3 * np.pi * a * b * c, rel=1e-9), name
    assert cover.truth["inclusion"]["volume_mm3"] == pytest.approx(4 / 3 * np.pi, rel=1e-9)


def test_branched_void_agrees_with_random_points_in_its_spheres(drawing, cover):
    void = void_named(cover, "branched")
    parts = drawing.cover.VOIDS["branched"]
    centres, radii = np.array([centre for centre, _ in parts]), np.array([radius for _, radius in parts])
    low, high = (centres - radii[:, None]).min(axis=0), (centres + radii[:, None]).max(axis=0)
    points = np.random.default_rng(31).uniform(low, high, (400_000, 3))
    inside = (np.linalg.norm(points[:, None] - centres, axis=2) < radii).any(axis=1)
    share = inside.mean()
    deviation = np.sqrt(share * (1 - share) / len(points))
    assert void["volume_mm3"] / np.prod(high - low) == pytest.approx(share, abs=3 * deviation)
    np.testing.assert_allclose(void["position_mm"], points[inside].mean(axis=0) + drawing.cover.ORIGIN, atol=0.01)


def test_every_void_and_the_inclusion_fill_their_volume_in_the_drawn_cells(drawing, cover):
    module, scanner = drawing.cover, drawing.scanner
    axes = [scanner.cells(0, n, step) for n, step in zip(module.SHAPE, module.SPACING, strict=True)]
    cell = np.prod(module.SPACING) / scanner.FINE**3
    solids = {name: (module.void(name), void_named(cover, name)["volume_mm3"]) for name in module.VOIDS}
    solids["inclusion"] = (module.INCLUSION, cover.truth["inclusion"]["volume_mm3"])
    for name, (solid, volume) in solids.items():
        bounds = zip(axes, solid.low[::-1], solid.high[::-1], strict=True)
        near = [axis[(axis > low - 0.5) & (axis < high + 0.5)] for axis, low, high in bounds]
        filled = drawing.shapes.coverage(solid, *near, splits=module.FINE_SPLITS).sum(dtype=float) * cell
        assert filled == pytest.approx(volume, rel=0.005), name


def test_every_void_lies_whole_in_the_metal(drawing):
    module = drawing.cover
    for name, parts in module.VOIDS.items():
        assert module.PART.distance(*module._surface(parts).T).max() < 0, name


def test_part_volume_does_not_hang_on_the_fineness_of_the_grid(drawing, cover):
    # Another pitch and another place of the cells.
    module = drawing.cover
    step = 0.17
    z, y, x = (np.arange(-0.11, n * s, step) for n, s in zip(module.SHAPE, module.SPACING, strict=True))
    filled = drawing.shapes.coverage(module.PART, z, y, x, splits=3).sum(dtype=float) * step**3
    whole = cover.truth["part_volume_mm3"] + cover.truth["closed_voids_total_mm3"]
    assert filled == pytest.approx(whole, rel=0.001)


def test_plate_of_the_cover_has_the_area_of_a_rounded_square_less_its_bore(drawing):
    # 28² − (4 − π) 4.5² − π 2.6², at a height that pocket and flange do not reach.
    module = drawing.cover
    axis = np.arange(0, 38, 0.1)
    share = drawing.shapes.coverage(module.PART, np.array([5.4, 5.5, 5.6]), axis, axis, splits=3)[1]
    area = share.sum(dtype=float) * 0.01
    assert area == pytest.approx(28**2 - (4 - np.pi) * 4.5**2 - np.pi * 2.6**2, rel=5e-4)


def test_totals_of_the_cover_follow_from_their_parts(cover):
    truth = cover.truth
    every = [*truth["closed_voids"], *truth["closed_voids_narrower_than_blur"]]
    total = sum(void["volume_mm3"] for void in every)
    assert truth["closed_voids_total_mm3"] == pytest.approx(total)
    assert truth["porosity_percent"] == pytest.approx(100 * total / (truth["part_volume_mm3"] + total))
    width = 2 * np.sqrt(2 * np.log(2)) * truth["blur_sigma_with_voxel_mm"]
    assert all(v["equivalent_diameter_mm"] < width for v in truth["closed_voids_narrower_than_blur"])
    assert all(v["equivalent_diameter_mm"] > width for v in truth["closed_voids"])


def test_ligaments_agree_with_plane_geometry(cover):
    # By hand from the drawing: to the lower face, to the floor of the cavity, to the bore, to a side, to the other end.
    expected = {
        "near the lower face": 0.75,
        "large sphere": 6.1 - 1.5 - 2.9,
        "sphere 4 voxels": 6.15 - 0.5 - 2.9,
        "sphere 3.5 voxels": np.hypot(0.3, 3.8) - 2.6 - 0.4375,
        "sphere 6 voxels": 7.6 - 0.75 - 4.9,
        "flat ellipsoid": 6.0 - 0.6 - 2.9,
    }
    for name, ligament in expected.items():
        assert void_named(cover, name)["ligament_mm"] == pytest.approx(ligament, abs=0.01), name
    assert cover.truth["inclusion"]["ligament_mm"] == pytest.approx(11.3 - 8.6 - 1.0, abs=0.01)


def test_touching_pair_touches_in_one_point(cover):
    one, other = void_named(cover, "touching pair, larger"), void_named(cover, "touching pair, smaller")
    apart = np.linalg.norm(np.subtract(one["position_mm"], other["position_mm"]))
    assert apart == pytest.approx((one["equivalent_diameter_mm"] + other["equivalent_diameter_mm"]) / 2)


def test_every_void_is_dark_and_the_inclusion_bright_at_its_place(cover):
    origin, step = np.array([float(v) for v in cover.headers[0].ImagePositionPatient]), 0.25
    levels = cover.truth["levels"]

    def around(position):
        x, y, z = np.rint((np.array(position) - origin) / step).astype(int)
        return cover.values[z - 1 : z + 2, y - 1 : y + 2, x - 1 : x + 2].mean()

    for void in cover.truth["closed_voids"]:
        assert around(void["position_mm"]) < levels["aluminium"] - 300, void["name"]
    assert around(cover.truth["inclusion"]["position_mm"]) > levels["iron-like"] - 200
    assert around(cover.truth["open_pocket"]["centre_mm"]) < levels["air"] + 200


def test_noise_of_a_plain_box_is_what_the_truth_says(scan):
    box = scan.values[PLAIN[scan.name]].astype(float)
    independent = box.size / PER_VALUE
    level = scan.truth["levels"]["air" if scan.name == "cover" else "muscle-like"]
    assert box.mean() == pytest.approx(level, abs=3.5 * scan.truth["noise"] / np.sqrt(independent))
    # The variance's own spread: √(2 / n) of it, with fewer voxels to one value, because correlations enter squared.
    assert box.std() == pytest.approx(scan.truth["noise"], rel=3.5 / np.sqrt(2 * independent) + 0.005)


def test_neighbours_in_noise_are_as_alike_as_filtered_white_noise(scan):
    # White noise through weights w: the correlation one voxel apart is Σ w[n] w[n+1] / Σ w[n]².
    weights = stats.norm.pdf(np.arange(-4, 5) / scan.truth["noise_filter_sigma_voxels"])
    expected = (weights[1:] * weights[:-1]).sum() / (weights**2).sum()
    box = scan.values[PLAIN[scan.name]].astype(float)
    box -= box.mean()
    for axis in range(3):
        one, other = (np.take(box, np.arange(a, box.shape[axis] - 1 + a), axis) for a in (0, 1))
        assert (one * other).mean() / box.var() == pytest.approx(expected, abs=4 / np.sqrt(box.size / PER_VALUE))


def test_nothing_in_the_cover_is_cut_off(cover):
    assert cover.stored.min() > 0 and cover.stored.max() < 4095


def test_air_of_the_forearm_is_cut_off_as_twelve_bits_from_the_lowest_number_do(forearm):
    # A normal distribution of whole numbers, all below the lowest counted with it.
    truth = forearm.truth
    air = forearm.values[:, :18, :].astype(float)
    noise = stats.norm(truth["levels"]["air"], truth["noise"])
    lowest = truth["cut_off_below"]
    numbers = np.arange(lowest, -800)
    shares = np.diff(noise.cdf(np.append(numbers, -800) - 0.5))
    shares[0] = noise.cdf(lowest + 0.5)
    mean = (numbers * shares).sum()
    assert forearm.values.min() == lowest
    assert (air == lowest).mean() == pytest.approx(shares[0], abs=0.01)
    assert air.mean() == pytest.approx(mean, abs=0.5)


def test_lower_face_of_the_cover_is_blurred_as_the_truth_says(cover):
    # A plane through a Gaussian and a voxel: the normal distribution's integral averaged over the voxel. The columns
    # keep away from bore, pocket, voids and sides.
    truth, origin = cover.truth, float(cover.headers[0].ImagePositionPatient[2])
    columns = cover.values[:22, 32:48, 84:112]
    profile = columns.mean(axis=(1, 2))
    face = truth["lower_face_z_mm"] - origin
    edge = stats.norm(face, truth["blur_sigma_mm"])
    step = 0.25
    expected = np.array([integrate.quad(edge.cdf, (k - 0.5) * step, (k + 0.5) * step)[0] / step for k in range(22)])
    air, metal = profile[:8].mean(), profile[16:22].mean()
    found = (profile - air) / (metal - air)
    deviation = truth["noise"] / (metal - air) / np.sqrt(columns[0].size / PER_VALUE ** (2 / 3))
    np.testing.assert_allclose(found, expected, atol=4 * deviation)
    # And the check can tell: an eighth more or less blur is seen.
    for wrong in (0.875, 1.125):
        other = stats.norm(face, wrong * truth["blur_sigma_mm"])
        off = [integrate.quad(other.cdf, (k - 0.5) * step, (k + 0.5) * step)[0] / step for k in range(22)]
        assert np.abs(found - off).max() > 4 * deviation


def test_metal_is_darker_in_the_middle_by_no_more_than_the_cupping(cover):
    levels, cupping = cover.truth["levels"], cover.truth["cupping"]
    contrast = levels["aluminium"] - levels["air"]
    middle = cover.values[28:33, 66:86, 66:80].astype(float)
    lost = (levels["aluminium"] - middle.mean()) / contrast
    deviation = cover.truth["noise"] / contrast / np.sqrt(middle.size / PER_VALUE)
    assert 0.5 * cupping < lost < cupping + 3 * deviation
    wall = cover.values[44:50, 40:112, 23:28]
    assert wall.mean() - middle.mean() > 0.5 * cupping * contrast


def test_sampled_volumes_of_the_forearm_agree_with_the_closed_forms(forearm):
    # Areas of ellipses integrated along the arm by SciPy's quadrature, from the diameters that the truth lists.
    truth, sampled = forearm.truth, forearm.truth["sampled_volumes_mm3"]
    length = 72 * 1.25

    def along(first, last):
        return integrate.quad(lambda u: np.pi / 4 * (first + (last - first) * u) ** 2, 0, 1)[0] * length

    outer = sum(along(*bone["mean_outer_diameters_mm"]) for bone in truth["bones"])
    inner = sum(along(*bone["mean_inner_diameters_mm"]) for bone in truth["bones"])
    assert truth["dense_wall_volume_mm3"] == pytest.approx(outer - inner, rel=1e-9)
    assert truth["marrow_volume_mm3"] == pytest.approx(inner, rel=1e-9)
    assert sampled["dense wall"] == pytest.approx(outer - inner, rel=0.005)
    assert sampled["marrow-like"] == pytest.approx(inner, rel=0.005)
    arm = integrate.quad(lambda u: np.pi * 35 * 29 * (0.84 + 0.16 * u) ** 2, 0, 1)[0] * length
    assert truth["arm_volume_mm3"] == pytest.approx(arm, rel=1e-9)
    inside = sum(sampled[name] for name in ("fat-like", "muscle-like", "marrow-like", "dense wall"))
    assert inside == pytest.approx(arm, rel=0.001)
    assert sampled["marker"] == pytest.approx(4 * 4 / 3 * np.pi * 2.0**3, rel=0.005)
    assert sum(sampled.values()) == pytest.approx(72 * 160 * 160 * 1.25 * 0.625**2, rel=1e-6)


def test_materials_of_the_forearm_have_their_levels(forearm):
    levels = forearm.truth["levels"]
    # In the layer under the skin, in the muscle between the bones, and on the crest of the walls.
    fat, muscle = forearm.values[34:40, 68:73, 31:34], forearm.values[30:42, 85:95, 75:85]
    assert np.mean(muscle) == pytest.approx(levels["muscle-like"], abs=5)
    assert np.mean(fat) == pytest.approx(levels["fat-like"], abs=30)
    middle = forearm.values[34:38]
    assert np.percentile(middle[middle > 900], 75) == pytest.approx(levels["dense wall"], abs=60)


def test_marker_lies_on_the_patients_left_and_reads_as_an_l(forearm):
    # LPS: x grows to the patient's left and y to the back; lying on the back, head first, nothing turns that round.
    truth, first = forearm.truth, forearm.headers[0]
    assert truth["marker_side"] == "left" and first.PatientPosition == "HFS"
    origin = np.array([float(v) for v in first.ImagePositionPatient])
    orientation = [float(v) for v in first.ImageOrientationPatient]
    along_columns, along_rows = np.array(orientation[:3]), np.array(orientation[3:])
    up = float(forearm.headers[1].ImagePositionPatient[2]) - origin[2]
    k, row, column = np.nonzero(forearm.values > 1700)
    found = (
        origin
        + np.outer(column * float(first.PixelSpacing[1]), along_columns)
        + np.outer(row * float(first.PixelSpacing[0]), along_rows)
        + np.outer(k * up, (0, 0, 1))
    )
    # The arm's own axis lies at x = 0.
    assert found[:, 0].min() > 25
    beads = np.array(truth["marker_centres_mm"])
    nearest = np.linalg.norm(found[:, None] - beads, axis=2).argmin(axis=1)
    for n, bead in enumerate(beads):
        np.testing.assert_allclose(found[nearest == n].mean(axis=0), bead, atol=0.25)
    # Three along the arm, and the foot of the L beside the last, towards the front.
    assert np.ptp(beads[:3, 2]) == 40 and beads[3, 2] == beads[2, 2] and beads[3, 1] < beads[2, 1] - 10


def test_table_lies_under_the_arm_with_a_gap(forearm):
    column = forearm.values[30:42, :, 80].mean(axis=0)
    arm_end = int(np.nonzero(column[:125] > -500)[0].max())
    beyond = column[arm_end + 3 :]
    gap, table = beyond[beyond < -900], beyond[beyond > -600]
    assert len(gap) >= 6 and len(table) >= 3
    assert forearm.truth["table_gap_mm"] > 5
