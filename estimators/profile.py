"""The likelihood of an Ornstein–Uhlenbeck window at unequal steps, maximised over all but the pull.

Given kappa, with alpha = kappa theta and residuals r = d − Δ phi (alpha − kappa x) (functions of z = kappa Δ as in
`driftbook.estimators.pull`), alpha and sigma² are weighted least squares: with

    a = Σ tau Δ    b = Σ p d + kappa tau Δ x    C = Σ q d²/Δ + 2 kappa p x d + kappa² tau Δ x²

alpha = b/a, R = Σ q r²/Δ = C − b²/a and sigma² = R/n, and what is to be minimised over kappa is

    f = ½ (n ln R − Σ ln q).

Sums over steps are sums over *nodes*: steps of one length together, or the nodes of an interpolation in the length,
so that a few numbers stand for a window of any number of steps.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.pull import Pull
from driftbook.estimators.regression import EPS, LARGEST, LOSS, SMALLEST, Mask
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]


class Profile(Protocol):
    """The function f of many windows, shape (m,), and its derivative."""

    def value(self, kappa: Array) -> Array:
        """f, at one kappa for all windows or one each."""
        ...

    def slope(self, kappa: Array) -> Array:
        """df/dkappa, at one kappa each."""
        ...

    def take(self, places: Places) -> Profile:
        """The same for some of the windows."""
        ...


@dataclass(frozen=True)
class Spot:
    """What least squares give at one kappa a window; arrays of shape (m,).

    Attributes
    ----------
    alpha : array
        kappa theta, with values measured from an origin.
    rss : array
        R.
    log_q : array
        Σ ln q.
    information : array
        Information on kappa, times sigma², from the mean, alpha being estimated too.
    lean : array
        By how much alpha falls when kappa rises by one.
    weight : array
        a.
    variance_information : array
        Information on kappa from the spread of the variances, sigma being estimated too.
    variance_slope : array
        By how much the mean logarithm of the variances, at sigma = 1, falls when kappa rises by one.
    told : array
        What the steps tell of the pull, in time: the sum of their lengths, each weighted as `told` says.
    sound : array of bool
        Whether R kept its digits.
    """

    alpha: Array
    rss: Array
    log_q: Array
    information: Array
    lean: Array
    weight: Array
    variance_information: Array
    variance_slope: Array
    told: Array
    sound: Mask


@dataclass(frozen=True)
class NodeProfile:
    """Windows by their sums over nodes.

    Attributes
    ----------
    n : int
        Steps in a window.
    gap : array, shape (nodes, m) or (nodes, 1)
        Length of step of each node.
    count, T, X, XX, D, XD, DD : array, shape (nodes, m)
        Sums of 1, Δ, Δ x, Δ x², d, x d and d²/Δ.
    """

    n: int
    gap: Array
    count: Array
    T: Array
    X: Array
    XX: Array
    D: Array
    XD: Array
    DD: Array

    def take(self, places: Places) -> NodeProfile:
        """The same for some of the windows."""
        gap = self.gap if self.gap.shape[1] == 1 and self.count.shape[1] > 1 else self.gap[:, places]
        sums = (self.count, self.T, self.X, self.XX, self.D, self.XD, self.DD)
        return NodeProfile(self.n, gap, *(each[:, places] for each in sums))

    def value(self, kappa: Array) -> Array:
        """f, at one kappa for all windows or one each."""
        pull = Pull(kappa * self.gap)
        a, b, C = self._normal(kappa, pull)
        return 0.5 * (self.n * np.log(C - b * b / a) - _total(self.count * np.log(pull.q)))

    def slope(self, kappa: Array) -> Array:
        """df/dkappa, at one kappa each."""
        pull = Pull(kappa * self.gap)
        a, b, C = self._normal(kappa, pull)
        p, q, tau, gap = pull.p, pull.q, pull.tau, self.gap
        s = 2 * pull.p_slope  # the derivative of kappa tau
        g = gap * pull.log_q_slope
        a_slope = _total(gap * pull.tau_slope * self.T)
        b_slope = _total(0.5 * gap * s * self.D + s * self.X)
        C_slope = _total(q * g * self.DD + (2 * p + pull.z * s) * self.XD + kappa * (tau + s) * self.XX)
        alpha = b / a
        R_slope = C_slope - alpha * (2 * b_slope - alpha * a_slope)
        return 0.5 * (self.n * R_slope / (C - b * alpha) - _total(self.count * g))

    def spot(self, kappa: Array) -> Spot:
        """Least squares at one kappa a window."""
        pull = Pull(kappa * self.gap)
        a, b, C = self._normal(kappa, pull)
        p, q, decay, bend = pull.p, pull.q, pull.decay, self.gap * pull.phi_slope
        alpha = b / a
        R = C - b * alpha
        A = alpha * bend
        squares = _total(q * (A * (A * self.T - 2 * decay * self.X) + decay * decay * self.XX))
        lean = _total(p * (A * self.T - decay * self.X)) / a
        g = self.gap * pull.log_q_slope
        mean_g = _total(self.count * g) / self.n
        spread = _total(self.count * np.square(g - mean_g))
        loss = 4 * EPS * self.n**0.5 / LOSS
        sound: Mask = loss * _total(q * self.DD + kappa * kappa * pull.tau * self.XX) < R
        sound &= loss * squares < squares - lean * lean * a
        sound &= _total(self.XX + self.DD) < LARGEST
        sound &= (R > SMALLEST) & (squares > SMALLEST)
        log_q = _total(self.count * np.log(q))
        in_time = _total(told(unbiased(kappa, _total(self.T)), self.gap) * self.T)
        return Spot(alpha, R, log_q, squares - lean * lean * a, lean, a, 0.5 * spread, mean_g, in_time, sound)

    def _normal(self, kappa: Array, pull: Pull) -> tuple[Array, Array, Array]:
        """The sums a, b and C."""
        a = _total(pull.tau * self.T)
        b = _total(pull.p * self.D + (kappa * pull.tau) * self.X)
        C = _total(pull.q * self.DD + (2 * kappa * pull.p) * self.XD + (kappa * kappa * pull.tau) * self.XX)
        return a, b, C


@dataclass(frozen=True)
class StepProfile:
    """Windows by their steps: slower, and without loss.

    Attributes
    ----------
    x, d, steps : array, shape (n, m)
        Values before each step, increments, and lengths of step.
    """

    x: Array
    d: Array
    steps: Array

    @property
    def n(self) -> int:
        """Steps in a window."""
        return len(self.x)

    def take(self, places: Places) -> StepProfile:
        """The same for some of the windows."""
        return StepProfile(self.x[:, places], self.d[:, places], self.steps[:, places])

    def value(self, kappa: Array) -> Array:
        """f, at one kappa for all windows or one each."""
        pull = Pull(kappa * self.steps)
        residual, _, _ = self._residuals(kappa, pull)
        return 0.5 * (self.n * np.log(_total(pull.q * residual * residual / self.steps)) - _total(np.log(pull.q)))

    def slope(self, kappa: Array) -> Array:
        """df/dkappa, at one kappa each."""
        pull = Pull(kappa * self.steps)
        r, alpha, _ = self._residuals(kappa, pull)
        g = self.steps * pull.log_q_slope
        squares = pull.q * r / self.steps
        bend = self._bend(alpha, pull)
        R_slope = _total(squares * (g * r - 2 * self.steps * bend))
        return 0.5 * (self.n * R_slope / _total(squares * r) - _total(g))

    def spot(self, kappa: Array) -> Spot:
        """Least squares at one kappa a window."""
        pull = Pull(kappa * self.steps)
        r, alpha, a = self._residuals(kappa, pull)
        bend = self._bend(alpha, pull)
        lean = _total(pull.p * self.steps * bend) / a
        information = _total(pull.q * self.steps * np.square(bend - lean * pull.phi))
        g = self.steps * pull.log_q_slope
        mean_g = _total(g) / self.n
        spread = _total(np.square(g - mean_g))
        R = _total(pull.q * r * r / self.steps)
        in_time = _total(told(unbiased(kappa, _total(self.steps)), self.steps) * self.steps)
        return Spot(alpha, R, _total(np.log(pull.q)), information, lean, a, 0.5 * spread, mean_g, in_time, R > 0)

    def fourth(self, kappa: Array, alpha: Array, lean: Array) -> tuple[Array, Array]:
        """Kurtosis of the standardised residuals, and White's over the ordinary variance of kappa, from the mean."""
        pull = Pull(kappa * self.steps)
        squares = pull.q * np.square(self.d - self.steps * pull.phi * (alpha - kappa * self.x)) / self.steps
        rss = _total(squares)
        levers = pull.q * self.steps * np.square(self._bend(alpha, pull) - lean * pull.phi)
        kurtosis = self.n * _total(squares * squares) / np.square(rss)
        return kurtosis, self.n * _total(levers * squares) / (_total(levers) * rss)

    def _bend(self, alpha: Array, pull: Pull) -> Array:
        """The derivative by kappa of the mean of an increment, over Δ."""
        return alpha * self.steps * pull.phi_slope - pull.decay * self.x

    def _residuals(self, kappa: Array, pull: Pull) -> tuple[Array, Array, Array]:
        """Residuals, alpha and a; a second round takes off what the first lost by rounding."""
        a = _total(pull.tau * self.steps)
        r = self.d + self.steps * pull.phi * (kappa * self.x)
        alpha = _total(pull.p * r) / a
        r = r - self.steps * pull.phi * alpha
        lost = _total(pull.p * r) / a
        return r - self.steps * pull.phi * lost, alpha + lost, a


def told(kappa: Array, steps: Array) -> Array:
    """What a step tells of the pull, per unit of its length and against a short one: 2z/(e^{2z} − 1), z = kappa Δ ≥ 0.

    A level that varies as it does in the long run gives a step of z the information Δ²/(e^{2z} − 1) on kappa: after a
    long step nothing is left of where it began.
    """
    pull = Pull(np.maximum(kappa, 0.0) * steps)
    return pull.q * np.square(pull.decay)


def unbiased(kappa: Array, duration: Array) -> Array:
    """A pull less its bias to first order, 4/T (Tang, C. Y. & Chen, S. X. (2009), J. Econometrics 149, 65–81)."""
    return kappa - 4 / duration


def _total(values: Array) -> Array:
    """The sum over nodes, in their order whatever the number of windows, so that bits do not depend on it."""
    return np.asarray(np.add.accumulate(values, axis=0)[-1])
