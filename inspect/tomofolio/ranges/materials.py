"""From peaks to materials: which peaks are one range, and which range surrounds the object.

A range is a group of neighbouring peaks. Most groups hold one peak; what joins peaks is stated rule by rule below.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tomofolio.ranges.histogram import Census
from tomofolio.ranges.mixture import Mixture
from tomofolio.ranges.peaks import VALLEY, Peak, emptiest_between, places_near

Array = NDArray[np.float64]

#: A report has at most so many ranges.
MOST_RANGES = 6
#: The lowest range is background from this share of the lateral border on.
BORDER_SHARE = 0.25
#: ... when what is brighter fills at least this share of the scan, ...
LEAST_OBJECT = 1e-3
#: ... and its share of the border is less than this part of its share of the scan.
RARER_AT_BORDER = 0.85
#: Two peaks nearer than this share of the upper one's contrast to the background are one uneven material: beam
#: hardening and scatter shift a material's value by up to about a tenth (common practice, no source).
UNEVEN_SHARE = 0.07
#: Two peaks farther apart than this many times the sum of their spreads stand clear of each other, ...
CLEAR = 3.5
#: ... and should then leave less than this share of the lower one's height between them.
EMPTY = 0.1
#: A peak wider than so many times the difference that its uniform places allow drifts: noise alone cannot spread it.
DRIFTING = 1.5
#: What lies near the background (foam, wrapping, a cushion) belongs to it when its share × contrast² is less than this
#: part of the main material's: it hardly adds to the variance between the classes that a threshold is there to part.
PACKING_SHARE = 5e-4
#: Two peaks with this many times their own voxels between them are one material of varying value (bone).
CONTINUUM_RATIO = 3.0
#: What shows no peak is one too from this share of the object on; less are grains too small to have a pure voxel.
CONTINUUM_SHARE = 0.02
#: A spike whose next peak is reached without mixed voxels (less than this share of it) is padding, not a material.
PADDING_MIXED = 1e-3
#: A peak narrower than this many bins has no noise: cleared air, padding, saturation.
SPIKE_BINS = 0.6


@dataclass(frozen=True)
class Group:
    """Peaks of one range. ``lead`` is the one that stands for the range; ``reason`` says what joined them."""

    members: tuple[int, ...]
    lead: int
    reason: str = ""


@dataclass(frozen=True)
class Settled:
    """Groups in ascending order and, where there is one, the first as background."""

    groups: tuple[Group, ...]
    background: bool


def settle(census: Census, peaks: list[Peak], model: Mixture, pure: Array) -> Settled:
    """Join the peaks that are one range, and decide whether the lowest is background.

    ``pure`` (shape (materials,)) is the share of the voxels that uniform places show to be of each peak.
    """
    groups = [Group((i,), i, "continuum" if p.tail > CONTINUUM_SHARE else "") for i, p in enumerate(peaks)]
    background = _surrounding(groups, census, model)
    if background is not None:
        groups, background = _leave_padding(groups, background, census, model)
        groups = _join_below(groups, background, model)
        groups = _join_packing(groups, census, peaks, model)
    groups = _join_continuum(groups, census, peaks, model, pure) if len(groups) > 2 else groups
    groups = _join_uneven(groups, census, peaks, model, background is not None)
    while len(groups) > MOST_RANGES:
        groups = _drop_smallest(groups, model)
    return Settled(tuple(groups), background is not None)


def _surrounding(groups: list[Group], census: Census, model: Mixture) -> int | None:
    """The group that surrounds the object, if one does.

    It holds more of the lateral border than any other, nothing but spikes (padding, clipped values) is darker, and
    what is brighter is rarer at the border than in the scan: the matrix of a piece that fills the field of view is
    as frequent at the border as anywhere.
    """
    lead = np.array([g.lead for g in groups])
    middle = (model.mean[lead][1:] + model.mean[lead][:-1]) / 2
    where = np.searchsorted(middle, census.axis.centres)
    border = np.bincount(where, census.border, minlength=len(groups)) / max(1, census.border.sum())
    volume = np.bincount(where, census.counts, minlength=len(groups)) / max(1, census.counts.sum())
    g = int(np.argmax(border))
    darker_are_spikes = bool(np.all(model.spread[lead[:g]] < SPIKE_BINS * census.axis.width))
    brighter = volume[g + 1 :].sum()
    if border[g] < BORDER_SHARE or not darker_are_spikes or brighter < LEAST_OBJECT:
        return None
    return g if border[g + 1 :].sum() < RARER_AT_BORDER * brighter else None


def _leave_padding(groups: list[Group], background: int, census: Census, model: Mixture) -> tuple[list[Group], int]:
    """A leftover spike of padding below the air: count it with the air, which then is the background."""
    width = census.axis.width
    is_spike = [model.spread[g.lead] < SPIKE_BINS * width for g in groups]
    above = next((g for g in range(background + 1, len(groups)) if not is_spike[g]), len(groups))
    if not is_spike[background] or above + 1 >= len(groups):
        return groups, background
    spike, next_peak = groups[background].lead, groups[above].lead
    low, high = model.mean[spike] + 2 * width, model.mean[next_peak] - 6 * model.spread[next_peak]
    apart = (census.axis.centres > low) & (census.axis.centres < high)
    for g in groups[background + 1 : above]:
        apart &= np.abs(census.axis.centres - model.mean[g.lead]) > 2 * width
    between = census.counts[apart].sum()
    if high > low and between < PADDING_MIXED * model.weight[next_peak] * census.counts.sum():
        return groups, above
    return groups, background


def _join_below(groups: list[Group], background: int, model: Mixture) -> list[Group]:
    """All below the background's peak (padding, clipped ends) counts with it: nothing is darker than air."""
    members = tuple(i for g in groups[: background + 1] for i in g.members)
    reason = "below" if background else ""
    return [Group(members, groups[background].lead, reason), *groups[background + 1 :]]


