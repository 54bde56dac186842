"""The table of the slope's law: close to the exact law, falling in c, and clear about its edges."""

import numpy as np
import pytest

from driftbook.estimators.data import make_slope_law
from driftbook.estimators.slope_law import SlopeLaw, slope_law

IN_PROBABILITY = 1e-4  # promised error of the table; rounding and the exact law's own error are far below
P_VALUE = 4e-4  # promised error of `p_no_pull`
OFF_NODE = (11, 15, 27, 50, 150, 350, 1000)  # numbers of transitions that the table has no row for


def law_of(n: int) -> SlopeLaw:
    law = slope_law(n)
    assert law is not None
    return law


@pytest.mark.parametrize("n", OFF_NODE)
def test_quantiles_have_the_stated_probability(n):
    law = law_of(n)
    for c in (0.0, 0.03, 0.9, 3.4, 11.0, 36.0, 95.0):
        if c <= 4 * n:
            slopes = [float(law.quantile(c, p)) for p in law.probabilities]
            found = make_slope_law.exact_cdf(slopes, c, n)
            np.testing.assert_allclose(found, law.probabilities, rtol=0, atol=IN_PROBABILITY, err_msg=f"c = {c}")


@pytest.mark.parametrize(("n", "c"), [(50, 199.0), (150, 590.0), (1000, 900.0), (1000, 3900.0)])
def test_quantiles_have_the_stated_probability_under_strong_pulls(n, c):
    law = law_of(n)
    slopes = [float(law.quantile(c, p)) for p in law.probabilities]
    found = make_slope_law.exact_cdf(slopes, c, n)
    np.testing.assert_allclose(found, law.probabilities, rtol=0, atol=IN_PROBABILITY)


@pytest.mark.parametrize("n", [11, 15, 50, 350])
def test_p_no_pull_is_the_exact_probability(n):
    slopes = 1 - np.linspace(-4, 35, 79) / n
    exact = make_slope_law.exact_cdf(slopes, 0.0, n)
    np.testing.assert_allclose(law_of(n).p_no_pull(slopes), exact, rtol=0, atol=P_VALUE)


def test_p_no_pull_keeps_its_size_in_the_left_tail():
    slopes = 1 - np.array([25.0, 30.0, 35.0, 40.0]) / 250
    exact = make_slope_law.exact_cdf(slopes, 0.0, 250)
    np.testing.assert_allclose(law_of(250).p_no_pull(slopes), exact, rtol=0.02)


def test_p_no_pull_rises_from_zero_to_one():
    p = law_of(60).p_no_pull(np.linspace(-1.5, 1.5, 5001))
    assert np.all(np.diff(p) >= 0)
    assert p[0] < 1e-12
    assert p[-1] > 1 - 1e-12


@pytest.mark.parametrize("n", [10, 13, 60, 250, 5000])
def test_quantiles_fall_in_the_pull_and_rise_in_probability(n):
    law = law_of(n)
    assert np.all(np.diff(law.quantiles, axis=1) < 0)
    assert np.all(np.diff(law.quantiles, axis=0) > 0)


def test_bounds_invert_the_quantiles():
    law = law_of(250)
    c = np.array([0.5, 3.0, 20.0, 150.0])
    for p, bound in ((0.025, law.lower), (0.5, law.median), (0.975, law.upper), (0.05, law.lower_90)):
        np.testing.assert_allclose(bound(law.quantile(c, p)), c, rtol=1e-12)


def test_bounds_are_in_order():
    law = law_of(100)
    slope = np.linspace(0.1, 1.02, 500)
    lower, lower_90, median, upper = law.lower(slope), law.lower_90(slope), law.median(slope), law.upper(slope)
    assert np.all((lower <= lower_90) & (lower_90 <= median) & (median <= upper))
    assert np.all(np.diff(upper[np.isfinite(upper)]) <= 0)


def test_lower_end_leaves_zero_where_the_p_value_falls_below_a_fortieth():
    law = law_of(250)
    slope = np.linspace(0.9, 0.96, 2001)
    clear = np.abs(law.p_no_pull(slope) - 0.025) > P_VALUE
    np.testing.assert_array_equal((law.lower(slope) > 0)[clear], (law.p_no_pull(slope) < 0.025)[clear])


def test_slope_too_large_for_any_pull_gives_the_set_zero():
    law = law_of(250)
    slope = law.quantile(0.0, 0.975) + 1e-9
    assert (law.lower(slope), law.median(slope), law.upper(slope)) == (0.0, 0.0, 0.0)


def test_slope_of_one_still_has_an_upper_end():
    law = law_of(250)
    assert law.lower(1.0) == 0
    assert law.median(1.0) == 0
    assert 0 < law.upper(1.0) < 2


def test_slope_below_the_table_is_unbounded():
    law = law_of(50)
    ends = law.quantile(law.pulls[-1], 0.975), law.quantile(law.pulls[-1], 0.5), law.quantile(law.pulls[-1], 0.025)
    below_upper, below_median, below_all = (end - 1e-9 for end in ends)
    assert law.upper(below_upper) == np.inf
    assert np.isfinite(law.median(below_upper))
    assert law.median(below_median) == np.inf
    assert np.isfinite(law.lower(below_median))
    assert law.lower(below_all) == np.inf


def test_nan_gives_nan():
    law = law_of(30)
    for method in (law.lower, law.median, law.upper, law.lower_90, law.p_no_pull):
        assert np.isnan(method(np.nan))


def test_batch_is_loop():
    law = law_of(30)
    slopes = np.array([[0.2, 0.7, 0.95], [1.0, 1.1, -0.9]])
    for method in (law.lower, law.median, law.upper, law.lower_90, law.p_no_pull):
        batch = method(slopes)
        assert batch.shape == slopes.shape
        assert batch.dtype == np.float64
        np.testing.assert_array_equal(batch, [[float(method(each)) for each in row] for row in slopes])


def test_table_starts_at_ten_transitions():
    assert slope_law(9) is None
    assert law_of(10).n == 10


def test_law_is_made_once():
    assert slope_law(77) is slope_law(77)


def test_probability_outside_the_table_is_refused():
    with pytest.raises(ValueError, match=r"p must be one of .*, got 0\.3"):
        law_of(50).solve(0.9, p=0.3)


def test_theta_critical_falls_with_the_pull_and_is_kept_beyond_the_table():
    law = law_of(120)
    values = law.theta_critical(np.linspace(0, 200, 401))
    assert np.all(np.diff(values) < 0)
    assert law.theta_critical(np.inf) == values[-1]


def test_script_and_shipped_table_agree():
    corrections, null_corrections = make_slope_law.make_quantiles(14)
    law = law_of(14)
    made = make_slope_law.reference_quantile(0.0, 14, make_slope_law.PROBABILITIES)
    made = made + make_slope_law.reference(0.0, 14)[1] * corrections[0]
    np.testing.assert_allclose(law.quantiles[:, 0], made, rtol=0, atol=1e-6)  # float32 in the file
    inside = np.isin(make_slope_law.NULL_PROBABILITIES, make_slope_law.PROBABILITIES)
    np.testing.assert_allclose(null_corrections[inside], corrections[0], rtol=0, atol=1e-5)


def test_exact_quantile_inverts_exact_cdf():
    p = np.array([0.001, 0.3, 0.99])
    found = make_slope_law.exact_cdf(make_slope_law.exact_quantile(p, 7.0, 35), 7.0, 35)
    np.testing.assert_allclose(found, p, rtol=0, atol=1e-6)
