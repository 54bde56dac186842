"""The exact Gaussian likelihood of a process with one hidden number, at any steps, with its derivatives.

Between observations z_k the hidden number s and the next observation follow

    z_{k+1} = alpha z_k + beta s + …    s' = delta z_k + gamma s + …

with noise of variances r and q and covariance c, all of which may depend on the step. The filter of Kalman (1960) then
gives the likelihood one observation at a time. A constant flow, which a level theta away from the first observation
makes, is taken out by the filter's answer to a flow of one, and the scale by its sum of squares R. So two parameters u
and v are left, and with e the innovations of the data, g of a flow of one, and F their variances,

    R = Σ e²/F − (Σ e g/F)²/Σ g²/F    flow = Σ e g/F / Σ g²/F    log-likelihood = −½ (n ln(2π R/n) + n + Σ ln F).

References
----------
Kalman, R. E. (1960), A new approach to linear filtering and prediction problems, J. Basic Engineering 82, 35–45.
Schweppe, F. C. (1965), Evaluation of likelihood functions for Gaussian signals, IEEE Trans. Information Theory 11,
61–70. Rosenberg, B. (1973), Random coefficients models, Annals of Economic and Social Measurement 2, 399–428.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.jets import Jet, constant, inverse, inverse_and_logarithm, logarithm, moved, square, times
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]


@dataclass(frozen=True)
class Transition:
    """One step; jets of shape (6, m), or None for what is zero.

    Attributes
    ----------
    less, delta : jet or None
        1 − alpha, and delta: what the observation adds; None where it adds nothing (alpha = delta = 0).
    beta, gamma : jet
        What the hidden number adds to the next observation and to itself.
    lift, hidden_lift : jet
        What a flow of one adds to the next observation and to the hidden number.
    r, c, q : jet
        Variance of the observation, covariance, variance of the hidden number.
    """

    less: Jet | None
    delta: Jet | None
    beta: Jet
    gamma: Jet
    lift: Jet
    hidden_lift: Jet
    r: Jet
    c: Jet
    q: Jet


Steps = Callable[[int], Transition]
"""Of the number of a step, counted from 0."""


@dataclass(frozen=True)
class Filtered:
    """What the filter found; jets of shape (6, m).

    Attributes
    ----------
    loglik : jet
        The log-likelihood, largest over flow and scale.
    rss : jet
        R.
    flow : jet
    weight : array, shape (m,)
        Σ g²/F.
    """

    loglik: Jet
    rss: Jet
    flow: Jet
    weight: Array

    def take(self, places: Places) -> Filtered:
        """The same for some of the windows."""
        return Filtered(self.loglik[:, places], self.rss[:, places], self.flow[:, places], self.weight[places])

    def put(self, places: Places, part: Filtered) -> None:
        """Write what was found for some of the windows."""
        self.loglik[:, places], self.rss[:, places], self.flow[:, places] = part.loglik, part.rss, part.flow
        self.weight[places] = part.weight

    def moved(self, du: Array, dv: Array) -> Filtered:
        """The same at parameters nearby."""
        return Filtered(moved(self.loglik, du, dv), moved(self.rss, du, dv), moved(self.flow, du, dv), self.weight)


def filtered(z: Array, variance: Jet, step: Steps) -> Filtered:
    """Run the filter through windows.

    Parameters
    ----------
    z : array, shape (n + 1, m)
        Observations less the first; time first.
    variance : jet
        Of the hidden number before the first step, whose mean is zero.
    step : callable
    """
    n, m = len(z) - 1, z.shape[1]
    mean, response, p = constant(0.0, (m,)), constant(0.0, (m,)), variance
    ee, eg, gg, log_F = np.zeros((4, 6, m))
    product = np.ones(m)
    for k in range(n):
        t = step(k)
        mean_seen, response_seen, spread = times(t.beta, mean), times(t.beta, response), times(t.beta, p)
        e, g = -mean_seen, t.lift - response_seen
        e[0] += z[k + 1]
        again = times(t.beta, spread)
        F = again + t.r
        if t.gamma is t.beta:
            mean, response, p, both = mean_seen, response_seen, again + t.q, again + t.c
        else:
            mean, response = times(t.gamma, mean), times(t.gamma, response)
            both, p = times(t.gamma, spread) + t.c, times(square(t.gamma), p) + t.q
        if t.less is not None and t.delta is not None:
            e += t.less * z[k]
            e[0] -= z[k]
            mean += t.delta * z[k]
        weight, log = inverse_and_logarithm(F)
        log_F += log
        gain, scaled = times(both, weight), times(e, weight)
        ee += times(e, scaled)
        eg += times(g, scaled)
        gg += times(square(g), weight)
        mean += times(gain, e)
        response += times(gain, g)
        response -= t.hidden_lift
        p -= times(gain, both)
        product *= F[0]
        if k % _LOGS_EVERY == _LOGS_EVERY - 1:
            log_F[0] += np.log(product)
            product[:] = 1.0
    log_F[0] += np.log(product)
    flow = times(eg, inverse(gg))
    rss = ee - times(eg, flow)
    loglik = -0.5 * (n * logarithm(rss) + log_F)
    loglik[0] += 0.5 * n * (np.log(n / (2 * np.pi)) - 1)
    return Filtered(loglik, rss, flow, gg[0])


_LOGS_EVERY = 8  # variances are of the size of a step's, so that eight of them stay in range


def standardised(z: Array, variance: Array, step: Steps, flow: Array) -> tuple[Array, Array]:
    """Sums of squares and of fourth powers of the standardised innovations, shape (m,), for a flow of each window."""
    squares, fourth, mean, p = np.zeros_like(flow), np.zeros_like(flow), np.zeros_like(flow), variance
    for k in range(len(z) - 1):
        t = step(k)
        beta, gamma = t.beta[0], t.gamma[0]
        e = z[k + 1] - beta * mean - t.lift[0] * flow
        mean = gamma * mean + t.hidden_lift[0] * flow
        if t.less is not None and t.delta is not None:
            e += t.less[0] * z[k] - z[k]
            mean += t.delta[0] * z[k]
        F, both = beta * beta * p + t.r[0], gamma * beta * p + t.c[0]
        mean += both / F * e
        p = gamma * gamma * p + t.q[0] - both * both / F
        miss = e * e / F
        squares += miss
        fourth += miss * miss
    return squares, fourth


def by_length(steps: StepLengths, transition: Callable[[Array], Transition]) -> Steps:
    """Transitions of windows; `transition` makes them from lengths, shape (m,)."""
    if steps.kinds is None:
        return lambda k: transition(steps.steps[k])
    m = steps.duration.size
    made = [transition(np.full(m, length)) for length in steps.lengths]
    if len(made) == 1:
        return lambda _: made[0]
    slots: dict[int, int] = {}  # jets that several names share are looked up once
    names = {f.name: id(getattr(made[0], f.name)) for f in fields(Transition) if getattr(made[0], f.name) is not None}
    for key in names.values():
        slots.setdefault(key, len(slots))
    first = {slots[key]: name for name, key in reversed(names.items())}
    table = np.stack([[getattr(each, first[slot]) for each in made] for slot in range(len(slots))])
    table = np.ascontiguousarray(table.transpose(0, 2, 1, 3)).reshape(len(slots) * 6, -1)
    places = steps.places()

    def chosen(k: int) -> Transition:
        found = list(table.take(places[k], axis=1).reshape(len(slots), 6, m))
        jets = {name: found[slots[key]] for name, key in names.items()}
        return Transition(**{"less": None, "delta": None, **jets})

    return chosen
