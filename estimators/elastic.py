"""The second-order likelihood of dX = (a + b X) dt + sigma X^gamma dW, from sums over steps.

In eta = x^{1 − gamma}/(1 − gamma), Lamperti's coordinate, the volatility is sigma; the closed-form expansion of the
log-density to second order in the step (Aït-Sahalia 2002, 2008) is given gamma exactly quadratic in the drift. Values
are in units of an origin, t = x/origin, and the drift is alpha + b (t − 1), which loses nothing where values are close
to each other. The volatility is that at a level e^λ in those units, the window's geometric mean: u = sigma² e^{2 gamma
λ}, which is all but independent of gamma. With k = gamma/2 − gamma²/4 and c = (alpha, b), and sums in which the powers
of t that come from the volatility are measured from e^λ,

    loglik = −½ (n ln(2 π u) + Σ ln Δ) − gamma Σ (ln t_{i+1} − λ) − ½ gamma Σ ln(t_{i+1}/t_i) − P/u
             − ¼ c′Uc + c·(B + u C) − ½ u k V − ¼ u² k W,    P = ½ S − c·A + ½ c′Tc,

where S = Σ h²/Δ and A, T, U, V, W, B and C are sums of integrals of powers over the step
(`driftbook.estimators.log_segments`). So (T + ½ u U) c = A + u B + u² C, and one equation in ln u is left.

All sums are entire functions of gamma, of a growth that the range of ln x in the window bounds: from their values at a
few Chebyshev points they are interpolated to rounding, and gamma is found as if it were in the sums.

References
----------
Aït-Sahalia, Y. (2002), Maximum likelihood estimation of discretely sampled diffusions: a closed-form approximation
approach, Econometrica 70, 223–262. Aït-Sahalia, Y. (2008), Closed-form likelihood expansions for multivariate
diffusions, Annals of Statistics 36, 906–937.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache, partial

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.chebyshev import points, weights
from driftbook.estimators.log_segments import Series, shapes
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
Mask = NDArray[np.bool_]

LOWEST, HIGHEST = -1.0, 2.5
"""Range of gamma."""

ROWS = ("S", "A0", "A1", "T00", "T01", "T11", "V", "inverse", "U00", "U01", "U11", "U_inverse", "W", "fourth")
WIDEST = 3.0
"""Factor by which u may differ from the mean square of the movement; far from there the expansion is no density."""

_LARGEST = 0.25  # share of the number of steps


def at_midpoint(series: Series, q: Array) -> Array:
    """The value of a series."""
    total = np.asarray(series[-1] * q)
    for each in series[-2:0:-1]:
        total += each
        total *= q
    total += series[0]
    return total


@lru_cache(maxsize=512)
def _shapes_at(gamma: float, terms: int) -> dict[str, Series]:
    """The series at a node: one term more of that of h², which weighs far more than what the drift adds."""
    of_movement = shapes(np.asarray(gamma), terms + 1)
    return {name: series if name == "hh" else series[:-1] for name, series in of_movement.items()}


@dataclass(frozen=True)
class Steps:
    """Steps of windows or segments, arrays of one shape.

    Attributes
    ----------
    middle, half : array
        Logarithm of the geometric mean of the two values of a step, less that of an origin; half their difference.
    steps : array
        Lengths, which broadcast.
    """

    middle: Array
    half: Array
    steps: Array

    def take(self, places: Places) -> Steps:
        """Of some segments."""
        return Steps(self.middle[places], self.half[places], self.steps[places])

    @cached_property
    def q(self) -> Array:
        """The square that series are in."""
        return np.square(self.half)

    @cached_property
    def more(self) -> Array:
        """By what the geometric mean of a step exceeds the origin, over that."""
        return np.expm1(self.middle)

    @cached_property
    def _moved(self) -> Array:
        return np.asarray(2 * self.half * (1 + self.more))

    @cached_property
    def _moved_square(self) -> Array:
        return np.asarray(np.square(self._moved) / self.steps)

    @cached_property
    def _over(self) -> Array:
        return np.asarray(self.steps / (1 + self.more))

    @cached_property
    def _over_square(self) -> Array:
        return np.asarray(self._over / (1 + self.more))

    def base_terms(self, terms: int) -> Iterator[Array]:
        """Terms that do not depend on gamma, 4 × `terms` arrays."""
        over = self._over
        for head in (over, over * over, over * self.steps, np.broadcast_to(self.steps**2, self.half.shape)):
            term = head
            for k in range(terms):
                if k:
                    term = term * self.q
                yield term

    def terms(self, gamma: float, terms: int, *, fourth: bool) -> Iterator[Array]:
        """Terms at one gamma: S, A, T, V, U_inverse, W and, if wanted, the fourth powers of h."""
        by = {name: partial(at_midpoint, series, self.q) for name, series in _shapes_at(gamma, terms).items()}
        more, power = self.more, np.exp((-2 * gamma) * self.middle)
        square = self._moved_square * power
        square *= by["hh"]()
        yield square
        movement = self._moved * power
        yield movement * by["first"]()
        yield movement * (more * by["second"]() + by["first difference"]())
        weighted = power * self.steps
        yield weighted * by["square"]()
        yield weighted * (more * by["cross"]() + by["cross difference"]())
        last = more * (more * by["last"]() + 2 * by["last difference"]())
        yield weighted * (last + by["last second difference"]())
        inverse = self._over_square / power
        yield inverse
        yield inverse * self._over * by["bridge inverse"]()
        yield np.square(inverse) * by["bridge volatility"]()
        if fourth:
            yield np.square(square)


def put_rows(
    place: Array, gamma: float, terms: int, base: Sequence[Array], sums: Sequence[Array], level: Array
) -> None:
    """Put the sums at one gamma into a place, shape (rows, m), in the order of `ROWS`.

    From sums of `Steps.base_terms` and `Steps.terms`, and the logarithm of the level that the volatility is of.
    """
    by = _shapes_at(gamma, terms)
    scale = np.exp((2 * gamma) * level)
    for row, total in zip(place[:6], sums[:6], strict=True):
        np.multiply(total, scale, out=row)
    np.divide(sums[6], scale, out=place[6])
    names = ("inverse", "bridge square", "bridge cross", "bridge last")
    place[7], U0, U1, U2 = (_total(by[name], base[k * terms : (k + 1) * terms]) for k, name in enumerate(names))
    place[8], place[9], place[10] = U0, U1 - U0, U2 - 2 * U1 + U0
    np.divide(sums[7], scale, out=place[11])
    square = scale * scale
    np.divide(sums[8], square, out=place[12])
    if len(sums) > 9:
        np.multiply(sums[9], square, out=place[13])


def _total(series: Series, sums: Sequence[Array]) -> Array:
    """The sum of a series, from sums of its powers."""
    total = series[0] * sums[0]
    for each, of_power in zip(series[1:], sums[1:], strict=True):
        total += each * of_power
    return total


@dataclass(frozen=True)
class Elastic:
    """Windows by their sums at points in gamma.

    Attributes
    ----------
    n : int
        Steps in a window.
    level : array, shape (m,)
        λ.
    log_steps, logs, log_change, duration : array, shape (m,)
        Σ ln Δ, Σ (ln t_{i+1} − λ), Σ ln(t_{i+1}/t_i), Σ Δ.
    nodes : array, shape (count,)
    rows : array, shape (count, rows, m)
        Sums at the nodes, in the order of `ROWS`.
    """

    n: int
    level: Array
    log_steps: Array
    logs: Array
    log_change: Array
    duration: Array
    nodes: Array
    rows: Array

    @classmethod
    def at_level(cls, n: int, plain: Sequence[Array], level: Array, gammas: Array, rows: Array) -> Elastic:
        """From Σ ln Δ, Σ ln t_{i+1}, Σ ln(t_{i+1}/t_i), Σ Δ, and rows by `put_rows`."""
        log_steps, logs, log_change, duration = plain
        return cls(n, level, log_steps, logs - n * level, log_change, duration, gammas, rows)

    def take(self, places: Places) -> Elastic:
        """Of some of the windows."""
        if places.size == self.logs.size:
            return self
        plain = self.level, self.log_steps, self.logs, self.log_change, self.duration
        level, *rest = (values[places] for values in plain)
        log_steps, logs, log_change, duration = rest
        rows = self.rows.take(places, axis=2)
        return Elastic(self.n, level, log_steps, logs, log_change, duration, self.nodes, rows)

    def at(self, gamma: Array) -> tuple[Array, Array]:
        """Sums and their derivatives at one gamma a window, shape (rows, m)."""
        rows, slopes = self._weighted(weights(self.nodes, gamma)[:2])
        return rows, slopes

    def near(self, gamma: Array) -> Near:
        """Sums about one gamma a window."""
        return Near(*self._weighted(weights(self.nodes, gamma, bend=True)))

    def _weighted(self, shares: tuple[Array, ...]) -> list[Array]:
        totals, term = [np.zeros(self.rows.shape[1:]) for _ in shares], np.empty(self.rows.shape[1:])
        for row, *each in zip(self.rows, *shares, strict=True):
            for total, share in zip(totals, each, strict=True):
                np.multiply(row, share, out=term)
                total += term
        return totals

    def spot(self, gamma: Array, rows: Array, u: Array) -> Spot:
        """The likelihood at given sums, gamma and u."""
        S, A0, A1, T00, T01, T11, V, inverse, U00, U01, U11, Ui, W = rows[:13]
        k = gamma * (0.5 - 0.25 * gamma)
        B0 = gamma * inverse
        B1 = -B0 - (0.5 - gamma) * self.duration
        C = 0.5 * gamma * Ui
        half = 0.5 * u
        M00, M01, M11 = T00 + half * U00, T01 + half * U01, T11 + half * U11
        det = M00 * M11 - M01 * M01
        r0, r1 = A0 + u * (B0 + u * C), A1 + u * (B1 - u * C)
        alpha, b = (M11 * r0 - M01 * r1) / det, (M00 * r1 - M01 * r0) / det
        P = 0.5 * S - alpha * A0 - b * A1
        P += 0.5 * (alpha * (alpha * T00 + 2 * b * T01) + b * b * T11)
        bent0, bent1 = 0.5 * (U00 * alpha + U01 * b), 0.5 * (U01 * alpha + U11 * b)
        uC, ukV, uukW = u * C, half * k * V, 0.5 * u * u * k * W
        level = alpha - b
        loglik = -0.5 * (self.n * np.log(2 * np.pi * u) + self.log_steps) - gamma * (self.logs + 0.5 * self.log_change)
        loglik += -P / u - 0.5 * (alpha * bent0 + b * bent1) + alpha * B0 + b * B1 + uC * level - ukV - 0.5 * uukW
        slope = P / u - 0.5 * self.n + uC * level - ukV - uukW
        w0, w1 = B0 + 2 * uC - bent0, B1 - 2 * uC - bent1
        m0, m1 = u * (M11 * w0 - M01 * w1) / det, u * (M00 * w1 - M01 * w0) / det
        curvature = P / u - uC * level + ukV + 2 * uukW - (w0 * m0 + w1 * m1)
        return Spot(u, alpha, b, m0, m1, P, loglik, slope, curvature, (M00, M01, M11))

    def rough(self, gamma: float, rows: Array) -> Array:
        """The profile at a node but for a constant, without the terms of second order; −inf where they are large."""
        S, A0, A1, T00, T01, T11, V, inverse = rows[:8]
        u = S / self.n
        r0 = u * (gamma * inverse)
        r1 = A1 - r0 - (0.5 - gamma) * (u * self.duration)
        r0 += A0
        explained = (r0 * (T11 * r0 - 2 * T01 * r1) + T00 * r1 * r1) / (2 * u * (T00 * T11 - T01 * T01))
        spread = u * V
        found = explained - 0.5 * self.n * np.log(u) - gamma * (self.logs + 0.5 * self.log_change)
        found -= gamma * (0.25 - 0.125 * gamma) * spread
        largest = _LARGEST * self.n
        return np.where((explained < largest) & (spread < largest), found, -np.inf)

    def solved(self, gamma: Array, rows: Array, u: Array | None = None, rounds: int = 3) -> Spot:
        """The likelihood at given sums and gamma, largest over the rest, by Newton's method in ln u."""
        u = rows[0] / self.n if u is None else u
        for _ in range(rounds):
            u = self._better(self.spot(gamma, rows, u), rows)
        return self.spot(gamma, rows, u)

    def _better(self, spot: Spot, rows: Array) -> Array:
        """A step of Newton's method: the next u."""
        step = np.where(spot.curvature > 0, spot.slope / spot.curvature, 0.0)
        mean_square = rows[0] / self.n
        return np.asarray(
            np.clip(spot.u * np.exp(np.clip(step, -0.7, 0.7)), mean_square / WIDEST, mean_square * WIDEST)
        )

    def slope(self, gamma: Array, rows: Array, slopes: Array, spot: Spot) -> Array:
        """The derivative of the log-likelihood by gamma, the rest being where it is."""
        S, A0, A1, T00, T01, T11, V, inverse, U00, U01, U11, Ui, W = slopes[:13]
        u, alpha, b = spot.u, spot.alpha, spot.b
        k, k_slope = gamma * (0.5 - 0.25 * gamma), 0.5 - 0.5 * gamma
        P = 0.5 * S - alpha * A0 - b * A1 + 0.5 * (alpha * (alpha * T00 + 2 * b * T01) + b * b * T11)
        bridged = alpha * (alpha * U00 + 2 * b * U01) + b * b * U11
        of_level = rows[7] + gamma * inverse + 0.5 * u * (rows[11] + gamma * Ui)
        total = -self.logs - 0.5 * self.log_change - P / u - 0.25 * bridged + (alpha - b) * of_level + b * self.duration
        total -= 0.5 * u * (k_slope * rows[6] + k * V)
        return np.asarray(total - 0.25 * u * u * (k_slope * rows[12] + k * W))

    def slope_of(
        self, gamma: Array, rows: Array, slopes: Array, u: Array | None = None, rounds: int = 3
    ) -> tuple[Array, Array]:
        """The derivative of the profile at given sums, and u there.

        Without rounds it is that of the likelihood at a given u, which differs the less the nearer u is: u, that of the
        window's own level, hardly depends on gamma.
        """
        spot = self.solved(gamma, rows, u, rounds)
        return self.slope(gamma, rows, slopes, spot), self._better(spot, rows)

    def slope_at(self, gamma: Array) -> Array:
        """The derivative of the profile."""
        return self.slope_of(gamma, *self.at(gamma))[0]


