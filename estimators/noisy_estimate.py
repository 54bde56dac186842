"""What is known of windows of an Ornstein–Uhlenbeck process with noise, from a search at equal steps or at others."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.filtering import Filtered, standardised
from driftbook.estimators.hidden_pull import HiddenPull, hidden_pull
from driftbook.estimators.jets import covariance, logarithm, times
from driftbook.estimators.jets import inverse as one_over
from driftbook.estimators.maximise import Maximum, inverse
from driftbook.estimators.noisy import Candidates, Exact
from driftbook.estimators.noisy_profile import determinant_slope
from driftbook.estimators.pull import Pull
from driftbook.estimators.regression import Mask
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.uneven_hidden import noisy_parameters, noisy_steps
from driftbook.estimators.windows import Array


@dataclass(frozen=True)
class Estimate:
    """What was found for m windows with noise, at equal steps or not; arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    duration : array
        Their time.
    kappa, theta, sigma, noise, loglik, kurtosis : array
    theta_se : array
    log_sigma_variance, log_noise_variance : array
        Without the error that all share, that of the scale of innovations.
    pull : HiddenPull
    pure, flat : array of bool
        Whether only noise is left, and whether there is no variation.
    """

    n: int
    duration: Array
    kappa: Array
    theta: Array
    sigma: Array
    noise: Array
    loglik: Array
    kurtosis: Array
    theta_se: Array
    log_sigma_variance: Array
    log_noise_variance: Array
    pull: HiddenPull
    pure: Mask
    flat: Mask


def by_regression(fit: Exact, found: Candidates, dt: Array) -> Estimate:
    """From a regression at equal steps.

    With the variance v of t = −ln(1 − a) from the curvature of f, b has the variance F/spread + b_t² v, and functions
    of a and b theirs by the delta method.
    """
    n, a, b, rho = fit.n, found.a, found.slope, 1 - found.slope
    kappa = np.log1p(-b) / -dt
    pull = Pull(kappa * dt)
    scale = fit.rss / n
    of_x = scale * ((rho - a) / rho) * (1 - a * rho)  # variance of X a step
    variance = fit.rss / (n - 2)
    v, b_t, per_a = np.where(found.curvature > 0, n / ((n - 2) * found.curvature), np.nan), found.slope_t, 1 - a
    given_a, given_b = variance / found.spread, variance / fit.weight
    slope_variance = given_a + b_t * b_t * v
    intercept_t = found.lean + fit.away * b_t  # of the intercept at the weighted mean
    centre = intercept_t * b_t * v / slope_variance
    intercept_variance = given_b + intercept_t * v * (intercept_t - centre * b_t)
    scale_t = -per_a * determinant_slope(a, n) * (2 / n)  # of ln R
    by_t = scale_t + per_a * (-1 / (rho - a) - rho / (1 - a * rho))
    by_b = -a / (rho * (rho - a)) + a / (1 - a * rho) + pull.log_q_slope / rho
    of_theta = given_b + given_a * np.square(fit.away) + np.square(found.lean) * v
    return Estimate(
        n=n,
        duration=n * dt,
        kappa=kappa,
        theta=fit.theta,
        sigma=np.sqrt(of_x * pull.q / dt),
        noise=np.sqrt(scale * np.where(rho == a, 1.0, a / rho)),
        loglik=fit.loglik,
        kurtosis=n * fit.fourth / np.square(fit.rss),
        theta_se=np.sqrt(of_theta) / np.abs(b),
        log_sigma_variance=0.25 * (np.square(by_t + by_b * b_t) * v + np.square(by_b) * given_a),
        log_noise_variance=0.25 * (np.square(scale_t + per_a / a + b_t / rho) * v + given_a / np.square(rho)),
        pull=HiddenPull(
            n,
            n * dt,
            rho,
            np.sqrt(slope_variance),
            fit.theta - fit.away + centre,
            fit.away - centre,
            intercept_variance,
        ),
        pure=found.pure,
        flat=fit.flat,
    )


def by_filter(found: Maximum, fit: Filtered, x: Array, steps: StepLengths) -> Estimate:
    """From the best parameters at unequal steps; time first."""
    n, duration, z = steps.n, steps.duration, x - x[0]
    u, v = found.point
    hidden, (kappa, ratio) = noisy_steps(u, v, steps), noisy_parameters(u, v, steps)
    squares, fourth = standardised(z, hidden.variance[0], hidden.steps, fit.flow[0])
    of_parameters = inverse(-found.hessian) * (n / (n - 2))
    log_scale = logarithm(fit.rss)
    theta = times(fit.flow, one_over(kappa))
    sigma2 = squares / n
    given = sigma2 * (n / (n - 2)) / (fit.weight * np.square(kappa[0]))
    log_noise = log_scale + logarithm(ratio)
    pure = found.at_bound[1] | found.at_bound[0]
    noise2 = np.where(found.at_bound[0], squares / n * (ratio[0] + 0.5 / kappa[0]), sigma2 * ratio[0])
    return Estimate(
        n=n,
        duration=duration,
        kappa=kappa[0],
        theta=x[0] + theta[0],
        sigma=np.sqrt(sigma2),
        noise=np.sqrt(noise2),
        loglik=fit.loglik[0],
        kurtosis=n * fourth / np.square(squares),
        theta_se=np.sqrt(covariance(theta, theta, of_parameters) + given),
        log_sigma_variance=0.25 * covariance(log_scale, log_scale, of_parameters),
        log_noise_variance=0.25 * covariance(log_noise, log_noise, of_parameters),
        pull=hidden_pull(n, duration, kappa, theta, x[0], given, of_parameters),
        pure=pure,
        flat=~(squares > 0),
    )
