"""Sums over nodes in the length of step: exact for few lengths, interpolated for many, whatever is beside."""

import numpy as np
import pytest

from driftbook.estimators.batches import Piece
from driftbook.estimators.gaps import by_length, by_octaves, by_range, distinct_lengths, segments_of

N, OFFSETS = 40, 40


def made(steps, *, seed=0, skip=0):
    """One segment of a random walk with these steps."""
    x = np.random.default_rng(seed).standard_normal(steps.size + 1).cumsum()
    piece = Piece(x[None], steps[None, N - 1 : N], steps[None], N, steps.size - N + 1, skip, intervals=False)
    return segments_of(piece), x


def calendar(kinds, *, seed=0):
    rng = np.random.default_rng(seed)
    return rng.choice(np.arange(1, kinds + 1) / 365, N + OFFSETS - 1)


def irregular(seed=0):
    return np.random.default_rng(seed).exponential(0.01, N + OFFSETS - 1) + 1e-6


@pytest.mark.parametrize("steps", [calendar(1), calendar(5), calendar(30), irregular(), np.sort(calendar(9))])
@pytest.mark.parametrize("skip", [0, 17])
def test_distinct_lengths_are_those_of_each_window(steps, skip):
    segments, _ = made(steps, skip=skip)
    expected = [np.unique(window).size for window in np.lib.stride_tricks.sliding_window_view(steps, N)]
    assert distinct_lengths(segments)[0].tolist() == expected[skip:]


def test_lengths_that_differ_by_rounding_are_one():
    steps = calendar(3) * (1 + 1e-14 * np.random.default_rng(1).standard_normal(N + OFFSETS - 1))
    assert distinct_lengths(made(steps)[0]).max() == 3


def sums_of(x, steps, k):
    """Sums of a window over all its steps."""
    u, d, g = x[k : k + N] - x[N - 1], np.diff(x[k : k + N + 1]), steps[k : k + N]
    return [N, g.sum(), (g * u).sum(), (g * u * u).sum(), d.sum(), (u * d).sum(), (d * d / g).sum()]


@pytest.mark.parametrize(
    ("steps", "nodes"),
    [
        (calendar(5), lambda s: by_length(s, np.ones((1, OFFSETS), dtype=bool))),
        (irregular(), lambda s: by_octaves(s, 4)),
        (irregular(), lambda s: by_range(s, int(np.frexp(s.steps.max())[1]), 16)),
    ],
)
def test_nodes_together_hold_every_step_once(steps, nodes):
    """Lagrange's polynomials sum to one."""
    segments, x = made(steps)
    profile = nodes(segments)
    for k in (0, 1, 20, OFFSETS - 1):
        found = [each[:, k].sum() for each in (profile.count, profile.T, profile.X, profile.XX)]
        found += [each[:, k].sum() for each in (profile.D, profile.XD, profile.DD)]
        np.testing.assert_allclose(found, sums_of(x, steps, k), rtol=1e-10, atol=1e-10)


def test_node_of_a_length_has_that_length_and_its_steps():
    steps = calendar(5)
    segments, _ = made(steps)
    profile = by_length(segments, np.ones((1, OFFSETS), dtype=bool))
    for k in (0, 13, OFFSETS - 1):
        lengths, counts = np.unique(steps[k : k + N], return_counts=True)
        present = profile.count[:, k] > 0
        np.testing.assert_allclose(profile.gap[present, k], lengths, rtol=1e-15)
        assert profile.count[present, k].tolist() == counts.tolist()


def test_other_lengths_in_the_segment_do_not_change_a_window_by_a_bit():
    """The first window alone, and with steps of many lengths after it."""
    steps = np.concatenate([calendar(4)[:N], irregular()[: OFFSETS - 1]])
    segments, _ = made(steps)
    few = distinct_lengths(segments) <= 8
    assert few[0, 0]
    assert not few.all()
    together = by_length(segments, few)
    alone = by_length(made(steps[:N])[0], np.ones((1, 1), dtype=bool))
    present = together.count[:, 0] > 0
    for name in ("count", "T", "X", "XX", "D", "XD", "DD", "gap"):
        found, expected = getattr(together, name)[present, 0], getattr(alone, name)[:, 0]
        # values are measured from the pivot, which both share
        assert found.tobytes() == expected.tobytes(), name


@pytest.mark.parametrize(("points", "error"), [(4, 2e-3), (8, 2e-6)])
def test_octaves_interpolate_over_any_pull(points, error):
    steps = irregular()
    profile = by_octaves(made(steps)[0], points)
    for kappa in (0.01, 1.0, 100.0, 1e4):
        z = kappa * profile.gap[:, 0]
        found = (profile.count[:, 0] * np.log(-2 * z / np.expm1(-2 * z))).sum()
        exact = np.log(-2 * kappa * steps[:N] / np.expm1(-2 * kappa * steps[:N])).sum()
        assert abs(found - exact) < error * N, kappa
