"""Real scans that were not drawn by anyone here."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tomofolio.ranges import find_ranges


def test_engine_block_shows_cleared_air_and_two_metals(engine):
    ranges = find_ranges(engine)
    air, light, hard = ranges.items
    assert air.background
    assert air.peak == pytest.approx(0, abs=0.5)
    assert 138 < light.peak < 147  # the mode of the histogram between 100 and 200 is 143
    assert hard.peak > 200
    assert 60 < light.lower < 80
    assert 175 < hard.lower < 215
    assert "ranges-saturated" in {remark.code for remark in ranges.remarks}


def test_engine_block_keeps_its_ranges_in_parts_of_the_scan(engine):
    whole = find_ranges(engine)
    for pick in (slice(0, 64), slice(30, 50)):
        grid = replace(engine.grid, slice_positions_mm=engine.grid.slice_positions_mm[pick] - pick.start)
        part = replace(
            engine, stored=engine.stored[pick], slope=engine.slope[pick], intercept=engine.intercept[pick], grid=grid
        )
        ranges = find_ranges(part)
        assert len(ranges.items) == len(whole.items)
        assert ranges.boundaries == pytest.approx(whole.boundaries, abs=8)


@pytest.mark.parametrize("padding_known", [True, False])
def test_head_shows_air_fat_soft_tissue_and_bone(head, padding_known):
    volume = head if padding_known else replace(head, no_data=None)
    ranges = find_ranges(volume)
    air, fat, soft, bone = ranges.items
    # CT numbers: air −1000 by definition; fat about −100, soft tissue 20 to 60, bone above 150 (from memory).
    assert air.background
    assert air.peak == pytest.approx(-1000, abs=10)
    assert -120 < fat.peak < -70
    assert 20 < soft.peak < 60
    assert -700 < fat.lower < -400
    assert -70 < soft.lower < 0
    assert 150 < bone.lower < 400
    low, high = bone.lower_95
    assert high - low > 50  # where a material without a peak begins is a choice, and the interval shows it
    assert "ranges-continuum" in {remark.code for remark in ranges.remarks}
    if padding_known:
        assert ranges.histogram.counts.sum() == np.count_nonzero(head.stored != -1500)
