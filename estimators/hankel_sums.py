"""The square-root process at equal steps, from sums over windows in rolling position.

In psi = ln c, rho = ln r = −kappa Δ/2 and q (see `driftbook.estimators.square_root`), with A = 2 c r, g = a b and
l = ln(2 c r), the log-likelihood of a window is

    n psi − c (D2 − 2 ω D1 + ω² D0) + (q/2) ln(x_n/x_0) − n q rho + Σ_i (ln I_q(A g_i) − A g_i),    ω = e^rho − 1,

with D2 = Σ d², D1 = Σ a d and D0 = Σ a². Where all A g_i are large, the last sum is, by Hankel's expansion,

    −½ Σ ln(2π A g_i) + Σ_k h_k(q²) A^{−k} Σ_i g_i^{−k},

so that a few sums that do not depend on the parameters give value, gradient and hessian of every window. Steps near
zero, at which the expansion does not hold, are left out of those sums and computed one by one.

Which steps are near zero is asked of the window alone: those with g below a power of two that its own values say.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.bessel import hankel, log_bessel_jet
from driftbook.estimators.maximise import Places, Surface
from driftbook.estimators.square_root import FASTEST, by_alpha, is_still, log_quotient, log_ratio, order
from driftbook.estimators.windows import Array, PairedTerms, window_maxima

Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]

TRUNCATED = 1e-10  # size, in a log-likelihood, of the last term of an expansion; what it leaves out is less
NEAR = 12.0  # least A g of the steps that enter sums
STALE = 0.75  # share of unchanged values above which a window is taken for no diffusion
MOST_NEAR = 0.6  # share of steps by themselves above which sums save nothing
_HEDGE = 1.2  # by how much A may turn out smaller than at the start,
_ROOM = 2.0  # and the last term larger
_TERMS, _NEAR_TERMS = (8, 12, 24), 16  # of expansions: windows without steps by themselves take the fewest that do
_LONGEST = 0.25  # step of a starting point
_LEVELS = 4  # of what counts as near zero, from one power of two to the next


@dataclass(frozen=True)
class Roots:
    """Roots of a piece's values and what is made of them, by step: views of shape (rows, blocks, steps).

    Attributes
    ----------
    a, d : array
        The root before a step, and what it grows by.
    g : array
        The product of the roots before and after it.
    growth, log_growth : array, shape `Piece.shape`
        Of a window from its first to its last value.
    """

    a: Array
    d: Array
    g: Array
    growth: Array
    log_growth: Array

    @classmethod
    def of(cls, piece: Piece, roots: Array) -> Roots:
        """From values that are positive or not numbers, and their roots."""
        x, n = piece.x, piece.lookback
        before, after = roots[:, :-1], roots[:, 1:]
        growth = x[:, n:] - x[:, :-n]
        return cls(
            piece.by_step(before),
            piece.by_step((x[:, 1:] - x[:, :-1]) / (before + after)),
            piece.by_step(before * after),
            piece.by_window(growth),
            piece.by_window(log_quotient(x[:, n:], x[:, :-n])),
        )


@dataclass(frozen=True)
class Sums:
    """What the log-likelihood is made of, one entry a window, shape (m,), but `inverse`, (terms, m).

    Attributes
    ----------
    n : int
        Steps in a window.
    D2, D1, D0 : array
    log_growth : array
    unit : array
        A value of g that others are measured in.
    count, log_g, inverse : array
        Of the steps in the expansion: their number, Σ ln(g/unit), and Σ (unit/g)^k for k = 1, 2, ….
    near : Near or None
        The other steps.
    """

    n: int
    D2: Array
    D1: Array
    D0: Array
    log_growth: Array
    unit: Array
    count: Array
    log_g: Array
    inverse: Array
    near: Near | None

    def take(self, places: Places) -> Sums:
        """Some of the windows."""
        near = None if self.near is None else self.near.take(places)
        return Sums(
            self.n,
            self.D2[places],
            self.D1[places],
            self.D0[places],
            self.log_growth[places],
            self.unit[places],
            self.count[places],
            self.log_g[places],
            self.inverse[:, places],
            near,
        )

    def surface(self, point: Array, places: Places) -> Surface:
        """The log-likelihood at psi, rho and (q + 1) e^{−psi}, one point a window, with its derivatives."""
        part = self if places.size == self.D2.size else self.take(places)
        psi, rho, alpha = point
        return by_alpha(part._surface(psi, rho, order(psi, alpha)), psi, alpha)

    def rest(self, point: Array) -> Array:
        """Size of the last term of the expansion: more than it leaves out."""
        psi, rho, alpha = point
        q, terms = order(psi, alpha), len(self.inverse)
        last = _horner(hankel(terms)[-1], q * q)
        return np.asarray(np.abs(last) * self.inverse[-1] * (2 * np.exp(psi + rho) * self.unit) ** -terms)

    def _surface(self, psi: Array, rho: Array, q: Array) -> Surface:
        n, c, r, less = self.n, np.exp(psi), np.exp(rho), np.expm1(rho)
        square = c * (self.D2 - less * (2 * self.D1 - less * self.D0))
        lean = 2 * c * r * (self.D1 - less * self.D0)
        weight = 2 * c * np.square(r) * self.D0
        F, F_l, F_q, F_ll, F_lq, F_qq = self._expansion(2 * c * r * self.unit, q)
        if self.near is not None:
            F, F_l, F_q, F_ll, F_lq, F_qq = (
                each + own
                for each, own in zip((F, F_l, F_q, F_ll, F_lq, F_qq), self.near.sums(psi, rho, q), strict=True)
            )
        by_q = 0.5 * self.log_growth - n * rho
        value = n * psi - square + q * by_q + F
        gradient, hessian = np.empty((3, psi.size)), np.empty((3, 3, psi.size))
        gradient[0], gradient[1], gradient[2] = n - square + F_l, lean - n * q + F_l, by_q + F_q
        hessian[0, 0], hessian[1, 1], hessian[2, 2] = F_ll - square, F_ll + lean - weight, F_qq
        hessian[0, 1] = hessian[1, 0] = F_ll + lean
        hessian[0, 2] = hessian[2, 0] = F_lq
        hessian[1, 2] = hessian[2, 1] = F_lq - n
        return Surface(value, gradient, hessian)

    def _expansion(self, argument: Array, q: Array) -> tuple[Array, ...]:
        """Hankel's, summed over steps, and its derivatives by l and q; `argument` is A times the unit."""
        qq, power = q * q, 1 / argument
        terms = np.empty_like(self.inverse)
        terms[0] = power
        for below, above in pairwise(terms):
            np.multiply(below, power, out=above)
        terms *= self.inverse
        E, E_l, E_ll, E_m, E_lm, E_mm = np.zeros((6, q.size))
        for row, term in zip(reversed(hankel(len(terms))), terms[::-1], strict=True):
            E += _horner(row, qq) * term
            E_l += E  # Σ k t_k is the sum over k of what has been summed from k on, and Σ k (k + 1)/2 t_k that of those
            E_ll += E_l
            E_m += _horner(_slopes(row), qq) * term
            E_lm += E_m
            if len(row) > 2:
                E_mm += _horner(_slopes(_slopes(row)), qq) * term
        half = 0.5 * self.count
        return (
            E - half * np.log(2 * np.pi * argument) - 0.5 * self.log_g,
            -E_l - half,
            2 * q * E_m,
            2 * E_ll - E_l,
            -2 * q * E_lm,
            2 * E_m + 4 * qq * E_mm,
        )


