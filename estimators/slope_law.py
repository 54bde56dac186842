"""The exact finite-sample law of the least-squares slope of an AR(1), read from a table.

Regress x_1 … x_n on x_0 … x_{n−1} with an intercept. For a Gaussian AR(1) with slope e^{−c/n}, started from its
stationary law (at c = 0: a random walk from anywhere), the law of the estimated slope depends on n and c alone: level
and volatility cancel. Here c = kappa·T is the pull over the whole window. Inverting the quantiles in c gives intervals
for the pull that hold where those of normal theory fail, near c = 0, a median-unbiased estimate, and the p-value of
"no pull".

The table holds quantiles computed without simulation by `driftbook.estimators.data.make_slope_law`, as differences
from a Cornish–Fisher reference, over a grid of n, c and probabilities. Between the grid's points it is interpolated:
by cubic polynomials in 1/n and a cubic spline in asinh c. SciPy is loaded when the first law is made, not before: who
only asks which models there are does not wait for it.

References
----------
Andrews, D. W. K. (1993), Exactly median-unbiased estimation of first order autoregressive/unit root models,
Econometrica 61, 139–165. Stock, J. H. (1991), Confidence intervals for the largest autoregressive root in U.S.
macroeconomic time series, J. Monetary Economics 28, 435–459.
"""

from dataclasses import dataclass
from functools import lru_cache
from importlib import resources

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

SHORTEST = 10
"""The smallest number of transitions for which the law is tabulated."""

_KNOTS = 2048
_LAST_PULL = 4.0  # the law of n transitions is inverted for c from 0 to 4 n


