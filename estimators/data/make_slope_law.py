"""Compute `slope_law.npz`, the table behind `driftbook.estimators.slope_law`: `python -m
driftbook.estimators.data.make_slope_law`, about two minutes on one core.

With x = (x_0 … x_n) Gaussian of precision P, the slope is at most r exactly if x'Mx ≤ 0 for a symmetric M that is a
tridiagonal matrix plus one of rank two (the centring). P is tridiagonal. So the characteristic function of x'Mx,
φ(t) = √(det P / det(P − 2itM)), costs one sweep of length n per frequency, and

    P(x'Mx ≤ 0) = ½ − (1/π) ∫_0^∞ Im φ(t)/t dt

(Gil-Pelaez, J. (1951), Note on the inversion theorem, Biometrika 38, 481–482; for quadratic forms Imhof, J. P. (1961),
Computing the distribution of quadratic forms in normal variables, Biometrika 48, 419–426).

The critical values of the set for theta have no such formula and come from simulation with a fixed seed.
"""

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri

from driftbook.estimators.slope_law import reference, reference_quantile

Floats = NDArray[np.float64]
Complexes = NDArray[np.complexfloating[Any, Any]]

TRANSITIONS = (10, 12, 14, 17, 20, 25, 30, 40, 60, 100, 200, 500, 2000)
# fmt: off
PULLS = (0, .05, .1, .2, .35, .5, .75, 1, 1.5, 2, 2.5, 3, 4, 5, 6, 8, 10, 12.5, 16, 20, 25, 32, 40, 50, 64, 80, 100,
         128, 160, 200, 256, 320, 400, 512, 724, 1024, 1448, 2048, 2896, 4096, 5792, 8192)
PROBABILITIES = (.005, .01, .025, .05, .1, .25, .5, .75, .9, .95, .975, .99, .995)
NULL_PROBABILITIES = (1e-6, 1e-5, 1e-4, .0005, .001, .002, .005, .01, .025, .05, .1, .175, .25, .375, .5, .625, .75,
                      .825, .9, .95, .975, .99, .995, .998, .999, .9995, .9999)
THETA_PULLS = (0, .25, .5, 1, 2, 3, 4, 5, 7, 10, 14, 20, 30, 50, 80, 120, 200)
# fmt: on
THETA_TRANSITIONS = (10, 20, 60, 500)
THETA_PATHS = 400_000

_STEP = 0.025  # of ln t; at 0.05 four digits are lost for n = 8000, and more above
_NEGLIGIBLE = -22.0  # ln |φ| at which the integral is cut
_START = 1e-4  # first frequency, in units of 1/sd of the form; below it the integrand is linear in t


def _log_transform(t: Floats, r: Floats, c: float, n: int) -> tuple[Floats, Floats]:
    """ln |φ| and arg φ of x'Mx at frequencies t of shape (k,), rising, for slopes r of shape (m, 1)."""
    walk = c == 0
    slope = float(np.exp(-c / n))
    log_det_p = 0.0 if walk else float(np.log(-np.expm1(-2 * c / n)))
    log_det, correction = _sweep(t, r, slope, n, walk)
    angle = np.unwrap(np.angle(correction), axis=-1)
    log_size = 0.5 * (log_det_p - log_det.real - np.log(np.abs(correction)))
    return np.asarray(log_size, dtype=np.float64), np.asarray(-0.5 * (log_det.imag + angle), dtype=np.float64)


