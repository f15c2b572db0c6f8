"""Peaks of a curve, and which of them are materials."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import find_peaks as scipy_find_peaks

from tomofolio.ranges.histogram import take_census
from tomofolio.ranges.peaks import find_peaks, prominent


def _tops(curve, valley=0.5):
    return [top for top, _, _ in prominent(np.array(curve, float), valley)]


def test_a_top_needs_a_valley_at_both_sides():
    assert _tops([0, 4, 10, 4, 0]) == [2]
    assert _tops([0, 10, 6, 9, 0]) == [1]
    assert _tops([0, 10, 4, 9, 0]) == [1, 3]
    assert _tops([10, 4, 0, 0, 3]) == [0, 4]
    assert _tops([0, 0, 0]) == []


def test_tops_are_those_whose_prominence_is_half_their_height():
    # scipy.signal.find_peaks gives the topographic prominence; a top that stands out by half its height has it.
    random = np.random.default_rng(8)
    for _ in range(20):
        curve = np.exp(np.cumsum(random.normal(0, 0.3, 200)))
        curve[[0, -1]] = 0
        tops, facts = scipy_find_peaks(curve, prominence=0)
        expected = tops[facts["prominences"] > 0.5 * curve[tops]]
        assert set(expected) <= set(_tops(curve))


@pytest.mark.parametrize("noise", [50, 300])
def test_a_plateau_of_mixed_voxels_is_no_peak(phantoms, noise):
    # blur of three voxels: more mixed voxels than pure ones in the part
    values = phantoms.draw([phantoms.part_in_air(2)], [1000, 9000], noise, 2, blur=3.0)
    peaks = find_peaks(take_census(phantoms.to_volume(np.rint(values).astype(np.int16))))
    assert len(peaks) == 2
    assert [p.value for p in peaks] == pytest.approx([1000, 9000], abs=200)


def test_a_material_between_two_others_is_seen_within_their_plateau(phantoms):
    part = phantoms.part_in_air(3)
    inner = phantoms.balls_in(part.shape, [(32, 30, 66), (32, 50, 26)], [8, 8])
    values = phantoms.draw([part, inner], [1000, 9000, 5000], 150, 3)
    peaks = find_peaks(take_census(phantoms.to_volume(np.rint(values).astype(np.int16))))
    assert [p.value for p in peaks] == pytest.approx([1000, 5000, 9000], abs=60)
