"""The model against closed forms, and its fit against the truth that samples were drawn from."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy.stats import norm

from tomofolio.ranges.histogram import ValueAxis
from tomofolio.ranges.mixture import PROPORTIONS, Mixture, fit, fitted_bins, frame_of, start_from
from tomofolio.ranges.peaks import Peak

EDGES = np.linspace(-100, 400, 501)


def _model(weight, mixed, mean=(0.0, 200.0), spread=(10.0, 10.0)):
    table = np.zeros((2, 2))
    table[0, 1] = mixed
    return Mixture(np.array(mean), np.array(spread), np.array(weight), table)


def test_pure_parts_are_normal():
    shares = _model([1.0, 0.0], 0.0).shares(EDGES)
    np.testing.assert_allclose(shares, np.diff(norm.cdf(EDGES, 0, 10)), atol=1e-12)


def test_mixed_voxels_have_the_published_density_between_two_proportions():
    # Santago & Gage, IEEE TMI 12(3) 1993: (Φ((v−a)/s) − Φ((v−b)/s)) / (b − a), here one piece for every step of
    # proportions, integrated numerically instead of in closed form.
    shares = _model([0.0, 0.0], 1.0).shares(EDGES)
    fine = np.linspace(EDGES[0], EDGES[-1], 50001)
    density = np.zeros_like(fine)
    ends = 200 * PROPORTIONS
    for a, b in pairwise(ends):
        density += (norm.cdf((fine - a) / 10) - norm.cdf((fine - b) / 10)) / (b - a) / (len(ends) - 1)
    cumulated = np.concatenate(([0.0], np.cumsum((density[1:] + density[:-1]) / 2 * np.diff(fine))))
    np.testing.assert_allclose(shares, np.diff(np.interp(EDGES, fine, cumulated)), atol=1e-6)
    assert shares.sum() == pytest.approx(1, abs=1e-9)


def test_mixed_voxels_follow_a_blurred_edge():
    # Values along a straight edge blurred by a Gaussian are Φ(x / σ): closed form, sampled from −2 σ to 2 σ.
    x = np.linspace(-2, 2, 200001)
    counts, _ = np.histogram(200 * norm.cdf(x) + 0.0, EDGES)
    model = _model([0.0, 0.0], 1.0, spread=(0.5, 0.5)).shares(EDGES)
    np.testing.assert_allclose(np.cumsum(model), np.cumsum(counts) / len(x), atol=0.04)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_fit_recovers_means_spreads_and_weights(seed):
    random = np.random.default_rng(seed)
    mean, spread = np.array([-20.0, 90.0, 260.0]), np.array([9.0, 12.0, 15.0])
    n = random.multinomial(200_000, [0.5, 0.25, 0.1, 0.1, 0.05])
    steps = np.diff(PROPORTIONS)
    pieces = [random.normal(mean[k], spread[k], n[k]) for k in range(3)]
    for (a, b), size in zip([(0, 1), (1, 2)], n[3:], strict=True):
        which = random.integers(0, len(steps), size)
        p = PROPORTIONS[which] + steps[which] * random.random(size)
        noise = (spread[a] + (spread[b] - spread[a]) * p) * random.normal(size=size)
        pieces.append(mean[a] + (mean[b] - mean[a]) * p + noise)
    axis = ValueAxis(-120.0, 1.0, 480)
    bins = fitted_bins(axis)
    counts, _ = np.histogram(np.concatenate(pieces), bins.edges)
    peaks = [Peak(m + 1, 0.5 * s, 1000, m - s, m + s, 10) for m, s in zip(mean, spread, strict=True)]
    model = fit(counts, bins.edges, start_from(peaks, axis), frame_of(peaks, axis), 1000)
    np.testing.assert_allclose(model.mean, mean, atol=1.0)
    np.testing.assert_allclose(model.spread, spread, rtol=0.06)
    np.testing.assert_allclose(model.weight, [0.5, 0.25, 0.1], atol=0.012)
