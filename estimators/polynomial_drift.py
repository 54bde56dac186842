"""The second-order likelihood of dX = f(X) dt + sigma dW with a cubic f, from sums over steps.

With increments d over steps Δ, t(v) the segment from x_i to x_{i+1} and u = sigma², the closed-form expansion of the
log-density to second order in the step is

    −½ ln(2 π u Δ) − d²/(2 u Δ) + (d/u) ∫ f dv − (Δ/2) ∫ (f²/u + f′) dv − (Δ²/4) ∫ v (1 − v) ((f²)″ + u f‴) dv.

For f = Σ a_k t^k all its integrals are sums of averaged powers, and given u it is exactly quadratic in a. With B and K
the sums of Δ ∫ t^p and Δ² ∫ v (1 − v) t^p, κ_p = ½ p (p − 1) K_{p−2}, Hankel matrices of B_{j+k} and κ_{j+k},
A_k = Σ d ∫ t^k, S = Σ d²/Δ, D_k = k B_{k−1} and E = (0, 0, 0, 6 K_0):

    (B + u κ) a = A − (u/2) D − (u²/4) E,

    loglik = −½ (n ln(2 π u) + Σ ln Δ) − P/u − ½ a′D − ½ a′κa − (u/4) a′E    with P = ½ S − a′A + ½ a′Ba.

What is left is one equation in ln u, which Newton's method solves with a moving along.

References
----------
Aït-Sahalia, Y. (2002), Maximum likelihood estimation of discretely sampled diffusions: a closed-form approximation
approach, Econometrica 70, 223–262. Aït-Sahalia, Y. (2008), Closed-form likelihood expansions for multivariate
diffusions, Annals of Statistics 36, 906–937 (the expansion of the log-density itself).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.segment_powers import bridge_share, homogeneous, mean_share, squared
from driftbook.estimators.symmetric import Factor, factor
from driftbook.estimators.windows import Array

Mask = NDArray[np.bool_]
Places = NDArray[np.intp]

SIZE = 4
MOST_ROUNDS = 40
_CLOSE = 2e-4  # step of Newton's method in ln u that leaves less than its square as error: 1e-6 of a standard error
_LONGEST = 0.7


def likelihood_terms(x: Array, y: Array, d: Array, steps: Array, *, more: int = 0) -> list[Array]:
    """What is to be summed over the steps of a window, in the order that `Sums.of` takes.

    Parameters
    ----------
    x, y : array, shape (..., n)
        Values before and after each step, from any origin.
    d : array, shape (..., n)
        Increments, or what they exceed a given rate by.
    steps : array, broadcasts with them
    more : int
        How many of B_7 … B_10 are wanted as well, at the end: they are no part of `Sums`.
    """
    rate = d / steps
    means = homogeneous(x, y, steps, 6 + more)
    bridges = [steps * each for each in squared(x, y, means[:5])]
    logs = np.broadcast_to(np.log(steps), d.shape)
    return [logs, d * rate, *(rate * each for each in means[:SIZE]), *means[:7], *bridges, *means[7:]]


TERMS = 2 + SIZE + 7 + 5


@dataclass(frozen=True)
class Sums:
    """Sums over the steps of windows; arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    log_steps, squares : array
        Σ ln Δ and S.
    first : list of 4 array
        A.
    plain : list of 7 array
        B_0 … B_6.
    bridged : list of 5 array
        κ_2 … κ_6; κ_0 and κ_1 are zero.
    rate : array or None
        A constant drift that S and A are measured from: the one that is added to a_0 at the end.
    """

    n: int
    log_steps: Array
    squares: Array
    first: list[Array]
    plain: list[Array]
    bridged: list[Array]
    rate: Array | None = None

    @classmethod
    def of(cls, n: int, sums: Sequence[Array], rate: Array | None = None) -> Sums:
        """From sums of `likelihood_terms`."""
        first = [total * mean_share(k) for k, total in enumerate(sums[2 : 2 + SIZE])]
        plain = [total * mean_share(p) for p, total in enumerate(sums[2 + SIZE : 9 + SIZE])]
        bridges = [total * bridge_share(p) for p, total in enumerate(sums[9 + SIZE : TERMS])]
        bridged = [0.5 * p * (p - 1) * each for p, each in enumerate(bridges, start=2)]
        return cls(n, sums[0], sums[1], first, plain, bridged, rate)

    def take(self, places: Places) -> Sums:
        """Of some of the windows."""
        first, plain, bridged = ([a[places] for a in each] for each in (self.first, self.plain, self.bridged))
        rate = None if self.rate is None else self.rate[places]
        return Sums(self.n, self.log_steps[places], self.squares[places], first, plain, bridged, rate)

    def matrix(self, u: Array) -> Callable[[int, int], Array]:
        """Entries of B + u κ."""
        hankel = [*self.plain[:2], *(b + u * k for b, k in zip(self.plain[2:], self.bridged, strict=True))]
        return lambda i, j: hankel[i + j]

    @property
    def divergence(self) -> list[Array]:
        """D_1 … D_3; D_0 is zero."""
        found = [k * self.plain[k - 1] for k in range(1, SIZE)]
        if self.rate is not None:
            for k in range(2, SIZE):
                found[k - 1] = found[k - 1] + 2 * self.rate * self.bridged[k - 2]
        return found

    @property
    def last(self) -> Array:
        """E_3, the only entry of E that is not zero: 6 K_0."""
        return 6 * self.bridged[0]

    def bent(self, a: Sequence[Array]) -> list[Array]:
        """κ a."""
        k = self.bridged
        return [
            k[0] * a[2] + k[1] * a[3],
            k[0] * a[1] + k[1] * a[2] + k[2] * a[3],
            k[0] * a[0] + k[1] * a[1] + k[2] * a[2] + k[3] * a[3],
            k[1] * a[0] + k[2] * a[1] + k[3] * a[2] + k[4] * a[3],
        ]


@dataclass(frozen=True)
class Spot:
    """Where the likelihood stands at one u a window, and the step of Newton's method in ln u; arrays of shape (m,).

    Attributes
    ----------
    drift : list of 4 array
        a, without the rate that sums are measured from.
    response : list of 4 array
        Its derivative by ln u.
    unexplained : array
        P.
    loglik, slope, curvature : array
        The log-likelihood, and its first and minus its second derivative by ln u, with a moving along.
    factor : Factor
        Of B + u κ; over u it is the information on a.
    """

    drift: list[Array]
    response: list[Array]
    unexplained: Array
    loglik: Array
    slope: Array
    curvature: Array
    factor: Factor


def spot(sums: Sums, u: Array) -> Spot:
    """The likelihood at one u a window."""
    fit = _Fit.of(sums, u)
    a, P, last = fit.drift, fit.unexplained, fit.last
    along = [*fit.pulled[:-1], fit.pulled[-1] + 0.5 * u * sums.last]
    moved = fit.factor.solve(along)
    loglik = -0.5 * (sums.n * np.log(2 * np.pi * u) + sums.log_steps) - P / u
    loglik -= 0.5 * _dot(a, fit.bent) + last
    for each, d in zip(a[1:], sums.divergence, strict=True):
        loglik -= 0.5 * each * d
    curvature = P / u + last - u * _dot(along, moved)
    return Spot(a, [-u * each for each in moved], P, loglik, P / u - last - 0.5 * sums.n, curvature, fit.factor)


@dataclass(frozen=True)
class _Fit:
    """The drift at one u a window, and what it leaves: a, κa, κa + ½ D, ¼ u a′E, P, and the factor of B + u κ."""

    drift: list[Array]
    bent: list[Array]
    pulled: list[Array]
    last: Array
    unexplained: Array
    factor: Factor

    @classmethod
    def of(cls, sums: Sums, u: Array) -> _Fit:
        D, E = sums.divergence, sums.last
        right = [sums.first[0], *(A - 0.5 * u * each for A, each in zip(sums.first[1:], D, strict=True))]
        right[-1] = right[-1] - 0.25 * u * u * E
        solved = factor(sums.matrix(u), SIZE)
        a = solved.solve(right)
        bent = sums.bent(a)
        pulled = [bent[0], *(b + 0.5 * each for b, each in zip(bent[1:], D, strict=True))]
        last = 0.25 * u * E * a[3]
        P = 0.5 * (sums.squares - _dot(a, sums.first) - u * (_dot(a, pulled) + last))
        return cls(a, bent, pulled, last, P, solved)


def _dot(a: Sequence[Array], b: Sequence[Array]) -> Array:
    total = a[0] * b[0]
    for left, right in zip(a[1:], b[1:], strict=True):
        total = total + left * right
    return total


@dataclass(frozen=True)
class Optimum:
    """Where likelihoods are largest; arrays of shape (m,).

    Attributes
    ----------
    variance : array
        u.
    drift : array, shape (4, m)
        a.
    response : array, shape (4, m)
        The derivative of a by ln u.
    curvature : array
        Information on ln u, a being estimated too.
    loglik : array
    unexplained : array
        P.
    share : array
        What elimination left of the pivots of B + u κ; see `Factor`.
    converged : array of bool
    """

    variance: Array
    drift: Array
    response: Array
    curvature: Array
    loglik: Array
    unexplained: Array
    share: Array
    converged: Mask


def maximise(sums: Sums) -> Optimum:
    """The maximum of each window's likelihood."""
    m = sums.squares.size
    found, converged = np.full((5 + 2 * SIZE, m), np.nan), np.zeros(m, dtype=np.bool_)
    at, u = np.arange(m), _start(sums)
    for left in range(MOST_ROUNDS - 1, -1, -1):
        here = spot(sums, u)
        concave, noise = here.curvature > 0, here.unexplained / u
        rest = noise - here.slope
        step = np.log(noise / np.where(rest > 0, rest, 0.5 * sums.n))
        step = np.clip(np.where(concave, step * (noise / here.curvature), step), -_LONGEST, _LONGEST)
        done = concave & (np.abs(step) < _CLOSE)
        u = u * np.exp(step)
        ended = done | ~np.isfinite(u) | (left == 0)
        if ended.any():
            moved = [a + step * by for a, by in zip(here.drift, here.response, strict=True)]
            loglik = here.loglik + 0.5 * step * here.slope
            state = (u, here.curvature, loglik, here.unexplained, here.factor.share, *moved, *here.response)
            for row, values in zip(found, state, strict=True):
                row[at[ended]] = values[ended]
            converged[at] = done
            on = np.flatnonzero(~ended)
            if not on.size:
                break
            at, u, sums = at[on], u[on], sums.take(on)
    variance, curvature, loglik, unexplained, share = found[:5]
    drift, response = found[5 : 5 + SIZE], found[5 + SIZE :]
    return Optimum(variance, drift, response, curvature, loglik, unexplained, share, converged)


def _start(sums: Sums) -> Array:
    """What the drift leaves of all movement, by the drift that is best if all of it were noise."""
    u = sums.squares / sums.n
    fit = _Fit.of(sums, u)
    left = fit.unexplained / (0.5 * sums.n + fit.last)
    return np.where((left > 0.1 * u) & (left < 10 * u), left, u)