def _join_packing(groups: list[Group], census: Census, peaks: list[Peak], model: Mixture) -> list[Group]:
    """What is faint and rare beside the main material, and next to the background, counts with the background.

    How rare is judged by uniform places at one level: mixed voxels of other materials have any value between.
    """
    air = model.mean[groups[0].lead]
    contrast = model.mean[[g.lead for g in groups]] - air
    weight = np.where(np.arange(len(groups)) > 0, model.weight[[g.lead for g in groups]], -1.0)
    main = groups[int(np.argmax(weight * contrast**2))].lead
    while len(groups) > 2 and groups[1].lead != main:
        faint = peaks[groups[1].lead]
        frequency = places_near(faint, census, faint.share_limit)
        frequency /= max(1.0, places_near(peaks[main], census, faint.share_limit))
        if frequency * ((faint.value - air) / (model.mean[main] - air)) ** 2 >= PACKING_SHARE:
            break
        groups = [_joined(groups[0], groups[1], groups[0].lead, "packing"), *groups[2:]]
    return groups


def _join_continuum(groups: list[Group], census: Census, peaks: list[Peak], model: Mixture, pure: Array) -> list[Group]:
    """The peaks above the main material's, with far more voxels among them than in them, are one of varying value.

    Only those: between others the mixed voxels of third materials lie too. ``pure`` (shape (materials,)) is the share
    of the voxels that is seen to be pure.
    """
    main = int(np.argmax([model.weight[g.lead] * (n > 0) for n, g in enumerate(groups)]))
    centres, shares = census.axis.centres, census.counts / max(1, census.counts.sum())
    material = shares[centres > (model.mean[groups[0].lead] + model.mean[groups[1].lead]) / 2].sum()
    for first in range(main + 1, len(groups) - 1):
        members = [i for g in groups[first:] for i in g.members]
        lowest = peaks[members[0]]
        among = shares[centres > lowest.value - 3 * lowest.spread].sum()
        if among > CONTINUUM_SHARE * material and among > (1 + CONTINUUM_RATIO) * pure[members].sum():
            return [*groups[:first], Group(tuple(members), members[0], "continuum")]
    return groups


def _join_uneven(
    groups: list[Group], census: Census, peaks: list[Peak], model: Mixture, background: bool
) -> list[Group]:
    """Peaks too near each other, beside their contrast to the background, are one uneven material.

    So are peaks that stand clear of each other and yet have uniform places at all values between.
    """
    air = model.mean[groups[0].lead]
    g = 0
    while g + 1 < len(groups):
        a, b = groups[g].lead, groups[g + 1].lead
        distance = model.mean[b] - model.mean[a]
        near = background and g > 0 and distance < UNEVEN_SHARE * (model.mean[b] - air)
        clear = distance > CLEAR * (peaks[a].spread + peaks[b].spread)
        drifting = max(p.spread / max(p.used_limit, census.axis.width) for p in (peaks[a], peaks[b])) > DRIFTING
        touching = emptiest_between(peaks[a], peaks[b], census) > (EMPTY if clear or drifting else VALLEY)
        if near or touching:
            lead = a if model.weight[a] >= model.weight[b] else b
            groups = [*groups[:g], _joined(groups[g], groups[g + 1], lead, "uneven"), *groups[g + 2 :]]
        else:
            g += 1
    return groups


def _drop_smallest(groups: list[Group], model: Mixture) -> list[Group]:
    """Join the smallest range that is not the first to its nearer neighbour."""
    weight = [model.weight[list(g.members)].sum() for g in groups]
    g = 1 + int(np.argmin(weight[1:]))
    near = [n for n in (g - 1, g + 1) if 0 <= n < len(groups)]
    other = min(near, key=lambda n: abs(model.mean[groups[n].lead] - model.mean[groups[g].lead]))
    low, high = sorted((g, other))
    lead = groups[low].lead if weight[low] >= weight[high] else groups[high].lead
    return [*groups[:low], _joined(groups[low], groups[high], lead, "many"), *groups[high + 1 :]]


def _joined(first: Group, second: Group, lead: int, reason: str) -> Group:
    return Group(first.members + second.members, lead, reason or first.reason or second.reason)
