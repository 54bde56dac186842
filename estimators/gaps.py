"""Windows of unequal steps, by sums over a few nodes in the length of step.

Calendar steps have few lengths: each is a node, and the sums over its steps are all that a likelihood needs. For
steps of any length, a function of the length is replaced by its interpolation at Chebyshev points, so that
Σ h_i F(Δ_i) = Σ_j F(node_j) Σ_i h_i L_j(Δ_i) with Lagrange's polynomials L_j: again sums over steps that do not
depend on what is estimated. All are sums over windows in rolling position.

Nothing here depends on other windows: whether the lengths are few is counted in each window, points lie at fixed
places within ranges that are powers of two, and a node without steps in a window adds exact zeros.

References
----------
Berrut, J.-P. & Trefethen, L. N. (2004), Barycentric Lagrange interpolation, SIAM Review 46, 501–517.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.profile import NodeProfile
from driftbook.estimators.windows import Array, PairedTerms, window_maxima, window_sums

Integers = NDArray[np.int64]

FEW = 8  # lengths of step that are taken one by one
_SAME = 31  # bits in which lengths agree that count as one: 5e-10
_NO_LENGTH = np.iinfo(np.int64).max


@dataclass(frozen=True)
class Segments:
    """Some segments of a piece, by step; arrays of shape (segments, steps).

    Attributes
    ----------
    n : int
        Steps in a window.
    skip : int
        Windows at the beginning of each segment that are not wanted.
    x, d, steps : array
        Values before each step, from the segment's origin, increments, and lengths of step.
    origin : array, shape (segments, 1)
        The value at the pivot.
    """

    n: int
    skip: int
    x: Array
    d: Array
    steps: Array
    origin: Array

    @property
    def windows(self) -> int:
        """Windows in a segment."""
        return int(self.steps.shape[1]) - self.n + 1

    def take(self, rows: slice) -> Segments:
        """Some of them."""
        return Segments(self.n, self.skip, self.x[rows], self.d[rows], self.steps[rows], self.origin[rows])

    def sums(self, values: Array) -> Array:
        """Sums over every window, shape (segments, windows)."""
        return window_sums(values, self.n, self.skip)

    def longest(self) -> Array:
        """The longest step of every window."""
        return window_maxima(self.steps, self.n, self.skip)

    def shortest(self) -> Array:
        """The shortest step of every window."""
        return -window_maxima(-self.steps, self.n, self.skip)


def segments_of(piece: Piece) -> Segments:
    """The segments of a piece with unequal steps, rows and blocks in one dimension."""
    if piece.steps is None:
        raise ValueError("the steps of the piece are equal")
    levels, steps = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.steps)
    origin = levels[..., piece.pivot : piece.pivot + 1]
    d = piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    width = steps.shape[-1]
    levels, d, steps = (np.ascontiguousarray(each).reshape(-1, width) for each in (levels - origin, d, steps))
    return Segments(piece.lookback, piece.skip, levels, d, steps, origin.reshape(-1, 1))


def distinct_lengths(segments: Segments) -> Integers:
    """How many lengths of step each window has, shape (segments, windows).

    A step is the first of its length in the windows that begin after the one before it of that length.
    """
    keys = _keys(segments.steps)
    order = np.argsort(keys, axis=1, kind="stable")
    ordered = np.take_along_axis(keys, order, axis=1)
    before = np.full(keys.shape, -1)
    np.put_along_axis(before, order[:, 1:], np.where(ordered[:, 1:] == ordered[:, :-1], order[:, :-1], -1), axis=1)
    place, m = np.arange(keys.shape[1]), segments.windows
    end = np.broadcast_to(np.minimum(place, m - 1) + 1, keys.shape)
    begin = np.minimum(np.maximum(np.maximum(place - segments.n, before) + 1, 0), end)
    row = np.arange(len(keys))[:, None] * (m + 1)
    size = len(keys) * (m + 1)
    change = np.bincount((row + begin).ravel(), minlength=size) - np.bincount((row + end).ravel(), minlength=size)
    return np.cumsum(change.reshape(-1, m + 1), axis=1)[:, :m]


def _keys(steps: Array) -> Integers:
    """Numbers that are equal for lengths that agree in their first bits."""
    mantissa, exponent = np.frexp(steps)
    return np.rint(np.ldexp(mantissa, _SAME)).astype(np.int64) + (exponent.astype(np.int64) << (_SAME + 2))


def by_length(segments: Segments, few: NDArray[np.bool_]) -> NodeProfile:
    """A node for each length of step: right in windows where lengths are `few`, shape (segments, windows).

    All these windows of a segment hold its pivot, so together they have no more than 2 FEW − 1 lengths.
    """
    kinds = _kinds(segments, few)
    weights = ((kinds == kind).astype(np.float64) for kind in range(int(kinds.max(initial=-1)) + 1))
    sums = _sums(segments, weights)
    count, T = sums[:2]
    mean = T.sum(axis=0) / segments.n
    gap = np.where(count > 0, T / np.maximum(count, 1), mean)
    return NodeProfile(segments.n, gap, *sums)


def _kinds(segments: Segments, few: NDArray[np.bool_]) -> Integers:
    """Numbers the lengths in each segment that such windows see from 0, in their order; others are −1."""
    n, m = segments.n, segments.windows
    some = few.any(axis=1)
    begin = np.where(some, few.argmax(axis=1), 0)
    end = np.where(some, m - 1 - few[:, ::-1].argmax(axis=1) + n, 0)
    place = np.arange(segments.steps.shape[1])
    seen = (begin[:, None] <= place) & (place < end[:, None])
    keys = np.where(seen, _keys(segments.steps), _NO_LENGTH)
    order = np.argsort(keys, axis=1)
    ordered = np.take_along_axis(keys, order, axis=1)
    rank = np.zeros_like(order)
    np.cumsum(ordered[:, 1:] != ordered[:, :-1], axis=1, out=rank[:, 1:])
    kinds = np.empty_like(rank)
    np.put_along_axis(kinds, order, rank, axis=1)
    return np.where(seen, kinds, -1)


def by_octaves(segments: Segments, points: int) -> NodeProfile:
    """Nodes in each range of lengths from one power of two to the next."""
    mantissa, exponent = np.frexp(segments.steps)
    nodes = 0.75 + 0.25 * _chebyshev(points)
    basis = _lagrange(4 * mantissa - 3, points)
    octaves = range(int(exponent.min()), int(exponent.max()) + 1)
    weights = (np.where(exponent == octave, each, 0.0) for octave in octaves for each in basis)
    gap = np.concatenate([np.ldexp(nodes, octave) for octave in octaves])
    return NodeProfile(segments.n, gap[:, None], *_sums(segments, weights))


def by_range(segments: Segments, exponent: int, points: int) -> NodeProfile:
    """Nodes between zero and a power of two: right in windows without a longer step."""
    basis = _lagrange(np.ldexp(segments.steps, 1 - exponent) - 1, points)
    gap = np.ldexp(0.5 + 0.5 * _chebyshev(points), exponent)
    return NodeProfile(segments.n, gap[:, None], *_sums(segments, basis))


def _chebyshev(points: int) -> Array:
    return np.cos(np.pi * (np.arange(points) + 0.5) / points)


def _lagrange(t: Array, points: int) -> list[Array]:
    """Lagrange's polynomials of the Chebyshev points, at t; barycentric, and exact at the points."""
    nodes = _chebyshev(points)
    signs = np.sin(np.pi * (np.arange(points) + 0.5) / points) * (-1.0) ** np.arange(points)
    shares = [sign / np.where(t == node, 1e-300, t - node) for sign, node in zip(signs, nodes, strict=True)]
    total = shares[0].copy()
    for share in shares[1:]:
        total += share
    return [share / total for share in shares]


def _sums(segments: Segments, weights: Iterable[Array]) -> list[Array]:
    """Sums over windows of weight times 1, Δ, Δ x, Δ x², d, x d and d²/Δ, each of shape (nodes, windows)."""
    x, d, steps = segments.x, segments.d, segments.steps
    terms = (np.ones_like(x), steps, steps * x, steps * x * x, d, x * d, d * d / steps)
    found = []
    for weight in weights:
        room = PairedTerms(x.shape, len(terms))
        for part, term in zip(room.parts, terms, strict=True):
            np.multiply(weight, term, out=part)
        found.append([each.reshape(-1) for each in room.sums(segments.n, segments.skip)])
    return [np.stack(each) for each in zip(*found, strict=True)]
