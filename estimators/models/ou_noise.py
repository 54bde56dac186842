"""The Ornstein–Uhlenbeck process observed with white noise, Y = X + noise·ε with dX = kappa (theta − X) dt + sigma dW.

It tells movement from a bid–ask bounce, which looks like a pull where there is none. The likelihood is the exact
log p(y_1 … y_n | y_0) from a flat start: given y_0, X_0 ~ N(y_0, noise²). So it holds with and without a pull, and
contains `driftbook.estimators.models.ou` (noise = 0) and a random walk with noise (kappa = 0).

At equal steps the increments are an AR(1) regression with moving-average errors (`driftbook.estimators.noisy`): with
rho = e^{−kappa Δ}, the root a and the innovations' variance F, noise² = F a/rho, and X has the variance
F (1 − a/rho)(1 − a rho) a step.

About half of all windows of a plain Ornstein–Uhlenbeck process end at a = 0: `Status.AT_BOUND`, with no noise, all
columns and the log-likelihood those of `ou`. Where rho < a or rho > 1/a would be best only noise is left, about a level
or a curve: `Status.AT_BOUND` too, with sigma = 0 and no kappa.

Standard errors are those of the observed information. Kappa's interval feeds rho to the exact law of the AR(1) slope,
widened by the standard error of rho over √((1 − rho²)/n + 4/n²), what that law has without noise; theta's is of
Fieller's type; sigma's is on the scale of its logarithm, with fat tails; noise's on that of its square, cut at 0.

References
----------
Harvey, A. C. (1989), Forecasting, Structural Time Series Models and the Kalman Filter, Cambridge University Press.
Roll, R. (1984), A simple implicit measure of the effective bid-ask spread in an efficient market, J. Finance 39,
1127–1139. Self, S. G. & Liang, K.-Y. (1987), Asymptotic properties of maximum likelihood estimators and likelihood
ratio tests under nonstandard conditions, J. American Statistical Association 82, 605–610 (half a χ² at the edge).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial
from statistics import NormalDist

import numpy as np

from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.filtering import Filtered, standardised
from driftbook.estimators.hidden_pull import HiddenPull, finite, hidden_pull, pull_ends
from driftbook.estimators.intervals import COARSEST
from driftbook.estimators.jets import covariance, inverse, logarithm, times
from driftbook.estimators.maximise import Limits, Maximum
from driftbook.estimators.maximise import inverse as inverse_of
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou
from driftbook.estimators.noisy import MORE_POINTS, Candidates, Exact, candidates, centred, determinant_slope, exact
from driftbook.estimators.noisy_values import first_search
from driftbook.estimators.pull import Pull
from driftbook.estimators.regression import Mask
from driftbook.estimators.repair import Columns, Places, Statuses, blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.uneven_hidden import noisy_parameters, noisy_steps, search, total
from driftbook.estimators.windows import Array

SHORTEST = 10
LN2 = float(np.log(2.0))
TWO_SIDED = NormalDist().inv_cdf(0.975)
AT_ONCE = 1 << 18  # observations in the windows that are settled at one time
FILTERED = 1 << 13  # windows of unequal steps that are searched at one time
START_NOISE = 0.02, 30.0  # least and largest noise²/(sigma² Δ) to start a search from
AGREED = 1e-7  # by how much the log-likelihood of a window may differ from what sums over windows said

PARAMETERS = (
    *ou.PARAMETERS,
    Parameter("noise", "x", "Standard deviation of the noise in each observation; 0: none is seen."),
)

_TAKEN_FROM_OU = ou.COLUMNS[4 * len(ou.PARAMETERS) : -2]  # from kappa_median_unbiased to stationary_sd

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    Column(
        "noise_share",
        "",
        "Share of the noise in the variance of a mean step's increment, 2 noise² over 2 noise² plus that of X in the "
        "stationary law; above 0.1 no_reversion_p of ou is not to be trusted.",
    ),
    Column(
        "no_noise_p",
        "",
        "One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %.",
    ),
    *_TAKEN_FROM_OU,
    Column("kurtosis", "", "Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_NAMES = {
    True: tuple(column.name for column in COLUMNS),
    False: (*(parameter.name for parameter in PARAMETERS), "loglik"),
}
_IN_UNITS_OF_X = tuple(column.name for column in COLUMNS if column.unit.startswith("x"))
_NEED_A_PULL = ("half_life", "half_life_mle", "stationary_sd")


def fit_equal(piece: Piece) -> Answer:
    """Fit every window of a piece, of equal steps; see `driftbook.estimators.batches`."""
    columns, status = _plain(piece)
    doubtful = _settle(piece, _search_by_index(piece), columns, status)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _search_by_index(piece: Piece) -> Candidates:
    """The search in every window of a piece as if its steps were equal."""
    levels, steps = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    usual, origin = steps[..., piece.pivot], levels[..., piece.pivot]
    sequences = np.stack([steps - usual[..., None], levels - origin[..., None]])
    sequences = sequences.reshape(2, -1, sequences.shape[-1]).transpose(2, 0, 1)
    return candidates(sequences, usual.ravel(), piece.lookback, piece.pivot, piece.shape[-1], piece.skip)


def _plain(piece: Piece) -> tuple[Columns, Statuses]:
    """All columns, filled where `ou` has them."""
    plain = ou.fit_piece(piece)
    columns = {name: np.full(plain.status.size, np.nan) for name in _NAMES[piece.intervals]}
    for name, values in plain.columns.items():
        columns[name][:] = values.reshape(-1)
    return columns, plain.status.reshape(-1).copy()


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite values, shape (m, n + 1), and equal steps, each searched by itself."""
    n = windows.shape[1] - 1
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    piece = Piece(np.ldexp(windows, -exponent[:, None]), steps[:, -1:], None, n, 1, 0, intervals)
    columns, status = _plain(piece)
    sequences, drift, _ = centred(piece.x)
    lost = _settle(piece, candidates(sequences, drift, n, -1, 1, n, MORE_POINTS), columns, status)
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)
    unit = np.ldexp(1.0, exponent)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name] *= unit
    columns["loglik"] -= n * np.log(unit)
    return columns, status


