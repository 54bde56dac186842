"""Windows in rolling position: sums that lose nothing, and bits that neighbours can't change."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from driftbook.estimators import aligned_start
from driftbook.estimators.windows import Layout, PairedTerms, segments, whole_blocks, window_sums

ROUNDING = 4 * np.finfo(float).eps  # a running sum of n terms is off by some √n units in the last place


def rolling_sums(x, lookback):
    """Sums over every `lookback` neighbours of a series, the way the estimators take them."""
    layout = Layout(lookback, len(x) - lookback + 1)
    padded = np.append(x, x[-1])  # as steps: one fewer than observations
    cut = segments(whole_blocks(padded[None], layout, 0, layout.n_blocks), lookback, layout.segment - 1)
    return window_sums(cut, lookback).reshape(-1)[: layout.n_windows]


@given(st.integers(1, 40), st.integers(0, 100))
def test_every_window_is_summed_once(lookback, more):
    x = np.random.default_rng(lookback * 1000 + more).standard_normal(lookback + more)
    expected = np.lib.stride_tricks.sliding_window_view(x, lookback).sum(axis=1)
    found = rolling_sums(x, lookback)
    assert found.shape == expected.shape
    np.testing.assert_allclose(found, expected, rtol=0, atol=ROUNDING * lookback**0.5 * np.abs(x).sum())


def test_large_value_leaves_no_trace():
    x = np.full(1000, 0.1)
    x[400] = 1e16
    clean = np.full(1000, 0.1)
    away = np.r_[0:371, 401:971]
    assert np.array_equal(rolling_sums(x, 30)[away], rolling_sums(clean, 30)[away])


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_missing_value_spoils_only_windows_that_hold_it(bad):
    x = np.random.default_rng(1).standard_normal(500)
    x[123] = bad
    holds = np.zeros(451, dtype=bool)
    holds[123 - 49 : 124] = True
    assert np.array_equal(~np.isfinite(rolling_sums(x, 50)), holds)


def test_two_sums_side_by_side_have_the_bits_of_each():
    terms = np.random.default_rng(2).standard_normal((3, 4, 79))
    together = PairedTerms(terms.shape[1:], 3)
    for part, term in zip(together.parts, terms, strict=True):
        part[...] = term
    for paired, term in zip(together.sums(40), terms, strict=True):
        assert np.array_equal(paired, window_sums(term, 40))


def test_a_spoiled_term_leaves_the_one_beside_it_alone():
    terms = PairedTerms((1, 19), 2)
    terms.parts[0][...] = np.nan
    terms.parts[1][...] = 1.0
    spoiled, clean = terms.sums(10)
    assert np.isnan(spoiled).all()
    assert (clean == 10.0).all()


@given(st.integers(0, 10_000), st.integers(1, 500))
def test_aligned_start_is_the_last_block_not_after_the_window(first_window, lookback):
    start = aligned_start(first_window, lookback)
    assert start % lookback == 0
    assert start <= first_window < start + lookback


@pytest.mark.parametrize(("first_window", "lookback", "named"), [(-1, 5, "first_window"), (3, 0, "lookback")])
def test_aligned_start_refuses_what_can_not_be(first_window, lookback, named):
    with pytest.raises(ValueError, match=f"{named} must be .* got"):
        aligned_start(first_window, lookback)
