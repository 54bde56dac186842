"""The transition law of the square-root process dX = kappa (theta − X) dt + sigma √X dW over a step.

With alpha = kappa theta, c = 2 kappa/(sigma² (1 − e^{−kappa Δ})), r = e^{−kappa Δ/2}, q = 2 alpha/sigma² − 1 and a, b
the roots of the values x and y before and after the step,

    ln p(y | x) = ln c − c (b − r a)² + (q/2) ln(y/x) − q ln r + ln I_q(z) − z,    z = 2 c r a b,

where b − r a is computed as (y − x)/(a + b) + (1 − r) a. So written it loses nothing: the usual form, a difference of
c x r², c y and z, loses as many digits as c x has.

`Windows` climbs this likelihood at any steps, transition by transition, in

    lambda = ln(2/(sigma² D)),    h = kappa D,    alpha D,

D being the mean step of the window; the first is nearly orthogonal to the others, which q is not. There,
q = alpha D e^lambda − 1, ln c_i = lambda + f(h w_i) − ln w_i and ln r_i = −h w_i/2 with w_i = Δ_i/D and
f(z) = ln(z/(1 − e^{−z})). At q = −1, which is alpha = 0, the density is the limit from above; paths that were absorbed
at zero are then missing from it.

References
----------
Feller, W. (1951), Two singular diffusion problems, Annals of Mathematics 54, 173–182. Cox, J. C., Ingersoll, J. E. &
Ross, S. A. (1985), A theory of the term structure of interest rates, Econometrica 53, 385–407.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.bessel import log_bessel, log_bessel_jet
from driftbook.estimators.maximise import Limits, Places, Surface
from driftbook.estimators.pull import Pull
from driftbook.estimators.windows import Array

FASTEST = 8.0
"""Pull over a mean step at which steps hold no trace of where they began; h lies between it and its negative."""

LIMITS = Limits((-np.inf, -FASTEST, 0.0), (np.inf, FASTEST, np.inf), (1.0, 0.5, np.inf), (0.0, 0.5, 0.0))

_SERIES_BELOW = 0.2  # below this |z| a difference loses digits and its series does not
_STILL = 1e11
_HEDGE = 0.1  # share of the mean value that is added to values before they serve as weights


def is_still(mean: Array, squares: Array) -> NDArray[np.bool_]:
    """Whether values move so little for their size that nothing can be told: some 1e6 times less in a step.

    Terms of the likelihood that cancel grow as the mean value over the sum of squares of what the roots grow by.
    """
    still: NDArray[np.bool_] = mean > _STILL * squares
    return still


def log_quotient(after: Array, before: Array) -> Array:
    """ln(after/before), without loss where the two are near each other."""
    change = (after - before) / before
    return np.where(np.abs(change) < 0.5, np.log1p(change), np.log(after / before))


def log_ratio(z: Array) -> Array:
    """f(z) = ln(z/(1 − e^{−z})), on either side of z = 0."""
    return np.asarray(-np.log(Pull(z).phi))


def log_ratio_slope(z: Array) -> Array:
    """f′(z) = 1/z − 1/(e^z − 1); ½ at z = 0."""
    small = np.abs(z) < _SERIES_BELOW
    away = np.where(small, 1.0, z)
    u = np.square(0.5 * z)
    series = 0.5 - 0.25 * z * (1 / 3 - u * (1 / 45 - u * (2 / 945 - u * (1 / 4725 - u * (2 / 93555)))))
    return np.asarray(np.where(small, series, 1 / away - 1 / np.expm1(away)))


def log_ratio_bend(z: Array) -> Array:
    """f″(z) = 1/(4 sinh²(z/2)) − 1/z²; −1/12 at z = 0."""
    small = np.abs(z) < _SERIES_BELOW
    away = np.where(small, 1.0, z)
    u = np.square(0.5 * z)
    series = -1 / 12 + u * (1 / 60 - u * (1 / 378 - u * (1 / 2700 - u * (1 / 20790))))
    return np.asarray(np.where(small, series, 0.25 / np.square(np.sinh(0.5 * away)) - 1 / np.square(away)))


def order(level: Array, alpha: Array) -> Array:
    """q, from a level that is ln(2/(sigma² D)), or differs from it by a constant that alpha D takes up."""
    return np.asarray(alpha * np.exp(level) - 1)


def by_alpha(surface: Surface, level: Array, alpha: Array) -> Surface:
    """A function of the level, another parameter and q as one of the level, that parameter and alpha; in place."""
    scale = np.exp(level)
    growth = alpha * scale
    (g0, _, g2), H = surface.gradient, surface.hessian
    mixed = growth * H[2, 2]
    mixed += H[0, 2]
    H[0, 0] += growth * (H[0, 2] + mixed + g2)
    H[0, 1] += growth * H[1, 2]
    mixed += g2
    np.multiply(scale, mixed, out=H[0, 2])
    H[1, 2] *= scale
    H[2, 2] *= scale
    H[2, 2] *= scale
    H[1, 0], H[2, 0], H[2, 1] = H[0, 1], H[0, 2], H[1, 2]
    g0 += growth * g2
    g2 *= scale
    return surface


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters; NaN for kappa theta < 0."""
    kappa, theta, sigma = kappa[..., None], theta[..., None], sigma[..., None]
    before, after = x[..., :-1], x[..., 1:]
    a, b = np.sqrt(before), np.sqrt(after)
    pull, q = kappa * steps, 2 * kappa * theta / np.square(sigma) - 1
    log_c = np.log(2 / (np.square(sigma) * steps)) + log_ratio(pull)
    e = (after - before) / (a + b) - a * np.expm1(-0.5 * pull)
    z = 2 * np.exp(log_c - 0.5 * pull) * (a * b)
    terms = log_c - np.exp(log_c) * e * e + 0.5 * q * (log_quotient(after, before) + pull) + log_bessel(q, z)
    sound = (sigma[..., 0] > 0) & (x > 0).all(axis=-1)
    return np.asarray(np.where(sound, terms.sum(axis=-1), np.nan))


