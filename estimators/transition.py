"""The transition density of a diffusion, numerically exact, from the Fokker–Planck equation.

Of dY = f(Y) dt + dW, the coordinate in which any diffusion of one dimension has unit volatility (Lamperti's). With
F an integral of f, e^{−F} times the density's generator times e^{F} is symmetric, a Schrödinger operator:

    p(y | x, t) = e^{F(y) − F(x)} Σ_k φ_k(x) φ_k(y) e^{−λ_k t},    −½ φ″ + ½ (f² + f′) φ = λ φ.

It is diagonalised on sinc functions at equally spaced points (Colbert & Miller 1992): where the solution has died away
at both ends, and the spacing resolves it, the error falls faster than any power of the spacing. Over a step t the
density is √t wide; a spacing of √t/2 leaves an error of some 1e-9 of its height, √t/2.5 one of 1e-14.

References
----------
Risken, H. (1989), The Fokker–Planck Equation, 2nd ed., Springer, section 5.4. Colbert, D. T. & Miller, W. H. (1992), A
novel discrete variable representation for quantum mechanical reactive scattering via the S-matrix Kohn method, J.
Chemical Physics 96, 1982–1991. Stenger, F. (1993), Numerical Methods Based on Sinc and Analytic Functions, Springer.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from driftbook.estimators.windows import Array

Function = Callable[[Array], Array]


@dataclass(frozen=True)
class Transition:
    """The spectrum of a diffusion with unit volatility.

    Attributes
    ----------
    points : array, shape (n,)
        Equally spaced points.
    energies : array, shape (n,)
        Rates λ of decay, rising; the first is zero where there is a stationary law.
    states : array, shape (n, n)
        Column k: the state φ_k at the points, times the square root of their spacing.
    integral : callable
        F, of arrays of any shape.
    """

    points: Array
    energies: Array
    states: Array
    integral: Function

    @property
    def spacing(self) -> float:
        """Distance of neighbouring points."""
        return float(self.points[1] - self.points[0])

    def log_density(self, x: ArrayLike, y: ArrayLike, t: float) -> Array:
        """Logarithm of the density at y after a time t from x.

        Parameters
        ----------
        x, y : array_like, of one shape
            Between the first and the last point.
        t : float

        Returns
        -------
        array, of that shape
            NaN where the sum of states is not positive: where the density is below some 1e-14 of its height, rounding
            is all there is.
        """
        x, y = np.broadcast_arrays(np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64))
        decayed = self._at(x) * np.exp(-self.energies * t)
        kernel = (decayed * self._at(y)).sum(axis=-1)
        logs = np.log(kernel, out=np.full(kernel.shape, np.nan), where=kernel > 0)
        return np.asarray(logs + self.integral(y) - self.integral(x))

    def densities(self, t: float) -> Array:
        """Densities from each point to each other after a time t, shape (n, n): from the first index to the second."""
        kernel = (self.states * np.exp(-self.energies * t)) @ self.states.T / self.spacing
        F = self.integral(self.points)
        return np.asarray(kernel * np.exp(F[None, :] - F[:, None]))

    def stationary(self) -> Array:
        """The stationary density at the points, for a diffusion that has one: ∝ e^{2F}."""
        F = self.integral(self.points)
        weight = np.exp(2 * (F - F.max()))
        return np.asarray(weight / (weight.sum() * self.spacing))

    def _at(self, y: Array) -> Array:
        """States at any places, shape (..., n)."""
        away = (y[..., None] - self.points) / self.spacing
        return np.asarray(np.sinc(away) @ self.states / np.sqrt(self.spacing))


def transition(
    drift: Function, slope: Function, integral: Function, *, low: float, high: float, points: int
) -> Transition:
    """The spectrum of dY = f(Y) dt + dW between two places beyond which its paths do not go.

    Parameters
    ----------
    drift, slope, integral : callable
        f, its derivative, and an integral of it, of arrays of any shape.
    low, high : float
        Where states have died away: several widths √t of a step beyond the places of interest, and where ½ f² t is 10
        or more for the shortest t of interest.
    points : int
        Equally spaced between them; time grows with their cube.

    Raises
    ------
    ValueError
        If `low` is not below `high`, or there are fewer than three points.
    """
    if not low < high:
        raise ValueError(f"low must be below high, got {low} and {high}")
    if points < 3:
        raise ValueError(f"points must be 3 or more, got {points}")
    y = np.linspace(low, high, points)
    apart = np.subtract.outer(np.arange(points), np.arange(points))
    with np.errstate(divide="ignore"):
        kinetic = np.where(apart % 2, -1.0, 1.0) / np.square(apart, dtype=np.float64)
    np.fill_diagonal(kinetic, np.pi**2 / 6)
    operator = kinetic / (y[1] - y[0]) ** 2
    operator[np.diag_indices(points)] += 0.5 * (np.square(drift(y)) + slope(y))
    energies, states = np.linalg.eigh(operator)
    return Transition(y, energies, states, integral)
