"""Where one range ends and the next begins, and how sure that is.

The boundary between two materials is the value above which the model counts as many voxels as there really is of
the upper material: its pure voxels plus half of the mixed ones. Where the peaks stand clear of each other that is
half-way between them, the unbiased place for volumes since a mixed voxel is above it as often as it should be; where
they overlap it moves so that the voxels lost at one side make up for those gained at the other.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr
from scipy.stats import t as student_t

from tomofolio.ranges.histogram import Census
from tomofolio.ranges.materials import Group, Settled
from tomofolio.ranges.mixture import Bins, Frame, Mixture, fit

Array = NDArray[np.float64]

#: Mixed voxels are taken to be at least this share of the smaller material: parts peaks that touch nowhere half-way.
LEAST_MIXED = 0.01
#: Boundaries are sought among so many steps between two peaks.
STEPS = 2048
#: Steps of fitting after a block is left out, from the fit to all blocks.
REFIT_STEPS = 10


def find_boundaries(model: Mixture, settled: Settled, counts: Array, edges: Array) -> Array:
    """Shape (ranges − 1,), ascending."""
    pairs = zip(settled.groups[:-1], settled.groups[1:], strict=True)
    return np.array([_between(model, lower, upper, counts, edges) for lower, upper in pairs])


def _between(model: Mixture, lower: Group, upper: Group, counts: Array, edges: Array) -> float:
    a, b = lower.lead, upper.lead
    if upper.reason == "continuum":
        return _below_continuum(model, a, counts, edges)
    step = (model.mean[b] - model.mean[a]) / STEPS
    at = model.mean[a] + step * np.arange(1, STEPS)
    z_a, z_b = (at - model.mean[a]) / model.spread[a], (at - model.mean[b]) / model.spread[b]
    w_a, w_b = max(model.weight[a], 1e-12), max(model.weight[b], 1e-12)
    mixed = max(model.mixed[min(a, b), max(a, b)], LEAST_MIXED * min(w_a, w_b))
    gained = w_a * ndtr(-z_a) - w_b * ndtr(z_b)
    surplus = gained + mixed * (0.5 - np.arange(1, STEPS) / STEPS)
    n = int(np.searchsorted(-surplus, 0.0))
    return float(at[min(n, len(at) - 1)])


def _below_continuum(model: Mixture, a: int, counts: Array, edges: Array, part: float = 0.5) -> float:
    """Half-way between a peak and the median of all that lies clear above it.

    A material of varying value has no peak to go half-way to; the median of its voxels (or another ``part``) stands
    for it.
    """
    centres = (edges[1:] + edges[:-1]) / 2
    clear = np.where(centres > model.mean[a] + 5 * model.spread[a], counts, 0.0)
    if clear.sum() <= 0:
        return float(model.mean[a] + 5 * model.spread[a])
    typical = np.interp(part, np.cumsum(clear) / clear.sum(), edges[1:])
    return float((model.mean[a] + typical) / 2)


def continuum_doubts(model: Mixture, settled: Settled, counts: Array, edges: Array) -> Array:
    """Shape (ranges − 1,): how far a boundary would move if the first quartile stood for a material of varying value.

    0 for all others. What stands for such a material is a choice, and no resampling shows how much hangs on it.
    """
    doubts = np.zeros(len(settled.groups) - 1)
    for n, (lower, upper) in enumerate(zip(settled.groups[:-1], settled.groups[1:], strict=True)):
        if upper.reason == "continuum":
            ends = [_below_continuum(model, lower.lead, counts, edges, part) for part in (0.25, 0.5)]
            doubts[n] = ends[1] - ends[0]
    return doubts


def jackknife_half_widths(census: Census, bins: Bins, model: Mixture, frame: Frame, settled: Settled) -> Array:
    """Half the 95 % interval of every boundary, from leaving out one block of the scan at a time.

    Blocks of neighbouring slices, not voxels, are left out, since neighbouring voxels are alike (the delete-a-group
    jackknife: Miller, Biometrika 61(1) 1974; for dependent data Künsch, Ann. Statist. 17(3) 1989). Each refit goes on
    from the fit to all blocks. Needs no random numbers.

    Returns
    -------
    shape (ranges − 1,).
    """
    blocks = bins.join(census.blocks)
    blocks = blocks[blocks.sum(axis=1) > 0]
    if len(blocks) < 2:
        return np.zeros(len(settled.groups) - 1)
    total = blocks.sum(axis=0)
    left = []
    for block in blocks:
        refit = fit(total - block, bins.edges, model, frame, REFIT_STEPS)
        left.append(find_boundaries(refit, settled, total - block, bins.edges))
    n = len(blocks)
    variance = (n - 1) / n * ((left - np.mean(left, axis=0)) ** 2).sum(axis=0)
    return student_t.ppf(0.975, n - 1) * np.sqrt(variance)
