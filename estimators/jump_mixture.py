"""Increments that are normal but for a Poisson number of normal jumps: likelihood, derivatives and starting points.

In units of a window's own mean and spread, with w_i the length of a step over the mean step, increments are

    z_i | k jumps ~ N(a w_i + k m, v w_i + k s),    k ~ Poisson(L w_i),

and the parameters are a, ln v, ln L, m, ln s. The sum over k ends where the remaining Poisson mass is below `REST`.

The likelihood has no upper end as v → 0 and L → 1: one jump more or less then explains every increment but one (Honoré
1998, Pitfalls in estimating jump-diffusion models). The unit of spread is therefore a jump-robust one, the
interquartile range over 1.349, which a few jumps do not move, and √v is kept above `LEAST_SPREAD` of it, √s above
`LEAST_JUMP`, L below `MOST_JUMPS`, and above `FEWEST` jumps in a window.

The likelihood has several maxima. Starting points come from the EM algorithm (Dempster, Laird & Rubin 1977), which is
quick to find a basin and slow to find its bottom: a few of its steps from each of some constellations, of rare large
jumps up to frequent small ones.

References
----------
Merton, R. C. (1976), Option pricing when underlying stock returns are discontinuous, J. Financial Economics 3,
125–144. Dempster, A. P., Laird, N. M. & Rubin, D. B. (1977), Maximum likelihood from incomplete data via the EM
algorithm, J. Royal Statistical Society B 39, 1–38.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from driftbook.estimators.maximise import Limits, Places, Surface
from driftbook.estimators.windows import Array

REST = 1e-12  # Poisson mass that is left out
LEAST_SPREAD, LEAST_JUMP = 0.25, 0.1  # of the jump-robust spread of a step, for the diffusion and for a jump
MOST_JUMPS, FEWEST = 1.0, 0.1  # jumps a step at most, and jumps a window at least
LARGEST = 1e3  # largest spread, likewise
EM_STEPS, EM_TERMS = 6, 7

_VANISHES = -600.0  # exponents below this are measured from the largest
_TERMS = (5, 7, 9, 11, 13, 16, 20)  # numbers of terms that sums may have
_AT_ONCE = 1 << 15  # elements (steps times terms) that are computed at one time: their arrays stay in cache
_STARTS = ((0.5, 0.1, 0.0, 3.0), (0.4, 0.3, 0.0, 1.5), (0.95, 0.008, -3.0, 0.1), (0.95, 0.008, 3.0, 0.1))  # v, L, m, s


@dataclass(frozen=True)
class Increments:
    """Windows of increments in units of their own; arrays with one row a window.

    Attributes
    ----------
    z : array, shape (m, n)
        Increments, less their mean by time, over their standard deviation.
    weight : array, shape (m, n), or None
        Length of each step over the mean step; None where all are 1.
    """

    z: Array
    weight: Array | None

    def take(self, places: Places) -> Increments:
        """Some of the windows."""
        return Increments(self.z[places], None if self.weight is None else self.weight[places])

    def surface(self, point: Array, places: Places) -> Surface:
        """The log-likelihood, one point a window, with its derivatives."""
        m, most = places.size, _TERMS[-1]
        sums = np.zeros((5, 1 if self.weight is None else 3, m, most))
        value, slope, square = np.empty(m), np.empty((m, 5)), np.empty((m, 5, 5))
        for part, terms in self._parts(point, places):
            mixture = _Mixture.at(self.take(places[part]), point[:, part], terms)
            sums[:, :, part, :terms], score = mixture.derivatives()
            value[part], slope[part] = mixture.loglik, score.sum(axis=2)
            square[part] = score @ score.transpose(0, 2, 1)
        return _assembled(value, slope, square, sums, point)

    def loglik(self, point: Array) -> Array:
        """The log-likelihood alone, shape (m,)."""
        places = np.arange(len(self.z))
        value = np.empty(places.size)
        for part, terms in self._parts(point, places):
            value[part] = _Mixture.at(self.take(part), point[:, part], terms).loglik
        return value

    def jumped(self, point: Array) -> Array:
        """Probability that the last step held a jump or more, shape (m,)."""
        places = np.arange(len(self.z))
        found = np.empty(places.size)
        last = Increments(self.z[:, -1:], None if self.weight is None else self.weight[:, -1:])
        for part, terms in self._parts(point, places):
            found[part] = 1 - _Mixture.at(last.take(part), point[:, part], terms).p[:, 0, 0]
        return found

    def starts(self) -> Array:
        """A point from each constellation, after a few steps of the EM algorithm, shape (starts, 5, m)."""
        m, n = self.z.shape
        bounds = limits(n)
        lower, upper = (np.array(each)[:, None] for each in (bounds.lower, bounds.upper))
        square = np.square(self.z) if self.weight is None else np.square(self.z) / self.weight
        size = np.log(square.mean(axis=1))
        found = np.empty((len(_STARTS), 5, m))
        at_once = max(1, _AT_ONCE // (n * EM_TERMS))
        for number, (spread, jumps, mean, of_jump) in enumerate(_STARTS):
            log_v, log_s = np.log(spread) + size, np.log(of_jump) + size
            point = np.stack([0 * size, log_v, np.full(m, np.log(jumps)), mean * np.exp(0.5 * size), log_s])
            for begin in range(0, m, at_once):
                part = np.arange(begin, min(begin + at_once, m))
                some, moved = self.take(part), point[:, part]
                for _ in range(EM_STEPS):
                    moved = np.clip(_Mixture.at(some, moved, EM_TERMS).em_step(), lower, upper)
                found[number, :, part] = moved.T
        return found

    def _parts(self, point: Array, places: Places) -> Iterator[tuple[Places, int]]:
        """Windows whose sums have the same number of terms, so many at one time as stay in cache."""
        n = self.z.shape[1]
        most = np.exp(point[2])
        if self.weight is not None:
            most = most * self.weight[places].max(axis=1)
        needed = np.searchsorted(_most_jumps(), most)
        for number, terms in enumerate(_TERMS):
            those = np.flatnonzero(np.minimum(needed, len(_TERMS) - 1) == number)
            at_once = max(1, _AT_ONCE // (n * terms))
            for begin in range(0, those.size, at_once):
                yield those[begin : begin + at_once], terms


def standardised(increments: Array, steps: Array | None) -> tuple[Increments, Array, Array]:
    """Windows in units of their own, their mean by time over a mean step, and their jump-robust spread, shape (m,)."""
    weight = None if steps is None else steps / steps.mean(axis=1, keepdims=True)
    mean = increments.mean(axis=1)
    rest = increments - (mean[:, None] if weight is None else mean[:, None] * weight)
    n = rest.shape[1]
    low, high = n // 4, n - 1 - n // 4
    order = np.partition(rest if weight is None else rest / np.sqrt(weight), (low, high), axis=1)
    spread = (order[:, high] - order[:, low]) / 1.349
    return Increments(rest / spread[:, None], weight), mean, spread


@lru_cache(maxsize=16)
def limits(n: int) -> Limits:
    """Bounds of a, ln v, ln L, m and ln s in windows of n steps, and how far they may go in one round."""
    free = np.inf
    most = 2 * np.log(LARGEST)
    return Limits(
        (-free, 2 * np.log(LEAST_SPREAD), np.log(FEWEST / n), -free, 2 * np.log(LEAST_JUMP)),
        (free, most, np.log(MOST_JUMPS), free, most),
        (1.0, 1.0, 1.0, 2.0, 1.0),
        (0.0, 0.0, 0.0, 0.5, 0.0),
    )


@lru_cache(maxsize=1)
def _most_jumps() -> Array:
    """The largest L at which each number of terms leaves out less than `REST`."""
    from scipy.special import gammaincinv

    return np.array([float(gammaincinv(terms, REST)) for terms in _TERMS])


@dataclass(frozen=True)
class _Mixture:
    """Windows at given parameters: arrays of shape (m, terms, n), or (m, terms, 1) where steps are equal.

    Attributes
    ----------
    p : array
        Probability of each number of jumps given the increment.
    lean : array
        (z − mean)/variance.
    inverse : array
        1/variance.
    loglik : array, shape (m,)
    """

    p: Array
    lean: Array
    inverse: Array
    loglik: Array
    point: Array
    weight: Array | None

    @classmethod
    def at(cls, increments: Increments, point: Array, terms: int) -> _Mixture:
        a, log_v, log_L, mean, log_s = (each[:, None, None] for each in point)
        v, L, s = np.exp(log_v), np.exp(log_L), np.exp(log_s)
        k = np.arange(terms, dtype=np.float64)[:, None]
        w = 1.0 if increments.weight is None else increments.weight[:, None, :]
        inverse = 1 / (v * w + k * s)
        e = increments.z[:, None, :] - (a * w + k * mean)
        lean = e * inverse
        e *= lean
        e *= -0.5
        e += k * (log_L + np.log(w)) - L * w - _log_factorial(terms)[:, None] + 0.5 * np.log(inverse / (2 * np.pi))
        top = _highest(e)
        if top is not None:
            e -= top
        p = np.exp(e, out=e)
        total = p.sum(axis=1, keepdims=True)
        p /= total
        loglik = np.log(total).sum(axis=(1, 2))
        if top is not None:
            loglik += top.sum(axis=(1, 2))
        weight = None if increments.weight is None else increments.weight
        return cls(p, lean, inverse, loglik, point, weight)

    def derivatives(self) -> tuple[Array, Array]:
        """Sums over increments, and the scores.

        Returns
        -------
        sums : array, shape (5, 1 or 3, m, terms)
            Of p; p times ∂ ln N by the mean μ and by the variance σ²; and p times (∂∂ + ∂ ∂) ln N by μ and σ², and by
            σ² twice: with weight 1, w and w². That by μ twice is 2 p ∂ ln N by σ².
        score : array, shape (m, 5, n)
            Derivatives of each increment's log-density by a, v, L, m, s.
        """
        inverse = self.inverse
        bend = np.square(self.lean)
        bend -= inverse
        bend *= 0.5  # of ln N by its variance
        by_mean, by_variance = self.p * self.lean, self.p * bend
        score = self._scores(by_mean, by_variance)
        parts = [self._by_weight(each) for each in (self.p, by_mean, by_variance)]
        bend -= inverse
        by_mean *= bend
        parts.append(self._by_weight(by_mean))
        bend -= inverse
        by_variance *= bend
        by_variance -= self.p * (0.5 * np.square(inverse))
        parts.append(self._by_weight(by_variance))
        return np.stack(parts), score

    def _scores(self, by_mean: Array, by_variance: Array) -> Array:
        m, terms, n = self.p.shape
        k, L = np.arange(terms, dtype=np.float64), np.exp(self.point[2])[:, None]
        w = 1.0 if self.weight is None else self.weight
        score, weights = np.empty((m, 5, n)), np.stack([np.ones(terms), k])
        score[:, 0::3] = weights @ by_mean
        score[:, 1::3] = weights @ by_variance
        score[:, 2] = (k @ self.p) / L - w
        if self.weight is not None:
            score[:, 0] *= w
            score[:, 1] *= w
        return score

    def _by_weight(self, values: Array) -> Array:
        """Sums over increments of values times 1, w and w², shape (3, m, terms); the first alone if all w are 1."""
        if self.weight is None:
            return np.asarray(values.sum(axis=2)[None])
        w = self.weight[:, None, :]
        weighted = values * w
        return np.stack([values.sum(axis=2), weighted.sum(axis=2), (weighted * w).sum(axis=2)])

    def em_step(self) -> Array:
        """The parameters after one step of the EM algorithm."""
        v, s = np.exp(self.point[1])[:, None, None], np.exp(self.point[4])[:, None, None]
        terms, n = self.p.shape[1:]
        k = np.arange(terms, dtype=np.float64)[:, None]
        w = 1.0 if self.weight is None else self.weight[:, None, :]
        own, jump = v * w * self.lean, s * self.lean  # what of z − mean falls to the diffusion, and to each jump
        by_jumps = self.p * k
        jumps = by_jumps.sum(axis=(1, 2))
        moved = (self.p * own).sum(axis=(1, 2)) / n
        rest = own - moved[:, None, None] * w
        rest *= rest
        rest += k * s * self.inverse * (v * w)
        rest *= self.p
        if self.weight is not None:
            rest /= w
        drift = (by_jumps * jump).sum(axis=(1, 2)) / jumps
        jump -= drift[:, None, None]
        jump *= jump
        jump += s - s * s * self.inverse
        jump *= by_jumps
        variance, of_jump = rest.sum(axis=(1, 2)) / n, jump.sum(axis=(1, 2)) / jumps
        return np.stack(
            [self.point[0] + moved, np.log(variance), np.log(jumps / n), self.point[3] + drift, np.log(of_jump)]
        )


def _highest(exponents: Array) -> Array | None:
    """The largest exponent of each increment, but 0 in windows where none is so low that its power would vanish."""
    low = exponents[:, -1].min(axis=1) < _VANISHES
    if not low.any():
        return None
    top = np.zeros((len(exponents), 1, exponents.shape[2]))
    top[low] = exponents[low].max(axis=1, keepdims=True)
    return top


@lru_cache(maxsize=16)
def _log_factorial(terms: int) -> Array:
    return np.concatenate([[0.0], np.cumsum(np.log(np.arange(1, terms)))])


def _assembled(value: Array, slope: Array, square: Array, sums: Array, point: Array) -> Surface:
    """The surface in a, ln v, ln L, m, ln s from sums over increments, shape (5, 1 or 3, m, terms)."""
    P, A, B, M, V = ([group[0], group[len(group) // 2], group[-1]] for group in sums)
    k, L = np.arange(sums.shape[-1], dtype=np.float64), np.exp(point[2])
    ones, kk = np.ones_like(k), k * k
    upper = {
        (0, 0): 2 * _dot(B[2], ones),
        (0, 1): _dot(M[2], ones),
        (0, 2): _dot(A[1], k) / L - _dot(A[2], ones),
        (0, 3): 2 * _dot(B[1], k),
        (0, 4): _dot(M[1], k),
        (1, 1): _dot(V[2], ones),
        (1, 2): _dot(B[1], k) / L - _dot(B[2], ones),
        (1, 3): _dot(M[1], k),
        (1, 4): _dot(V[1], k),
        (2, 2): _dot(P[0], kk - k) / np.square(L) - 2 * _dot(P[1], k) / L + _dot(P[2], ones),
        (2, 3): _dot(A[0], kk) / L - _dot(A[1], k),
        (2, 4): _dot(B[0], kk) / L - _dot(B[1], k),
        (3, 3): 2 * _dot(B[0], kk),
        (3, 4): _dot(M[0], kk),
        (4, 4): _dot(V[0], kk),
    }
    scale = np.ones_like(point)
    for i in (1, 2, 4):
        scale[i] = np.exp(point[i])
    gradient, hessian = slope.T * scale, np.empty((5, 5, value.size))
    for (i, j), values in upper.items():
        hessian[i, j] = hessian[j, i] = (values - square[:, i, j]) * (scale[i] * scale[j])
    for i in (1, 2, 4):
        hessian[i, i] += gradient[i]
    return Surface(value, gradient, hessian)


def _dot(values: Array, weights: Array) -> Array:
    """Σ_k weights_k values_k, in the same order of additions for any number of windows."""
    return np.asarray((values * weights).sum(axis=-1))
