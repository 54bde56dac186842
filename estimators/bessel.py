"""ln I_q(z) − z of the modified Bessel function of the first kind, with its derivatives, for orders q ≥ −1 and z > 0.

Two expansions share the quarter plane; both hold 1e-13 where they are used and lose nothing where I_q(z) itself would
overflow or vanish.

With r = √(q² + z²) ≥ `FAR`, Debye's expansion, uniform in the order (NIST DLMF 10.41.3), in logarithms: with s = q²/r²,

    ln I_q(z) − z = q²/(r + z) − q asinh(q/z) − ½ ln(2π r) + Σ_k d_k(s) r^{−k},

where the polynomials d_k follow from the U_k of DLMF 10.41.10 in exact rationals. It is even in q but for the second
term, so it serves −1 ≤ q < 0 as well: what it leaves out there is of the order of e^{−2z}.

Nearer to zero, the power series (DLMF 10.25.2) with its first factor 1/Γ(q + 1) written as (q + 1)/Γ(q + 2):

    I_q(z) = (z/2)^q/Γ(q + 2) · [(q + 1) + Σ_{k ≥ 1} (z²/4)^k/(k! (q + 2)_{k−1})],

all of whose terms are positive, and which is smooth at q = −1.

For one large z and a moderate order there is also the logarithm of Hankel's expansion (DLMF 10.40.1), a polynomial in
q² for each power of 1/z: `hankel`.

References
----------
Olver, F. W. J. & Maximon, L. C., Bessel functions, chapter 10 of the NIST Digital Library of Mathematical Functions.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from driftbook.estimators.windows import Array

FAR = 25.0  # r from which the uniform expansion holds
_UNIFORM = ((25.0, 12), (45.0, 9), (150.0, 6), (1500.0, 4))  # terms that it takes from each r on
_SERIES = (1.0, 2.5, 5.0, 9.0, 16.0, FAR)  # ends of the ranges of z with a number of terms of their own
_AT_ONCE = 8192  # elements that are computed at one time: their arrays stay in cache
_SHIFT = 8  # steps up before the asymptotic series of the digamma function is used

Polynomial = list[Fraction]


@dataclass(frozen=True)
class Jet:
    """A function of ln z and the order q: its value, and its first and second derivatives; arrays of one shape."""

    value: Array
    by_log: Array
    by_order: Array
    by_log_log: Array
    by_log_order: Array
    by_order_order: Array


def log_bessel(order: ArrayLike, z: ArrayLike) -> Array:
    """ln I_q(z) − z.

    Parameters
    ----------
    order, z : array_like, shapes that broadcast
        Orders q ≥ −1 and arguments z > 0; elsewhere the result is not a number.
    """
    (value,) = _in_parts(order, z, _uniform_value, _series_value, 1)
    return np.asarray(value)


def log_bessel_jet(order: ArrayLike, z: ArrayLike) -> Jet:
    """ln I_q(z) − z and its derivatives; arguments as in `log_bessel`."""
    return Jet(*_in_parts(order, z, _uniform_jet, _series_jet, 6))


Part = Callable[[Array, Array, int], Sequence[Array]]


def _in_parts(order: ArrayLike, z: ArrayLike, uniform: Part, series: Part, count: int) -> NDArray[np.float64]:
    """Let each element be computed by the expansion that holds there, with the terms that it takes there."""
    q, z = np.broadcast_arrays(np.asarray(order, dtype=np.float64), np.asarray(z, dtype=np.float64))
    shape, q, z = z.shape, q.reshape(-1), z.reshape(-1)
    out = np.full((count, z.size), np.nan)
    with np.errstate(all="ignore"):
        r = np.hypot(q, z)
        usable = (q >= -1) & (z > 0)
        far = usable & (r >= FAR)
        starts = [start for start, _ in _UNIFORM]
        band = np.where(far, np.searchsorted(starts, r, side="right"), 0)
        for number, (_, terms) in enumerate(_UNIFORM, start=1):
            _fill(out, np.flatnonzero(band == number), q, z, uniform, terms)
        band = np.where(usable & ~far, np.searchsorted(_SERIES, z, side="left"), -1)
        for number, end in enumerate(_SERIES):
            _fill(out, np.flatnonzero(band == number), q, z, series, _terms_of_series(end))
    return out.reshape(count, *shape)


def _fill(out: Array, places: NDArray[np.intp], q: Array, z: Array, part: Part, terms: int) -> None:
    for start in range(0, places.size, _AT_ONCE):
        at = places[start : start + _AT_ONCE]
        for row, values in zip(out, part(q[at], z[at], terms), strict=True):
            row[at] = values


# The uniform expansion.


def _uniform_value(q: Array, z: Array, terms: int) -> tuple[Array]:
    r = np.hypot(q, z)
    w, s = 1 / r, np.square(q / r)
    return (_leading(q, z, r) + _double_sum(_debye(terms).value, w, s),)


def _leading(q: Array, z: Array, r: Array) -> Array:
    return q * q / (r + z) - q * np.arcsinh(q / z) - 0.5 * np.log(2 * np.pi * r)


def _uniform_jet(q: Array, z: Array, terms: int) -> tuple[Array, ...]:
    r = np.hypot(q, z)
    w, s, c = 1 / r, np.square(q / r), np.square(z / r)
    ww, tables = w * w, _debye(terms)
    T, T_a, T_aa, T_m, T_mm, T_am = (_double_sum(table, w, s) for table in tables.all)
    lost = q * q / (r + z)
    return (
        _leading(q, z, r) + T,
        lost - 0.5 * c - c * T_a,
        -np.arcsinh(q / z) - 0.5 * q * ww + 2 * q * ww * T_m,
        -z * w * lost - s * c - 2 * s * c * T_a + c * c * T_aa,
        q * w + c * q * ww - 2 * q * ww * c * T_am,
        -w - 0.5 * ww + s * ww + 2 * ww * T_m + 4 * s * ww * T_mm,
    )


def _double_sum(table: tuple[tuple[float, ...], ...], w: Array, s: Array) -> Array:
    """Σ_k w^k Σ_j table[k − 1][j] s^j, by Horner's rule in both."""
    total = np.zeros_like(w)
    for row in reversed(table):
        inner = np.full_like(w, row[-1])
        for coefficient in row[-2::-1]:
            inner *= s
            inner += coefficient
        total += inner
        total *= w
    return total


