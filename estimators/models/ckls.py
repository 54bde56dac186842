"""Constant elasticity of volatility with a linear pull: dX = kappa (theta − X) dt + sigma X^gamma dW, X > 0.

There is no closed transition density; the likelihood is the closed-form expansion of second order in the step, in the
coordinate of unit volatility (`driftbook.estimators.elastic`): never that of first order, which is no density. Given
gamma it is exactly quadratic in the drift; its sums are interpolated in gamma from a few Chebyshev points, for windows
in rolling position, and gamma in [−1, 2.5] is where the derivative of the profile vanishes next to its best point.

How far the expansion is from the exact density, as E|ln p − ln p_exact| a step in the stationary law with theta = 1,
against the Fokker–Planck equation solved numerically (`driftbook.estimators.transition`), and of Euler's scheme:

=====  =====  =====  =======  ========  =========  =======
gamma  kappa  sigma  kappa Δ  sigma √Δ  expansion  Euler
=====  =====  =====  =======  ========  =========  =======
½      4      0.4    0.016    0.025     8.4e-8     1.2e-2
½      4      0.4    0.077    0.055     9.3e-6     4.1e-2
½      4      0.4    0.333    0.115     7.0e-4     1.5e-1
1      4      0.4    0.016    0.025     9.1e-8     2.0e-2
1      4      0.4    0.077    0.055     1.0e-5     5.3e-2
1      4      0.4    0.333    0.115     7.4e-4     1.6e-1
1½     4      0.4    0.016    0.025     1.0e-7     2.9e-2
1½     4      0.4    0.333    0.115     8.4e-4     1.8e-1
½      20     1      0.079    0.063     1.0e-5     4.3e-2
½      20     1      0.385    0.139     1.1e-3     1.7e-1
½      20     1      1.667    0.289     6.5e-2     6.0e-1
1      20     1      0.385    0.139     1.1e-3     1.9e-1
=====  =====  =====  =======  ========  =========  =======

It grows with the third power of the step. Where the pull over a step exceeds a half, or zero is near, no closed form is
adequate.

sigma and gamma by themselves are hard to tell apart (the standard error of gamma is about 1/(√(2n) sd(ln X))); the
volatility at the window's geometric mean m, `local_volatility` = sigma m^gamma, is well determined where they are not.
For gamma > 1 theta is not the stationary mean, and a stationary law may exist with kappa ≤ 0: no half-life is given.

Standard errors are those of the observed information. Intervals:

* kappa: the slope's law of the AR(1) is fed e^{−kappa T/n}, widened by the ratio of the standard error of that slope to
  what the AR(1) would have;
* theta: all theta₀ for which (alpha − theta₀ kappa)² ≤ k Var(alpha − theta₀ kappa), with that law's critical value;
* gamma: estimate ± 1.96 standard errors; where it stopped at its edge neither it nor sigma has an interval;
* sigma and local_volatility: on the logarithm, with (kurtosis − 3)/(4n) more where movements have fat tails.

Zero can be reached if gamma < ½, and not if gamma > ½ while kappa theta > 0 (Feller 1952): `can_reach_zero` is told
where the interval of gamma lies on one side.

A window in which a step multiplies the value by more than 4.4, or values differ by more than e^12, is not_converged.
sigma² is looked for within a factor of 3 of the mean square of the movement: far from there the expansion is no density
and can be larger without bound.

References
----------
Chan, K. C., Karolyi, G. A., Longstaff, F. A. & Sanders, A. B. (1992), An empirical comparison of alternative models of
the short-term interest rate, J. Finance 47, 1209–1227. Aït-Sahalia, Y. (2002), Maximum likelihood estimation of
discretely sampled diffusions, Econometrica 70, 223–262. Feller, W. (1952), The parabolic differential equations and the
associated semi-groups of transformations, Annals of Mathematics 55, 468–519. Fieller, E. C. (1954), Some problems in
interval estimation, J. Royal Statistical Society B 16, 175–185.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import partial
from statistics import NormalDist

import numpy as np

from driftbook.estimators import elastic
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.elastic import HIGHEST, LOWEST, Elastic, Mask, Near, Spot, Steps, at_midpoint, rows_of
from driftbook.estimators.intervals import theta_set, widened_pull
from driftbook.estimators.log_segments import shapes
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou
from driftbook.estimators.parts import in_parts
from driftbook.estimators.regression import EPS, ROUNDING
from driftbook.estimators.repair import Columns, Places, Statuses, blank, repair
from driftbook.estimators.slope_law import slope_law
from driftbook.estimators.solve import roots
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array, PairedTerms, window_maxima

SHORTEST = 10
PART = 1 << 12  # observations of a piece that are worked on at one time
_DOUBTFUL = np.int8(-1)
LN2 = float(np.log(2.0))
TWO_SIDED = NormalDist().inv_cdf(0.975)
_TOLERANCE = 1e-8  # of gamma, whose standard error is 0.05 or more
_SECANTS = 2  # steps of the secant method from a parabola's top
_NEAR = 0.2  # farthest that they go
_SETTLED = 2e-3  # longest last step, on sums to second order about it; larger ones are looked into with care
_STRIDES = (1, 2, 4, 8, 16, 32)  # in nodes, on the way up
_REST = 1e-4  # longest correction at the end
_CURVATURE_STEP = 1e-3  # in gamma, for second derivatives
_LOSS = 1e-8  # largest share that elimination or what the drift explains may cancel to in sums


@dataclass(frozen=True)
class Tier:
    """How finely sums are taken.

    Attributes
    ----------
    reach : float
        Largest |ln x − ln origin|,
    step : float
        and largest |ln x_{i+1} − ln x_i|, for which it is exact to rounding.
    nodes : int
        Points in gamma.
    terms : int
        Of the series in the square of a step.
    """

    reach: float
    step: float
    nodes: int
    terms: int


TIERS = (Tier(1.6, 0.3, 22, 5), Tier(2.6, 0.5, 30, 7))
LAST = Tier(6.0, 1.48, 48, 20)

PARAMETERS = (
    Parameter("kappa", "1/t", "Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average."),
    Parameter("theta", "x", "Level that the drift pulls to; the stationary mean where gamma is 1 or less."),
    Parameter("sigma", "x^(1-gamma)/√t", "Volatility of the driving noise: times x^gamma it is that of the series."),
    Parameter("gamma", "", "Power of the level in the volatility; between -1 and 2.5."),
)

_OF_PULL = {
    "half_life": "ln(2) / nullif(kappa_median_unbiased, 0)",
    "half_life_mle": "ln(2) / kappa",
}


def _like_ou(column: Column) -> Column:
    """A column of the Ornstein–Uhlenbeck fit; half-lives are empty where gamma is above 1."""
    if column.name in _OF_PULL:
        return replace(column, sql=f"CASE WHEN kappa > 0 AND gamma <= 1 THEN {_OF_PULL[column.name]} END")
    for end, other in (("lower", "upper"), ("upper", "lower")):
        if column.name == f"half_life_{end}":
            return replace(column, sql=f"CASE WHEN kappa_{other} > 0 AND gamma <= 1 THEN ln(2) / kappa_{other} END")
    return column


_TAKEN_FROM_OU = tuple(
    _like_ou(column) for column in ou.COLUMNS[4 * len(ou.PARAMETERS) : -2] if column.name != "stationary_sd"
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    *_TAKEN_FROM_OU,
    *parameter_columns(
        Parameter(
            "local_volatility", "x/√t", "Volatility at the geometric mean of the window: sigma times its power gamma."
        )
    ),
    Column(
        "can_reach_zero",
        "",
        "Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive.",
        "CASE WHEN gamma_upper < 0.5 THEN true WHEN gamma_lower > 0.5 AND kappa * theta > 0 THEN false END",
        "boolean",
    ),
    Column("kurtosis", "", "Fourth moment of movements in the coordinate of unit volatility over the squared second."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_NAMES = {
    True: tuple(column.name for column in COLUMNS),
    False: (*(parameter.name for parameter in PARAMETERS), "loglik"),
}


def fit_piece(piece: Piece) -> Answer:
    """Fit every window of a piece; see `driftbook.estimators.batches`."""
    piece = replace(piece, x=np.where((piece.x > 0) & np.isfinite(piece.x), piece.x, np.nan))
    answer = _by_parts(piece)
    columns = {name: values.reshape(-1) for name, values in answer.columns.items()}
    status = answer.status.reshape(-1)
    doubtful = np.flatnonzero(status == _DOUBTFUL)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _from_sums(piece: Piece) -> Answer:
    """The same where sums can vouch for it; `_DOUBTFUL` elsewhere."""
    m = int(np.prod(piece.shape))
    columns = {name: np.full(m, np.nan) for name in _NAMES[piece.intervals]}
    status, tried = np.full(m, _DOUBTFUL, dtype=np.int8), np.zeros(m, dtype=np.bool_)
    segment = _Segment.of(piece)
    for tier in TIERS:
        places = np.flatnonzero(~tried & segment.within(tier))
        if places.size:
            sums = segment.sums(tier).take(places)
            found, became, done = _fitted(
                sums, segment.origin[places], segment.mean[places], intervals=piece.intervals, careful=False
            )
            status[places], tried[places] = np.where(done, became, _DOUBTFUL), True
            for name, values in columns.items():
                values[places] = found[name]
    return Answer(columns, status)


_by_parts = in_parts(_from_sums, PART)


@dataclass(frozen=True)
class _Segment:
    """A piece on the logarithm, from its pivots: steps of shape (rows, blocks, …), the rest of shape (m,)."""

    piece: Piece
    steps: Steps
    origin: Array
    reach: Array
    step: Array
    mean: Array
    plain: tuple[Array, Array, Array, Array]

    @classmethod
    def of(cls, piece: Piece) -> _Segment:
        """Logarithms lose nothing where values are close to the pivot, and steps small."""
        levels = piece.by_step(piece.x[:, :-1])
        origin = levels[..., piece.pivot : piece.pivot + 1]
        change = piece.by_step(np.log1p((piece.x[:, 1:] - piece.x[:, :-1]) / piece.x[:, :-1]))
        before = np.log1p((levels - origin) / origin)
        dt = piece.dt[..., None] if piece.steps is None else piece.by_step(piece.steps)
        dt = np.broadcast_to(dt, change.shape)
        steps = Steps(before + 0.5 * change, 0.5 * change, dt)
        after = before + change
        largest = window_maxima(np.maximum(np.abs(before), np.abs(after)), piece.lookback, piece.skip)
        step = window_maxima(np.abs(change), piece.lookback, piece.skip)
        terms = (before, after, change, np.log(dt), dt)
        room = PairedTerms(change.shape, len(terms))
        for part, term in zip(room.parts, terms, strict=True):
            part[...] = term
        levels_sum, *rest = (total.reshape(-1) for total in room.sums(piece.lookback, piece.skip))
        logs, log_change, log_steps, duration = rest
        mean = levels_sum / piece.lookback
        plain = log_steps, logs, log_change, duration
        return cls(piece, steps, piece.of_windows(origin), largest.reshape(-1), step.reshape(-1), mean, plain)

    def within(self, tier: Tier) -> Mask:
        """Windows that a tier is fine enough for."""
        found: Mask = (self.reach <= tier.reach) & (self.step <= tier.step)
        return found

    def sums(self, tier: Tier) -> Elastic:
        """Sums over every window."""
        base = self._summed(self.steps.base_terms(tier.terms), 4 * tier.terms)
        gammas = elastic.nodes(tier.nodes)
        count = 10 if self.piece.intervals else 9
        rows = np.empty((tier.nodes, count + 4, self.mean.size))
        for gamma, row in zip(gammas.tolist(), rows, strict=True):
            terms = self.steps.terms(gamma, tier.terms, fourth=self.piece.intervals)
            for place, values in zip(row, rows_of(gamma, tier.terms, base, self._summed(terms, count)), strict=True):
                place[...] = values
        return Elastic(self.piece.lookback, *self.plain, gammas, rows)

    def _summed(self, terms: Iterator[Array], count: int) -> list[Array]:
        room = PairedTerms(self.steps.half.shape, count)
        for part, term in zip(room.parts, terms, strict=True):
            part[...] = term
        return [total.reshape(-1) for total in room.sums(self.piece.lookback, self.piece.skip)]


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite positive values, shape (m, n + 1), from the middle of their range."""
    n = windows.shape[1] - 1
    logs = np.log(windows)
    origin = np.exp(0.5 * (logs.min(axis=1) + logs.max(axis=1)))
    change = np.log1p(np.diff(windows, axis=1) / windows[:, :-1])
    before = np.log1p((windows[:, :-1] - origin[:, None]) / origin[:, None])
    after = before + change
    fits = (np.maximum(np.abs(before), np.abs(after)).max(axis=1) <= LAST.reach) & (
        np.abs(change).max(axis=1) <= LAST.step
    )
    each = Steps(before + 0.5 * change, np.where(fits[:, None], 0.5 * change, 0.0), steps)
    base = [term.sum(axis=1) for term in each.base_terms(LAST.terms)]
    gammas = elastic.nodes(LAST.nodes)
    rows = [
        rows_of(gamma, LAST.terms, base, [t.sum(axis=1) for t in each.terms(gamma, LAST.terms, fourth=intervals)])
        for gamma in gammas.tolist()
    ]
    plain = np.log(steps).sum(axis=1), after.sum(axis=1), change.sum(axis=1), steps.sum(axis=1)
    sums = Elastic(n, *plain, gammas, np.array(rows))
    columns, status, done = _fitted(sums, origin, before.mean(axis=1), intervals=intervals, careful=True)
    moved = np.square(change - change.mean(axis=1, keepdims=True)).sum(axis=1)
    flat = moved <= n * ROUNDING**2
    lost = ~flat & ~(fits & done)
    status[lost], status[flat] = Status.NOT_CONVERGED, Status.FLAT
    blank(columns, np.flatnonzero(flat | lost))
    return columns, status


