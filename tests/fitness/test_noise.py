"""Noise of the main material against the noise that was put in."""

import numpy as np
import pytest

from tomofolio.fitness.noise import filter_sigma, measure_noise

CASES = {
    "turned box, white, low contrast": ("box", 4.0, 0.0, 0.0, 3),
    "turned box, correlated": ("box", 10.0, 1.0, 0.0, 4),
    "cylinder, cupping of 10 %, white": ("cylinder", 20.0, 0.0, 0.1, 5),
    "cylinder, cupping of 10 %, correlated": ("cylinder", 10.0, 0.6, 0.1, 6),
    "ribs, correlated, low contrast": ("ribs", 4.0, 0.8, 0.05, 7),
    "sphere on a flat grid, correlated": ("sphere", 8.0, 0.8, 0.0, 8),
}


@pytest.mark.parametrize("name", CASES)
def test_noise_and_its_correlation_are_those_put_in(phantoms, name):
    kind, cnr, correlation, cupping, seed = CASES[name]
    grid = phantoms.grid_of((56, 56, 56))
    if kind == "box":
        shape = phantoms.box((18, 17, 18), phantoms.rotation(seed))
    elif kind == "cylinder":
        shape = phantoms.cylinder(17, 22)
    elif kind == "ribs":
        shape = phantoms.ribs((22, 22, 20), 13, 26, phantoms.rotation(seed))
    else:
        grid = phantoms.grid_of((32, 80, 80), (0.8, 0.3, 0.3))
        shape = phantoms.sphere(10.5)
    radius = 17 if kind == "cylinder" else 30
    phantom = phantoms.make(
        grid, shape, blur=1.0, cnr=cnr, correlation=correlation, seed=seed, cupping=cupping, cupping_radius=radius
    )
    noise = measure_noise(phantom.volume, phantom.body, phantom.ranges.main)
    assert noise.sd == pytest.approx(phantom.noise, rel=0.05)
    if correlation:
        assert noise.correlation == pytest.approx((correlation,) * 3, rel=0.15)
    else:
        assert max(noise.correlation) < 0.3


def test_small_voids_and_inclusions_do_not_count_as_noise(phantoms):
    grid = phantoms.grid_of((56, 56, 56))
    solid = phantoms.box((22, 22, 22))

    def pierced(x):
        """Spherical voids of 1.6 voxels radius, 11 voxels apart."""
        from_void = np.linalg.norm((x + 5.5) % 11 - 5.5, axis=-1)
        return np.minimum(solid(x), from_void - 1.6)

    phantom = phantoms.make(grid, pierced, blur=0.8, cnr=10, correlation=0.6, seed=12)
    noise = measure_noise(phantom.volume, phantom.body, phantom.ranges.main)
    assert noise.sd == pytest.approx(phantom.noise, rel=0.05)


def test_correlation_differs_between_axes(phantoms):
    phantom = phantoms.make(
        phantoms.grid_of((56, 56, 56)), phantoms.box((24, 24, 24)), cnr=10, correlation=(0.0, 0.7, 1.1), seed=13
    )
    noise = measure_noise(phantom.volume, phantom.body, phantom.ranges.main)
    assert noise.sd == pytest.approx(phantom.noise, rel=0.05)
    assert noise.correlation[0] < 0.3
    assert noise.correlation[1:] == pytest.approx((0.7, 1.1), rel=0.15)


@pytest.mark.parametrize("sigma", [0.5, 0.8, 1.3, 2.5])
def test_filter_sigma_inverts_the_gaussian_autocorrelation(sigma):
    # Closed form: a Gaussian filter of σ leaves the autocorrelation exp(−d²/(4σ²)).
    assert filter_sigma(np.exp(-1 / (4 * sigma**2)), np.exp(-1 / sigma**2)) == pytest.approx(sigma, rel=0.01)


def test_no_noise_figure_where_the_material_is_too_thin(phantoms):
    grid = phantoms.grid_of((40, 40, 40))
    phantom = phantoms.make(grid, phantoms.box((1.5, 1.5, 1.5)), blur=0.6, cnr=20, seed=14)
    assert measure_noise(phantom.volume, phantom.body, phantom.ranges.main) is None
