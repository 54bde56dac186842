"""Roots of many functions at once."""

import numpy as np

from driftbook.estimators.solve import roots

TOL = 1e-12


def test_each_function_has_its_own_root():
    shift = np.linspace(-2, 2, 101)
    found = roots(lambda x, at: np.expm1(x - shift[at]), *ends(shift, -5.0, 5.0), TOL)
    np.testing.assert_allclose(found, shift, rtol=0, atol=TOL)


def ends(shift, low, high):
    a, b = np.full(shift.shape, low), np.full(shift.shape, high)
    return a, b, np.expm1(a - shift), np.expm1(b - shift)


def test_hard_functions():
    """A root of high order, a kink and a cliff, for which interpolation alone would not do."""
    functions = (lambda x: (x - 0.3) ** 9, lambda x: np.cbrt(x - 0.3), lambda x: np.tanh(1e6 * (x - 0.3)))
    for function in functions:
        a, b = np.array([-1.0]), np.array([2.0])
        found = roots(lambda x, _, function=function: function(x), a, b, function(a), function(b), TOL)
        assert abs(found[0] - 0.3) <= 2 * TOL or abs(function(found[0])) < 1e-100


def test_without_a_change_of_sign_there_is_no_answer():
    a, b = np.array([0.0, 0.0]), np.array([1.0, 1.0])
    found = roots(lambda x, _: x + 1, a, b, a + 1, b + 1, TOL)
    assert np.isnan(found).all()


def test_what_is_not_a_number_ends_alone():
    a, b = np.zeros(2), np.ones(2)
    fa, fb = np.array([-0.5, -0.5]), np.array([0.5, 0.5])
    found = roots(lambda x, at: np.where(at == 0, np.nan, x - 0.5), a, b, fa, fb, TOL)
    assert np.isnan(found[0])
    assert found[1] == 0.5


def test_bits_do_not_depend_on_the_others():
    shift = np.random.default_rng(0).uniform(-2, 2, 50)
    together = roots(lambda x, at: np.expm1(x - shift[at]), *ends(shift, -5.0, 5.0), TOL)
    for place in (0, 7, 49):
        own = shift[place : place + 1]
        alone = roots(lambda x, at, own=own: np.expm1(x - own[at]), *ends(own, -5.0, 5.0), TOL)
        assert alone[0] == together[place]