@dataclass(frozen=True)
class _Top:
    """The maximum: gamma, sums and their derivatives there, the rest, and whether gamma stopped at an edge."""

    gamma: Array
    near: Near
    spot: Spot
    at_edge: Mask


def _fitted(
    sums: Elastic, origin: Array, mean: Array, *, intervals: bool, careful: bool
) -> tuple[Columns, Statuses, Mask]:
    """Columns, status, and whether sums can vouch for them."""
    top = _top(sums, careful=careful)
    spot, gamma = top.spot, top.gamma
    kappa = -spot.b
    power = np.exp((1 - gamma) * np.log(origin))
    columns = {
        "kappa": kappa,
        "theta": origin * (1 + np.where(kappa != 0, spot.alpha / kappa, np.nan)),
        "sigma": np.sqrt(spot.u) * power,
        "gamma": gamma,
        "loglik": spot.loglik - sums.n * np.log(origin),
    }
    if intervals:
        columns |= _uncertainty(sums, top, columns, origin, mean)
    status = np.where(kappa > 0, np.int8(Status.OK), np.int8(Status.NO_REVERSION))
    status[top.at_edge] = Status.AT_BOUND
    M00, M01, M11 = spot.matrix
    square = top.near.rows[0]
    done: Mask = np.isfinite(spot.loglik) & (M00 * M11 - M01 * M01 > _LOSS * M00 * M11) & (M00 > 0)
    done &= (2 * spot.unexplained > _LOSS * square) & (spot.curvature > 0) & (np.abs(spot.slope) < 1e-6 * sums.n)
    done &= square > sums.n * np.square(1e4 * EPS) / sums.duration
    return columns, status, done


