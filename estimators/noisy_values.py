"""A first search for the Ornstein–Uhlenbeck process with noise at unequal steps, by values of its likelihood alone.

The filter's exact derivatives cost some fifteen times its value. So a search goes most of its way by differences: six
values give value, gradient and Hessian, right to some 1e-7 of a standard error, and the exact search starts from there.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.maximise import Limits, Surface, maximise
from driftbook.estimators.pull import Pull
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]

ROUNDS = 6  # after which nearly all are within some 1e-7 of a standard error
LANES = 1 << 9  # windows that go through the filter at one time, each at six points
SHARE = 2e-4  # of a standard error, by which parameters are moved
_MOVES = ((0, 0), (1, 0), (-1, 0), (0, 1), (0, -1), (1, 1))


def first_search(start: Array, z: Array, steps: StepLengths, limits: Limits) -> Array:
    """Parameters near the best, shape (2, m); arguments as of `driftbook.estimators.uneven_hidden.search`."""

    def objective(point: Array, at: Places) -> Surface:
        parts = [slice(begin, begin + LANES) for begin in range(0, at.size, LANES)]
        found = [_by_differences(point[:, part], z[:, at[part]], steps.take(at[part])) for part in parts]
        return Surface(
            np.concatenate([each.value for each in found]),
            np.concatenate([each.gradient for each in found], axis=1),
            np.concatenate([each.hessian for each in found], axis=2),
        )

    return maximise(objective, start, limits, most_rounds=ROUNDS).point


def _by_differences(point: Array, z: Array, steps: StepLengths) -> Surface:
    u, v = point
    move_u = SHARE * np.sqrt(2 * np.abs(u) + 6)
    move_v = SHARE * (v + 0.1)
    at = np.array(_MOVES)[:, :, None]
    here, up, down, right, left, both = noisy_loglik(u + at[:, 0] * move_u, v + at[:, 1] * move_v, z, steps)
    cross = (both - up - right + here) / (move_u * move_v)
    bend_u, bend_v = (up - 2 * here + down) / move_u**2, (right - 2 * here + left) / move_v**2
    gradient = np.stack([(up - down) / (2 * move_u), (right - left) / (2 * move_v)])
    return Surface(here, gradient, np.array([[bend_u, cross], [cross, bend_v]]))


def noisy_loglik(u: Array, v: Array, z: Array, steps: StepLengths) -> Array:
    """The likelihood, largest over theta and sigma, at several u = kappa T and v = noise²/(sigma² Δ) of each window.

    Parameters
    ----------
    u, v : array, shape (points, m)
    z : array, shape (n + 1, m)
        Observations less the first; time first.
    steps : StepLengths
    """
    n = steps.n
    kappa, noise = u / steps.duration, v * (steps.duration / n)
    mean, response, ee, eg, gg, log_F = np.zeros((6, *u.shape))
    product, p = np.ones_like(u), noise
    look_up = _laws(kappa, steps)
    for k in range(n):
        rho, lift, variance = look_up(k)
        mean *= rho
        response *= rho
        both = rho * rho
        both *= p
        both += variance
        F = both + noise
        e, g = z[k + 1] - mean, lift - response
        e_scaled, g_scaled = e / F, g / F
        e *= e_scaled
        ee += e
        eg += g * e_scaled
        g *= g_scaled
        gg += g
        p = both * noise
        p /= F
        e_scaled *= both
        mean += e_scaled
        g_scaled *= both
        response += g_scaled
        response -= lift
        product *= F
        if k % 8 == 7:
            log_F += np.log(product)
            product[:] = 1.0
    log_F += np.log(product)
    rss = ee - eg / gg * eg
    return np.asarray(-0.5 * (n * (np.log(2 * np.pi / n * rss) + 1) + log_F))


def _laws(kappa: Array, steps: StepLengths) -> Callable[[int], Array]:
    """The decay over a step, what a flow of one adds, and the variance for sigma = 1: shape (3, points, m), by step."""

    def law(length: Array) -> Array:
        pull = Pull(kappa * length)
        return np.stack([pull.decay, length * pull.phi, length / pull.q])

    if steps.kinds is None:
        return lambda k: law(steps.steps[k])
    points, m = kappa.shape
    table = np.stack([law(np.full(m, length)) for length in steps.lengths], axis=2).reshape(3 * points, -1)
    places = steps.places()
    return lambda k: table.take(places[k], axis=1).reshape(3, points, m)
