"""95 % intervals of a diffusion with a linear pull, from the sums of its AR(1) regression.

The regression is of x_1 … x_n on x_0 … x_{n−1} with an intercept. `slope` is that of x_i on x_{i−1}, A the sum of
squares of x_0 … x_{n−1} about their mean, s2 = RSS/(n − 2) the residual variance. All functions work on batches:
arguments are arrays of one shape, or scalars, and NaN means "no such end".
"""

from dataclasses import dataclass
from functools import lru_cache
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike, NDArray

from driftbook.estimators.slope_law import SlopeLaw

Floats = NDArray[np.float64]

COARSEST = 0.8
"""Pull per step, kappa·Δ, beyond which the volatility has no interval that keeps its promise."""

_TWO_SIDED = NormalDist().inv_cdf(0.975)
_SERIES_BELOW = 0.02  # where the series is exact to rounding and the closed form loses two digits


@dataclass(frozen=True)
class Interval:
    """Ends of 95 % intervals, arrays of one shape; NaN where there is no end on that side."""

    lower: Floats
    upper: Floats


@dataclass(frozen=True)
class PullInterval:
    """Median-unbiased pulls c = kappa·T (no unit) and the ends of their 95 % intervals, arrays of one shape."""

    lower: Floats
    median: Floats
    upper: Floats


def widened_pull(law: SlopeLaw, slope: ArrayLike, widening: ArrayLike = 1.0) -> PullInterval:
    """The interval for the pull from the slope's exact law, widened about its median for uneven variance.

    lower' = max(0, median − w (median − lower)) and upper' = median + w (upper − median), with w = max(1, widening).

    Parameters
    ----------
    law : SlopeLaw
        The slope's law for this number of transitions.
    slope : array_like, any shape
        Least-squares slopes.
    widening : array_like, broadcasts with slope
        Ratio of a standard error of the slope that allows for uneven variance (White, H. (1980), A
        heteroskedasticity-consistent covariance matrix estimator, Econometrica 48, 817–838) to the ordinary one.

    Returns
    -------
    PullInterval
        In units of c: divide by T for rates. Infinite ends stay infinite; where the median is infinite, the lower end
        is not widened. An interval [0, 0] (a slope too large for any pull ≥ 0) stays [0, 0].
    """
    slope, w = np.broadcast_arrays(np.asarray(slope, dtype=np.float64), np.asarray(widening, dtype=np.float64))
    w = np.maximum(w, 1.0)
    lower, median, upper = law.lower(slope), law.median(slope), law.upper(slope)
    known = np.isfinite(median)
    centre = np.where(known, median, 0.0)
    return PullInterval(
        lower=np.where(known, np.maximum(centre - w * (centre - lower), 0.0), lower),
        median=median,
        upper=centre + w * (upper - centre),
    )


def theta_set(
    law: SlopeLaw, slope: ArrayLike, *, mean_from: ArrayLike, mean_to: ArrayLike, A: ArrayLike, s2: ArrayLike
) -> Interval:
    """95 % set for the long-run level theta, by inverting the test that the intercept about theta is zero.

    With v = theta − mean_from, d = mean_to − mean_from and g = 1 − slope, the set is

        (d − g v)² ≤ k s2 (1/n + v²/A),

    where k is the critical value at the lower end of the 90 % interval for the pull (`SlopeLaw.theta_critical`). As a
    quadratic in v it is an interval, the whole line, or all but an interval.

    Parameters
    ----------
    law : SlopeLaw
        The slope's law for this number of transitions.
    slope : array_like, any shape
        Least-squares slopes.
    mean_from, mean_to : array_like
        Means of x_0 … x_{n−1} and x_1 … x_n, both relative to one pivot (unit of x). With a pivot near the values a
        small spread about a large level is not lost; nothing is lost at all with mean_from itself as the pivot, which
        makes the two 0 and the mean step.
    A : array_like
        Sums of squares of x_0 … x_{n−1} about their mean (unit of x squared).
    s2 : array_like
        Residual variances RSS/(n − 2) (unit of x squared).

    Returns
    -------
    Interval
        Relative to the same pivot. Both ends are NaN where the set is unbounded: the whole line, or all but an
        interval, which happens where the squared t-statistic of the slope against one is at most k.

    References
    ----------
    Fieller, E. C. (1954), Some problems in interval estimation, J. Royal Statistical Society B 16, 175–185.
    """
    slope, origin, to, A, s2 = (np.asarray(each, dtype=np.float64) for each in (slope, mean_from, mean_to, A, s2))
    noise = law.theta_critical(law.lower_90(slope)) * s2
    d, g = to - origin, 1 - slope
    with np.errstate(divide="ignore", invalid="ignore"):  # a constant window has A = 0; it ends as NaN
        a = g**2 - noise / A
        half = d * g
        root = np.sqrt(noise * (a / law.n + d**2 / A))  # half² − a (d² − noise/n), expanded: nothing cancels
        far = half + np.copysign(root, half)
        near = np.where(far == 0, 0.0, (d**2 - noise / law.n) / far)
        ends = far / a, near
    bounded = a > 0
    return Interval(
        lower=np.where(bounded, origin + np.minimum(*ends), np.nan),
        upper=np.where(bounded, origin + np.maximum(*ends), np.nan),
    )


