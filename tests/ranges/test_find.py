"""Ranges of phantoms with known materials, from several seeds."""

from __future__ import annotations

import numpy as np
import pytest
from skimage.filters import threshold_otsu

from tomofolio.errors import CallError
from tomofolio.ranges import find_ranges

SEEDS = (1, 2, 3)


def as_int16(values):
    return np.clip(np.rint(values), -32768, 32767).astype(np.int16)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("noise", [60, 400])
def test_two_materials_give_two_ranges_with_the_boundary_half_way(phantoms, seed, noise):
    part = phantoms.part_in_air(seed)
    stored = as_int16(phantoms.draw([part], [1000, 9000], noise, seed))
    ranges = find_ranges(phantoms.to_volume(stored))
    assert [item.background for item in ranges.items] == [True, False]
    assert ranges.items[0].peak == pytest.approx(1000, abs=0.1 * noise)
    assert ranges.items[1].peak == pytest.approx(9000, abs=0.1 * noise)
    assert ranges.items[1].spread == pytest.approx(noise, rel=0.15)
    assert ranges.boundaries[0] == pytest.approx(5000, abs=40)
    # Otsu, IEEE Trans. SMC 9(1) 1979, as in scikit-image: between the two classes.
    assert ranges.items[0].peak < threshold_otsu(stored) < ranges.items[1].peak


def test_a_uniform_scan_has_one_range_and_no_background(phantoms):
    ranges = find_ranges(phantoms.to_volume(as_int16(1000 + 50 * phantoms.grainy((40, 60, 60), 4))))
    (item,) = ranges.items
    assert (item.lower, item.upper, item.background) == (None, None, False)
    assert item.peak == pytest.approx(1000, abs=3)
    assert item.spread == pytest.approx(50, rel=0.03)


def test_names_are_given_in_ascending_order_and_must_be_as_many_as_ranges(phantoms):
    stored = as_int16(phantoms.draw([phantoms.part_in_air(1)], [1000, 9000], 300, 1))
    ranges = find_ranges(phantoms.to_volume(stored), names=("air", "light alloy"), named_by="job sheet")
    assert [(i.id, i.name, i.named_by) for i in ranges.items] == [
        ("R1", "air", "job sheet"),
        ("R2", "light alloy", "job sheet"),
    ]
    with pytest.raises(
        CallError, match=r"3 names are given, but 2 ranges were found .* peaks at 10\d\d, (89|90)\d\d u"
    ):
        find_ranges(phantoms.to_volume(stored), names=("a", "b", "c"))
