"""Maxima of many functions of a few parameters at once, each with its own end.

`maximise` climbs by Newton's method with the exact second derivatives. Where these do not bend down in every direction
they are damped until they do (Levenberg 1944, Marquardt 1963), steps have a longest length, parameters have bounds,
and a step that leads down is taken back and shortened. What is found for a window depends on its own start and values
alone, and so do its bits: all arithmetic runs over windows, element by element.

References
----------
Levenberg, K. (1944), A method for the solution of certain non-linear problems in least squares, Quarterly of Applied
Mathematics 2, 164–168. Marquardt, D. W. (1963), An algorithm for least-squares estimation of nonlinear parameters, J.
SIAM 11, 431–441.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.symmetric import Factor, factor
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
Mask = NDArray[np.bool_]
MOST_ROUNDS = 80
CLOSE = 1e-12  # gain that a last step may still promise: the point is then within 1e-6 of its standard error, before it
FALL = 1e-9  # of the value, that counts as rounding; so does a share of it of `SHARE`
SHARE = 1e-14
_FIRST_DAMPING, _DAMPED, _LEAST_PIVOT = 1e-3, 1e-4, 1e-14
_MOST_DAMPING, _MOST_TRIES = 1e12, 40


@dataclass(frozen=True)
class Surface:
    """A function of p parameters at one point a window: value, shape (m,), gradient, (p, m), hessian, (p, p, m)."""

    value: Array
    gradient: Array
    hessian: Array

    def take(self, places: Places) -> Surface:
        """The same for some of the windows."""
        return Surface(self.value[places], self.gradient[:, places], self.hessian[:, :, places])


Objective = Callable[[Array, Places], Surface]
"""Of points, shape (p, k), and the places of the windows that they belong to, (k,): the function there."""


@dataclass(frozen=True)
class Limits:
    """Bounds of each parameter, and the longest step in one round: `step` plus `growth` times the parameter's size."""

    lower: tuple[float, ...]
    upper: tuple[float, ...]
    step: tuple[float, ...]
    growth: tuple[float, ...]

    def longest(self, point: Array) -> Array:
        """The longest step from here, shape (p, m)."""
        return _column(self.step) + _column(self.growth) * np.abs(point)


@dataclass(frozen=True)
class Maximum:
    """Where each window's function is largest.

    Attributes
    ----------
    point : array, shape (p, m)
        Where a window did not converge, the best that was found.
    value : array, shape (m,)
        At `point`: that of the last point that was computed, and what a last step of Newton's promises.
    gradient, hessian : array, shape (p, m), (p, p, m)
        At the last point that was computed.
    converged : array of bool, shape (m,)
    at_bound : array of bool, shape (p, m)
        Whether a parameter ended on one of its bounds.
    rounds : int array, shape (m,)
        Points that were computed.
    """

    point: Array
    value: Array
    gradient: Array
    hessian: Array
    converged: Mask
    at_bound: Mask
    rounds: NDArray[np.int64]

    def covariance(self) -> Array:
        """Inverse of the information, shape (p, p, m), given what is on a bound, whose own entries are NaN."""
        information, held = -self.hessian, self.at_bound
        some = np.flatnonzero(held.any(axis=0))
        on_bound = held[:, some]
        either = on_bound[:, None] | on_bound[None, :]
        information[:, :, some] = np.where(either, 0.0, information[:, :, some])
        for i, each in enumerate(held):
            information[i, i, each] = 1.0
        found = inverse(information)
        found[:, :, some] = np.where(either, np.nan, found[:, :, some])
        return found

    def take(self, places: Places) -> Maximum:
        """The same for some of the windows."""
        return Maximum(
            self.point[:, places],
            self.value[places],
            self.gradient[:, places],
            self.hessian[:, :, places],
            self.converged[places],
            self.at_bound[:, places],
            self.rounds[places],
        )


def maximise(
    objective: Objective, start: Array, limits: Limits, *, most_rounds: int = MOST_ROUNDS, close: float = CLOSE
) -> Maximum:
    """The maximum of each window's function near its start.

    Parameters
    ----------
    objective : callable
        Asked for windows that are not finished. Where it is not finite, the step is taken back.
    start : array, shape (p, m)
        Moved into the bounds.
    limits : Limits
    most_rounds : int
        Rounds after which a window is given up.
    close : float
        Gain that a last step may still promise.

    Returns
    -------
    Maximum
    """
    with np.errstate(all="ignore"):
        return _climb(objective, start, limits, most_rounds, close)