@dataclass(frozen=True)
class Near:
    """Sums to second order about one gamma a window: they and two derivatives, each of shape (rows, m)."""

    rows: Array
    slopes: Array
    curvatures: Array

    def put(self, places: Places, other: Near) -> None:
        """Put those of some windows in their places."""
        self.rows[:, places], self.slopes[:, places] = other.rows, other.slopes
        self.curvatures[:, places] = other.curvatures

    def at(self, away: Array) -> tuple[Array, Array]:
        """Sums and their derivatives so far away from there."""
        bent = self.curvatures * away
        return self.rows + away * (self.slopes + 0.5 * bent), self.slopes + bent


@dataclass(frozen=True)
class Spot:
    """Where the likelihood stands; arrays of shape (m,).

    Attributes
    ----------
    u, alpha, b : array
    alpha_moves, b_moves : array
        Derivatives of alpha and b by ln u.
    unexplained : array
        P.
    loglik, slope, curvature : array
        The log-likelihood, its first and minus its second derivative by ln u, alpha and b moving along.
    matrix : tuple of 3 array
        T + ½ u U: over u it is the information on alpha and b.
    """

    u: Array
    alpha: Array
    b: Array
    alpha_moves: Array
    b_moves: Array
    unexplained: Array
    loglik: Array
    slope: Array
    curvature: Array
    matrix: tuple[Array, Array, Array]


def nodes(count: int) -> Array:
    """The points in gamma."""
    return points(LOWEST, HIGHEST, count)