def reference(c: ArrayLike, n: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """Centre, scale and slope that the tabulated quantiles are measured from.

    Parameters
    ----------
    c, n : array_like, shapes that broadcast
        Pull over the window kappa·T, and number of transitions.

    Returns
    -------
    centre, scale, slope : ndarray
        slope = e^{−c/n}; centre = slope − (1 + 3 slope)/n, the mean to first order (Kendall, M. G. (1954), Note on
        bias in the estimation of autocorrelation, Biometrika 41, 403–404); scale = √((1 − slope²)/n + 4/n²).
    """
    c, n = np.asarray(c, dtype=np.float64), np.asarray(n, dtype=np.float64)
    slope = np.exp(-c / n)
    scale = np.sqrt(-np.expm1(-2 * c / n) / n + 4 / n**2)
    return slope - (1 + 3 * slope) / n, scale, slope


def reference_quantile(c: ArrayLike, n: ArrayLike, p: ArrayLike) -> Floats:
    """Cornish–Fisher approximation to the p-quantile, which the table corrects.

    centre + scale·(z − slope (z² − 1)/(n·scale)) with z = Φ⁻¹(p): the skewness term of the normal expansion.
    """
    from scipy.special import ndtri

    centre, scale, slope = reference(c, n)
    z = ndtri(np.asarray(p, dtype=np.float64))
    return np.asarray(centre + scale * z - slope * (z**2 - 1) / np.asarray(n, dtype=np.float64))


@dataclass(frozen=True)
class SlopeLaw:
    """The law of the slope for one number of transitions, made by `slope_law(n)`.

    Methods take slopes of any shape and return arrays of that shape; NaN gives NaN. Pulls are c = kappa·T and have no
    unit: divide by the window's length T for a rate.

    Attributes
    ----------
    n : int
        Number of transitions.
    pulls : ndarray, shape (knots,)
        Rising grid of c from 0 to 4 n.
    probabilities : ndarray, shape (m,)
        Probabilities of the tabulated quantiles.
    quantiles : ndarray, shape (m, knots)
        Quantiles of the slope at each c, falling in c.
    null_slopes, null_scores : ndarray, shape (k,)
        Slopes and the normal scores of their probabilities at c = 0, both rising.
    theta_pulls, theta_values : ndarray, shape (j,)
        Critical values of the set for theta, on a rising grid of c.
    """

    n: int
    pulls: Floats
    probabilities: Floats
    quantiles: Floats
    null_slopes: Floats
    null_scores: Floats
    theta_pulls: Floats
    theta_values: Floats

    def lower(self, slope: ArrayLike, /) -> Floats:
        """Lower end of the 95 % interval for c: under it the slope is the 2.5 % quantile of its law."""
        return self.solve(slope, p=0.025)

    def median(self, slope: ArrayLike, /) -> Floats:
        """Median-unbiased estimate of c: under it the slope is the median of its law (Andrews 1993)."""
        return self.solve(slope, p=0.5)

    def upper(self, slope: ArrayLike, /) -> Floats:
        """Upper end of the 95 % interval for c: under it the slope is the 97.5 % quantile of its law.

        Zero where the slope is above that quantile at c = 0: then no pull is compatible with the slope, and the
        interval is [0, 0].
        """
        return self.solve(slope, p=0.975)

    def lower_90(self, slope: ArrayLike, /) -> Floats:
        """Lower end of the 90 % interval for c, at which `theta_critical` is looked up."""
        return self.solve(slope, p=0.05)

    def solve(self, slope: ArrayLike, /, *, p: float) -> Floats:
        """The pull c under which the slope is the p-quantile of its law.

        Parameters
        ----------
        slope : array_like, any shape
            Least-squares slopes.
        p : float
            One of `probabilities`.

        Returns
        -------
        ndarray
            c; 0 where the slope is above the quantile at c = 0, infinite where it is below the one at c = 4 n.

        Raises
        ------
        ValueError
            If p is not tabulated.
        """
        slope = np.asarray(slope, dtype=np.float64)
        quantiles = self.quantiles[self._column(p)]
        solved = np.interp(-slope, -quantiles, self.pulls)
        return np.where(slope < quantiles[-1], np.inf, solved)

    def p_no_pull(self, slope: ArrayLike, /) -> Floats:
        """Probability of a slope at most this large when c = 0: the one-sided p-value of "no pull".

        Within 4e-4 of the exact law (3e-5 from n = 15 on); below 1e-6 it is extrapolated.
        """
        from scipy.special import ndtr

        return np.asarray(ndtr(np.interp(np.asarray(slope, dtype=np.float64), self.null_slopes, self.null_scores)))

    def quantile(self, c: ArrayLike, p: float) -> Floats:
        """The p-quantile of the slope under the pull c, for p in `probabilities` and 0 ≤ c ≤ 4 n."""
        return np.asarray(np.interp(np.asarray(c, dtype=np.float64), self.pulls, self.quantiles[self._column(p)]))

    def theta_critical(self, c: ArrayLike, /) -> Floats:
        """Critical value at 95 % of the squared t-statistic for the long-run level theta under the pull c.

        From simulation, see `driftbook.estimators.data.make_slope_law`. It falls from the square of the Dickey–Fuller
        point at c = 0 towards that of Student's t.
        """
        return np.asarray(np.interp(np.asarray(c, dtype=np.float64), self.theta_pulls, self.theta_values))

    def _column(self, p: float) -> int:
        column = int(np.argmin(np.abs(self.probabilities - p)))
        if not np.isclose(self.probabilities[column], p, rtol=0, atol=1e-12):
            message = f"p must be one of {self.probabilities.tolist()}, got {p}"
            raise ValueError(message)
        return column


@lru_cache(maxsize=256)
def slope_law(n: int) -> SlopeLaw | None:
    """The law of the least-squares slope over n transitions, or None for n < 10, where there is no table.

    Made in about two milliseconds and kept. Quantiles are within 1e-4 of the exact law in probability.
    """
    if n < SHORTEST:
        return None
    table = _table()
    pulls = np.sinh(np.linspace(0.0, np.arcsinh(_LAST_PULL * n), _KNOTS))
    null_slopes, null_scores = _null_law(table, n)
    return SlopeLaw(
        n=n,
        pulls=pulls,
        probabilities=table["probabilities"],
        quantiles=_quantiles(table, n, pulls),
        null_slopes=null_slopes,
        null_scores=null_scores,
        theta_pulls=table["theta_pulls"],
        theta_values=_across(table["theta_transitions"], table["theta_critical"], n),
    )


@lru_cache(maxsize=1)
def _table() -> dict[str, Floats]:
    path = resources.files("driftbook.estimators.data") / "slope_law.npz"
    with path.open("rb") as file, np.load(file) as stored:
        return {name: np.asarray(stored[name], dtype=np.float64) for name in stored.files}


def _across(transitions: Floats, values: Floats, n: int) -> Floats:
    """Values of shape (transitions, ...) at n, by the cubic in 1/n through the four nearest tabulated n."""
    target = np.log(min(n, transitions[-1]))
    near = np.sort(np.argsort(np.abs(np.log(transitions) - target), kind="stable")[:4])
    x = 1 / transitions[near]
    weights = [np.prod([(1 / n - b) / (a - b) for b in x if b != a]) for a in x]
    return np.tensordot(np.asarray(weights), values[near], axes=1)


def _quantiles(table: dict[str, Floats], n: int, pulls: Floats) -> Floats:
    """Quantiles at each pull, shape (probabilities, pulls), made to fall in c."""
    from scipy.interpolate import CubicSpline

    nodes = table["pulls"]
    spline = CubicSpline(np.arcsinh(nodes), _across(table["transitions"], table["corrections"], n))
    correction = spline(np.arcsinh(np.minimum(pulls, nodes[-1]))).T
    correction *= np.minimum(1.0, nodes[-1] / np.maximum(pulls, 1.0))  # past the table it dies out as 1/c
    probabilities = table["probabilities"][:, None]
    scale = reference(pulls, n)[1]
    return np.minimum.accumulate(reference_quantile(pulls, n, probabilities) + scale * correction, axis=1)


def _null_law(table: dict[str, Floats], n: int) -> tuple[Floats, Floats]:
    """Slopes and normal scores of their probabilities at c = 0, on a fine grid with straight tails."""
    from scipy.interpolate import CubicSpline
    from scipy.special import ndtri

    p = table["null_probabilities"]
    correction = _across(table["transitions"], table["null_corrections"], n)
    slopes = reference_quantile(0.0, n, p) + reference(0.0, n)[1] * correction
    grid = np.linspace(slopes[0], slopes[-1], _KNOTS)
    scores = np.maximum.accumulate(np.asarray(CubicSpline(slopes, ndtri(p))(grid), dtype=np.float64))
    far = np.array([grid[0] - 4.0, grid[-1] + 4.0])
    tails = scores[[0, -1]] + (far - grid[[0, -1]]) * _end_gradients(slopes, ndtri(p))
    return np.concatenate([far[:1], grid, far[1:]]), np.concatenate([tails[:1], scores, tails[1:]])


def _end_gradients(x: Floats, y: Floats) -> Floats:
    gradients = np.diff(y) / np.diff(x)
    return gradients[[0, -1]]
