"""Compute `drift_law.npz`, the table behind `driftbook.estimators.drift_law`: `python -m
driftbook.estimators.data.make_drift_law`, about one minute on one core.

Paths of nine kinds of cubic drift, from deep wells to random walks, are simulated over windows of 60 to 2500 daily
steps, fitted, and the errors of a0 … a3 in their standard errors sorted by Q and the cosine, once as coefficients of
powers of x and once of its distance from the window's mean. The law depends on the truth by more than these two where Q
is small, as it is for random walks: there the quantiles are taken further out than 2.5 and 97.5 %, so that intervals
hold the truth of a walk too.
"""

from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.cubic import shifts
from driftbook.estimators.cubic_uncertainty import MORE, Uncertainty, dot
from driftbook.estimators.drift_law import COSINES, HALF_OCTAVES
from driftbook.estimators.movements import Movements, movement_terms
from driftbook.estimators.polynomial_drift import TERMS, Sums, likelihood_terms, maximise

Floats = NDArray[np.float64]

KINDS = (
    ((1.0, 30.0, 0.0, -30.0), 3.0),
    ((0.0, 8.0, 0.0, -8.0), 1.5),
    ((2.0, 6.0, -3.0, -6.0), 1.5),
    ((0.0, -5.0, 0.0, -5.0), 1.0),
    ((0.0, 0.0, 0.0, -10.0), 1.0),
    ((0.0, -1.0, 0.0, -0.3), 1.0),
    ((0.5, -5.0, 0.0, 0.0), 1.0),
    ((0.5, -25.0, 0.0, 0.0), 1.0),
    ((0.0, 0.0, 0.0, 0.0), 1.0),
)
"""Drifts in powers of x, and volatilities; a unit of time has 252 steps."""
LENGTHS = (60, 250, 1000, 2500)
STEP = 1 / 252
SUBSTEPS, SETTLING = 6, 200
PATHS, AT_ONCE = 2000, 500
STRENGTHS = (1.5, 2.0, 2.5, 3.0, 3.5, 4.0, 5.0)
OUTSIDE = (0.012, 0.013, 0.015, 0.018, 0.021, 0.023, 0.025)
"""Probability left outside on either side, by the root of Q."""
LEAST_SHARE = 1e-7  # of a pivot that elimination leaves, as in fits
FEWEST = 1000  # errors at a point of the table


def paths(drift: tuple[float, ...], sigma: float, rows: int, n: int, rng: np.random.Generator) -> Floats:
    """Euler's scheme in small steps, after some time to settle, shape (rows, n + 1)."""
    h, x, every = STEP / SUBSTEPS, rng.choice([-1.0, 1.0], rows), np.empty((rows, n + 1))
    for i in range(-SETTLING, n + 1):
        for _ in range(SUBSTEPS):
            f = drift[0] + x * (drift[1] + x * (drift[2] + x * drift[3]))
            x = x + f * h + sigma * np.sqrt(h) * rng.standard_normal(rows)
        if i >= 0:
            every[:, i] = x
    return every


def errors(windows: Floats, truth: tuple[float, ...]) -> tuple[Floats, Floats, Floats]:
    """Q, cosines and errors in the direction of the bias, of a0 … a3 about zero and each mean, shape (8, windows)."""
    n, origin = windows.shape[1] - 1, windows.mean(axis=1)
    local = windows - origin[:, None]
    x, y, d = local[:, :-1], local[:, 1:], np.diff(local, axis=1)
    steps = np.full((1, n), STEP)
    totals = [term.sum(axis=1) for term in likelihood_terms(x, y, d, steps, more=MORE)]
    sums = Sums.of(n, totals)
    optimum = maximise(sums)
    moved = [term.sum(axis=1) for term in movement_terms(x, d, d, steps)]
    movements = Movements.of(n, moved, sums.plain[0])
    uncertainty = Uncertainty.of(sums, optimum, optimum.drift, movements, totals[TERMS:])
    rows = [*shifts(origin), *shifts(np.zeros_like(origin))]
    row = [np.stack(entries) for entries in zip(*rows, strict=True)]
    error = uncertainty.errors(row, uncertainty.factor.solve(row))
    bias = dot(row, uncertainty.bias)
    there = [sum(share * a for share, a in zip(shares, truth, strict=True)) for shares in shifts(-origin)]
    true = np.concatenate([np.broadcast_to(np.array(truth)[:, None], bias[:4].shape), np.stack(there)])
    off = (dot(row, optimum.drift) - true) / error * np.sign(bias)
    cosine = np.abs(bias) / (error * uncertainty.weight)
    off[:, ~(optimum.converged & (optimum.share > LEAST_SHARE))] = np.nan
    return np.broadcast_to(uncertainty.strength, off.shape), cosine, off


def simulated() -> Iterator[tuple[Floats, Floats, Floats]]:
    """Errors of all kinds and lengths."""
    for kind, (drift, sigma) in enumerate(KINDS):
        for n in LENGTHS:
            rng = np.random.default_rng([kind, n])
            for _ in range(PATHS // AT_ONCE):
                yield errors(paths(drift, sigma, AT_ONCE, n, rng), drift)


def quantiles(strength: Floats, cosine: Floats, off: Floats) -> Floats:
    """The table, shape (2, cosines, half octaves), from errors near each point: half-way to the next, or further."""
    octave = np.clip(2 * np.log2(np.maximum(strength, 1.0)), 2 * HALF_OCTAVES[0], 2 * HALF_OCTAVES[-1])
    angle = np.minimum(cosine / COSINES[1], len(COSINES) - 1)
    outside = np.interp(2 ** (HALF_OCTAVES / 2), STRENGTHS, OUTSIDE)
    table = np.empty((2, len(COSINES), len(HALF_OCTAVES)))
    for j, k in np.ndindex(*table.shape[1:]):
        away = np.maximum(np.abs(octave - 2 * HALF_OCTAVES[k]), np.abs(angle - j))
        reach = max(0.5, np.partition(away, FEWEST)[FEWEST])
        some = off[away <= reach]
        if j == 0:  # across the bias the law is even
            some = np.concatenate([some, -some])
        table[:, j, k] = np.quantile(some, [outside[k], 1 - outside[k]])
    return table


def main() -> None:
    """Write the table beside this file."""
    with np.errstate(all="ignore"):
        parts = list(simulated())
    strength, cosine, off = (np.concatenate([part[i].ravel() for part in parts]) for i in range(3))
    known = np.isfinite(strength) & np.isfinite(cosine) & np.isfinite(off)
    table = quantiles(strength[known], cosine[known], off[known])
    np.savez_compressed(Path(__file__).with_name("drift_law.npz"), quantiles=np.round(table, 3))


if __name__ == "__main__":
    main()