def _top(sums: Elastic, *, careful: bool) -> _Top:
    """Where the profile is largest: near the best of the nodes, or at an edge.

    The secant method goes on sums to second order about its start, and once more about where it ended. Where it does
    not settle, gamma is NaN, or if care is to be taken looked for between nodes.
    """
    best, start, bend = _started(sums)
    near = sums.near(start)
    gamma = start
    slope, u = sums.slope_of(gamma, near.rows, near.slopes, None, 2)
    for _ in range(_SECANTS):
        to = np.clip(np.clip(gamma - slope / bend, start - _NEAR, start + _NEAR), LOWEST, HIGHEST)
        there, u = sums.slope_of(to, *near.at(to - start), u, 1)
        moved = to - gamma
        bend = np.where(np.abs(moved) > _TOLERANCE, (there - slope) / np.where(moved == 0, 1.0, moved), bend)
        gamma, slope = to, there
    gamma = np.clip(gamma - slope / bend, LOWEST, HIGHEST)
    here = Near(*sums.at(gamma), near.curvatures)
    slope, u = sums.slope_of(gamma, here.rows, here.slopes, u, 1)
    at_edge = ((gamma == LOWEST) & (slope < 0)) | ((gamma == HIGHEST) & (slope > 0))
    first = np.where(at_edge, 0.0, np.clip(-slope / bend, -_SETTLED, _SETTLED))
    there, _ = sums.slope_of(gamma + first, *here.at(first), u, 1)
    bend = np.where(np.abs(first) > _TOLERANCE, (there - slope) / np.where(first == 0, 1.0, first), bend)
    step = np.where(at_edge, 0.0, first - there / bend)
    settled = (bend < 0) & (np.abs(step) < _SETTLED) & (gamma + step > LOWEST) & (gamma + step < HIGHEST)
    left = np.flatnonzero(~(settled | at_edge))
    gamma = np.where(settled, gamma + step, gamma)
    if left.size:
        gamma[left] = np.nan
        bend[left] = -np.inf
        if careful:
            gamma[left], at_edge[left] = _between_nodes(sums.take(left), best[left])
    top = sums.near(gamma)
    slope, u = sums.slope_of(gamma, top.rows, top.slopes, np.where(settled | at_edge, u, top.rows[0] / sums.n), 2)
    rest = np.where(at_edge, 0.0, np.clip(-slope / bend, -_REST, _REST))
    rows, slopes = top.at(rest)
    return _Top(gamma + rest, Near(rows, slopes, top.curvatures), sums.solved(gamma + rest, rows, u, 1), at_edge)