def _settle(piece: Piece, found: Candidates, columns: Columns, status: Statuses) -> Places:
    """Fill in what was found, and tell which windows it is not sound for."""
    usable = (status != Status.FLAT) & (status != Status.OUT_OF_RANGE)
    lost = usable & ~np.isfinite(found.value + found.a)
    at_zero = usable & (found.a == 0) & ~found.pure & (status != Status.ALTERNATING)
    _without_noise(columns, status, np.flatnonzero(at_zero))
    status[usable & found.swings] = Status.ALTERNATING
    blank(columns, np.flatnonzero(usable & found.swings))
    places = np.flatnonzero(usable & ~lost & ~at_zero & ~found.swings)
    at_once = max(1, AT_ONCE // (piece.lookback + 1))
    for start in range(0, places.size, at_once):
        part = places[start : start + at_once]
        windows = piece.windows[np.unravel_index(part, piece.shape)]
        dt, some = piece.dt.reshape(-1)[part // piece.shape[-1]], found.take(part)
        fit = exact(windows, some)
        lost[part] = ~(np.abs(fit.value - some.value) <= AGREED * piece.lookback)
        _write(_by_regression(fit, some, dt), part, columns, status)
    return np.flatnonzero(lost)


def _without_noise(columns: Columns, status: Statuses, places: Places) -> None:
    """What is known of the noise where none is seen; the rest is that of `ou`."""
    status[places] = Status.AT_BOUND
    columns["noise"][places] = 0.0
    if "noise_share" in columns:
        columns["noise_share"][places], columns["no_noise_p"][places] = 0.0, 1.0


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


def _by_regression(fit: Exact, found: Candidates, dt: Array) -> Estimate:
    """From a regression at equal steps.

    With the variance v of t = −ln(1 − a) from the curvature of f, b has the variance F/spread + b_t² v, and functions
    of a and b theirs by the delta method.
    """
    n, a, b, rho = fit.n, found.a, fit.slope, 1 - fit.slope
    kappa = np.log1p(-b) / -dt
    pull = Pull(kappa * dt)
    scale = fit.rss / n
    of_x = scale * ((rho - a) / rho) * (1 - a * rho)  # variance of X a step
    variance = fit.rss / (n - 2)
    v, b_t, per_a = np.where(found.curvature > 0, n / ((n - 2) * found.curvature), np.nan), found.slope_t, 1 - a
    given_a, given_b = variance / fit.spread, variance / fit.weight
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


def _write(estimate: Estimate, places: Places, columns: Columns, status: Statuses) -> None:
    """Put an estimate into its places."""
    without = np.where(status[places] == Status.ALTERNATING, np.nan, columns["loglik"][places])
    found = _point(estimate)
    if "kurtosis" in columns:
        found |= _with_intervals(estimate, without)
    for name, values in found.items():
        columns[name][places] = values
    with_pull = np.where(estimate.kappa > 0, np.int8(Status.OK), np.int8(Status.NO_REVERSION))
    status[places] = np.where(estimate.pure, np.int8(Status.AT_BOUND), with_pull)
    status[places[estimate.flat]] = Status.FLAT
    blank(columns, places[estimate.flat])


def _point(estimate: Estimate) -> Columns:
    """Parameters and log-likelihood."""
    return {
        "kappa": np.where(estimate.pure, np.nan, estimate.kappa),
        "theta": estimate.theta,
        "sigma": np.where(estimate.pure, 0.0, estimate.sigma),
        "noise": estimate.noise,
        "loglik": estimate.loglik,
    }


def _with_intervals(estimate: Estimate, without: Array) -> Columns:
    """The other columns; `without` is the log-likelihood of `ou`."""
    n, sigma, noise = estimate.n, estimate.sigma, estimate.noise
    own = np.maximum(1 / (2 * n), (estimate.kurtosis - 1) / (4 * n))  # of the logarithm of the innovations' scale
    sigma_se = np.sqrt(own + estimate.log_sigma_variance)
    noise_se = np.sqrt(np.where(estimate.pure, own, own + estimate.log_noise_variance))
    h = estimate.kappa * (estimate.duration / n)
    fine, reach = ~(h > COARSEST), np.exp(TWO_SIDED * sigma_se)
    ends = pull_ends(estimate.pull)
    of_pull = {
        "kappa_se": estimate.pull.slope_se / (estimate.pull.slope * (estimate.duration / n)),
        "kappa_lower": ends.lower,
        "kappa_upper": ends.upper,
        "theta_se": estimate.theta_se,
        "theta_lower": ends.theta_lower,
        "theta_upper": ends.theta_upper,
        "sigma_se": sigma * sigma_se,
        "sigma_lower": np.where(fine, sigma / reach, np.nan),
        "sigma_upper": np.where(fine, sigma * reach, np.nan),
        "kappa_median_unbiased": ends.median,
        "no_reversion_p": ends.p_no_pull,
    }
    of_pull |= _formulas({**of_pull, "kappa": estimate.kappa, "sigma": sigma})
    of_step = np.square(sigma) * (estimate.duration / n) * Pull(h).phi  # variance of an increment of X
    share = 2 * np.square(noise) / (2 * np.square(noise) + of_step)
    return {
        **{name: np.where(estimate.pure, np.nan, values) for name, values in of_pull.items()},
        "noise_se": noise * noise_se,
        "noise_lower": noise * np.sqrt(np.maximum(1 - 2 * TWO_SIDED * noise_se, 0.0)),
        "noise_upper": noise * np.sqrt(1 + 2 * TWO_SIDED * noise_se),
        "noise_share": np.where(estimate.pure, 1.0, share),
        "no_noise_p": _half_chi_square(2 * (estimate.loglik - without)),
        "kurtosis": estimate.kurtosis,
    }


def _half_chi_square(gain: Array) -> Array:
    """Probability of at least this gain, twice that of the log-likelihood, without noise."""
    from scipy.special import erfc

    return np.asarray(0.5 * erfc(np.sqrt(0.5 * np.maximum(gain, 0.0))))


def _formulas(columns: Columns) -> Columns:
    """The columns that are formulas of others, as their SQL has them."""
    kappa, lower = columns["kappa"], columns["kappa_lower"]
    found = {
        "half_life": finite(LN2 / columns["kappa_median_unbiased"]),
        "half_life_lower": finite(LN2 / columns["kappa_upper"]),
        "half_life_upper": finite(LN2 / lower),
        "half_life_mle": LN2 / kappa,
        "half_life_unbounded": np.where(np.isnan(lower), np.nan, lower == 0),
        "stationary_sd": columns["sigma"] / np.sqrt(2 * kappa),
    }
    for name in _NEED_A_PULL:
        found[name] = np.where(kappa > 0, found[name], np.nan)
    return found


def fit_unequal(piece: Piece) -> Answer:
    """The same for unequal steps, by the filter: the search starts from the fit as if steps were equal."""
    columns, status = _plain(piece)
    start = _start(_search_by_index(piece), piece.lookback)
    usable = (status != Status.FLAT) & (status != Status.OUT_OF_RANGE)
    places = np.flatnonzero(usable)
    for first in range(0, places.size, FILTERED):
        part = places[first : first + FILTERED]
        where = np.unravel_index(part, piece.shape)
        _fit_unequal(piece.windows[where], piece.window_steps[where], start[:, part], part, columns, status)
    return Answer(columns, status)


def _start(found: Candidates, n: int) -> Array:
    """kappa T and noise²/(sigma² Δ) to start from, shape (2, m)."""
    rho, a = 1 - found.slope, found.a
    h = -np.log(rho)
    share = (a / (rho - a)) / ((1 - a * rho) * Pull(h).q)
    u, v = np.clip(n * h, -10.0, 4.0 * n), np.clip(share, START_NOISE[0], START_NOISE[1])
    known = np.isfinite(found.value + u + v) & ~found.swings
    pure = [[5.0], [START_NOISE[1]]]
    return np.where(known, np.where(found.pure, pure, np.stack([u, v])), [[5.0], [0.1]])


def _fit_unequal(
    windows: Array, steps: Array, start: Array, places: Places, columns: Columns, status: Statuses
) -> None:
    n = steps.shape[1]
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    unit = np.ldexp(1.0, exponent)
    x, steps = np.ascontiguousarray(np.ldexp(windows, -exponent[:, None]).T), np.ascontiguousarray(steps.T)
    limits = Limits(lower=(-60.0, 0.0), upper=(8.0 * n, float(n * n)), step=(3.0, 0.2), growth=(0.5, 0.5))
    start = first_search(start, x - x[0], steps, limits)
    found, fit = search(noisy_steps, start, x - x[0], steps, limits)
    without = columns["loglik"][places] + n * np.log(unit)
    none = (found.at_bound[1] & (found.point[1] == 0)) | (found.value <= without)
    none &= found.converged | np.isfinite(without)
    _without_noise(columns, status, places[none & (status[places] != Status.ALTERNATING)])
    some = np.flatnonzero(~none)
    if not some.size:
        return
    estimate = _by_filter(found.take(some), fit.take(some), x[:, some], steps[:, some])
    part, unit = places[some], unit[some]
    columns["loglik"][part] += n * np.log(unit)  # as if values had been divided by it
    _write(estimate, part, columns, status)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name][part] *= unit
    columns["loglik"][part] -= n * np.log(unit)
    lost = part[~found.converged[some] & ~estimate.pure]
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)