def _horner(row: tuple[float, ...], x: Array) -> Array | float:
    if len(row) == 1:
        return row[0]
    total = x * row[-1]
    for coefficient in row[-2:0:-1]:
        total += coefficient
        total *= x
    total += row[0]
    return total


def _slopes(row: tuple[float, ...]) -> tuple[float, ...]:
    """Coefficients of a polynomial's derivative."""
    return tuple(j * each for j, each in enumerate(row))[1:]


@dataclass(frozen=True)
class Near:
    """Steps near zero: their ln g, all in one array, and the range of them that belongs to each window, shape (m,)."""

    log_g: Array
    begin: Integers
    end: Integers

    def take(self, places: Places) -> Near:
        """Some of the windows."""
        return Near(self.log_g, self.begin[places], self.end[places])

    def sums(self, psi: Array, rho: Array, q: Array) -> list[Array]:
        """Sums over each window's steps of ln I_q(z) − z and its derivatives."""
        count = self.end - self.begin
        window = np.repeat(np.arange(count.size), count)
        place = np.arange(count.sum()) + np.repeat(self.end - np.cumsum(count), count)
        jet = log_bessel_jet(q[window], np.exp((np.log(2.0) + psi + rho)[window] + self.log_g[place]))
        each = (jet.value, jet.by_log, jet.by_order, jet.by_log_log, jet.by_log_order, jet.by_order_order)
        sums = (np.bincount(window, weights=values, minlength=count.size) for values in each)
        return [values.astype(np.float64, copy=False) for values in sums]


