"""Limits for small voids against theory from elsewhere and against simulation."""

import numpy as np
import pytest
from scipy import ndimage

from tomofolio.fitness.detection import FALSE_CALL_DEVIATIONS, SMALLEST_SHARE
from tomofolio.fitness.limits import SphereLimits, volume_limit

# From another reckoning of the same bound, made before this one, for contrast-to-noise 10 and noise filtered with
# σ 0.6 voxel, in per cent.
INDEPENDENT = {
    0.8: {3: 16.6, 4: 8.7, 5: 5.8, 6: 3.9, 8: 2.2, 10: 1.4, 16: 0.6},
    1.0: {3: 20.1, 4: 10.3, 5: 6.9, 6: 4.6, 8: 2.6, 10: 1.7, 16: 0.7},
}


@pytest.mark.parametrize("blur", INDEPENDENT)
@pytest.mark.parametrize("diameter", INDEPENDENT[0.8])
def test_volume_limit_agrees_with_independent_figures(blur, diameter):
    # The figures are given to two digits, and depend a little on where the sphere lies between the voxels.
    expected = INDEPENDENT[blur][diameter]
    assert 100 * volume_limit(diameter, blur, 0.6, 10) == pytest.approx(expected, rel=0.05, abs=0.06)


def test_volume_limit_falls_as_the_surface_grows():
    # Closed form for large spheres: information per area of surface is constant, so σ_V/V goes with 1/(r·r).
    assert volume_limit(12, 1.0, 0.6, 10) / volume_limit(24, 1.0, 0.6, 10) == pytest.approx(4, rel=0.03)


def test_volume_limit_is_proportional_to_the_noise():
    assert volume_limit(5, 0.8, 0.6, 5) == pytest.approx(2 * volume_limit(5, 0.8, 0.6, 10))


def _ball(radius, blur, size, offset, fine=5):
    """A blurred sphere drawn on voxels ``fine`` times finer, averaged over the voxels."""
    at = (np.arange(size * fine) + 0.5) / fine - size / 2
    k, j, i = np.meshgrid(at - offset[0], at - offset[1], at - offset[2], indexing="ij")
    ball = np.clip((radius - np.sqrt(k * k + j * j + i * i)) * fine + 0.5, 0, 1)
    ball = ndimage.gaussian_filter(ball, blur * fine)
    return ball.reshape(size, fine, size, fine, size, fine).mean(axis=(1, 3, 5))


def test_measurable_diameter_holds_in_simulated_noise(phantoms):
    blur, correlation, cnr, size = 0.8, 0.7, 10.0, 20
    limits = SphereLimits((np.sqrt(blur**2 + 1 / 12),) * 3, (correlation,) * 3, cnr)
    noise = [phantoms.noise_field((size,) * 3, 1 / cnr, correlation, seed).ravel() for seed in range(300)]
    offset = (0.31, -0.22, 0.13)

    diameter = limits.measurable_diameter()
    step = 0.02
    growth = _ball(diameter / 2 + step, blur, size, offset) - _ball(diameter / 2 - step, blur, size, offset)
    growth = growth.ravel() / (2 * step)
    radius_error = np.std([growth @ n for n in noise]) / (growth @ growth)
    assert 1.96 * 3 * radius_error / (diameter / 2) == pytest.approx(0.25, rel=0.08)


@pytest.mark.parametrize(("blur", "correlation", "cnr"), [(0.8, 0.7, 10.0), (1.1, 0.0, 6.0), (0.6, 0.6, 20.0)])
def test_a_void_of_the_detectable_diameter_is_found_95_times_in_100(phantoms, blur, correlation, cnr):
    limits = SphereLimits((np.sqrt(blur**2 + 1 / 12),) * 3, (correlation,) * 3, cnr)
    diameter, size = limits.detectable_diameter(), 14
    rng = np.random.default_rng(7)
    balls = [_ball(diameter / 2, blur, size, rng.uniform(-0.5, 0.5, 3)) for _ in range(20)]
    noise = [phantoms.noise_field((size,) * 3, 1 / cnr, correlation, seed) for seed in range(200)]
    means = [ndimage.uniform_filter(n, 3)[4:-4, 4:-4, 4:-4] for n in noise]
    threshold = max(FALSE_CALL_DEVIATIONS * np.std(means), SMALLEST_SHARE)
    found = [
        (ndimage.uniform_filter(balls[k % 20], 3)[4:-4, 4:-4, 4:-4] + m).max() > threshold for k, m in enumerate(means)
    ]
    # The largest of several noisy means helps a little, so more than 95 % are found; far more would be too cautious.
    assert np.mean(found) >= 0.93
    smaller = [_ball(0.85 * diameter / 2, blur, size, rng.uniform(-0.5, 0.5, 3)) for _ in range(20)]
    seen = [
        (ndimage.uniform_filter(smaller[k % 20], 3)[4:-4, 4:-4, 4:-4] + m).max() > threshold
        for k, m in enumerate(means)
    ]
    assert np.mean(seen) < 0.9
