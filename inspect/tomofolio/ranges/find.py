"""The public step of this room: from a volume to its value ranges."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from tomofolio.errors import CallError
from tomofolio.ranges.boundaries import continuum_doubts, find_boundaries, jackknife_half_widths
from tomofolio.ranges.histogram import Census, take_census
from tomofolio.ranges.materials import Group, Settled, settle
from tomofolio.ranges.mixture import Bins, Frame, Mixture, fit, fitted_bins, frame_of, raise_least, start_from
from tomofolio.ranges.peaks import Peak, find_peaks
from tomofolio.ranges.result import Histogram, Interval, Ranges, ValueRange
from tomofolio.ranges.words import remarks_about
from tomofolio.volume import Unit, Volume

Array = NDArray[np.float64]

#: Two-sided 95 % of a normal distribution.
COVERAGE_95 = 1.96
#: Part of the distance between two peaks by which their half-way value may be off because edges are not as straight
#: as the model has them: about what phantoms with balls and bores show.
MODEL_DOUBT = 0.002


def find_ranges(volume: Volume, *, names: Sequence[str] = (), named_by: str = "") -> Ranges:
    """Find the value ranges of the materials or tissues that the scan's own histogram shows.

    Peaks are found at uniform places (`peaks`), a model of normal densities and mixed voxels is fitted to the
    histogram of all voxels (`mixture`), peaks that are one material are joined (`materials`), and boundaries with
    95 % intervals follow from the model (`boundaries`).

    Parameters
    ----------
    volume : voxels of ``no_data`` are left out.
    names : one for every range in ascending order, or none.
    named_by : who gave the names.

    Raises
    ------
    CallError : the number of names is not the number of ranges found.
    """
    census = take_census(volume)
    axis, bins = census.axis, fitted_bins(census.axis)
    peaks = find_peaks(census)
    frame = frame_of(peaks, axis)
    counts = bins.join(census.counts)
    model = fit(counts, bins.edges, start_from(peaks, axis), frame)
    frame = raise_least(frame, model, peaks, census)
    model = fit(counts, bins.edges, model, frame)
    settled = settle(census, peaks, model, frame.least)
    seen = _at_uniform_places(model, peaks)
    boundaries = find_boundaries(seen, settled, counts, bins.edges)
    if names and len(names) != len(settled.groups):
        raise CallError(
            _wrong_number(len(names), [model.mean[g.lead] for g in settled.groups], volume.unit),
            remedy="Give one name for every range, in ascending order, or none",
        )
    intervals: list[Interval] = []
    if len(boundaries):
        half = _half_widths(census, bins, model, frame, settled, peaks, boundaries)
        intervals = [(float(b - h), float(b + h)) for b, h in zip(boundaries, half, strict=True)]
    items = []
    for n, group in enumerate(settled.groups):
        peak, spread = _peak_and_spread(group, seen, census, boundaries, n)
        name = names[n] if names else f"R{n + 1}"
        items.append(
            ValueRange(
                id=f"R{n + 1}",
                name=name,
                named_by=named_by if names else "",
                lower=float(boundaries[n - 1]) if n else None,
                lower_95=intervals[n - 1] if n else None,
                upper=float(boundaries[n]) if n < len(boundaries) else None,
                upper_95=intervals[n] if n < len(boundaries) else None,
                peak=peak,
                spread=spread,
                pure_share=float(_pure_share(group, model)),
                background=settled.background and n == 0,
            )
        )
    centres = axis.centres
    edges = np.append(centres - axis.width / 2, centres[-1] + axis.width / 2)
    expected = model.shares(edges) * census.counts.sum()
    histogram = Histogram(centres, census.counts, axis.width)
    remarks = remarks_about(settled, peaks, model, boundaries, volume.unit, _is_saturated(settled, model, census))
    return Ranges(tuple(items), histogram, expected, remarks)


def _peak_and_spread(group: Group, model: Mixture, census: Census, boundaries: Array, n: int) -> tuple[float, float]:
    """Of the leading peak; of all voxels in the range where it is a material of varying value."""
    if group.reason != "continuum":
        return float(model.mean[group.lead]), float(model.spread[group.lead])
    centres = census.axis.centres
    inside = centres >= boundaries[n - 1] if n else np.ones(len(centres), bool)
    if n < len(boundaries):
        inside &= centres < boundaries[n]
    weight = census.counts * inside
    if weight.sum() <= 0:
        return float(model.mean[group.lead]), float(model.spread[group.lead])
    mean = float(np.average(centres, weights=weight))
    return mean, float(np.sqrt(np.average((centres - mean) ** 2, weights=weight)))


def _is_saturated(settled: Settled, model: Mixture, census: Census) -> bool:
    """Whether the uppermost peak has no noise, though others have, and lies where the values end."""
    lead, width = settled.groups[-1].lead, census.axis.width
    noisy = bool(np.any(model.spread > width))
    end = census.axis.centres[np.flatnonzero(census.counts)[-1]] if census.counts.any() else np.inf
    return noisy and bool(model.spread[lead] < width / 2 and model.mean[lead] > end - 2 * width)


def _pure_share(group: Group, model: Mixture) -> float:
    """Pure voxels of a range's peaks and those mixed of them alone."""
    members = list(group.members)
    return min(1.0, model.weight[members].sum() + model.mixed[np.ix_(members, members)].sum())


def _at_uniform_places(model: Mixture, peaks: list[Peak]) -> Mixture:
    """The model with the means seen at uniform places, which mixed voxels hardly reach."""
    return replace(model, mean=np.array([p.value for p in peaks]))


def _half_widths(
    census: Census,
    bins: Bins,
    model: Mixture,
    frame: Frame,
    settled: Settled,
    peaks: list[Peak],
    boundaries: Array,
) -> Array:
    """Half the 95 % interval of every boundary.

    Six parts, added in quadrature: how the boundary changes when blocks of the scan are left out, the standard
    error of the two peaks, the difference to the boundary with the means that the model fits to all voxels (what the
    model cannot describe), the choice of what stands for a material of varying value, `MODEL_DOUBT`, and the width
    of a bin.
    """
    drawn = jackknife_half_widths(census, bins, model, frame, settled)
    errors = np.array([peaks[g.lead].value_error for g in settled.groups])
    sampled = COVERAGE_95 * np.hypot(errors[1:], errors[:-1]) / 2
    counts = bins.join(census.counts)
    doubt = find_boundaries(model, settled, counts, bins.edges) - boundaries
    choice = continuum_doubts(model, settled, counts, bins.edges)
    lead = np.array([peaks[g.lead].value for g in settled.groups])
    shape = MODEL_DOUBT * np.diff(lead)
    return np.sqrt(drawn**2 + sampled**2 + doubt**2 + choice**2 + shape**2 + census.axis.width**2 / 12)


def _wrong_number(given: int, peaks: list[float], unit: Unit) -> str:
    found = ", ".join(f"{peak:.4g}" for peak in peaks)
    ranges = "1 range was" if len(peaks) == 1 else f"{len(peaks)} ranges were"
    names = "1 name is" if given == 1 else f"{given} names are"
    return f"{names} given, but {ranges} found in the scan, with peaks at {found} {unit.symbol}".rstrip()