def _by_filter(found: Maximum, fit: Filtered, x: Array, steps: Array) -> Estimate:
    """From the best parameters at unequal steps; time first."""
    n, duration, z = len(steps), total(steps), x - x[0]
    u, v = found.point
    hidden, (kappa, ratio) = noisy_steps(u, v, steps), noisy_parameters(u, v, steps)
    squares, fourth = standardised(z, hidden.variance[0], hidden.steps, fit.flow[0])
    of_parameters = inverse_of(-found.hessian) * (n / (n - 2))
    log_scale = logarithm(fit.rss)
    theta = times(fit.flow, inverse(kappa))
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


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array, noise: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters, by the filter of Kalman (1960)."""
    shape = np.broadcast_shapes(x.shape[:-1], kappa.shape, theta.shape, sigma.shape, noise.shape)
    steps = np.broadcast_to(steps, (*x.shape[:-1], x.shape[-1] - 1))
    mean, spread = x[..., 0] - theta, np.square(noise)
    total = np.zeros(shape)
    for k in range(x.shape[-1] - 1):
        pull = Pull(kappa * steps[..., k])
        mean = mean * pull.decay
        hidden = np.square(pull.decay) * spread + np.square(sigma) * steps[..., k] / pull.q
        variance = hidden + np.square(noise)
        miss = x[..., k + 1] - theta - mean
        total -= 0.5 * (np.log(2 * np.pi * variance) + np.square(miss) / variance)
        mean = mean + hidden / variance * miss
        spread = hidden * (np.square(noise) / variance)
    return np.where((sigma >= 0) & (noise >= 0) & (sigma + noise > 0), total, np.nan)


MODEL = Model(
    name="ou_noise",
    revision=1,
    equation="Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW",
    range="real",
    is_relative=False,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="kappa * (theta - x)",
    reaches_zero=True,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=by_steps(fit_equal, fit_unequal),
    log_density=log_density,
)