def _started(sums: Elastic) -> tuple[Places, Array, Array]:
    """The best node of each window, the top of a parabola near it, and its second derivative."""
    values = np.array([sums.rough(gamma, rows) for gamma, rows in zip(sums.nodes.tolist(), sums.rows, strict=True)])
    best = np.argmax(np.where(np.isfinite(values), values, -np.inf), axis=0)
    inner, windows = np.clip(best, 1, len(sums.nodes) - 2), np.arange(best.size)
    left, middle, right = (sums.nodes[inner + k] for k in (-1, 0, 1))
    low, centre, high = (values[inner + k, windows] for k in (-1, 0, 1))
    rise, fall = (centre - low) / (middle - left), (high - centre) / (right - middle)
    bend = 2 * (fall - rise) / (right - left)
    bend = np.where(np.isfinite(bend) & (bend < 0), bend, np.nan)
    top = np.clip(0.5 * (left + middle) - rise / bend, LOWEST, HIGHEST)
    known = np.isfinite(bend)
    return best, np.where(known, top, sums.nodes[best]), np.where(known, bend, -1.0)


def _between_nodes(sums: Elastic, best: Places) -> tuple[Array, Mask]:
    """Where the derivative of the profile first vanishes on the way up from the best node, or the edge."""
    ends = np.concatenate([[LOWEST], sums.nodes, [HIGHEST]])
    low = sums.nodes[best]
    at_low = sums.slope_at(low)
    way = np.where(at_low > 0, 1, -1)
    place = best + 1 + way
    high = ends[place]
    at_high = sums.slope_at(high)
    for stride in _STRIDES:
        on = (at_low * at_high > 0) & (place > 0) & (place < len(ends) - 1)
        if not on.any():
            break
        place = np.where(on, np.clip(place + stride * way, 0, len(ends) - 1), place)
        low, at_low = np.where(on, high, low), np.where(on, at_high, at_low)
        high = ends[place]
        at_high = sums.slope_at(high)
    beyond: Mask = (at_low * at_high > 0) & ((place == 0) | (place == len(ends) - 1))

    def slope(gamma: Array, places: Places) -> Array:
        return sums.take(places).slope_at(gamma)

    return np.where(beyond, high, roots(slope, low, high, at_low, at_high, _TOLERANCE)), beyond


