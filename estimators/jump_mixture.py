"""Increments that are normal but for a Poisson number of normal jumps: likelihood, derivatives and starting points.

In units of a window's own mean and spread, with w_i the length of a step over the mean step, increments are

    z_i | k jumps ~ N((b − L m) w_i + k m, v w_i + k s),    k ~ Poisson(L w_i),

and the parameters are b, the mean of an increment, which the others hardly move, ln v, ln L, m, ln s. The sum over k
ends where the remaining Poisson mass is below `REST`.

The likelihood has no upper end as v → 0 and L → 1: one jump more or less then explains every increment but one (Honoré
1998, Pitfalls in estimating jump-diffusion models). The unit of spread is therefore a jump-robust one, the
interquartile range over 1.349, which a few jumps do not move, and √v is kept above `LEAST_SPREAD` of it, √s above
`LEAST_JUMP`, L below `MOST_JUMPS`, and above `FEWEST` jumps in a window.

References
----------
Merton, R. C. (1976), Option pricing when underlying stock returns are discontinuous, J. Financial Economics 3,
125–144.
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

_VANISHES = -600.0  # exponents below this are measured from the largest
_TERMS = (5, 7, 9, 11, 13, 16, 20)  # numbers of terms that sums may have
_AT_ONCE = 1 << 15  # elements (steps times terms) that are computed at one time: their arrays stay in cache


@dataclass(frozen=True)
class Increments:
    """Windows of increments in units of their own; arrays with one row a window.

    Attributes
    ----------
    z : array, shape (m, n)
        Increments, less their mean by time, over their standard deviation.
    weight : array, shape (m, n), or None
        Length of each step over the mean step; None where all are 1.
    count : array, shape (n,), or None
        Number of increments that each stands for; None where it is 1.
    """

    z: Array
    weight: Array | None = None
    count: Array | None = None

    def take(self, places: Places) -> Increments:
        """Some of the windows."""
        return Increments(self.z[places], None if self.weight is None else self.weight[places], self.count)

    def surface(self, point: Array, places: Places) -> Surface:
        """The log-likelihood, one point a window, with its derivatives."""
        m, most = places.size, _TERMS[-1]
        sums = np.zeros((5, 1 if self.weight is None else 3, m, most))
        value, slope, square = np.empty(m), np.empty((m, 5)), np.empty((m, 5, 5))
        for part, terms in self._parts(point, places):
            mixture = _Mixture.at(self.take(places[part]), point[:, part], terms)
            sums[:, :, part, :terms], score = mixture.derivatives()
            counted = score if self.count is None else score * self.count
            value[part], slope[part] = mixture.loglik, counted.sum(axis=2)
            square[part] = counted @ score.transpose(0, 2, 1)
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
    """Bounds of b, ln v, ln L, m and ln s in windows of n steps, and how far they may go in one round."""
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
    e : array
        z − mean.
    inverse : array
        1/variance.
    loglik : array, shape (m,)
    """

    p: Array
    e: Array
    inverse: Array
    loglik: Array
    point: Array
    increments: Increments

    @classmethod
    def at(cls, increments: Increments, point: Array, terms: int) -> _Mixture:
        b, log_v, log_L, mean, log_s = (each[:, None, None] for each in point)
        v, L, s = np.exp(log_v), np.exp(log_L), np.exp(log_s)
        a = b - L * mean
        k = np.arange(terms, dtype=np.float64)[:, None]
        w = 1.0 if increments.weight is None else increments.weight[:, None, :]
        inverse = 1 / (v * w + k * s)
        e = increments.z[:, None, :] - (a * w + k * mean)
        p = np.square(e)
        p *= -0.5 * inverse
        p += k * (log_L + np.log(w)) - L * w - _log_factorial(terms)[:, None] + 0.5 * np.log(inverse / (2 * np.pi))
        top = _highest(p)
        if top is not None:
            p -= top
        np.exp(p, out=p)
        total = p.sum(axis=1, keepdims=True)
        p *= 1 / total
        logs = np.log(total)[:, 0]
        if top is not None:
            logs += top[:, 0]
        loglik = (logs if increments.count is None else logs * increments.count).sum(axis=1)
        return cls(p, e, inverse, loglik, point, increments)

    def derivatives(self) -> tuple[Array, Array]:
        """Sums over increments, and the scores; `p` is lost.

        Returns
        -------
        sums : array, shape (5, 1 or 3, m, terms)
            Of p; p times ∂ ln N by the mean μ and by the variance σ²; and p times (∂∂ + ∂ ∂) ln N by μ and σ², and by
            σ² twice: with weight 1, w and w². That by μ twice is 2 p ∂ ln N by σ².
        score : array, shape (m, 5, n)
            Derivatives of each increment's log-density by b, v, L, m, s.
        """
        m, terms, n = self.p.shape
        L, weight = np.exp(self.point[2])[:, None], self.increments.weight
        score = np.empty((m, 5, n))
        score[:, 2] = (np.arange(terms, dtype=np.float64) @ self.p) / L
        sums = self._of_equal(score) if weight is None else self._of_unequal(score)
        if weight is None:
            score[:, 2] -= 1
        else:
            score[:, 2] -= weight
            score[:, :2] *= weight[:, None]
        score[:, 2] -= self.point[3][:, None] * score[:, 0]
        score[:, 3] -= L * score[:, 0]
        return sums, score

    def _of_equal(self, score: Array) -> Array:
        """Sums, and the scores by a, v, m and s, which are put in place.

        All are made of p e^j, as the variance is the same for all increments.
        """
        _, terms, n = self.p.shape
        count = np.ones(n) if self.increments.count is None else self.increments.count
        i, k, power = self.inverse[:, :, 0], np.arange(terms, dtype=np.float64), self.p
        once = np.stack([i, k * i], axis=1)
        twice = 0.5 * i[:, None] * once
        P, score[:, 1::3] = power @ count, (-0.5 * once) @ power
        power *= self.e
        E, score[:, 0::3] = power @ count, once @ power
        power *= self.e
        S = power @ count
        score[:, 1::3] += twice @ power
        power *= self.e
        T = power @ count
        power *= self.e
        Q = power @ count
        A, B = i * E, 0.5 * i * (i * S - P)
        M, V = i * i * (0.5 * i * T - 1.5 * E), i * i * (i * (0.25 * i * Q - 1.5 * S) + 0.75 * P)
        return np.stack([P, A, B, M, V])[:, None]

    def _of_unequal(self, score: Array) -> Array:
        """The same, term by term."""
        inverse = self.inverse
        lean = self.e * inverse
        bend = 0.5 * (np.square(lean) - inverse)  # of ln N by its variance
        by_mean, by_variance = self.p * lean, self.p * bend
        weights = np.stack([np.ones(self.p.shape[1]), np.arange(self.p.shape[1], dtype=np.float64)])
        score[:, 0::3], score[:, 1::3] = weights @ by_mean, weights @ by_variance
        parts = [self._by_weight(each) for each in (self.p, by_mean, by_variance)]
        parts.append(self._by_weight(by_mean * (bend - inverse)))
        parts.append(self._by_weight(by_variance * (bend - 2 * inverse) - self.p * (0.5 * np.square(inverse))))
        return np.stack(parts)

    def _by_weight(self, values: Array) -> Array:
        """Sums over increments of values times 1, w and w², shape (3, m, terms)."""
        w = np.asarray(self.increments.weight)[:, None, :]
        weighted = values * w
        return np.stack([values.sum(axis=2), weighted.sum(axis=2), (weighted * w).sum(axis=2)])


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
    """The surface in b, ln v, ln L, m, ln s from sums over increments, shape (5, 1 or 3, m, terms)."""
    P, A, B, M, V = ([group[0], group[len(group) // 2], group[-1]] for group in sums)
    k, L, m = np.arange(sums.shape[-1], dtype=np.float64), np.exp(point[2]), point[3]
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
    _from_drift_to_mean(upper, slope[:, 0], L, m)
    scale = np.ones_like(point)
    for i in (1, 2, 4):
        scale[i] = np.exp(point[i])
    gradient, hessian = slope.T * scale, np.empty((5, 5, value.size))
    for (i, j), values in upper.items():
        hessian[i, j] = hessian[j, i] = (values - square[:, i, j]) * (scale[i] * scale[j])
    for i in (1, 2, 4):
        hessian[i, i] += gradient[i]
    return Surface(value, gradient, hessian)


def _from_drift_to_mean(upper: dict[tuple[int, int], Array], slope: Array, L: Array, m: Array) -> None:
    """Second derivatives by a, … made those by b = a + L m, …, in place; `slope` is the first derivative by a."""
    of_drift = [upper[0, i] for i in range(5)]
    upper[2, 3] -= L * of_drift[2] + m * of_drift[3] - L * m * of_drift[0] + slope
    upper[2, 2] -= m * (2 * of_drift[2] - m * of_drift[0])
    upper[3, 3] -= L * (2 * of_drift[3] - L * of_drift[0])
    for i, factor in ((2, m), (3, L)):
        upper[0, i] = of_drift[i] - factor * of_drift[0]
        upper[1, i] -= factor * of_drift[1]
        upper[i, 4] -= factor * of_drift[4]


def _dot(values: Array, weights: Array) -> Array:
    """Σ_k weights_k values_k, in the same order of additions for any number of windows."""
    return np.asarray((values * weights).sum(axis=-1))
