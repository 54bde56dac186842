"""Sums of products of filtered sequences over every window, each window filtered from its own beginning.

A sequence w_1 … w_m of a window is filtered with a decay a to A_j = w_j + a A_{j−1}, A_0 = 0. Likelihoods of ARMA
models with one moving-average root are made of the sums Σ A_j B_j, Σ A_j and Σ a^j A_j. Windows that start in one
segment share a step, the pivot: filters run from there to the end of each window, and the way back from there to each
window's beginning is a recursion too, as one more step before the others adds w a^j to A_j. So all windows of a
segment cost two runs together, nothing outside a window enters its sums, and nothing is subtracted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.windows import Array


@dataclass(frozen=True)
class FilteredSums:
    """Sums over windows, for r filtered sequences; lanes are nodes by segments.

    Attributes
    ----------
    half_gram : array, shape (windows, r, r, nodes, segments)
        A matrix which, added to its transpose, gives Σ A_j B_j.
    total, fading : array, shape (windows, r, nodes, segments)
        Σ A_j, and Σ decay^j A_j.
    """

    half_gram: Array
    total: Array
    fading: Array

    def gram(self, a: int, b: int) -> Array:
        """Σ A_j B_j, shape (windows, nodes, segments)."""
        return np.asarray(self.half_gram[:, a, b] + self.half_gram[:, b, a])


@dataclass(frozen=True)
class _Powers:
    """Powers of the decays and their sums; arrays of shape (length + 1, nodes, 1 or segments).

    Attributes
    ----------
    power : array
        decay^k.
    ones, squares : array
        Σ decay^j and Σ decay^{2j} over j < k.
    """

    power: Array
    ones: Array
    squares: Array


def _powers(decay: Array, length: int) -> _Powers:
    """Up to this one; the sums are running ones, which lose nothing near a decay of one."""
    power = np.empty((length + 1, *decay.shape))
    power[0] = 1.0
    for k in range(length):
        np.multiply(power[k], decay, out=power[k + 1])
    ones, squares = np.zeros_like(power), np.zeros_like(power)
    np.cumsum(power[:-1], axis=0, out=ones[1:])
    np.cumsum(np.square(power[:-1]), axis=0, out=squares[1:])
    return _Powers(power, ones, squares)


def filtered_sums(sequences: Array, decay: Array, pivot: int, windows: int, tail: int, lead: int) -> FilteredSums:
    """Sums over every window of segments, for every decay.

    Parameters
    ----------
    sequences : array, shape (steps, r, segments)
        Values by step.
    decay : array, shape (nodes, 1) or (nodes, segments)
    pivot : int
        The step from which filters run; −1 where a segment is one window, with all its steps in the tail.
    windows : int
        Window o holds the steps o + lead … pivot + tail + o.
    tail : int
        Steps after the pivot in the first window.
    lead : int
        0, or 1 where the first step of a window is left out: then the last window may begin after the pivot.

    Returns
    -------
    FilteredSums
    """
    w = sequences[:, :, None, :]
    some = _powers(decay, pivot + 1)
    head, last = _heads(w[: pivot + 1], some, lead + windows)
    begin = slice(lead, lead + windows)
    sums = FilteredSums(head.half_gram[begin], head.total[begin], head.fading[begin])
    _add_tails(sums, last[begin], w[pivot + 1 :], some.power[: pivot + 2 - lead][::-1], decay, tail)
    return sums


def _heads(w: Array, some: _Powers, keep: int) -> tuple[FilteredSums, Array]:
    """Sums up to the last step and the filtered value there, by first step, of which the first `keep` are kept.

    Beyond the last step they are of no step at all.
    """
    m, r, _, segments = w.shape
    shapes = tuple((*shape, some.power.shape[1], segments) for shape in ((r, r), (r,), (r,), (r,)))
    kept = tuple(np.empty((keep, *shape)) for shape in shapes)
    passing = tuple(np.zeros((2, *shape)) for shape in shapes)
    half_squares, decay = 0.5 * some.squares, some.power[1 if m else 0]
    half, middle, of_pairs = (np.empty(shape) for shape in (shapes[1], shapes[1], shapes[0]))
    after = tuple(each[m % 2] for each in passing)
    if m < keep:
        for all_of_it, nothing in zip(kept, after, strict=True):
            all_of_it[m:] = nothing
    for s in range(m - 1, -1, -1):
        length = m - s
        half_gram, total, fading, last = here = tuple(
            own[s] if s < keep else spare[s % 2] for own, spare in zip(kept, passing, strict=True)
        )
        np.multiply(w[s], half_squares[length], out=half)
        np.add(after[2], half, out=middle)
        np.multiply(w[s][:, None], middle, out=of_pairs)
        np.add(after[0], of_pairs, out=half_gram)
        middle += half
        np.multiply(middle, decay, out=fading)
        np.multiply(w[s], some.power[length - 1], out=half)
        np.add(after[3], half, out=last)
        np.multiply(w[s], some.ones[length], out=half)
        np.add(after[1], half, out=total)
        after = here
    return FilteredSums(*kept[:3]), kept[3]


def _add_tails(sums: FilteredSums, last: Array, w: Array, faded: Array, decay: Array, first: int) -> None:
    """Add what windows hold after the pivot, which is `first` steps in the first of them.

    `faded` is the decay to the power of the number of steps before that, by window.
    """
    windows, r, *lanes = sums.total.shape
    value, total, fading, away = np.zeros((4, r, *lanes))
    half_gram, of_pairs = np.zeros((2, r, r, *lanes))
    power, ones, squares = np.ones_like(decay), np.zeros_like(decay), np.zeros_like(decay)
    for length in range(first + windows):
        if length:
            ones += power
            squares += power * power
            power = power * decay
            value *= decay
            value += w[length - 1]
            total += value
            np.multiply(value, power, out=away)
            fading += away
            np.multiply(value, 0.5, out=away)
            np.multiply(away[:, None], value, out=of_pairs)
            half_gram += of_pairs
        o = length - first
        if o < 0:
            continue
        half_gram_here, total_here, fading_here = sums.half_gram[o], sums.total[o], sums.fading[o]
        half_gram_here += half_gram
        total_here += total
        np.multiply(last[o], decay * ones, out=away)
        total_here += away
        half = 0.5 * (decay * decay * squares)
        np.multiply(last[o], half, out=away)
        away += fading
        np.multiply(last[o][:, None], away, out=of_pairs)
        half_gram_here += of_pairs
        np.multiply(last[o], 2 * half, out=away)
        away += fading
        away *= faded[o]
        fading_here += away