def _uncertainty(sums: Elastic, top: _Top, columns: Columns, origin: Array, mean: Array) -> Columns:
    """Standard errors, intervals, and what follows from them."""
    n, spot, gamma = sums.n, top.spot, top.gamma
    V = _Covariance.of(sums, top)
    kurtosis = n * top.near.rows[13] / np.square(top.near.rows[0])
    more = np.maximum(kurtosis - 3, 0.0) / (4 * n)
    gamma_se = np.sqrt(V.gg)
    log_origin = np.log(origin)
    of_sigma = np.sqrt(0.25 * V.uu - log_origin * V.ug + np.square(log_origin) * V.gg)
    level_volatility = origin * np.sqrt(spot.u) * np.exp(gamma * mean)
    of_level = np.sqrt(0.25 * V.uu + mean * V.ug + np.square(mean) * V.gg)
    centre = np.sqrt(n / (n - 2))
    reach, level_reach = (np.exp(TWO_SIDED * np.sqrt(each * each + more)) for each in (of_sigma, of_level))
    found = {
        "kappa_se": np.sqrt(V.bb),
        "theta_se": origin
        * np.sqrt(V.aa + 2 * V.ab * (columns["theta"] / origin - 1) + V.bb * np.square(columns["theta"] / origin - 1))
        / np.abs(spot.b),
        "sigma_se": np.where(top.at_edge, np.nan, columns["sigma"] * of_sigma),
        "sigma_lower": np.where(top.at_edge, np.nan, columns["sigma"] * centre / reach),
        "sigma_upper": np.where(top.at_edge, np.nan, columns["sigma"] * centre * reach),
        "gamma_se": np.where(top.at_edge, np.nan, gamma_se),
        "gamma_lower": np.where(top.at_edge, np.nan, gamma - TWO_SIDED * gamma_se),
        "gamma_upper": np.where(top.at_edge, np.nan, gamma + TWO_SIDED * gamma_se),
        "local_volatility": level_volatility,
        "local_volatility_se": level_volatility * of_level,
        "local_volatility_lower": level_volatility * centre / level_reach,
        "local_volatility_upper": level_volatility * centre * level_reach,
        "kurtosis": kurtosis,
    }
    found |= _of_pull(sums, spot, V, origin)
    return found | _formulas({**columns, **found})


