"""The likelihood of a damped oscillator whose position is seen at equal steps: an ARMA(2,1), from sums over windows.

With the step of `driftbook.estimators.oscillator`, beta = e^{−g} and zeta = (1 − a11)(1 − a22) + w a12², positions
about their level follow, from the second step on,

    x_k − 2 x_{k−1} + x_{k−2} + (1 − beta)(x_{k−1} − x_{k−2}) + zeta x_{k−1} = ε_k + psi ε_{k−1},

with second differences, so that smooth paths lose nothing; the first has e_1 = x_1 − a11 x_0, of the variance
F_1 = q11 + a12²/(2g) that a velocity in its stationary law gives it. So given psi, innovations are sums of three
filtered sequences, and the sums of their products are all the likelihood needs (`driftbook.estimators.filtered`). These
are known at Chebyshev points of psi, which slow motion keeps below 0.27, and in between as polynomials; the likelihood
and its derivatives follow for any g and w.

The two parameters are s = ln(1 + 1/g) and b = w/(g + 1): strong damping is s → 0, where the process is that of
Ornstein and Uhlenbeck and the likelihood is smooth in s; and b passes zero, where there is no pull, without harm.

References
----------
Phadke, M. S. & Wu, S. M. (1974), Modeling of continuous stochastic processes from discrete observations with
application to sunspots data, J. American Statistical Association 69, 325–329.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.chebyshev import Panels
from driftbook.estimators.filtered import FilteredSums
from driftbook.estimators.innovations import standardised_moments
from driftbook.estimators.jets import Jet, function, inverse, less_one, logarithm, root, square, times, variables
from driftbook.estimators.oscillator import Motion, motion
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]

PANEL = Panels(-0.01, 0.5, 1, 18)
COARSEST = 0.45  # psi above this is motion near the end of what steps can show
_PAIRS = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))


def chart(s: Array, b: Array) -> tuple[Jet, Jet]:
    """g and w as jets in s and b."""
    s_jet, b_jet = variables(s, b)
    g = inverse(less_one(s_jet))
    with_one = g.copy()
    with_one[0] += 1
    return g, times(b_jet, with_one)


@dataclass(frozen=True)
class Sampled:
    """An oscillator seen at equal steps, for Δ = 1 and eta = 1; jets of shape (6, m).

    Attributes
    ----------
    damped, pulled : jet
        1 − beta, and zeta.
    first : jet
        1 − a11.
    level_first : jet
        (1 − a11)/zeta.
    psi, F, d : jet
        Moving-average coefficient, variance of innovations, and F_1/F − 1.
    """

    damped: Jet
    pulled: Jet
    first: Jet
    level_first: Jet
    psi: Jet
    F: Jet
    d: Jet


def sampled(g: Jet, w: Jet) -> Sampled:
    """Its ARMA(2,1) coefficients."""
    step: Motion = motion(g, w)
    still = -step.a22
    still[0] += 1
    per_w = times(step.held, still) + square(step.a12)
    both = times(step.a12, step.a22)
    one_more = square(step.a22)
    one_more[0] += 1
    c0 = times(step.q11, one_more) + times(square(step.a12), step.q22) - 2 * times(both, step.q12)
    c1 = times(step.a12, step.q12) - times(step.a22, step.q11)
    r = times(c1, inverse(c0))
    rest = -4 * square(r)
    rest[0] += 1
    under = root(rest)
    under[0] += 1
    psi = 2 * times(r, inverse(under))
    of_psi = square(psi)
    of_psi[0] += 1
    F = times(c0, inverse(of_psi))
    F1 = step.q11 + 0.5 * times(square(step.a12), inverse(g))
    d = times(F1, inverse(F))
    d[0] -= 1
    return Sampled(
        -less_one(-g),
        times(w, per_w),
        times(w, step.held),
        times(step.held, inverse(per_w)),
        psi,
        F,
        d,
    )


@dataclass(frozen=True)
class SwingSums:
    """What windows hold; m windows.

    Attributes
    ----------
    n : int
        Steps in a window.
    series : array, shape (points, 12, m)
        Chebyshev series in psi of the sums of products of the filtered second differences, increments and levels, of
        their sums, and of their fading sums.
    increment, level : array, shape (m,)
        First increment, and first level from the origin.
    """

    n: int
    series: Array
    increment: Array
    level: Array

    def take(self, places: Places) -> SwingSums:
        """The same for some of the windows."""
        return SwingSums(self.n, self.series[:, :, places], self.increment[places], self.level[places])


def swing_sums(n: int, sums: FilteredSums, increment: Array, level: Array) -> SwingSums:
    """From sums at the points of `PANEL`; shapes of `FilteredSums`, and (windows, segments) for the first values."""
    rows = [sums.gram(a, b) for a, b in _PAIRS]
    rows += [each[:, a] for each in (sums.total, sums.fading) for a in range(3)]
    m = increment.size
    series = np.empty((PANEL.points, len(rows), m))
    nowhere = np.zeros(m, dtype=np.intp)
    for k, row in enumerate(rows):
        series[:, k] = PANEL.series(np.ascontiguousarray(row.transpose(1, 2, 0)).reshape(-1, m), nowhere)
    first = (np.ascontiguousarray(each.T).reshape(-1) for each in (increment, level))
    return SwingSums(n, series, *first)


@dataclass(frozen=True)
class SwingFit:
    """The likelihood at given parameters, largest over level and scale; jets of shape (6, m).

    Attributes
    ----------
    loglik : jet
    rss : jet
        Sum of squares of innovations over F/eta², so that eta² = rss/n.
    level : jet
        Theta from the origin, times zeta.
    weight : jet
        Sum of squares of the answer to a level, over zeta² and F/eta².
    log_det : array
        ½ ln(1 + d Σ h²).
    coefficients : Sampled
    """

    loglik: Jet
    rss: Jet
    level: Jet
    weight: Jet
    log_det: Array
    coefficients: Sampled


def swing_fit(sums: SwingSums, s: Array, b: Array) -> SwingFit:
    """The likelihood of each window at one s and b each."""
    n = sums.n
    c = sampled(*chart(s, b))
    dd, dv, dx, vv, vx, xx, *rest = _at(sums.series, c.psi)
    total = rest[0] + times(c.damped, rest[1]) + times(c.pulled, rest[2])
    fading = rest[3] + times(c.damped, rest[4]) + times(c.pulled, rest[5])
    by_v = times(c.damped, vv) + 2 * (dv + times(c.pulled, vx))
    E = dd + times(c.damped, by_v) + times(c.pulled, times(c.pulled, xx) + 2 * dx)
    first = c.first * sums.level
    first[0] += sums.increment
    OO, hO, hh, gain = _of_ones(c.psi, n)
    inner = fading + times(first, hh)
    ee = E + times(first, fading + inner)
    oo = OO + times(c.level_first, 2 * hO + times(c.level_first, hh))
    ho = hO + times(c.level_first, hh)
    eo = times(total - fading, gain) + times(c.level_first, fading) + times(first, ho)
    more = times(c.d, hh)
    more[0] += 1
    share = times(c.d, inverse(more))
    shared = times(share, ho)
    eo -= times(inner, shared)
    oo -= times(ho, shared)
    level = times(eo, inverse(oo))
    rss = times(ee - times(share, square(inner)) - times(eo, level), inverse(c.F))
    loglik = -0.5 * (n * (logarithm(rss) + logarithm(c.F)) + logarithm(more))
    loglik[0] += 0.5 * n * (np.log(n / (2 * np.pi)) - 1)
    return SwingFit(loglik, rss, level, times(oo, inverse(c.F)), 0.5 * np.log(more[0]), c)


def _of_ones(psi: Jet, n: int) -> tuple[Jet, Jet, Jet, Jet]:
    """For O_j the filtered ones and h_j = a^j, a = −psi: Σ O², Σ h O, Σ_{j<n} h² from j = 0, and 1/(1 − a)."""
    a = -psi
    one_less = -a
    one_less[0] += 1
    gain = inverse(one_less)
    square_less = -square(a)
    square_less[0] += 1
    power = _power(a, n)
    H1 = times(a - power, gain)  # Σ a^j, j = 1 … n − 1
    H2 = times(square(a) - square(power), inverse(square_less))
    hh = H2.copy()
    hh[0] += 1
    OO = H2 - 2 * H1
    OO[0] += n - 1
    return times(OO, square(gain)), times(H1 - H2, gain), hh, gain


def _power(a: Jet, n: int) -> Jet:
    """a^n."""
    last = np.power(a[0], n - 2)
    return function(a, last * a[0] * a[0], n * last * a[0], n * (n - 1) * last)


def _at(series: Array, psi: Jet) -> list[Jet]:
    """Each sum at psi."""
    z = (psi[0] - PANEL.low) / PANEL.half - 1
    values, slopes, bends = np.zeros((3, *series.shape[1:]))
    T = [np.ones_like(z), z]
    T1 = [np.zeros_like(z), np.ones_like(z)]
    T2 = [np.zeros_like(z), np.zeros_like(z)]
    for j, c in enumerate(series):
        if j > 1:
            T.append(2 * z * T[-1] - T[-2])
            T1.append(2 * T[-2] + 2 * z * T1[-1] - T1[-2])
            T2.append(4 * T1[-2] + 2 * z * T2[-1] - T2[-2])
        values += c * T[j]
        slopes += c * T1[j]
        bends += c * T2[j]
    slopes /= PANEL.half
    bends /= PANEL.half**2
    return [function(psi, *each) for each in zip(values, slopes, bends, strict=True)]


START_AT = (300.0, 30.0, 12.0, 7.0, 4.5, 3.0, 2.0, 1.3, 0.8, 0.5, 0.3, 0.15, 0.07, 0.03, 0.012)
_SLOW = 1e-3  # w over g of which psi is taken for a first look


def swing_start(sums: SwingSums) -> Array:
    """The best s and b, shape (2, m), of a look at some g, each with the least squares zeta and without the start."""
    n = sums.n - 1
    g = np.array(START_AT)
    psi = sampled(*variables(g, _SLOW * g)).psi[0]
    m = sums.increment.size
    best, found = np.full(m, np.inf), np.full((2, m), np.nan)
    for each, where in zip(g, psi, strict=True):
        dd, dv, dx, vv, vx, xx, td, tv, tx, *_ = _values(sums.series, float(where))
        damped, beta = -np.expm1(-each), np.exp(-each)
        total = td + damped * tv
        ee = dd + damped * (2 * dv + damped * vv) - total * total / n
        ex = dx + damped * vx - total * tx / n
        xx = xx - tx * tx / n
        value = ee - ex / xx * ex
        better = value < best
        best = np.where(better, value, best)
        w = _turn(each, 1 + beta + ex / xx)
        found = np.where(better, np.stack([np.full(m, np.log1p(1 / each)), w / (each + 1)]), found)
    return found


def _values(series: Array, psi: float) -> Array:
    """Each sum at one psi for all windows."""
    z = (psi - PANEL.low) / PANEL.half - 1
    before, now = 1.0, z
    values = series[0] + z * series[1]
    for c in series[2:]:
        before, now = now, 2 * z * now - before
        values += now * c
    return np.asarray(values)


def _turn(g: float, trace: Array) -> Array:
    """w of given g and 1 + beta − zeta, which is twice e^{−g/2} cosh √D."""
    half = 0.5 * trace
    inside = half * half - np.exp(-g)
    slow = np.log(half + np.sqrt(np.maximum(inside, 0.0)))
    angle = np.arccos(np.clip(half * np.exp(0.5 * g), -1.0, 1.0))
    swinging = 0.25 * g * g + angle * angle
    return np.asarray(np.where((inside >= 0) & (half > 0), -slow * (g + slow), swinging))


def swing_moments(fit: SwingFit, sums: SwingSums, x: Array) -> tuple[Array, Array]:
    """Sums of squares and fourth powers of the standardised innovations, by a run through each window.

    Parameters
    ----------
    fit : SwingFit
    sums : SwingSums
        What it was made from.
    x : array, shape (n + 1, m)
        Windows less their first value; time first.

    Returns
    -------
    squares, fourth : array, shape (m,)
        The first is R F/eta².
    """
    c = fit.coefficients
    damped, pulled = c.damped[0], c.pulled[0]

    def residuals() -> Iterator[Array]:
        before = x[1] - x[0]
        yield before + c.first[0] * sums.level - c.level_first[0] * fit.level[0]
        rest = pulled * sums.level - fit.level[0]
        for k in range(2, sums.n + 1):
            step = x[k] - x[k - 1]
            yield step - before + damped * before + (pulled * x[k - 1] + rest)
            before = step

    return standardised_moments(residuals(), -c.psi[0], np.ones_like(damped), c.d[0])