@dataclass(frozen=True)
class _Debye:
    """Coefficients, by k and j, of w^k s^j in the sum T and what its derivatives are made of.

    With l = ln z, m = q², c = 1 − s and w = 1/r: a term w^k s^j has the derivative −c (k + 2j) w^k s^j by l, and
    w² (j w^k s^{j−1} − ½ (k + 2j) w^k s^j) by m. So T_l = −c A, T_ll = −2 s c A + c² AA, T_m = w² M, T_mm = w⁴ MM and
    T_lm = −c w² AM.
    """

    all: tuple[tuple[tuple[float, ...], ...], ...]

    @property
    def value(self) -> tuple[tuple[float, ...], ...]:
        """Of T itself."""
        return self.all[0]


@lru_cache(maxsize=16)
def _debye(terms: int) -> _Debye:
    d = _debye_polynomials()[:terms]
    once = [_weighted(row, k) for k, row in enumerate(d, start=1)]
    twice = [_weighted(row, k) for k, row in enumerate(once, start=1)]
    by_m = [_by_square(row, k) for k, row in enumerate(d, start=1)]
    by_m_m = [_by_square(row, k + 2) for k, row in enumerate(by_m, start=1)]
    by_m_l = [_weighted(row, k + 2) for k, row in enumerate(by_m, start=1)]
    tables = (d, once, twice, by_m, by_m_m, by_m_l)
    return _Debye(tuple(tuple(tuple(float(each) for each in row) for row in table) for table in tables))


def _weighted(row: Polynomial, k: int) -> Polynomial:
    return [(k + 2 * j) * each for j, each in enumerate(row)]


def _by_square(row: Polynomial, k: int) -> Polynomial:
    kept = [-Fraction(k + 2 * j, 2) * each for j, each in enumerate(row)]
    for j, each in enumerate(row[1:], start=1):
        kept[j - 1] += j * each
    return kept


@lru_cache(maxsize=1)
def _debye_polynomials() -> list[Polynomial]:
    """The polynomials d_k(s), k = 1, 2, …: the logarithm of 1 + Σ U_k(p) q^{−k}, with U_k(p) q^{−k} = r^{−k} u_k(s)."""
    count = max(terms for _, terms in _UNIFORM)
    U: list[Polynomial] = [[Fraction(1)]]
    for _ in range(count):
        U.append(_next_debye(U[-1]))
    u = [[row[k + 2 * j] for j in range(k + 1)] for k, row in enumerate(U)]
    return _log_series(u)


def _next_debye(U: Polynomial) -> Polynomial:
    """U_{k+1}(p) = ½ p² (1 − p²) U_k′(p) + ⅛ ∫₀^p (1 − 5t²) U_k(t) dt."""
    out = [Fraction(0)] * (len(U) + 3)
    for i, each in enumerate(U):
        out[i + 1] += each * (Fraction(i, 2) + Fraction(1, 8 * (i + 1)))
        out[i + 3] -= each * (Fraction(i, 2) + Fraction(5, 8 * (i + 3)))
    return out


