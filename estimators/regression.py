"""Least squares of a window's increments on its levels: what an Ornstein–Uhlenbeck fit with equal steps needs.

With d_i = x_{i+1} − x_i and an intercept, the slope of d on x is b − 1, where b is the slope of the AR(1) regression
of x_{i+1} on x_i. Estimating b − 1 itself loses no digits where b is near 1, which is the usual case.

Two ways lead to the same numbers. `from_sums` takes a few sums over every window in rolling position, and says where
they lost digits; `from_windows` goes through each window twice and loses none. The first is fast, the second repairs
it where needed.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.windows import Array, PairedTerms

Mask = NDArray[np.bool_]

EPS = float(np.finfo(np.float64).eps)
LOSS = 1e-10  # largest loss that is left standing: estimated relative rounding error of a sum of squares
LARGEST, SMALLEST = 1e130, 1e-110  # sums of squares outside this have fourth powers that overflow or vanish
ROUNDING = 2 * EPS  # residuals this small against the values are rounding, not movement


@dataclass(frozen=True)
class Regression:
    """Increments on levels, one regression a window; all arrays have one shape.

    Attributes
    ----------
    n : int
        Steps in a window.
    level : array
        Mean of x_0 … x_{n-1}.
    drift : array
        Mean increment.
    slope : array
        Slope of the increments on the levels: b − 1.
    spread : array
        Sum of squares of the levels about their mean.
    rss : array
        Residual sum of squares.
    robust : array or None
        Σ (x_i − level)² e_i² over the residuals e, the middle of White's (1980) covariance, HC0.
    fourth : array or None
        Σ e_i⁴.
    evenness : array or float
        By how much the variance of the level that increments point to is larger than at equal steps; 1 there.
    log_b : array or None
        ln(1 + slope) where it is known better than from the slope.
    """

    n: int
    level: Array
    drift: Array
    slope: Array
    spread: Array
    rss: Array
    robust: Array | None = None
    fourth: Array | None = None
    evenness: Array | float = 1.0
    log_b: Array | None = None

    def without_fourth(self) -> Regression:
        """The same without the sums of degree four."""
        return replace(self, robust=None, fourth=None)

    def flat(self) -> Regression:
        """The same with arrays of one dimension."""
        return Regression(
            self.n,
            self.level.reshape(-1),
            self.drift.reshape(-1),
            self.slope.reshape(-1),
            self.spread.reshape(-1),
            self.rss.reshape(-1),
            None if self.robust is None else self.robust.reshape(-1),
            None if self.fourth is None else self.fourth.reshape(-1),
        )


def from_sums(piece: Piece) -> tuple[Regression, Mask]:
    """Regress in every window of a piece, from sums over windows; with sums of degree four if intervals are wanted.

    Returns
    -------
    regression : Regression
        Arrays of `Piece.shape`.
    sound : array of bool, of that shape
        False where a sum of squares may have lost more than `LOSS` of its size, left the range in which its square
        is a number, is no larger than rounding, or met a value that is not finite: what is said there means nothing.
    """
    x, lookback, skip = piece.x, piece.lookback, piece.skip
    n = float(lookback)
    steps = piece.by_step(x[:, 1:] - x[:, :-1])
    levels = piece.by_step(x[:, :-1])
    origin = levels[..., piece.pivot : piece.pivot + 1]
    drift = piece.by_window((x[:, lookback:] - x[:, :-lookback]) * (1 / n))
    terms = _terms(levels, origin, steps)
    Su, Suu, Sud, Sdd = terms.sums(lookback, skip)
    u_mean = Su * (1 / n)
    spread = Suu - Su * u_mean
    slope = (Sud - Su * drift) / spread
    rss = Sdd - n * (drift * drift) - slope * slope * spread
    regression = Regression(lookback, u_mean + origin, drift, slope, spread, rss)
    sound = _is_sound(regression, origin, Suu, Sdd)
    if piece.intervals:
        usual = steps[..., piece.pivot : piece.pivot + 1]
        higher = _higher_terms(steps - usual, terms).sums(lookback, skip)
        regression, kept = _with_fourth(regression, u_mean, drift - usual, [Suu, *higher])
        sound &= kept
    return regression, sound


def _terms(levels: Array, origin: Array, d: Array) -> PairedTerms:
    """The terms u = level − origin, u², u d and d²."""
    terms = PairedTerms(levels.shape, 4)
    u, uu, ud, dd = terms.parts
    np.subtract(levels, origin, out=u)
    np.multiply(u, u, out=uu)
    np.multiply(u, d, out=ud)
    np.multiply(d, d, out=dd)
    return terms


def _higher_terms(e: Array, lower: PairedTerms) -> PairedTerms:
    """The terms u e, e², u³, u² e, u e², e³, u⁴, u³ e, u² e², u e³ and e⁴; e is measured from a pivot of its own."""
    u, uu, *_ = lower.parts
    ue, ee = u * e, e * e
    factors = ((u, e), (e, e), (uu, u), (uu, e), (ue, e), (ee, e), (uu, uu), (uu, ue), (ue, ue), (ue, ee), (ee, ee))
    terms = PairedTerms(u.shape, len(factors))
    for part, (a, b) in zip(terms.parts, factors, strict=True):
        np.multiply(a, b, out=part)
    return terms


def _is_sound(regression: Regression, origin: Array, Suu: Array, Sdd: Array) -> Mask:
    """Whether spread, slope and rss kept their digits; NaN compares as false.

    A running sum of n squares is off by about eps·√n of its size, four times that at worst in practice: spread and
    rss are compared with what they were taken from. Here increments are not measured from a pivot of their own: where
    they are large against what they differ by, as on a ramp, this finds it.
    """
    n, slope, spread, rss = regression.n, regression.slope, regression.spread, regression.rss
    loss = 4 * EPS * n**0.5 / LOSS
    rounding = 2 * ROUNDING**2
    largest_share = n + 1  # of Suu by spread, as the pivot is one of the levels
    least = (slope * slope * (2 * loss) + rounding) * Suu + 2 * loss * Sdd + (rounding * n) * origin * origin
    sound: Mask = least < rss
    if loss * largest_share > 0.5:
        sound &= loss * Suu < spread
    sound &= Suu + Sdd < LARGEST
    sound &= np.minimum(rss, spread) > SMALLEST
    return sound


def _with_fourth(regression: Regression, u_mean: Array, e_mean: Array, sums: list[Array]) -> tuple[Regression, Mask]:
    """Add the two sums of degree four, and say where they kept their digits.

    With g = e − slope·u and α the mean of g, residuals are g − α; the sums of u^j g^k follow from those of u^j e^k by
    the binomial theorem.
    """
    Suu, Sue, See, Suuu, Suue, Suee, Seee, Suuuu, Suuue, Suuee, Sueee, Seeee = sums
    n, m = regression.n, regression.slope
    alpha = e_mean - m * u_mean
    Sug, Suug = Sue - m * Suu, Suue - m * Suuu
    Sgg = See - m * (Sue + Sug)
    Sugg = Suee - m * (Suue + Suug)
    Suugg = Suuee + m * (m * Suuuu - 2 * Suuue)
    Sggg = Seee + m * (m * (3 * Suue - m * Suuu) - 3 * Suee)
    Sgggg = Seeee + m * (m * (6 * Suuee + m * (m * Suuuu - 4 * Suuue)) - 4 * Sueee)
    fourth = Sgggg + alpha * (alpha * (6 * Sgg - 3 * n * alpha * alpha) - 4 * Sggg)
    urr = Sugg + alpha * (alpha * n * u_mean - 2 * Sug)
    uurr = Suugg + alpha * (alpha * Suu - 2 * Suug)
    robust = uurr + u_mean * (u_mean * regression.rss - 2 * urr)
    loss = 4 * EPS * n**0.5 / LOSS
    mm = m * m
    sound: Mask = 8 * loss * (Seeee + mm * mm * Suuuu) < fourth
    sound &= 8 * loss * (Suuee + mm * Suuuu) < robust
    return replace(regression, robust=robust, fourth=fourth), sound


def from_windows(windows: Array) -> tuple[Regression, Array, Mask]:
    """Regress in windows given one by one, with means taken off before anything is squared.

    Parameters
    ----------
    windows : array, shape (m, n + 1)
        Finite observations.

    Returns
    -------
    regression : Regression
        Arrays of shape (m,), of observations divided by `unit`.
    unit : array, shape (m,)
        A power of two a window, near its largest value: dividing by it is exact, and keeps squares in range.
    flat : array of bool, shape (m,)
        True where values do not vary, or residuals are no larger than the rounding of the values.
    """
    n = windows.shape[1] - 1
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    scaled = np.ldexp(windows, -exponent[:, None])
    x, step = scaled[:, :-1], np.diff(scaled, axis=1)
    level, u = _centre(x)
    drift, e = _centre(step)
    spread = (u * u).sum(axis=1)
    slope = (u * e).sum(axis=1) / spread
    residual = e - slope[:, None] * u
    squares = residual * residual
    rss = squares.sum(axis=1)
    flat = ~((spread > 0) & (rss > ROUNDING**2 * (x * x).sum(axis=1)))
    fourth, robust = (squares * squares).sum(axis=1), (u * u * squares).sum(axis=1)
    return Regression(n, level, drift, slope, spread, rss, robust, fourth), np.ldexp(1.0, exponent), flat


def _centre(values: Array) -> tuple[Array, Array]:
    """Row means and what remains; the second pass takes off what the first mean lost by rounding."""
    origin = values[:, :1]
    rest = values - origin
    mean = rest.mean(axis=1, keepdims=True)
    rest -= mean
    lost = rest.mean(axis=1, keepdims=True)
    rest -= lost
    return (origin + (mean + lost))[:, 0], rest