def _sweep(t: Floats, r: Floats, slope: float, n: int, walk: bool) -> tuple[Complexes, Complexes]:
    """ln det of the tridiagonal part of P − 2itM, and the factor that its part of rank two adds to the determinant.

    M = M₀ − (ab' + ba')/(2n): M₀ has 1/2 beside the diagonal and −r on it (0 at the end), a = (1, …, 1, 0) and
    b = (−r, 1 − r, …, 1 − r, 1). All pivots of the factorisation LDL' have positive real parts, so the sum of their
    principal logarithms is on the right branch. A random walk starts at x_0 = 0, which drops the first row.
    """
    beside = -slope - 1j * t
    inner = (2.0 if walk else 1 + slope**2) + 2j * t * r
    pivot: Any = inner if walk else 1 + 2j * t * r
    ya: Any = 1.0
    yb: Any = 1 - r if walk else -r
    aa, ab, bb, log_det = (np.zeros(inner.shape, dtype=np.complex128) for _ in range(4))
    pending: Any = None
    for left in range(n - 1 if walk else n, -1, -1):
        inverse = 1 / pivot
        za, zb = ya * inverse, yb * inverse
        aa += ya * za
        ab += ya * zb
        bb += yb * zb
        if pending is None:
            pending = pivot
        else:  # two arguments within ±π/2 can be added before the logarithm
            log_det += np.log(pending * pivot)
            pending = None
        if left == 0:
            break
        last = left == 1
        pivot = (1.0 if last else inner) - beside**2 * inverse
        ya = (0.0 if last else 1.0) - beside * za
        yb = (1.0 if last else 1 - r) - beside * zb
    if pending is not None:
        log_det += np.log(pending)
    s = 1j * t / n
    return log_det, (1 + s * ab) ** 2 - s**2 * aa * bb


def _last_frequency(start: float, r: Floats, c: float, n: int) -> float:
    """ln t from where on φ is negligible for all slopes: |φ| falls in t, so a coarse scan finds it."""
    coarse = start + np.arange(0.0, 45.0)
    log_size, _ = _log_transform(np.exp(coarse), r, c, n)
    return float(coarse[np.argmax((log_size < _NEGLIGIBLE).all(axis=0))])


def exact_cdf(r: ArrayLike, c: float, n: int) -> Floats:
    """Probability that the estimated slope is at most r.

    Parameters
    ----------
    r : array_like, any shape
        Slopes.
    c : float
        Pull over the window, kappa·T ≥ 0; the true slope is e^{−c/n}.
    n : int
        Number of transitions.

    Returns
    -------
    ndarray
        Probabilities, in the shape of r, to about 1e-9.
    """
    r = np.asarray(r, dtype=np.float64)
    column = r.reshape(-1, 1)
    spread = n * np.sqrt(min(1 / max(-np.expm1(-2 * c / n), 1e-300), n / 2) / n)
    start = float(np.log(_START / spread))
    u = np.arange(start, _last_frequency(start, column, c, n) + _STEP, _STEP)
    log_size, angle = _log_transform(np.exp(u), column, c, n)
    integrand = np.exp(log_size) * np.sin(angle)
    before = integrand[:, 0] / np.expm1(_STEP)  # the trapezoids left of the first: a geometric series
    return np.asarray(0.5 - _STEP / np.pi * (before + integrand.sum(axis=-1))).reshape(r.shape)


def exact_quantile(p: ArrayLike, c: float, n: int, *, start: ArrayLike | None = None) -> Floats:
    """Quantiles of the estimated slope: `exact_cdf` inverted by the secant method on normal scores.

    Parameters
    ----------
    p : array_like, shape (m,)
        Probabilities.
    c, n :
        As for `exact_cdf`.
    start : array_like, shape (m,), optional
        First guess.

    Returns
    -------
    ndarray, shape (m,)
        Slopes r, with |Φ⁻¹(exact_cdf(r)) − Φ⁻¹(p)| ≤ 1e-6.

    Raises
    ------
    ArithmeticError
        If the iteration does not settle.
    """
    z = ndtri(np.asarray(p, dtype=np.float64))
    r = np.asarray(reference_quantile(c, n, p) if start is None else start, dtype=np.float64)
    step_per_score = np.full(z.shape, float(reference(c, n)[1]))
    error = _score(r, c, n) - z
    for _ in range(60):
        if np.all(np.abs(error) <= 1e-6):
            return r
        step = -np.clip(error, -1.0, 1.0) * step_per_score
        r = r + step
        before, error = error, _score(r, c, n) - z
        change = error - before
        secant = np.divide(step, change, out=step_per_score.copy(), where=np.abs(change) > 1e-7)
        step_per_score = np.clip(secant, step_per_score / 4, step_per_score * 4)
    message = f"no quantile found for c = {c}, n = {n}"
    raise ArithmeticError(message)


def _score(r: Floats, c: float, n: int) -> Floats:
    return np.asarray(ndtri(np.clip(exact_cdf(r, c, n), 1e-8, 1 - 1e-8)))