class Summing:
    """The windows of a piece, and how they are summed.

    Parameters
    ----------
    piece : Piece
        Of values that are positive or not numbers.
    roots : Roots

    Attributes
    ----------
    stale : array of bool, shape (m,)
        Windows with most values unchanged, which are left out.
    """

    def __init__(self, piece: Piece, roots: Roots) -> None:
        self._piece, self._roots = piece, roots
        self._common, unchanged = _common(piece, roots)
        D2, _, D0, _ = self._common
        self.stale = unchanged > STALE * piece.lookback
        moving = ~(self.stale | is_still(D0 / piece.lookback, D2))
        least = -window_maxima(-roots.g, piece.lookback, piece.skip).reshape(-1)
        self._near_below = _HEDGE * NEAR / piece.lookback * D2  # as 1/A is about D2/n
        self._far = np.flatnonzero(moving & (least >= self._near_below))
        self._near = np.flatnonzero(moving & (least < self._near_below))

    def groups(self) -> Iterator[tuple[Places, Sums, Array]]:
        """Places of windows, their sums, and points to start from, shape (3, m); not of those with most steps near."""
        yield from self._far_groups()
        level = np.ceil(_LEVELS * np.log2(self._near_below[self._near])).astype(np.int64)
        for each in np.unique(level):
            yield _near_sums(self._piece, self._roots, self._common, self._near[level == each], 2 ** (each / _LEVELS))

    def _far_groups(self) -> Iterator[tuple[Places, Sums, Array]]:
        places = self._far
        for terms in _TERMS:
            if not places.size:
                return
            sums = _far_sums(self._piece, self._roots, self._common, places, terms)
            start = _far_start(sums)
            enough = sums.rest(start) <= TRUNCATED / _ROOM
            some = np.flatnonzero(enough)
            yield (places, sums, start) if enough.all() else (places[some], sums.take(some), start[:, some])
            places = places[~enough]


Common = tuple[Array, Array, Array, Array]


def _common(piece: Piece, roots: Roots) -> tuple[Common, Array]:
    """D2, D1, D0 and ln(x_n/x_0) of every window, shape (m,), and the number of steps without a change."""
    terms = PairedTerms(roots.d.shape, 3)
    squares, values, unchanged = terms.parts
    np.multiply(roots.d, roots.d, out=squares)
    np.multiply(roots.a, roots.a, out=values)
    unchanged[...] = roots.d == 0
    D2, D0, count = (each.reshape(-1) for each in terms.sums(piece.lookback, piece.skip))
    D1 = 0.5 * (roots.growth.reshape(-1) - D2)
    return (D2, D1, D0, roots.log_growth.reshape(-1)), count


