"""The numerically exact transition density, against closed forms and published spectra."""

import numpy as np
import pytest

from driftbook.estimators.transition import transition

# Sum of states over their height: rounding of a few hundred terms.
ROUNDING = 1e-11


def pull(kappa, **grid):
    return transition(lambda y: -kappa * y, lambda y: -kappa + 0 * y, lambda y: -0.5 * kappa * y * y, **grid)


def double_well(D, points=301):
    """dX = (X − X³) dt + √(2D) dW, in units of √(2D)."""
    s = np.sqrt(2 * D)
    reach = (2.4 + D) / s
    return transition(
        lambda y: (s * y - (s * y) ** 3) / s,
        lambda y: 1 - 3 * (s * y) ** 2,
        lambda y: ((s * y) ** 2 / 2 - (s * y) ** 4 / 4) / s**2,
        low=-reach,
        high=reach,
        points=points,
    )


@pytest.mark.parametrize("t", [0.05, 0.3, 2.0])
def test_a_linear_pull_has_its_gaussian_law(t):
    kappa = 3.0
    x, y = np.meshgrid(np.linspace(-0.7, 0.9, 9), np.linspace(-1.1, 1.0, 8))
    found = pull(kappa, low=-8, high=8, points=301).log_density(x, y, t)
    variance = -np.expm1(-2 * kappa * t) / (2 * kappa)
    away = y - x * np.exp(-kappa * t)
    expected = -0.5 * (np.log(2 * np.pi * variance) + away**2 / variance)
    likely = away**2 < 25 * variance  # beyond five standard deviations rounding of the sum shows
    np.testing.assert_allclose(found[likely], expected[likely], atol=1e-7)
    near = away**2 < 9 * variance
    np.testing.assert_allclose(found[near], expected[near], atol=1e-9)


def test_levels_of_a_linear_pull_are_equally_spaced():
    energies = pull(2.0, low=-5, high=5, points=121).energies
    np.testing.assert_allclose(energies[:8], 2.0 * np.arange(8), atol=1e-10)


# Eigenvalues of the Fokker–Planck operator in the double well, by two other grids that agree to 1e-11; the first at
# D = 0.1 is 0.03354 in Blackmore, R. & Shizgal, B. (1985), Physical Review A 31, 1855–1868, quoted from memory.
SPECTRA = {
    0.05: (0.002776140636, 0.8222471245, 1.314155319, 1.780921344),
    0.1: (0.03354528731, 0.9273721026, 1.680263767, 2.595820576),
    0.25: (0.1871704181, 1.501028418, 2.915173889, 4.660786695),
    1.0: (0.7920884266, 3.548889182, 6.843548464, 10.82697395),
}


@pytest.mark.parametrize("D", SPECTRA)
def test_spectrum_of_the_double_well(D):
    energies = double_well(D).energies
    assert abs(energies[0]) < 1e-9
    np.testing.assert_allclose(energies[1:5], SPECTRA[D], rtol=1e-8)


def test_rate_of_exchange_between_deep_wells_is_that_of_kramers():
    """Kramers (1940): twice √2/(2π) e^{−1/(4D)}, to first order in D; the next order is −3/2 D."""
    D = 0.03
    rate = double_well(D).energies[1]
    assert abs(rate / (np.sqrt(2) / np.pi * np.exp(-1 / (4 * D))) - (1 - 1.5 * D)) < 0.01


@pytest.mark.parametrize("t", [0.02, 0.5])
def test_densities_hold_all_probability_and_balance_in_detail(t):
    of_well = double_well(0.25)
    p, law, h = of_well.densities(t), of_well.stationary(), of_well.spacing
    flow = law[:, None] * p
    inside = law * h > 1e-6  # what rounding leaves grows with the root of one over the law
    np.testing.assert_allclose((p.sum(axis=1) * h)[inside], 1.0, atol=1e-9)
    np.testing.assert_allclose(flow, flow.T, atol=ROUNDING * flow.max())
    np.testing.assert_allclose(flow.sum(axis=0) * h, law, atol=ROUNDING * law.max())


def test_a_step_of_two_halves_is_a_step():
    of_well = double_well(0.25)
    once, half = of_well.densities(0.2), of_well.densities(0.1)
    law = of_well.stationary()[:, None]
    np.testing.assert_allclose(law * (half @ half) * of_well.spacing, law * once, atol=1e-10)


def test_places_between_points_are_as_good_as_points():
    coarse, fine = double_well(0.25, points=181), double_well(0.25, points=287)
    x, y = np.array([-1.3, 0.123, 0.9]), np.array([-1.1, 0.2, 1.234])
    np.testing.assert_allclose(coarse.log_density(x, y, 0.1), fine.log_density(x, y, 0.1), atol=1e-10)


def test_misuse_raises():
    with pytest.raises(ValueError, match="low must be below high, got 1 and 1"):
        pull(1.0, low=1, high=1, points=9)
    with pytest.raises(ValueError, match="points must be 3 or more, got 2"):
        pull(1.0, low=0, high=1, points=2)