def _climb(objective: Objective, start: Array, limits: Limits, most_rounds: int, close: float) -> Maximum:
    lower, upper = _column(limits.lower), _column(limits.upper)
    p, m = start.shape
    best, converged, rounds = np.clip(start, lower, upper), np.zeros(m, dtype=np.bool_), np.zeros(m, dtype=np.int64)
    last = Surface(np.full(m, -np.inf), np.full((p, m), np.nan), np.full((p, p, m), np.nan))
    at, trial, here, top, damping = np.arange(m), best, best, last, np.zeros(m)
    for number in range(1, most_rounds + 1):
        if not at.size:
            break
        found = objective(trial, at)
        better = _is_finite(found) & (found.value >= top.value - FALL - SHARE * np.abs(top.value))
        if better.all():
            here, top, damping = trial, found, _eased(damping)
        else:
            here, top = np.where(better, trial, here), _chosen(better, found, top)
            damping = np.where(better, _eased(damping), _raised(damping))
        step, damped, held = _step(here, top, damping, limits)
        whole = _shorten(step, held, limits.longest(here))
        gain = 0.5 * (top.gradient * step).sum(axis=0)
        done = better & whole & (np.abs(gain) < close) & (damped <= _DAMPED)
        trial = np.clip(here + step, lower, upper)
        damping = np.where(damped > _DAMPED, damped, damping)
        ended = done | ~np.isfinite(top.value + gain) | (damping > _MOST_DAMPING)
        if ended.any():
            out, on = np.flatnonzero(ended), np.flatnonzero(~ended)
            if at.size == m:  # nobody has left before: faster to write all
                _write(best, last, slice(None), np.where(done, trial, here), top)
            else:
                _write(best, last, at[out], np.where(done[out], trial[:, out], here[:, out]), top.take(out))
            last.value[at[done]] += gain[done]
            converged[at[done]], rounds[at[out]] = True, number
            at, trial, here, top, damping = at[on], trial[:, on], here[:, on], top.take(on), damping[on]
    _write(best, last, at, here, top)
    rounds[at] = most_rounds
    at_bound = (best <= lower) | (best >= upper)
    return Maximum(best, last.value, last.gradient, last.hessian, converged, at_bound, rounds)


def _shorten(step: Array, held: Mask, longest: Array) -> Mask:
    """Shorten steps, in place, to where no parameter goes further than it may, and say which were not."""
    far = np.flatnonzero(((np.abs(step) > longest) & ~held).any(axis=0))
    whole = np.ones(step.shape[1], dtype=np.bool_)
    if far.size:
        whole[far] = False
        step[:, far] *= np.where(held[:, far], 1.0, longest[:, far] / np.abs(step[:, far])).min(axis=0)
    return whole


def _chosen(first: Mask, a: Surface, b: Surface) -> Surface:
    """Surface a where `first`, b elsewhere."""
    return Surface(
        np.where(first, a.value, b.value),
        np.where(first, a.gradient, b.gradient),
        np.where(first, a.hessian, b.hessian),
    )


def _write(best: Array, last: Surface, at: Places | slice, point: Array, top: Surface) -> None:
    """Put what is known of some windows into the arrays of all."""
    best[:, at], last.value[at] = point, top.value
    last.gradient[:, at], last.hessian[:, :, at] = top.gradient, top.hessian


def maximise_from_each(
    objective: Objective, starts: Array, limits: Limits, *, most_rounds: int = MOST_ROUNDS, close: float = CLOSE
) -> tuple[Maximum, ...]:
    """The maxima near several starts, of shape (starts, p, m), the largest first.

    Those that did not converge come last. One that is no lower than another is that one found again, or as good.
    """
    count, p, m = starts.shape

    def of_copies(points: Array, places: Places) -> Surface:
        return objective(points, places % m)

    start = np.moveaxis(starts, 0, 1).reshape(p, count * m)
    found = maximise(of_copies, start, limits, most_rounds=most_rounds, close=close)
    values = np.where(found.converged, found.value, -np.inf).reshape(count, m)
    order = np.argsort(-values, axis=0, kind="stable")
    return tuple(found.take(each * m + np.arange(m)) for each in order)


def inverse(matrix: Array) -> Array:
    """Inverses of symmetric positive definite matrices, shape (p, p, m); NaN where one is not positive definite."""
    with np.errstate(all="ignore"):
        factors, sound = _factored(matrix, 1.0)
        found = np.zeros(matrix.shape)
        for pivot, row in zip(factors.pivots, _unit_inverse(factors.rows), strict=True):
            weight = np.where(sound, 1 / pivot, np.nan)
            for i, left in enumerate(row):
                scaled = left * weight
                for j, right in enumerate(row[: i + 1]):
                    found[i, j] += scaled * right
        for i in range(len(found)):
            found[:i, i] = found[i, :i]
        return found