def sigma_interval(
    n: int,
    slope: ArrayLike,
    *,
    median_pull: ArrayLike,
    A: ArrayLike,
    s2: ArrayLike,
    kurtosis: ArrayLike,
    step: ArrayLike,
) -> Interval:
    """95 % interval for the volatility sigma, on ln sigma, with what the pull's uncertainty adds.

    With h the pull per step, the centre is sigma² = (s2/Δ)·2h/(1 − e^{−2h}) and

        SE² = max(1/(2(n − 2)), (kurtosis − 1)/(4n)) + ¼ g² (s2/A) e^{2h},

    where g = 1/h − 2/(e^{2h} − 1) is the derivative of ln(2h/(1 − e^{−2h})), and (s2/A) e^{2h} the variance of h.

    Parameters
    ----------
    n : int
        Number of transitions.
    slope : array_like, any shape
        Least-squares slopes.
    median_pull : array_like
        Median-unbiased pull c over the window (`PullInterval.median`); h = c/n, or −ln slope where it is infinite.
    A, s2 : array_like
        As for `theta_set`.
    kurtosis : array_like
        Fourth moment of the standardised residuals over the squared second; 3 for a Gaussian.
    step : array_like
        Length Δ of a step in years (or seconds).

    Returns
    -------
    Interval
        In units of x per √year. Both ends are NaN where −ln slope, the pull per step, is over `COARSEST` or is not
        defined (slope ≤ 0), and where s2 is not positive.
    """
    slope, c, A, s2 = (np.asarray(each, dtype=np.float64) for each in (slope, median_pull, A, s2))
    pull = -np.log(slope, out=np.full_like(slope, -np.inf), where=slope > 0)
    h = np.maximum(np.where(np.isfinite(c), c / n, pull), 0.0)
    usable = (slope > 0) & (pull <= COARSEST) & (s2 > 0) & (A > 0)
    A, s2 = np.where(usable, A, np.nan), np.where(usable, s2, np.nan)
    log_sigma = 0.5 * np.log(s2 / np.asarray(step, dtype=np.float64) * exact_over_euler(h))
    own = np.maximum(1 / (2 * (n - 2)), (np.asarray(kurtosis, dtype=np.float64) - 1) / (4 * n))
    reach = _TWO_SIDED * np.sqrt(own + 0.25 * exact_over_euler_gradient(h) ** 2 * s2 / A * np.exp(2 * h))
    return Interval(lower=np.exp(log_sigma - reach), upper=np.exp(log_sigma + reach))


def mean_interval(n: int, mean: ArrayLike, se: ArrayLike) -> Interval:
    """95 % interval of a mean of n Gaussian terms: mean ± t se, with Student's t of n − 1 degrees of freedom.

    References
    ----------
    Student (1908), The probable error of a mean, Biometrika 6, 1–25.
    """
    mean, reach = np.asarray(mean, dtype=np.float64), student_point(n - 1) * np.asarray(se, dtype=np.float64)
    return Interval(lower=mean - reach, upper=mean + reach)


def log_sd_interval(n: int, sd: ArrayLike, kurtosis: ArrayLike) -> Interval:
    """95 % interval of a standard deviation from its estimate with n − 1 degrees of freedom.

    The χ² interval on the scale of logarithms, stretched about the estimate by √(V/V₀) where fat tails make the
    variance V = (kurtosis − 1)/(4n) of ln sd larger than the Gaussian V₀ = 1/(2(n − 1)).
    """
    sd, kurtosis = np.asarray(sd, dtype=np.float64), np.asarray(kurtosis, dtype=np.float64)
    stretch = np.sqrt(np.maximum(1.0, (kurtosis - 1) * ((n - 1) / (2 * n))))
    below, above = chi_square_reach(n - 1)
    return Interval(lower=sd * np.exp(-stretch * below), upper=sd * np.exp(stretch * above))


@lru_cache(maxsize=256)
def student_point(freedom: int) -> float:
    """The 97.5 % point of Student's t."""
    from scipy.special import stdtrit

    return float(stdtrit(freedom, 0.975))


@lru_cache(maxsize=256)
def chi_square_reach(freedom: int) -> tuple[float, float]:
    """How far the 95 % χ² interval of ln sd reaches below and above its estimate."""
    from scipy.special import chdtri

    largest, least = float(chdtri(freedom, 0.025)), float(chdtri(freedom, 0.975))
    return 0.5 * float(np.log(largest / freedom)), 0.5 * float(np.log(freedom / least))


def exact_over_euler(h: ArrayLike) -> Floats:
    """2h/(1 − e^{−2h}) for h ≥ 0: variance per unit of time over the residual variance per step; 1 at h = 0."""
    h = np.asarray(h, dtype=np.float64)
    return np.asarray(np.divide(-2 * h, np.expm1(-2 * h), out=np.ones_like(h), where=h > 0))


def exact_over_euler_gradient(h: ArrayLike) -> Floats:
    """Derivative of ln(2h/(1 − e^{−2h})) for h ≥ 0: 1/h − 2/(e^{2h} − 1); 1 at h = 0."""
    h = np.asarray(h, dtype=np.float64)
    small = h < _SERIES_BELOW
    away = np.where(small, 1.0, h)
    series = 1 - h / 3 + h**3 / 45 - 2 * h**5 / 945
    return np.asarray(np.where(small, series, 1 / away - 2 / np.expm1(2 * away)))
