"""Where to begin the search for a mixture of jumps: a few steps of the EM algorithm, on few points a window.

The likelihood has several maxima. The EM algorithm (Dempster, Laird & Rubin 1977) is quick to find a basin and slow to
find its bottom: so it takes a few steps from each of some constellations, of rare large jumps up to frequent small
ones and of the largest increments alone, and those that have come highest are climbed from.

Which basin is highest can be told from less than all increments: sorted, and put together in groups that grow towards
the middle, each group stands as two points, its mean less and plus its standard deviation, that count half of it. The
log-likelihood is then right to about 1e-3, for a fraction of the work. Unequal steps are taken for equal ones here,
with each increment over the root of its step.

References
----------
Dempster, A. P., Laird, N. M. & Rubin, D. B. (1977), Maximum likelihood from incomplete data via the EM algorithm, J.
Royal Statistical Society B 39, 1–38.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.jump_mixture import LEAST_JUMP, LEAST_SPREAD, MOST_JUMPS, Increments, limits
from driftbook.estimators.windows import Array

Floats = NDArray[np.float32]

_SINGLE = 6  # increments at either end that stay by themselves
_GROUPS = 16  # of those in the middle, each holds no more than a share of the window
_STEPS, _TERMS = 5, 6
_AT_ONCE = 1 << 16  # elements that are computed at one time: their arrays stay in cache
_TINY = np.float32(1e-30)  # of a density, below which an increment says nothing of where to go
_CONSTELLATIONS = ((0.5, 0.1, 0.0, 3.0), (0.4, 0.3, 0.0, 1.5), (0.95, 0.008, -3.0, 0.1), (0.95, 0.008, 3.0, 0.1))
_EXTREMES = (1, 4)  # largest or least increments that are taken for the jumps


def condensed(increments: Increments) -> Increments:
    """Windows as few points that each stand for some increments."""
    z = increments.z if increments.weight is None else increments.z / np.sqrt(increments.weight)
    first, size = _groups(z.shape[1])
    order = np.sort(z, axis=1)
    mean = np.add.reduceat(order, first, axis=1) / size
    squares = np.add.reduceat(np.square(order - np.repeat(mean, size, axis=1)), first, axis=1)
    several = size > 1
    sd = np.sqrt(squares[:, several] / size[several])
    middle, half = mean[:, several], 0.5 * size[several]
    points = np.concatenate([mean[:, ~several], middle - sd, middle + sd], axis=1)
    return Increments(points, count=np.concatenate([size[~several].astype(np.float64), half, half]))


@lru_cache(maxsize=64)
def _groups(n: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """First place and size of each group of n sorted increments."""
    half, sizes = n // 2, [1] * min(_SINGLE, n // 2)
    while sum(sizes) < half:
        sizes.append(min(len(sizes) - _SINGLE + 2, -(-n // _GROUPS), half - sum(sizes)))
    size = np.array(sizes + [1] * (n % 2) + sizes[::-1])
    return np.cumsum(size) - size, size


def starts(points: Increments, keep: int) -> Array:
    """The best points to climb from, the highest first, shape (keep, 5, m)."""
    m, n = points.z.shape
    begin = _constellations(points)
    count = begin.shape[0]
    found, value = np.empty(begin.shape), np.empty((count, m))
    at_once = max(1, _AT_ONCE // (count * n * _TERMS))
    for first in range(0, m, at_once):
        part = slice(first, min(first + at_once, m))
        found[..., part], value[:, part] = _moved(points.take(np.arange(m)[part]), begin[..., part])
    order = np.argsort(-value, axis=0, kind="stable")[:keep]
    return np.take_along_axis(found, order[:, None], axis=0)


def _constellations(points: Increments) -> Array:
    """Points to begin with, as b, ln v, ln L, m, ln s, shape (starts, 5, m)."""
    z, count = points.z, np.asarray(points.count)
    n, zero = float(count.sum()), np.zeros(len(z))
    size = (np.square(z) * count).sum(axis=1) / n
    begin = [(v * size, zero + L, m * np.sqrt(size), s * size) for v, L, m, s in _CONSTELLATIONS]
    single = z[:, count == 1]
    for number in _EXTREMES:
        parts = single[:, :number], single[:, ::-1][:, :number]
        spreads = (np.maximum(part.var(axis=1), 0.02 * size) for part in parts)
        begin += [(0.8 * size, zero + number / n, p.mean(axis=1), s) for p, s in zip(parts, spreads, strict=True)]
    return np.stack([np.stack([zero, np.log(v), np.log(L), m, np.log(s)]) for v, L, m, s in begin])


def _moved(points: Increments, begin: Array) -> tuple[Array, Array]:
    """After some steps of the EM algorithm from each start, and the log-likelihoods before the last, (starts, m)."""
    starts, _, m = begin.shape
    count = np.asarray(points.count, dtype=np.float32)
    z = np.tile(points.z.astype(np.float32), (starts, 1))
    point = np.moveaxis(begin, 0, 1).reshape(5, -1).astype(np.float32)
    for _ in range(_STEPS):
        point, value = _em_step(z, count, point)
    bounds = limits(int(count.sum()))
    moved = np.clip(point.astype(np.float64), np.array(bounds.lower)[:, None], np.array(bounds.upper)[:, None])
    return np.moveaxis(moved.reshape(5, starts, m), 0, 1), value.reshape(starts, m).astype(np.float64)


def _em_step(z: Floats, count: Floats, point: Floats) -> tuple[Floats, Floats]:
    """One step of the EM algorithm, and the log-likelihood before it."""
    b, log_v, log_L, mean, log_s = point
    v, L, s = np.exp(log_v)[:, None], np.exp(log_L), np.exp(log_s)[:, None]
    k = np.arange(_TERMS, dtype=np.float32)
    inverse = 1 / (v + k * s)
    log_weight = k * log_L[:, None] - L[:, None] - _log_factorial() + np.float32(0.5) * np.log(inverse)
    e = z[:, None, :] - ((b - L * mean)[:, None] + k * mean[:, None])[:, :, None]
    square = e * e
    p = square * (np.float32(-0.5) * inverse)[:, :, None]
    p += log_weight[:, :, None]
    np.exp(p, out=p)
    total = np.maximum(p.sum(axis=1), _TINY)
    p *= (count / total)[:, None, :]
    P = p.sum(axis=2)
    e *= p
    square *= p
    E, S = e.sum(axis=2), square.sum(axis=2)
    own, jump = v * inverse, s * inverse
    n, jumps = count.sum(), (k * P).sum(axis=1)
    moved, drift = (own * E).sum(axis=1) / n, (k * jump * E).sum(axis=1) / jumps
    by, of = moved[:, None], drift[:, None]
    variance = (own * (own * S - 2 * by * E + k * s * P) + by * by * P).sum(axis=1) / n
    of_jump = (k * (jump * (jump * S - 2 * of * E - s * P) + (of * of + s) * P)).sum(axis=1) / jumps
    new_L, new_mean = np.clip(jumps / n, np.float32(1e-6), np.float32(MOST_JUMPS)), mean + drift
    b = b - L * mean + moved + new_L * new_mean
    variance, of_jump = np.maximum(variance, LEAST_SPREAD**2), np.maximum(of_jump, LEAST_JUMP**2)
    moved_to = np.stack([b, np.log(variance), np.log(new_L), new_mean, np.log(of_jump)])
    return moved_to, (np.log(total) * count).sum(axis=1)


@lru_cache(maxsize=1)
def _log_factorial() -> Floats:
    return np.concatenate([[0.0], np.cumsum(np.log(np.arange(1, _TERMS)))]).astype(np.float32)