def make_quantiles(n: int) -> tuple[Floats, Floats]:
    """Corrections to `reference_quantile` in units of the scale: shape (pulls, probabilities), and at c = 0 alone.

    Works from the largest pull, where the law is nearly normal, down: each answer starts the next search.
    """
    correction = np.zeros(len(PROBABILITIES))
    corrections = np.empty((len(PULLS), len(PROBABILITIES)))
    for k in range(len(PULLS) - 1, -1, -1):
        correction = corrections[k] = _correction(PROBABILITIES, PULLS[k], n, correction)
    guess = np.interp(ndtri(NULL_PROBABILITIES), ndtri(PROBABILITIES), corrections[0])
    return corrections, _correction(NULL_PROBABILITIES, 0.0, n, guess)


def _correction(p: ArrayLike, c: float, n: int, guess: Floats) -> Floats:
    base, scale = reference_quantile(c, n, p), reference(c, n)[1]
    return np.asarray((exact_quantile(p, c, n, start=base + scale * guess) - base) / scale)


def simulate_theta_critical(n: int, paths: int, rng: np.random.Generator) -> Floats:
    """95 % points of the squared t-statistic for theta at each of `THETA_PULLS`, shape (pulls,).

    The statistic is that of the intercept when values are measured from theta. All pulls use the same shocks, so that
    the values are smooth in c. As c → 0 the stationary start lies far from theta and the statistic tends to the square
    of the Dickey–Fuller t-statistic, which is what stands at c = 0.
    """
    blocks = [_theta_statistics(n, size, rng) for size in np.diff(np.arange(0, paths + 1, min(paths, 4000)))]
    return np.asarray(np.quantile(np.concatenate(blocks, axis=1), 0.95, axis=1))


def _theta_statistics(n: int, paths: int, rng: np.random.Generator) -> Floats:
    pulls = np.array(THETA_PULLS, dtype=np.float64)[:, None]
    slope = np.exp(-pulls / n)
    sd = np.sqrt(1 / np.where(pulls > 0, -np.expm1(-2 * pulls / n), np.inf))
    first = sd * rng.standard_normal(paths)
    x = first.copy()
    sx, sxx, sxy = (np.zeros((len(pulls), paths)) for _ in range(3))
    for _ in range(n):
        y = slope * x
        y += rng.standard_normal(paths)
        sx += x
        sxx += x * x
        sxy += x * y
        x = y
    return _theta_statistic(n, first, x, sx, sxx, sxy)


def _theta_statistic(n: int, first: Floats, last: Floats, sx: Floats, sxx: Floats, sxy: Floats) -> Floats:
    """Squared t-statistics of the intercept from sums over the window; in the first row that of the slope at one."""
    sy, syy = sx - first + last, sxx - first**2 + last**2
    A, B, D = sxx - sx**2 / n, sxy - sx * sy / n, syy - sy**2 / n
    slope = B / A
    s2 = (D - slope * B) / (n - 2)
    statistic = (sy / n - slope * sx / n) ** 2 / (s2 * (1 / n + (sx / n) ** 2 / A))
    statistic[0] = (1 - slope[0]) ** 2 * A[0] / s2[0]
    return np.asarray(statistic)


def main() -> None:
    """Compute the table and write it beside this file."""
    made = [make_quantiles(n) for n in TRANSITIONS]
    rng = np.random.default_rng(20_250_101)
    np.savez_compressed(
        Path(__file__).with_name("slope_law.npz"),
        transitions=np.array(TRANSITIONS),
        pulls=np.array(PULLS, dtype=np.float64),
        probabilities=np.array(PROBABILITIES),
        corrections=np.array([each for each, _ in made], dtype=np.float32),
        null_probabilities=np.array(NULL_PROBABILITIES),
        null_corrections=np.array([each for _, each in made], dtype=np.float32),
        theta_transitions=np.array(THETA_TRANSITIONS),
        theta_pulls=np.array(THETA_PULLS, dtype=np.float64),
        theta_critical=np.array([simulate_theta_critical(n, THETA_PATHS, rng) for n in THETA_TRANSITIONS]),
    )


if __name__ == "__main__":
    main()
