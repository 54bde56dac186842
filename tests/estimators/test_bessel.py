"""ln I_q(z) − z and its derivatives against arbitrary precision."""

from fractions import Fraction

import mpmath
import numpy as np
import pytest

from driftbook.estimators import bessel
from driftbook.estimators.bessel import FAR, hankel, log_bessel, log_bessel_jet

# Of the larger of the number and 1: the value and first derivatives, which make log-likelihoods and their maxima, and
# the second ones, which tell the way there and standard errors.
PROMISE, SECOND = 1e-12, 1e-11
ORDERS = (-1.0, -0.999, -0.5, 0.0, 0.3, 2.5, 6.5, 24.9, 40.0, 400.0, 2e3)
ARGUMENTS = (1e-3, 0.4, 1.0, 2.5, 4.9, 9.0, 15.9, 24.9, 25.1, 44.0, 46.0, 149.0, 151.0, 1499.0, 1501.0, 1e5)
STEP = mpmath.mpf("1e-14")


def exact(order, z):
    """The function at ln z + j STEP and order + i STEP, as a function of (i, j), with 60 digits."""
    q = mpmath.mpf(order) + (mpmath.mpf("1e-40") if order == -1 else 0)  # at −1 the reference takes 1/Γ(0)
    log_z = mpmath.log(z)

    def at(i, j):
        point = mpmath.e ** (log_z + j * STEP)
        return mpmath.log(mpmath.besseli(q + i * STEP, point, maxterms=10**6)) - point

    return at


@pytest.mark.parametrize("order", ORDERS)
def test_value_and_derivatives(order):
    with mpmath.workdps(60):
        for z in ARGUMENTS:
            if order == -1 and z < 1:
                continue  # a step of the reference below order −1 leaves its range
            f = exact(order, z)
            # Between −1 and the first step the reference needs orders of at least −1: all but −1 itself have room.
            shift = 1 if order == -1 else 0
            c, up, down = f(shift, 0), f(shift, 1), f(shift, -1)
            right, left = f(shift + 1, 0), f(shift - 1, 0)
            corner = f(shift + 1, 1) - f(shift + 1, -1) - f(shift - 1, 1) + f(shift - 1, -1)
            expected = [
                c,
                (up - down) / (2 * STEP),
                (right - left) / (2 * STEP),
                (up - 2 * c + down) / STEP**2,
                corner / (4 * STEP**2),
                (right - 2 * c + left) / STEP**2,
            ]
            jet = log_bessel_jet(order, z)
            found = [jet.value, jet.by_log, jet.by_order, jet.by_log_log, jet.by_log_order, jet.by_order_order]
            for name, value, reference in zip(jet.__dataclass_fields__, found, map(float, expected), strict=True):
                allowed = SECOND if name.count("_") > 1 else PROMISE
                assert abs(float(value) - reference) <= allowed * max(1, abs(reference)), (order, z, name)
            assert float(log_bessel(order, z)) == pytest.approx(float(c), rel=PROMISE, abs=PROMISE)


@pytest.mark.parametrize("order", [-1.0, -0.3, 7.0])
def test_both_expansions_agree_where_they_meet(order):
    z = np.sqrt(FAR**2 - order**2)
    below, above = log_bessel_jet(order, z * (1 - 1e-12)), log_bessel_jet(order, z * (1 + 1e-12))
    for name in below.__dataclass_fields__:
        a, b = getattr(below, name), getattr(above, name)
        assert abs(a - b) <= 2e-10 * max(1, abs(b)), name  # the argument itself moves by 2e-12, times z and more


def test_hankels_expansion():
    """Where the docstring says: z ≥ 30 and |q| ≤ z/12, with ten terms."""
    z = np.array([30.0, 60.0, 300.0])
    for share in (0.0, 1 / 24, 1 / 12):
        q = z * share
        powers = sum(np.polyval(row[::-1], q * q) / z**k for k, row in enumerate(hankel(10), start=1))
        np.testing.assert_allclose(powers - 0.5 * np.log(2 * np.pi * z), log_bessel(q, z), rtol=3e-12)


def test_debyes_polynomials_are_the_published_ones():
    """DLMF 10.41.10: U_1 = (3p − 5p³)/24, U_2 = (81p² − 462p⁴ + 385p⁶)/1152; their logarithm has d_1 = u_1."""
    first, second = bessel._next_debye([Fraction(1)]), [0, 0, 81, 0, -462, 0, 385]
    assert [24 * each for each in first] == [0, 3, 0, -5]
    assert [1152 * each for each in bessel._next_debye(first)] == second


def test_an_element_does_not_depend_on_the_others():
    rng = np.random.default_rng(0)
    q, z = rng.uniform(-1, 60, 500), 10 ** rng.uniform(-3, 4, 500)
    whole = log_bessel_jet(q, z)
    for k in (0, 17, 499):
        alone = log_bessel_jet(q[k], z[k])
        for name in whole.__dataclass_fields__:
            assert getattr(alone, name) == getattr(whole, name)[k]


def test_outside_the_range_there_is_no_number():
    assert np.isnan(log_bessel([-1.5, 1.0, 1.0, np.nan], [1.0, 0.0, -1.0, 1.0])).all()


def test_shapes_broadcast():
    assert log_bessel(np.ones((3, 1)), np.ones(4)).shape == (3, 4)
    assert log_bessel_jet(np.empty(0), np.empty(0)).value.shape == (0,)
