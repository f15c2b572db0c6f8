"""Runs against `scipy.ndimage.label` and plain NumPy."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.body.pieces import measure_pieces
from tomofolio.body.runs import find_runs, paint, shared_columns


@pytest.mark.parametrize(("seed", "share"), [(1, 0.02), (2, 0.3), (3, 0.5), (4, 0.9), (5, 0.0), (6, 1.0)])
def test_components_are_those_of_scipy(seed, share):
    rng = np.random.default_rng(seed)
    regions = np.where(rng.random((9, 14, 17)) < share, rng.choice([1, 3], (9, 14, 17)), 0).astype(np.uint8)
    runs = find_runs(regions, [1, 3])
    labels, count = ndimage.label(regions > 0)
    ours = np.zeros(regions.shape, int)
    for row, start, stop, label in zip(runs.row, runs.start, runs.stop, runs.label, strict=True):
        ours[row // 14, row % 14, start:stop] = label + 1
    assert runs.count == count
    # SciPy numbers components by their first voxel in C order, as we do: the label images are the same
    np.testing.assert_array_equal(ours, labels)
    np.testing.assert_array_equal(runs.voxels(), np.bincount(labels.ravel())[1:])
    edge = np.ones(regions.shape, bool)
    edge[1:-1, 1:-1, 1:-1] = False
    np.testing.assert_array_equal(runs.touches_border(), np.isin(np.arange(1, count + 1), labels[edge]))


def test_shared_columns_are_the_faces_between_rows():
    rng = np.random.default_rng(7)
    mask = rng.random((5, 12, 15)) < 0.6
    weight = np.arange(1.0, 6.0)
    runs = find_runs(mask.astype(np.uint8), [1])
    labels, count = ndimage.label(mask)
    pairs = mask[:, 1:] & mask[:, :-1]
    expected = ndimage.sum_labels(pairs * weight[:, None, None], labels[:, 1:], np.arange(1, count + 1))
    np.testing.assert_allclose(shared_columns(runs, weight), expected)


def test_painting_changes_only_chosen_components_and_named_codes():
    regions = np.array([[[1, 1, 0, 3, 3], [0, 0, 0, 0, 0], [1, 3, 0, 1, 0]]], np.uint8)
    runs = find_runs(regions, [1, 3])
    paint(regions, runs.keep(np.array([True, False, True, True])), np.array([False, True, True]), {1: 6})
    np.testing.assert_array_equal(regions, [[[1, 1, 0, 3, 3], [0, 0, 0, 0, 0], [6, 3, 0, 6, 0]]])


def test_figures_of_pieces_are_those_of_numpy_on_a_tilted_uneven_grid(make_grid):
    rng = np.random.default_rng(8)
    mask = rng.random((8, 13, 16)) < 0.35
    grid = make_grid(mask.shape, (0, 0.7, 1.3), np.cumsum(rng.uniform(0.5, 4.0, 8)) - 0.5, tilt_degrees=14)
    pieces = measure_pieces(find_runs(mask.astype(np.uint8), [1]), grid)
    labels, count = ndimage.label(mask)
    for n in range(count):
        k, j, i = np.nonzero(labels == n + 1)
        weights = grid.voxel_volumes_mm3[k]
        assert pieces.volume_mm3[n] == pytest.approx(weights.sum())
        centre = weights @ grid.to_mm(np.column_stack((k, j, i))) / weights.sum()
        np.testing.assert_allclose(pieces.position_mm[n], centre, atol=1e-9)
        np.testing.assert_array_equal(pieces.low[n], [k.min(), j.min(), i.min()])
        np.testing.assert_array_equal(pieces.high[n], [k.max() + 1, j.max() + 1, i.max() + 1])


def test_thickness_of_a_sheet_and_of_a_box_is_their_closed_form(make_grid):
    regions = np.zeros((6, 40, 60), np.uint8)
    regions[:, 5:8, 2:58] = 1
    regions[:, 20:38, 10:30] = 1
    pieces = measure_pieces(find_runs(regions, [1]), make_grid(regions.shape, (2.0, 0.5, 0.25)))
    # 2 A / P of a rectangle a × b is a b / (a + b)
    sheet, box = (1.5, 14.0), (9.0, 5.0)
    np.testing.assert_allclose(pieces.thickness_mm, [a * b / (a + b) for a, b in (sheet, box)])
    np.testing.assert_allclose(pieces.length_mm, [np.hypot(*sheet), np.hypot(*box)])
    np.testing.assert_allclose(pieces.section_variation, 0, atol=1e-6)