@dataclass(frozen=True)
class _Covariance:
    """Of alpha (a), b, ln u and gamma: arrays of shape (m,)."""

    aa: Array
    ab: Array
    bb: Array
    uu: Array
    ug: Array
    gg: Array

    @classmethod
    def of(cls, sums: Elastic, top: _Top) -> _Covariance:
        """From second derivatives: by ln u exact, by gamma from differences of first ones at either side."""
        spot, u = top.spot, top.spot.u
        sides = []
        for step in (-_CURVATURE_STEP, _CURVATURE_STEP):
            rows, slopes = top.near.at(np.full(u.shape, step))
            there = sums.spot(top.gamma + step, rows, u)
            sides.append((sums.slope(top.gamma + step, rows, slopes, there), there.slope, there.alpha, there.b))
        by_gamma = [(high - low) / (2 * _CURVATURE_STEP) for low, high in zip(*sides, strict=True)]
        Igg, Iug, a_g, b_g = -by_gamma[0], -by_gamma[1], by_gamma[2], by_gamma[3]
        Iuu = spot.curvature
        det = Iuu * Igg - Iug * Iug
        free = ~top.at_edge
        uu = np.where(free, Igg / det, 1 / Iuu)
        ug, gg = np.where(free, -Iug / det, 0.0), np.where(free, Iuu / det, 0.0)
        M00, M01, M11 = spot.matrix
        det = M00 * M11 - M01 * M01
        a_u, b_u = spot.alpha_moves, spot.b_moves
        aa = u * M11 / det + a_u * a_u * uu + 2 * a_u * a_g * ug + a_g * a_g * gg
        ab = -u * M01 / det + a_u * b_u * uu + (a_u * b_g + a_g * b_u) * ug + a_g * b_g * gg
        bb = u * M00 / det + b_u * b_u * uu + 2 * b_u * b_g * ug + b_g * b_g * gg
        return cls(aa, ab, bb, uu, ug, gg)


def _of_pull(sums: Elastic, spot: Spot, V: _Covariance, origin: Array) -> Columns:
    """Intervals of kappa and theta by the exact law of the slope of an AR(1)."""
    n, duration = sums.n, sums.duration
    law = slope_law(n)
    if law is None:
        nothing = np.full(spot.b.shape, np.nan)
        names = ("kappa_lower", "kappa_upper", "kappa_median_unbiased", "no_reversion_p", "theta_lower", "theta_upper")
        return {name: nothing.copy() for name in names}
    dt = duration / n
    rho = np.exp(spot.b * dt)
    plain = np.sqrt(np.maximum(1 - rho * rho, 0.0) / n + 4 / n**2)
    pull = widened_pull(law, rho, rho * np.sqrt(V.bb) * dt / plain)
    per_step = np.where(spot.b == 0, dt, np.expm1(spot.b * dt) / spot.b)
    surest = -V.ab / V.bb  # away from the origin
    least = (V.aa - V.ab * V.ab / V.bb) * np.square(per_step)
    mean_to = (spot.alpha + spot.b * surest) * per_step
    theta = theta_set(
        law, rho, mean_from=0.0, mean_to=mean_to, A=least * n / (V.bb * np.square(per_step)), s2=least * n
    )
    return {
        "kappa_lower": _finite(pull.lower / duration),
        "kappa_upper": _finite(pull.upper / duration),
        "kappa_median_unbiased": _finite(pull.median / duration),
        "no_reversion_p": law.p_no_pull(rho),
        "theta_lower": origin * (1 + surest + theta.lower),
        "theta_upper": origin * (1 + surest + theta.upper),
    }


