"""Increments of a window against the time they took: what an arithmetic Brownian motion needs.

With increments d_i over steps Δ_i and T = Σ Δ_i, the rate is m = Σ d_i/T and the sum of squares
R = Σ (d_i − m Δ_i)²/Δ_i. Two ways lead to the same numbers: `from_sums` by sums over windows in rolling position,
which says where they lost digits, and `from_windows` by two passes through each window, which loses none.

For the sums, increments are measured from those of the rate at the segment's pivot, a step of every window, and steps
in units of the pivot's: with e_i = d_i − rate Δ_i, R = Σ e²/Δ − (Σ e)²/T.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from driftbook.estimators.batches import Piece
from driftbook.estimators.regression import EPS, LARGEST, LOSS, ROUNDING, SMALLEST, Mask
from driftbook.estimators.windows import Array, PairedTerms


@dataclass(frozen=True)
class Increments:
    """Rate and volatility, one a window; all arrays have one shape.

    Attributes
    ----------
    n : int
        Steps in a window.
    duration : array
        T, the time from the first observation to the last.
    rate : array
        m, the change per unit of time.
    volatility : array
        √(R/n).
    kurtosis : array or None
        Σ z⁴/n over z = (d − m Δ)/√(Δ R/n).
    log_steps : array
        Σ ln Δ_i.
    """

    n: int
    duration: Array
    rate: Array
    volatility: Array
    kurtosis: Array | None
    log_steps: Array


def from_sums(piece: Piece) -> tuple[Increments, Mask]:
    """Increments of every window of a piece, with the kurtosis if intervals are wanted, and where they are sound.

    Not sound is what may have lost more than `LOSS` of its size, or met a value that is not finite.

    Returns
    -------
    increments : Increments
        Arrays of shape (windows,).
    sound : array of bool, shape (windows,)
    """
    x, n = piece.x, piece.lookback
    d = piece.by_step(x[:, 1:] - x[:, :-1])
    at_pivot = slice(piece.pivot, piece.pivot + 1)
    origin, usual, unit = piece.by_step(x[:, :-1])[..., at_pivot], d[..., at_pivot], piece.dt[..., None]
    if piece.steps is None:
        T, log_steps = np.asarray(float(n)), n * np.log(unit)
        terms = _equal_terms(d - usual, fourth=piece.intervals)
    else:
        steps = piece.by_step(piece.steps)
        in_units = steps / unit
        T, log_steps = piece.sums(in_units), piece.sums(np.log(steps))
        terms = _unequal_terms(d - usual * in_units, in_units, fourth=piece.intervals)
    Se, See, *higher = terms.sums(n, piece.skip)
    mean = Se * (1 / T)
    R = See - Se * mean
    loss = 4 * EPS * n**0.5 / LOSS
    largest = 2 * (origin * origin) + 4 * T * (See + (usual * usual) * T)  # no value of the window has a larger square
    sound: Mask = np.maximum(loss * See, 2 * n * ROUNDING**2 * largest) < R
    sound &= (R > SMALLEST) & (largest < LARGEST)
    kurtosis = None
    if piece.intervals:
        fourth = _fourth_about_mean(mean, T, [Se, See, *higher], is_equal=piece.steps is None)
        sound &= 8 * loss * higher[0] < fourth
        kurtosis = (n * fourth / np.square(R)).reshape(-1)
    found = Increments(
        n,
        np.broadcast_to(T * unit, R.shape).reshape(-1),
        ((usual + mean) / unit).reshape(-1),
        np.sqrt(R / (n * unit)).reshape(-1),
        kurtosis,
        np.broadcast_to(log_steps, R.shape).reshape(-1),
    )
    return found, sound.reshape(-1)


def _equal_terms(e: Array, *, fourth: bool) -> PairedTerms:
    """The terms e, e², and if wanted e⁴ and e³."""
    terms = PairedTerms(e.shape, 4 if fourth else 2)
    terms.parts[0][...] = e
    square = np.multiply(e, e, out=terms.parts[1])
    if fourth:
        np.multiply(square, square, out=terms.parts[2])
        np.multiply(square, e, out=terms.parts[3])
    return terms


def _unequal_terms(e: Array, step: Array, *, fourth: bool) -> PairedTerms:
    """The terms e, e²/Δ, and if wanted e⁴/Δ², e³/Δ, e², e Δ and Δ²."""
    terms = PairedTerms(e.shape, 7 if fourth else 2)
    terms.parts[0][...] = e
    square = np.divide(e * e, step, out=terms.parts[1])
    if fourth:
        factors = ((square, square), (square, e), (e, e), (e, step), (step, step))
        for part, (a, b) in zip(terms.parts[2:], factors, strict=True):
            np.multiply(a, b, out=part)
    return terms


def _fourth_about_mean(mean: Array, T: ArrayLike, sums: list[Array], *, is_equal: bool) -> Array:
    """Σ (e − mean Δ)⁴/Δ², by the binomial theorem."""
    Se, See, e4, e3 = sums[:4]
    ee, ed, dd = (See, Se, np.asarray(T)) if is_equal else sums[4:]
    return np.asarray(e4 + mean * (mean * (6 * ee + mean * (mean * dd - 4 * ed)) - 4 * e3))


def from_windows(windows: Array, steps: Array, *, fourth: bool) -> tuple[Increments, Mask]:
    """Increments of windows given one by one, with the rate taken off before anything is squared.

    Parameters
    ----------
    windows : array, shape (m, n + 1)
        Finite observations.
    steps : array, shape (m, n)
    fourth : bool
        Whether to compute the kurtosis.

    Returns
    -------
    increments : Increments
        Arrays of shape (m,).
    flat : array of bool, shape (m,)
        True where values do not vary but in a straight line, or by no more than their rounding.
    """
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    x = np.ldexp(windows, -exponent[:, None])  # exact, and squares stay in range
    T = steps.sum(axis=1)
    rate = (x[:, -1] - x[:, 0]) / T
    rest = np.diff(x, axis=1) - rate[:, None] * steps
    lost = rest.sum(axis=1) / T
    rest -= lost[:, None] * steps
    squares = rest * rest / steps
    R = squares.sum(axis=1)
    rounding = ROUNDING**2 * (x[:, :-1] * x[:, :-1] / steps).sum(axis=1)
    flat = ~(rounding < R)
    n = windows.shape[1] - 1
    kurtosis = n * (squares * squares).sum(axis=1) / np.square(R) if fourth else None
    volatility = np.ldexp(np.sqrt(R / n), exponent)
    return Increments(n, T, np.ldexp(rate + lost, exponent), volatility, kurtosis, np.log(steps).sum(axis=1)), flat