def _unit_inverse(rows: list[list[Array]]) -> list[list[Array]]:
    """Inverse of a lower triangle with a diagonal of ones, given below it, row by row; with its diagonal."""
    found: list[list[Array]] = []
    for i, row in enumerate(rows):
        products = ((row[k] * found[k][j] for k in range(j, i)) for j in range(i))
        found.append([*(-sum(each, np.zeros(1)) for each in products), np.ones(1)])
    return found


def _column(values: tuple[float, ...]) -> Array:
    return np.array(values)[:, None]


def _is_finite(surface: Surface) -> Mask:
    total = surface.value + surface.gradient.sum(axis=0)
    for i, row in enumerate(surface.hessian):
        for entry in row[: i + 1]:
            total += entry
    finite: Mask = np.isfinite(total)
    return finite


def _eased(damping: Array) -> Array:
    return np.where(damping <= _DAMPED, 0.0, damping * 0.1)


def _raised(damping: Array) -> Array:
    return np.maximum(damping * 8, 10 * _FIRST_DAMPING)


def _step(here: Array, top: Surface, damping: Array, limits: Limits) -> tuple[Array, Array, Mask]:
    """Newton's step, on bounds that it would cross: step, the damping it took, and which parameters bounds hold."""
    lower, upper = _column(limits.lower), _column(limits.upper)
    held = ((here <= lower) & (top.gradient <= 0)) | ((here >= upper) & (top.gradient >= 0))
    step, damped = _newton(top, damping, held, np.zeros_like(here))
    for _ in range(len(here) - 1):
        to = here + step
        crosses = ~held & ((to < lower) | (to > upper))
        some = np.flatnonzero(crosses.any(axis=0))
        if not some.size:
            break
        held[:, some] |= crosses[:, some]
        move = np.where(held, np.clip(to, lower, upper) - here, 0.0)[:, some]
        step[:, some], damped[some] = _newton(top.take(some), damped[some], held[:, some], move)
    return step, damped, held


def _newton(top: Surface, damping: Array, held: Mask, move: Array) -> tuple[Array, Array]:
    """The step to the top of the damped quadratic with some parameters moved as told, and the damping it took."""
    bend, pull = top.hessian, top.gradient
    some = np.flatnonzero(held.any(axis=0))
    if some.size:
        bend, pull = bend.copy(), pull.copy()
        bend[:, :, some], pull[:, some] = _holding(top.take(some), held[:, some], move[:, some])
    damped, step = damping.copy(), _solved(bend, pull, damping, held)
    left = np.flatnonzero(np.isnan(step[0]))
    for _ in range(_MOST_TRIES):
        if not left.size:
            break
        damped[left] = np.maximum(damped[left] * 4, _FIRST_DAMPING)
        step[:, left] = _solved(bend[:, :, left], pull[:, left], damped[left], held[:, left])
        left = left[np.isnan(step[0, left])]
    return step, damped


def _holding(top: Surface, held: Mask, move: Array) -> tuple[Array, Array]:
    """Hessian and gradient that make the parameters that are held move as told, and the others answer to it."""
    bend = np.where(held[:, None] | held[None, :], 0.0, top.hessian)
    pull = top.gradient.copy()
    for i, row in enumerate(top.hessian):
        for j, entry in enumerate(row):
            pull[i] += np.where(held[j], entry * move[j], 0.0)
    for i, each in enumerate(held):
        bend[i, i, each] = -1.0
    return bend, np.where(held, move, pull)


def _solved(bend: Array, pull: Array, damping: Array, held: Mask) -> Array:
    """The step, NaN where the damped hessian does not bend down in every direction."""
    if damping.any():
        bend = bend.copy()
        for i, each in enumerate(held):
            bend[i, i] -= np.where(each, 0.0, damping * np.abs(bend[i, i]))
    factors, sound = _factored(bend, -1.0)
    step = np.stack(factors.solve(list(pull)))
    np.negative(step, out=step)
    if not sound.all():
        step[:, ~sound] = np.nan
    return step


def _factored(matrix: Array, sign: float) -> tuple[Factor, Mask]:
    """L D L′ of symmetric matrices, and whether all pivots have the sign."""
    factors = factor(lambda i, j: matrix[i, j], len(matrix))
    sound: Mask = (factors.share > _LEAST_PIVOT) & (sign * np.einsum("iim->im", matrix) > 0).all(axis=0)
    return factors, sound