def _formulas(columns: Columns) -> Columns:
    """The columns that are formulas of others, as their SQL has them."""
    kappa, gamma, lower, upper = (columns[name] for name in ("kappa", "gamma", "kappa_lower", "kappa_upper"))
    linear = gamma <= 1
    reach_zero = np.where(columns["gamma_upper"] < 0.5, 1.0, np.nan)
    never = (columns["gamma_lower"] > 0.5) & (kappa * columns["theta"] > 0)
    return {
        "half_life": np.where(linear & (kappa > 0), _finite(LN2 / columns["kappa_median_unbiased"]), np.nan),
        "half_life_lower": np.where(linear, _finite(LN2 / upper), np.nan),
        "half_life_upper": np.where(linear, _finite(LN2 / lower), np.nan),
        "half_life_mle": np.where(linear & (kappa > 0), LN2 / kappa, np.nan),
        "half_life_unbounded": np.where(np.isnan(lower), np.nan, lower == 0),
        "can_reach_zero": np.where(never, 0.0, reach_zero),
    }


def _finite(values: Array) -> Array:
    """NaN in place of infinity, which is how a missing end is told."""
    return np.where(np.isinf(values), np.nan, values)


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array, gamma: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters."""
    kappa, theta, sigma, g = (each[..., None] for each in (kappa, theta, sigma, gamma))
    a, b, u = kappa * theta, -kappa, np.square(sigma)
    x = np.where(x > 0, x, np.nan)
    half = 0.5 * np.log1p(np.diff(x, axis=-1) / x[..., :-1])
    m, change, q = np.sqrt(x[..., :-1] * x[..., 1:]), 2 * half, half * half
    by = {name: at_midpoint(series, q) for name, series in shapes(g, LAST.terms).items()}
    E, k = m ** (-2 * g), 0.5 * g - 0.25 * g * g
    square = E * (a * a * by["square"] + 2 * a * b * m * by["cross"] + b * b * m * m * by["last"])
    V = m ** (2 * g - 2)
    near = square / u - 2 * g * a * by["inverse"] / m + b * (1 - 2 * g) + u * k * V
    bridged = (a * a * by["bridge square"] / m + 2 * a * b * by["bridge cross"]) / m + b * b * by["bridge last"]
    bridged += -2 * g * a * u * V / m * by["bridge inverse"] + u * u * k * V * V * by["bridge volatility"]
    terms = -0.5 * np.log(2 * np.pi * u * steps) - g * (np.log(x[..., 1:]) + half)
    terms -= 0.5 * np.square(change * m) * E * by["hh"] / (u * steps)
    terms += change * E * m * (a * by["first"] + b * m * by["second"]) / u
    terms -= 0.5 * steps * near + 0.25 * steps * steps * bridged
    usable = (sigma[..., 0] > 0) & (np.abs(change) <= LAST.step).all(axis=-1)
    return np.where(usable, terms.sum(axis=-1), np.nan)


_RELATIVE = "sigma * x ** gamma"

MODEL = Model(
    name="ckls",
    revision=1,
    equation="dX = kappa (theta - X) dt + sigma X^gamma dW",
    range="positive",
    has_pull=True,
    is_relative=False,
    local_volatility=(
        _RELATIVE,
        f"{_RELATIVE} * local_volatility_lower / local_volatility",
        f"{_RELATIVE} * local_volatility_upper / local_volatility",
    ),
    local_drift="kappa * (theta - x)",
    reaches_zero=None,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=fit_piece,
    log_density=log_density,
)
