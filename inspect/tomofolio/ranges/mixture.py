"""The model of the histogram: a normal density for every material, and mixed voxels between every two of them.

A voxel that holds two materials has any value between them. With every proportion between p and q equally likely, and
normal noise, its density is (Φ((v − a) / s_a) − Φ((v − b) / s_b)) / (b − a), a and b being the values at p and q.
One such step from 0 to 1 is the published model. A blurred edge is steepest in its middle, so proportions near 0 and 1
are more frequent; they are taken from a Gaussian blur, in four steps. With one step the tails of the edges go
to the peaks, which are drawn towards each other.

References
----------
Santago & Gage, IEEE TMI 12(3) (1993) 566–574; Clausnitzer & Hopmans, Advances in Water Resources 22 (1999) 577–584.
Fitted by expectation and maximisation (Dempster, Laird & Rubin, J. R. Stat. Soc. B 39 (1977) 1–38).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from tomofolio.ranges.histogram import Census, ValueAxis
from tomofolio.ranges.peaks import Peak, places_near

Array = NDArray[np.float64]

#: The model is fitted to about so many bins; a finer histogram is joined.
FITTED_BINS = 600
#: A material's standard deviation is at most so many times the one seen in means over seven voxels (√7 = 2.6 where
#: the noise of neighbours is independent).
WIDEST = 3.0
#: A material without noise (cleared air, saturation) is given this standard deviation, in bins.
SMALLEST_SPREAD = 0.125
#: A material's mean stays within this part of that standard deviation around the mean at uniform places.
DRIFT = 0.5
#: A peak in which the stored values end is at least this part as wide as seen in means over seven voxels, so that it
#: does not shrink to the spike at the end.
CUT_NARROWEST = 0.7
#: Proportions between which a mixed voxel's proportion is equally likely, all steps alike: how a straight edge with a
#: Gaussian blur passes through them on its way from -2 to 2 σ, where 2 % at either end count as pure.
PROPORTIONS = ndtr(np.linspace(-2.0, 2.0, 5))
PROPORTIONS[[0, -1]] = 0.0, 1.0
#: The densities of mixed voxels follow means and spreads every so many steps.
FOLLOWED_EVERY = 10
#: Mixed voxels of a smaller share are left out when a fit goes on from another.
NEGLIGIBLE = 1e-5
#: Fitting takes at most so many steps, ...
MOST_STEPS = 150
#: ... and ends when no weight changes by more.
SETTLED = 1e-7


@dataclass(frozen=True)
class Bins:
    """A histogram as the fit sees it: ``edges`` has the shape (bins + 1,), in the unit of the values."""

    edges: Array
    factor: int

    def join(self, counts: NDArray) -> Array:
        """Counts (..., axis bins) joined to the fitted bins."""
        size = (len(self.edges) - 1) * self.factor
        padded = np.zeros((*counts.shape[:-1], size))
        padded[..., : counts.shape[-1]] = counts
        return padded.reshape(*counts.shape[:-1], -1, self.factor).sum(axis=-1)


def fitted_bins(axis: ValueAxis) -> Bins:
    """Bins of a whole number of bins of the axis."""
    factor = max(1, -(-axis.bins // FITTED_BINS))
    bins = -(-axis.bins // factor)
    edges = axis.first + np.arange(bins + 1, dtype=np.float64) * (factor * axis.width)
    return Bins(edges, factor)


@dataclass(frozen=True)
class Mixture:
    """A fitted model. All weights are shares of the voxels and add up to 1.

    ``mean``, ``spread``, ``weight`` have the shape (materials,); ``mixed`` (materials, materials) holds above its
    diagonal the weight of the voxels mixed of two materials.
    """

    mean: Array
    spread: Array
    weight: Array
    mixed: Array

    def shares(self, edges: Array) -> Array:
        """Shape (bins,): the share of the voxels that every bin is expected to hold."""
        pairs = list(combinations(range(len(self.mean)), 2))
        weights = np.array([*self.weight, *(self.mixed[p] for p in pairs)])
        return weights @ _densities(self.mean, self.spread, pairs, edges)


def _densities(mean: Array, spread: Array, pairs: list[tuple[int, int]], edges: Array) -> Array:
    """Shape (materials + pairs, bins): probability of every bin under every part of the model."""
    z = (edges - mean[:, None]) / spread[:, None]
    pure = np.diff(ndtr(z), axis=1)
    if not pairs:
        return pure
    first, second = np.array(pairs).T
    at = mean[first, None] + (mean[second] - mean[first])[:, None] * PROPORTIONS
    between = spread[first, None] + (spread[second] - spread[first])[:, None] * PROPORTIONS
    z = (edges - at[..., None]) / between[..., None]
    ramp = np.diff(between[..., None] * (z * ndtr(z) + np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi)), axis=-1)
    steps = np.diff(at, axis=1)[..., None] * (len(PROPORTIONS) - 1)
    mixed = ((ramp[:, :-1] - ramp[:, 1:]) / steps).sum(axis=1)
    return np.concatenate((pure, np.maximum(mixed, 0.0)))


def start_from(peaks: list[Peak], axis: ValueAxis) -> Mixture:
    """A first guess: the peaks seen at uniform places, all weights alike."""
    n = len(peaks)
    spread = np.array([max(1.5 * p.spread, axis.width / 4) for p in peaks])
    pairs = n * (n - 1) // 2
    mixed = np.triu(np.full((n, n), 1.0 / (n + pairs)), 1)
    return Mixture(np.array([p.value for p in peaks]), spread, np.full(n, 1.0 / (n + pairs)), mixed)


@dataclass(frozen=True)
class Frame:
    """What the fit may not leave; all of shape (materials,).

    A material's mean stays within ``lowest`` and ``highest``, its spread within ``narrowest`` and ``widest``, its
    weight at or above ``least``.
    """

    lowest: Array
    highest: Array
    narrowest: Array
    widest: Array
    least: Array


def frame_of(peaks: list[Peak], axis: ValueAxis) -> Frame:
    """The frame that the peaks seen at uniform places give.

    A material keeps near the mean seen there, so that none takes over another's peak, and has at
    least the voxels that were seen to be pure: a plateau of mixed voxels alone could take them over.
    """
    value = np.array([p.value for p in peaks])
    middle = (value[1:] + value[:-1]) / 2
    narrowest = np.array([max(CUT_NARROWEST * p.spread if p.cut else 0.0, SMALLEST_SPREAD * axis.width) for p in peaks])
    widest = np.array([max(WIDEST * p.spread, axis.width / 2) for p in peaks])
    drift = np.array([max(DRIFT * p.spread, axis.width / 2) for p in peaks])
    return Frame(
        lowest=np.maximum(np.concatenate(([-np.inf], middle)), value - drift),
        highest=np.minimum(np.concatenate((middle, [np.inf])), value + drift),
        narrowest=narrowest,
        widest=widest,
        least=np.array([p.share for p in peaks]),
    )


def raise_least(frame: Frame, model: Mixture, peaks: list[Peak], census: Census) -> Frame:
    """The frame with the least weights raised by what the strictness of "uniform" leaves out.

    Of the pure voxels of the largest material with noise, so and so many are uniform at a level; the same part is
    taken of the others at that level. Never more than the histogram holds near a peak.
    """
    noisy = model.spread > census.axis.width
    if not noisy.any():
        return frame
    main = int(np.argmax(np.where(noisy, model.weight, -1.0)))
    least = frame.least.copy()
    centres, shares = census.axis.centres, census.counts / max(1, census.counts.sum())
    for k, peak in enumerate(peaks):
        limit = peak.share_limit
        part = places_near(peaks[main], census, limit) / (max(1, census.looked_at) * model.weight[main])
        if k == main or part <= 0:
            continue
        near = shares[np.abs(centres - model.mean[k]) <= max(model.spread[k], census.axis.width)].sum()
        least[k] = max(least[k], min(peak.share / min(1.0, part), near))
    return replace(frame, least=least)


def fit(counts: Array, edges: Array, start: Mixture, frame: Frame, most_steps: int = MOST_STEPS) -> Mixture:
    """Fit the model to a histogram by expectation and maximisation.

    Parameters
    ----------
    counts, edges : shapes (bins,) and (bins + 1,).
    start : where to begin; mixed voxels that it leaves out stay left out.
    """
    total = counts.sum()
    n = len(start.mean)
    pairs = [p for p in combinations(range(n), 2) if start.mixed[p] > NEGLIGIBLE]
    mean, spread = start.mean.copy(), start.spread.copy()
    weight = np.array([*start.weight, *(start.mixed[p] for p in pairs)])
    if total <= 0:
        return start
    share = counts / total
    used = share > 0
    centres = (edges[1:] + edges[:-1]) / 2
    within = np.diff(edges)[0] ** 2 / 12
    densities = _densities(mean, spread, pairs, edges)
    for step in range(most_steps):
        if step % FOLLOWED_EVERY:
            densities[:n] = _densities(mean, spread, [], edges)
        else:
            densities = _densities(mean, spread, pairs, edges)
        parts = weight[:, None] * densities
        expected = parts.sum(axis=0)
        ratio = np.where(used, share / np.maximum(expected, 1e-300), 0.0)
        new = parts @ ratio
        pure = parts[:n] * ratio
        mass = np.maximum(pure.sum(axis=1), 1e-300)
        mean_new = pure @ centres / mass
        variance = (pure * (centres - mean_new[:, None]) ** 2).sum(axis=1) / mass - within
        kept = new[:n] > 1e-9
        mean = np.where(kept, np.clip(mean_new, frame.lowest, frame.highest), mean)
        deviation = np.clip(np.sqrt(np.maximum(variance, 0)), frame.narrowest, frame.widest)
        spread = np.where(kept, deviation, spread)
        new[:n] = np.maximum(new[:n], frame.least)
        new /= new.sum()
        change = np.abs(new - weight).max()
        weight = new
        if change < SETTLED:
            break
    mixed = np.zeros((n, n))
    for p, w in zip(pairs, weight[n:], strict=True):
        mixed[p] = w
    return Mixture(mean, spread, weight[:n], mixed)
