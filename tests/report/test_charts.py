"""Charts: what they count and where they put it."""

from __future__ import annotations

import numpy as np
import pytest

from tomofolio.report.chart import Plot, decade_text, round_ticks, tick_texts
from tomofolio.report.histogram import joined_bins, path_length_mm, shown_limits
from tomofolio.report.sizes import size_bins


@pytest.mark.parametrize(("first", "last"), [(-1024.0, 3071.0), (0.0, 1.0), (0.21, 0.29), (-3e-4, 8e-4), (5, 5)])
def test_ticks_are_round_few_and_inside(first, last):
    ticks = round_ticks(first, last)
    assert 1 <= len(ticks) <= 7
    assert all(first - 1e-9 <= tick <= last + 1e-9 for tick in ticks)
    if len(ticks) > 2:
        steps = np.diff(ticks)
        assert steps == pytest.approx(np.full(len(steps), steps[0]))
        assert f"{steps[0]:e}"[0] in "125"


def test_ticks_have_the_decimals_that_their_distance_needs():
    assert tick_texts([-0.5, 0.0, 0.5]) == ["−0.5", "0.0", "0.5"]
    assert tick_texts([-1000, 0, 1000]) == ["−1000", "0", "1000"]


def test_decades_are_written_out_up_to_a_thousand():
    assert [decade_text(p) for p in (0, 3, 4, 12)] == ["1", "1000", "10⁴", "10¹²"]


def test_joining_bins_keeps_the_number_of_voxels():
    centres, counts = np.arange(1000.0), np.arange(1000)
    middles, means = joined_bins(centres, counts, most=90)
    group = 12
    assert len(middles) <= 90
    assert means.sum() * group == pytest.approx(counts.sum())
    assert np.all(np.diff(middles) > 0)


def test_few_bins_stay_as_they_are():
    centres, counts = joined_bins(np.arange(5.0), np.array([1, 0, 3, 0, 2]))
    assert list(counts) == [1, 0, 3, 0, 2] and list(centres) == [0, 1, 2, 3, 4]


def test_all_peaks_and_nearly_all_voxels_are_shown(case_of):
    ranges = case_of().ranges
    first, last = shown_limits(ranges)
    inside = (ranges.histogram.centres >= first) & (ranges.histogram.centres <= last)
    assert ranges.histogram.counts[inside].sum() >= (1 - 3e-6) * ranges.histogram.counts.sum()
    assert all(first < item.peak < last for item in ranges.items)


@pytest.mark.parametrize(("size", "length"), [(100.0, 5.0), (250.0, 10.0), (2.0, 0.1), (33.0, 2.0)])
def test_path_for_the_opacity_is_a_round_twentieth_of_the_object(size, length):
    assert path_length_mm(size) == pytest.approx(length)


@pytest.mark.parametrize("diameters", [[1.0], [1.0, 1.0, 1.0], [0.2, 0.21], list(np.geomspace(0.05, 9, 3000))])
def test_size_bins_hold_every_void(diameters):
    values = np.array(diameters)
    edges = size_bins(values)
    assert np.histogram(values, edges)[0].sum() == len(values)
    assert np.diff(edges) == pytest.approx(np.full(len(edges) - 1, edges[1] - edges[0]))


def test_plot_keeps_points_inside():
    plot = Plot(10, 0, 100, 50, -1.0, 1.0)
    assert (plot.x(-1.0), plot.x(0.0), plot.x(1.0), plot.x(99.0)) == (10, 60, 110, 110)