@dataclass(frozen=True)
class Windows:
    """Windows of positive values and any steps, transition by transition; arrays of shape (m, n).

    Attributes
    ----------
    a : array
        Roots of the values before each step.
    d : array
        What the roots grow by in it.
    log_growth : array
        What the logarithms of the values grow by in it.
    log_product : array
        Logarithm of the roots' product, ln(a b).
    weight : array
        Length of each step, over the mean of its window.
    """

    a: Array
    d: Array
    log_growth: Array
    log_product: Array
    weight: Array

    @classmethod
    def of(cls, x: Array, steps: Array) -> Windows:
        """From values, shape (m, n + 1), and steps, shape (m, n)."""
        before, increments = x[:, :-1], np.diff(x, axis=1)
        log_growth = log_quotient(x[:, 1:], before)
        roots = np.sqrt(x)
        a, b = roots[:, :-1], roots[:, 1:]
        weight = steps / steps.mean(axis=1, keepdims=True)
        return cls(a, increments / (a + b), log_growth, np.log(a) + np.log(b), weight)

    def take(self, places: Places) -> Windows:
        """Some of them."""
        return Windows(
            self.a[places],
            self.d[places],
            self.log_growth[places],
            self.log_product[places],
            self.weight[places],
        )

    def start(self) -> Array:
        """Weighted least squares of increments on values, with weights that stay bounded at zero; shape (3, m)."""
        x, w = np.square(self.a), self.weight
        increments = self.d * (2 * self.a + self.d)
        lever = 1 / (x + _HEDGE * x.mean(axis=1, keepdims=True))
        S, Sx, Sxx = ((lever * w * each).sum(axis=1) for each in (np.ones_like(x), x, x * x))
        Sd, Sxd = ((lever * each).sum(axis=1) for each in (increments, x * increments))
        det = S * Sxx - Sx * Sx
        alpha, h = (Sxx * Sd - Sx * Sxd) / det, (Sx * Sd - S * Sxd) / det
        errors = increments - w * (alpha[:, None] - h[:, None] * x)
        variance = (lever * np.square(errors) / w).sum(axis=1) / (lever * x).sum(axis=1)
        h = np.clip(-np.log1p(-np.minimum(h, 0.9)), -1.0, FASTEST / 2)
        return np.stack([np.log(2 / variance), h, np.maximum(alpha, 0.25 * variance)])

    def surface(self, point: Array, places: Places) -> Surface:
        """The log-likelihood at lambda, h and alpha D, one point a window, with its derivatives."""
        part = self if places.size == len(self.a) else self.take(places)
        level, h, alpha = point
        return by_alpha(part._surface(level[:, None], h[:, None], order(level, alpha)[:, None]), level, alpha)

    def _surface(self, level: Array, h: Array, q: Array) -> Surface:
        a, w = self.a, self.weight
        z = h * w
        log_c, log_r = level + log_ratio(z) - np.log(w), -0.5 * z
        c, r = np.exp(log_c), np.exp(log_r)
        e = self.d - a * np.expm1(log_r)
        F = log_bessel_jet(q, np.exp(np.log(2.0) + log_c + log_r + self.log_product))
        square, lean, weight = c * e * e, 2 * c * r * a * e, 2 * c * np.square(r * a)
        by_c, by_r = 1 - square + F.by_log, lean - q + F.by_log
        c_c, c_r, r_r = F.by_log_log - square, F.by_log_log + lean, F.by_log_log + lean - weight
        u, v = log_ratio_slope(z) * w, -0.5 * w
        value = log_c - square + q * (0.5 * self.log_growth - log_r) + F.value
        by_q = 0.5 * self.log_growth - log_r + F.by_order
        h_h = c_c * u * u + 2 * c_r * u * v + r_r * v * v + by_c * log_ratio_bend(z) * w * w
        return _summed(
            value,
            (by_c, by_c * u + by_r * v, by_q),
            (c_c, c_c * u + c_r * v, F.by_log_order, h_h, F.by_log_order * (u + v) - v, F.by_order_order),
        )


def _summed(value: Array, gradient: tuple[Array, ...], upper: tuple[Array, ...]) -> Surface:
    """Sums over transitions; `upper` is the hessian's upper triangle, row by row."""
    total = np.empty((3, 3, len(value)))
    for (i, j), each in zip(((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)), upper, strict=True):
        total[i, j] = total[j, i] = each.sum(axis=1)
    return Surface(value.sum(axis=1), np.stack([each.sum(axis=1) for each in gradient]), total)
