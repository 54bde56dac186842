"""What is known of windows of a damped oscillator, from a search at equal steps or at others."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.filtering import Filtered, standardised
from driftbook.estimators.jets import Jet, inverse, logarithm, times
from driftbook.estimators.maximise import Maximum
from driftbook.estimators.regression import ROUNDING, Mask
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.swings import COARSEST, SwingSums, chart, sampled, swing_fit, swing_moments
from driftbook.estimators.uneven_hidden import inertial_parameters, inertial_steps
from driftbook.estimators.windows import Array

NEARLY = 0.98  # of the coarsest psi: a search that has run against it stops a little before
AGREED = 1e-9  # per step, by how much the log-likelihood of a window may differ from what sums over windows said


@dataclass(frozen=True)
class Estimate:
    """What a search found in m windows, for equal steps or not; jets by its two parameters, of shape (6, m).

    Attributes
    ----------
    n : int
        Steps in a window.
    duration : array, shape (m,)
        Their time.
    damping, stiffness : jet
        The latter is omega².
    log_eta2 : jet
        Of the best eta² at each damping and omega.
    theta : jet
        The best level, from the first value.
    first : array, shape (m,)
        The first value.
    theta_weight : array, shape (m,)
        One over the variance of theta at given damping and omega, times n/(n − 2).
    found : Maximum
    loglik, kurtosis : array, shape (m,)
    coarse, sound, flat : array of bool, shape (m,)
        Whether motion is too fast for the steps, the search and its sums can be relied on, values do not vary.
    """

    n: int
    duration: Array
    damping: Jet
    stiffness: Jet
    log_eta2: Jet
    theta: Jet
    first: Array
    theta_weight: Array
    found: Maximum
    loglik: Array
    kurtosis: Array
    coarse: Mask
    sound: Mask
    flat: Mask


def by_sums(sums: SwingSums, found: Maximum, windows: Array, dt: Array) -> Estimate:
    """The estimate at the best point, with the likelihood of one more run through each window."""
    n, fit = sums.n, swing_fit(sums, *found.point)
    g, w = chart(*found.point)
    x = np.ascontiguousarray(windows.T)
    first = x[0].copy()
    x -= first
    squares, fourth = swing_moments(fit, sums, x)
    value = 0.5 * n * (np.log(n / (2 * np.pi)) - 1 - np.log(squares)) - fit.log_det
    log_eta2 = logarithm(fit.rss)
    log_eta2[0] -= np.log(n * dt**3)
    theta = times(fit.level, inverse(fit.coefficients.pulled))
    theta[0] -= sums.level
    return Estimate(
        n=n,
        duration=n * dt,
        damping=g / dt,
        stiffness=w / dt**2,
        log_eta2=log_eta2,
        theta=theta,
        first=first,
        theta_weight=fit.weight[0] * np.square(fit.coefficients.pulled[0]) * (n / fit.rss[0]),
        found=found,
        loglik=value,
        kurtosis=n * fourth / np.square(squares),
        coarse=~(fit.coefficients.psi[0] < NEARLY * COARSEST) | (found.at_bound[1] & (found.point[1] > 0)),
        sound=found.converged & (np.abs(value - fit.loglik[0]) <= AGREED * n),
        flat=~(squares > n * np.square(ROUNDING * np.abs(windows).max(axis=1))),
    )


def by_filter(found: Maximum, fit: Filtered, x: Array, steps: StepLengths) -> Estimate:
    """From the best parameters at unequal steps; time first."""
    n, z = steps.n, x - x[0]
    s, b = found.point
    hidden, (damping, stiffness) = inertial_steps(s, b, steps), inertial_parameters(s, b, steps)
    squares, fourth = standardised(z, hidden.variance[0], hidden.steps, fit.flow[0])
    log_eta2 = logarithm(fit.rss)
    log_eta2[0] -= np.log(n)
    psi = sampled(*chart(s, b)).psi[0]
    return Estimate(
        n=n,
        duration=steps.duration,
        damping=damping,
        stiffness=stiffness,
        log_eta2=log_eta2,
        theta=times(fit.flow, inverse(stiffness)),
        first=x[0],
        theta_weight=fit.weight * np.square(stiffness[0]) * (n / fit.rss[0]),
        found=found,
        loglik=fit.loglik[0],
        kurtosis=n * fourth / np.square(squares),
        coarse=~(psi < NEARLY * COARSEST) | (found.at_bound[1] & (found.point[1] > 0)),
        sound=found.converged,
        flat=~(squares > 0),
    )
