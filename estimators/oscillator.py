"""The damped oscillator driven by noise, dX = V dt, dV = −damping V dt − omega² X dt + eta dW, over one step.

With g = damping Δ, w = omega² Δ² and h(t) the answer of X to a push, in units of Δ, (X, V) after a step is

    X' = (h' + g h) X + h V    V' = −w h X + h' V    with noise of variances ∫h², ∫h'² and covariance h²/2, times eta²,

all functions at 1 or integrals up to 1. h = e^{−g/2} sinh(√D)/√D with D = g²/4 − w, an entire function of D, so that
underdamped, critical and overdamped motion are one formula.

References
----------
Uhlenbeck, G. E. & Ornstein, L. S. (1930), On the theory of the Brownian motion, Physical Review 36, 823–841.
Chandrasekhar, S. (1943), Stochastic problems in physics and astronomy, Reviews of Modern Physics 15, 1–89.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

from driftbook.estimators.jets import Jet, exponential, function, inverse, relative, root, square, times
from driftbook.estimators.windows import Array

_POINTS = 10  # of Gauss, for the integrals of slow motion
_SLOW_DAMPING, _SLOW_TURN = 1.0, 1.0  # up to these g and |w| motion is slow
_SERIES_BELOW = 0.05


@dataclass(frozen=True)
class Motion:
    """One step, with Δ = 1 and eta = 1; jets of shape (6, m).

    Attributes
    ----------
    a11, a12, a21, a22 : jet
        What X and V give to X and V.
    held : jet
        ∫h: 1 − a11 = w ∫h, and a constant level adds w ∫h to X.
    q11, q12, q22 : jet
        Variances and covariance of the noise.
    """

    a11: Jet
    a12: Jet
    a21: Jet
    a22: Jet
    held: Jet
    q11: Jet
    q12: Jet
    q22: Jet


def motion(g: Jet, w: Jet) -> Motion:
    """The step of these numbers."""
    push, swing = _answer(g, w, 1.0)
    half = 0.5 * g
    lag = times(half, push)
    a22 = swing - lag
    q12 = 0.5 * square(push)
    held, q11, q22 = _integrals(g, w, push, swing + lag, a22)
    return Motion(swing + lag, push, -times(w, push), a22, held, q11, q12, q22)


def _answer(g: Jet, w: Jet, t: float) -> tuple[Jet, Jet]:
    """h(t) = e^{−gt/2} sinh(√D t)/√D, and e^{−gt/2} cosh(√D t)."""
    half = 0.5 * g
    D = square(half) - w
    z = D[0] * t * t
    size = np.sqrt(np.abs(z))
    over = z > 0
    # both over e^{size} where motion is overdamped, which the exponential makes up for without loss
    scale = np.where(over, 1.0, 0.0) * size
    with_exp = np.exp(-2 * scale)
    sh = np.where(over, 0.5 * (1 - with_exp), np.sin(size))
    ch = np.where(over, 0.5 * (1 + with_exp), np.cos(size))
    small = size * size < _SERIES_BELOW
    away = np.where(small, 1.0, size)
    S0 = sh / away
    zz = np.where(small, 1.0, z)
    S1 = 0.5 * (ch - S0) / zz
    S2 = (0.25 * S0 - 1.5 * S1) / zz
    if small.any():
        less = np.exp(-scale)
        near = np.where(small, z, 0.0)
        S0, S1, S2 = (np.where(small, less * _power_series(near, k), far) for k, far in enumerate((S0, S1, S2)))
    # derivatives by D: S(D t²) t and C(D t²), with dC/dz = S/2
    S = function(D, t * S0, t**3 * S1, t**5 * S2)
    C = function(D, ch, 0.5 * t * t * S0, 0.5 * t**4 * S1)
    decay = -t * half
    held = decay.copy()
    fast = np.where(over, -w[0] * t * t / (t * half[0] + size), decay[0])  # of size − g t/2
    held[0] = 0.0
    factor = exponential(held)
    lost = np.exp(fast)
    return times(S, factor) * lost, times(C, factor) * lost


def _power_series(z: Array, order: int) -> Array:
    """Derivatives of Σ z^k/(2k + 1)!, for small z."""
    total = np.zeros_like(z)
    for k in range(9, order - 1, -1):
        term = 1.0
        for j in range(order):
            term *= k - j
        total = total * z + term / _FACTORIALS[2 * k + 1]
    return total


_FACTORIALS = np.concatenate([[1.0], np.cumprod(np.arange(1.0, 24.0))])


def _integrals(g: Jet, w: Jet, push: Jet, a11: Jet, a22: Jet) -> tuple[Jet, Jet, Jet]:
    """∫h, ∫h² and ∫h'²: in closed form, or by Gauss's rule where that would lose digits."""
    quarter = 0.25 * np.square(g[0])
    slow = (np.abs(g[0]) < _SLOW_DAMPING) & (np.abs(w[0]) < _SLOW_TURN)
    apart = ~slow & (quarter - w[0] > 0.1 * np.maximum(1.0, quarter))
    if slow.all():
        return _by_gauss(g, w)
    found = np.empty_like(g), np.empty_like(g), np.empty_like(g)
    for those, rule in ((slow, _by_gauss), (apart, _by_rates)):
        where = np.flatnonzero(those)
        if where.size:
            _put(found, where, rule(g[:, where], w[:, where]))
    where = np.flatnonzero(~slow & ~apart)
    if where.size:
        _put(found, where, _closed(*(each[:, where] for each in (g, w, push, a11, a22))))
    return found


def _put(found: tuple[Jet, Jet, Jet], where: NDArray[np.intp], part: tuple[Jet, Jet, Jet]) -> None:
    for whole, some in zip(found, part, strict=True):
        whole[:, where] = some


def _by_gauss(g: Jet, w: Jet) -> tuple[Jet, Jet, Jet]:
    held, q11, q22 = np.zeros((3, *g.shape))
    for point, weight in zip(*leggauss(_POINTS), strict=True):
        push, swing = _answer(g, w, 0.5 + 0.5 * float(point))
        held += 0.5 * weight * push
        q11 += 0.5 * weight * square(push)
        q22 += 0.5 * weight * square(swing - times(0.5 * g, push))
    return held, q11, q22


def _closed(g: Jet, w: Jet, push: Jet, a11: Jet, a22: Jet) -> tuple[Jet, Jet, Jet]:
    """∫h = (1 − a11)/w, ∫h'² = (1 − h'² − w h²)/(2g) and ∫h² = (∫h'² − g h²/2 − h h')/w."""
    rest = -square(a22) - times(w, square(push))
    rest[0] += 1
    q22 = 0.5 * times(rest, inverse(g))
    per_w, left = inverse(w), -a11
    left[0] += 1
    return times(left, per_w), times(q22 - 0.5 * times(g, square(push)) - times(push, a22), per_w), q22


def _by_rates(g: Jet, w: Jet) -> tuple[Jet, Jet, Jet]:
    """By the rates a > b of overdamped motion, with E(z) = (e^z − 1)/z.

    ∫h = (E(a) − E(b))/(a − b) and ∫h² = (E(2a) − 2 E(a + b) + E(2b))/(a − b)², with (a − b)² = 4D. The third,
    (a² E(2a) − 2 a b E(a + b) + b² E(2b))/(a − b)², loses nothing either.
    """
    D = 0.25 * square(g) - w
    half_apart = root(D)
    fast = -0.5 * g - half_apart
    slow = times(w, inverse(fast))
    held = 0.5 * times(relative(slow) - relative(fast), inverse(half_apart))
    of_slow, of_both, of_fast, per = relative(2 * slow), relative(-g), relative(2 * fast), 0.25 * inverse(D)
    q11 = times(of_slow - 2 * of_both + of_fast, per)
    q22 = times(times(square(slow), of_slow) - 2 * times(w, of_both) + times(square(fast), of_fast), per)
    return held, q11, q22