def _far_sums(piece: Piece, roots: Roots, common: Common, places: Places, terms: int) -> Sums:
    """Of windows without steps near zero; g is measured in what it is at the pivot, which all windows hold."""
    m, width = piece.shape[-1], roots.g.shape[-1]
    wanted = np.zeros(roots.g.size // width, dtype=np.bool_)
    wanted[places // m] = True
    row = (np.cumsum(wanted) - 1)[places // m]
    g = roots.g.reshape(-1, width)
    g = g if wanted.all() else g[wanted]
    unit = g[:, piece.pivot : piece.pivot + 1]
    log_g, *inverse = _expansion_terms(unit / g, terms).sums(piece.lookback, piece.skip)
    at = row * m + places % m
    D2, D1, D0, log_growth = (each[places] for each in common)
    powers = np.stack([each.reshape(-1)[at] for each in inverse])
    count = np.full(places.size, float(piece.lookback))
    return Sums(piece.lookback, D2, D1, D0, log_growth, unit[row, 0], count, log_g.reshape(-1)[at], powers, None)


def _expansion_terms(share: Array, terms: int, far: Mask | None = None) -> PairedTerms:
    """−ln s and s^k, k = 1 … terms, of s = unit/g; zeros for steps that are not far."""
    room = PairedTerms(share.shape, terms + 1)
    log_g, *powers = room.parts
    np.negative(np.log(share if far is None else np.where(far, share, 1.0)), out=log_g)
    powers[0][...] = share if far is None else np.where(far, share, 0.0)
    for below, above in pairwise(powers):
        np.multiply(below, powers[0], out=above)
    return room


def _near_sums(piece: Piece, roots: Roots, common: Common, places: Places, unit: float) -> tuple[Places, Sums, Array]:
    """Of windows whose steps count as near zero below `unit`, those with not too many of them."""
    n, m, width = piece.lookback, piece.shape[-1], roots.g.shape[-1]
    segments, row = np.unique(places // m, return_inverse=True)
    a, d, g = (each.reshape(-1, width)[segments] for each in (roots.a, roots.d, roots.g))
    far = g >= unit
    small = np.flatnonzero(~far)
    begin = row * width + places % m
    near = Near(np.log(g.reshape(-1)[small]), np.searchsorted(small, begin), np.searchsorted(small, begin + n))
    count = (near.end - near.begin).astype(np.float64)
    keep = np.flatnonzero(count <= MOST_NEAR * n)
    at = row[keep], places[keep] % m
    log_g, *inverse = (each[at] for each in _expansion_terms(unit / g, _NEAR_TERMS, far).sums(n, piece.skip))
    D2, D1, D0, log_growth = (each[places[keep]] for each in common)
    units, far_count = np.full(keep.size, unit), n - count[keep]
    sums = Sums(n, D2, D1, D0, log_growth, units, far_count, log_g, np.stack(inverse), near.take(keep))
    weighted = [each[at] for each in _weighted_terms(a, d, unit).sums(n, piece.skip)]
    return places[keep], sums, _near_start(sums, *weighted)


def _weighted_terms(a: Array, d: Array, unit: float) -> PairedTerms:
    """w, w y and w y² of increments y, in units of `unit`, with weights w = 1/(1 + x) that stay bounded at zero."""
    room = PairedTerms(a.shape, 3)
    w, wy, wyy = room.parts
    np.divide(unit, unit + np.square(a), out=w)
    y = d * (2 * a + d) / unit
    np.multiply(w, y, out=wy)
    np.multiply(wy, y, out=wyy)
    return room


def _near_start(sums: Sums, S: Array, Sy: Array, Syy: Array) -> Array:
    """Weighted least squares of increments y on values x, in units of `Sums.unit`, with weights 1/(1 + x)."""
    unit, n = sums.unit, sums.n
    Sx = n - S
    Sxx, Sxy = sums.D0 / unit - Sx, (sums.D2 + 2 * sums.D1) / unit - Sy
    det = S * Sxx - Sx * Sx
    alpha, slope = (Sxx * Sy - Sx * Sxy) / det, (Sx * Sy - S * Sxy) / det
    variance = (Syy - alpha * Sy + slope * Sxy) / Sx
    h = np.clip(-np.log1p(-np.minimum(slope, 0.9)), -1.0, 0.5 * FASTEST)
    ratio = np.exp(log_ratio(h))
    c = 2 * ratio / (variance * unit)
    return np.stack([np.log(c), -0.5 * h, unit * np.maximum(alpha, 0.25 * variance) / ratio])


def _far_start(sums: Sums) -> Array:
    """Where the likelihood with three terms of the expansion is largest, nearly, for windows without steps near zero.

    With S = Σ 1/g + Σ 1/g²/(2 A) − q² Σ 1/g³/(6 A²), the best q is u A/S with u = ½ ln(x_n/x_0) − n rho, and the best c
    is n/(2 R) with R = Q − r u²/S, Q = Σ (b − r a)²; what is left is to minimise ln R + rho: one step of Newton's from
    weighted least squares, at whose A = 4/(sigma² Δ) and q the sum S is taken.
    """
    n, half, unit = sums.n, 0.5 * sums.log_growth, sums.unit
    S = sums.inverse[0] / unit
    variance, h = _weighted_squares(sums, S)
    rho = -0.5 * h
    less, u, r = np.expm1(rho), half - n * rho, np.exp(rho)
    second, third = 0.125 * variance / unit * sums.inverse[1], np.square(u / sums.inverse[0]) / 6 * sums.inverse[2]
    S_all = S + (second - third) / unit
    lean = r / S_all
    Q, Q_1 = sums.D2 - less * (2 * sums.D1 - less * sums.D0), 2 * r * (less * sums.D0 - sums.D1)
    R, R_1 = Q - lean * u * u, Q_1 - lean * u * (u - 2 * n)
    R_2 = Q_1 + 2 * np.square(r) * sums.D0 - lean * (u * (u - 4 * n) + 2 * n * n)
    share = R_1 / R
    move = -(share + 1) / (R_2 / R - np.square(share))
    rho = rho + np.where(np.abs(move) < _LONGEST, move, 0.0)
    less, u, r = np.expm1(rho), half - n * rho, np.exp(rho)
    R = sums.D2 - less * (2 * sums.D1 - less * sums.D0) - r / S_all * u * u
    c = n / (2 * np.fmax(R, 0.25 * sums.D2))
    c = c * (1 - S / (8 * n * c * r))
    q = 2 * c * r * u / S_all
    return np.stack([np.log(c), rho, np.fmax((q + 1) / c, 0.25 / c)])


def _weighted_squares(sums: Sums, S: Array) -> tuple[Array, Array]:
    """Variance sigma² Δ and pull h by weighted least squares of increments on values, with weights 1/g; S = Σ 1/g.

    Σ dx/x is about ln(x_n/x_0) + ½ sigma² Δ Σ 1/x, and Σ dx²/x about 4 D2.
    """
    n, squares = sums.n, 4 * sums.D2
    rise = sums.D2 + 2 * sums.D1
    pull = sums.log_growth + squares * S / (2 * n)
    det = S * sums.D0 - n * n
    alpha, slope = (sums.D0 * pull - n * rise) / det, (n * pull - S * rise) / det
    variance = np.fmax(squares - alpha * pull + slope * rise, 0.25 * squares) / n
    return variance, -np.log1p(-np.clip(np.where(np.isfinite(slope), slope, 0.0), -0.5, 0.8))