def _log_series(terms: list[Polynomial]) -> list[Polynomial]:
    """Coefficients of the logarithm of a power series that begins with 1, from the first power on."""
    logs: list[Polynomial] = [[]]
    for k in range(1, len(terms)):
        total = [k * each for each in terms[k]]
        for j in range(1, k):
            for a, left in enumerate(logs[j]):
                for b, right in enumerate(terms[k - j]):
                    if left and right:
                        total[a + b] -= j * left * right
        logs.append([each / k for each in total])
    return logs[1:]


# The power series.


def _series_value(q: Array, z: Array, terms: int) -> tuple[Array]:
    from scipy.special import gammaln

    quarter = 0.25 * z * z
    term = quarter.copy()
    total = q + 1
    total += term
    for k in range(2, terms + 1):
        term *= quarter / (k * (q + k))
        total += term
    return (q * np.log(0.5 * z) - gammaln(q + 2) + np.log(total) - z,)


def _series_jet(q: Array, z: Array, terms: int) -> tuple[Array, ...]:
    from scipy.special import gammaln

    quarter = 0.25 * z * z
    term = quarter.copy()
    total = q + 1
    total += term
    once, twice = term.copy(), term.copy()
    h, h2, h_once, h_total, square = (np.zeros_like(z) for _ in range(5))
    for k in range(2, terms + 1):
        share = 1 / (q + k)
        term *= quarter
        term *= share
        term *= 1 / k
        h += share
        share *= share
        h2 += share
        total += term
        weighted = term * k
        once += weighted
        weighted *= k
        twice += weighted
        weighted = term * h
        h_total += weighted
        square += weighted * h
        weighted *= k
        h_once += weighted
        square += term * h2
    a, b = 2 * once / total, (1 - h_total) / total
    log_half, (digamma, trigamma) = np.log(0.5 * z), _digamma_and_trigamma(q + 2)
    return (
        q * log_half - gammaln(q + 2) + np.log(total) - z,
        q + a - z,
        log_half - digamma + b,
        4 * twice / total - a * a - z,
        1 - 2 * h_once / total - a * b,
        square / total - b * b - trigamma,
    )


@lru_cache(maxsize=16)
def _terms_of_series(z: float) -> int:
    """Terms after which the rest, weighted by k² as in a second derivative, is below 1e-19 of the sum, for q ≥ −1."""
    term = total = 0.25 * z * z
    k = 1
    while k * k * term > 1e-19 * total or k < z / 2:
        k += 1
        term *= 0.25 * z * z / (k * (k - 1))
        total += term
    return k


def _digamma_and_trigamma(x: Array) -> tuple[Array, Array]:
    """ψ(x) and ψ′(x) for x ≥ 1, by steps up and their asymptotic series (DLMF 5.5.2, 5.11.2)."""
    x = x.copy()
    digamma, trigamma = np.zeros_like(x), np.zeros_like(x)
    for _ in range(_SHIFT):
        share = 1 / x
        digamma -= share
        trigamma += share * share
        x += 1
    i = 1 / x
    j = i * i
    digamma += np.log(x) - 0.5 * i
    digamma -= j * (1 / 12 - j * (1 / 120 - j * (1 / 252 - j * (1 / 240 - j * (1 / 132 - j * (691 / 32760))))))
    tail = 1 / 6 - j * (1 / 30 - j * (1 / 42 - j * (1 / 30 - j * (5 / 66 - j * (691 / 2730)))))
    trigamma += i * (1 + i * (0.5 + i * tail))
    return digamma, trigamma


# Hankel's expansion.


@lru_cache(maxsize=4)
def hankel(terms: int) -> tuple[tuple[float, ...], ...]:
    """Coefficients h_k by powers of q², k = 1 … terms: ln I_q(z) − z + ½ ln(2π z) = Σ_k h_k(q²) z^{−k}.

    To 1e-12 for z ≥ 30 and |q| ≤ z/12 with ten terms. Row k has ⌈k/2⌉ + 1 coefficients.
    """
    a: list[Polynomial] = [[Fraction(1)]]
    for k in range(1, terms + 1):
        below = a[-1]
        row = [Fraction((2 * k - 1) ** 2, 8 * k) * each for each in below] + [Fraction(0)]
        for j, each in enumerate(below):
            row[j + 1] -= Fraction(4, 8 * k) * each
        a.append(row)
    return tuple(tuple(float(each) for each in row[: -(-k // 2) + 1]) for k, row in enumerate(_log_series(a), start=1))
