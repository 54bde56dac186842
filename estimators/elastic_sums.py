"""Sums of the ckls likelihood over windows: how finely they are taken, and the series on the logarithm."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from driftbook.estimators import elastic
from driftbook.estimators.batches import Piece
from driftbook.estimators.elastic import Elastic, Mask, Places, Steps, put_rows
from driftbook.estimators.windows import Array, PairedTerms, window_maxima


@dataclass(frozen=True)
class Tier:
    """How finely sums are taken.

    Attributes
    ----------
    reach : float
        Largest distance of ln x from its mean in a window for which it is exact to rounding,
    step : float
        and largest |ln x_{i+1} − ln x_i|.
    nodes : int
        Points in gamma.
    terms : int
        Of the series in the square of a step; one more of that of the movement itself.
    """

    reach: float
    step: float
    nodes: int
    terms: int


TIERS = (Tier(0.25, 0.06, 11, 3), Tier(0.7, 0.3, 16, 4), Tier(1.6, 0.3, 22, 4), Tier(2.6, 0.5, 30, 6))
LAST = Tier(6.0, 1.48, 48, 20)


@dataclass(frozen=True)
class Segments:
    """Segments of a piece on the logarithm, from their pivots.

    Attributes
    ----------
    lookback, skip : int
        As in `Piece`.
    steps : Steps
        Of shape (segments, steps).
    origin : array, shape (segments, windows)
        Value at the pivot.
    level, reach, step, longest : array, shape (segments, windows)
        Mean of ln x from there, farthest from it, largest change, and longest step.
    plain : tuple of array, shape (segments, windows)
        Σ ln Δ, Σ ln x_{i+1}, Σ ln(x_{i+1}/x_i), Σ Δ.
    """

    lookback: int
    skip: int
    steps: Steps
    origin: Array
    level: Array
    reach: Array
    step: Array
    longest: Array
    plain: tuple[Array, ...]

    @classmethod
    def of(cls, piece: Piece) -> Segments:
        """Logarithms lose nothing where values are close to the pivot, and steps small."""
        levels = piece.by_step(piece.x[:, :-1])
        origin = levels[..., piece.pivot : piece.pivot + 1]
        change = piece.by_step(np.log1p((piece.x[:, 1:] - piece.x[:, :-1]) / piece.x[:, :-1]))
        before = np.log1p((levels - origin) / origin)
        dt = piece.dt[..., None] if piece.steps is None else piece.by_step(piece.steps)
        before, change, dt = (
            each.reshape(-1, change.shape[-1]) for each in (before, change, np.broadcast_to(dt, change.shape))
        )
        after = before + change
        windows = piece.lookback, piece.skip
        high, low = (window_maxima(np.maximum(way * before, way * after), *windows) for way in (1, -1))
        step = window_maxima(np.abs(change), *windows)
        longest = dt[:, : step.shape[1]] if piece.steps is None else window_maxima(dt, *windows)
        terms = (before, after, change, np.log(dt), dt)
        room = PairedTerms(change.shape, len(terms))
        for part, term in zip(room.parts, terms, strict=True):
            part[...] = term
        total, logs, log_change, log_steps, duration = room.sums(*windows)
        level = total / piece.lookback
        reach = np.maximum(high - level, low + level)
        steps = Steps(before + 0.5 * change, 0.5 * change, dt)
        origins = np.broadcast_to(origin.reshape(-1, 1), step.shape)
        return cls(*windows, steps, origins, level, reach, step, longest, (log_steps, logs, log_change, duration))

    def within(self, tier: Tier) -> Mask:
        """Windows that a tier is fine enough for."""
        found: Mask = (self.reach <= tier.reach) & (self.step <= tier.step)
        return found

    def sums(self, tier: Tier, segments: Places, *, intervals: bool) -> Elastic:
        """Sums over every window of some segments."""
        steps, level = self.steps.take(segments), self.level[segments].reshape(-1)
        base = self._summed(steps, steps.base_terms(tier.terms), 4 * tier.terms)
        gammas = elastic.nodes(tier.nodes)
        count = 10 if intervals else 9
        rows = np.empty((tier.nodes, count + 4, level.size))
        for gamma, place in zip(gammas.tolist(), rows, strict=True):
            terms = steps.terms(gamma, tier.terms, fourth=intervals)
            put_rows(place, gamma, tier.terms, base, self._summed(steps, terms, count), level)
        plain = [each[segments].reshape(-1) for each in self.plain]
        return Elastic.at_level(self.lookback, plain, level, gammas, rows)

    def _summed(self, steps: Steps, terms: Iterator[Array], count: int) -> list[Array]:
        room = PairedTerms(steps.half.shape, count)
        for part, term in zip(room.parts, terms, strict=True):
            part[...] = term
        return [total.reshape(-1) for total in room.sums(self.lookback, self.skip)]


def of_windows(windows: Array, steps: Array, origin: Array, *, intervals: bool) -> tuple[Elastic, Mask]:
    """Sums over windows of positive values, shape (m, n + 1), and whether they are within `LAST`."""
    change = np.log1p(np.diff(windows, axis=1) / windows[:, :-1])
    before = np.log1p((windows[:, :-1] - origin[:, None]) / origin[:, None])
    after, level = before + change, before.mean(axis=1)
    farthest = np.maximum(np.abs(before - level[:, None]), np.abs(after - level[:, None])).max(axis=1)
    fits: Mask = (farthest <= LAST.reach) & (np.abs(change).max(axis=1) <= LAST.step)
    each = Steps(before + 0.5 * change, np.where(fits[:, None], 0.5 * change, 0.0), steps)
    base = [term.sum(axis=1) for term in each.base_terms(LAST.terms)]
    gammas = elastic.nodes(LAST.nodes)
    rows = np.empty((LAST.nodes, 14 if intervals else 13, len(windows)))
    for gamma, place in zip(gammas.tolist(), rows, strict=True):
        terms = [term.sum(axis=1) for term in each.terms(gamma, LAST.terms, fourth=intervals)]
        put_rows(place, gamma, LAST.terms, base, terms, level)
    plain = [np.log(steps).sum(axis=1), after.sum(axis=1), change.sum(axis=1), steps.sum(axis=1)]
    return Elastic.at_level(windows.shape[1] - 1, plain, level, gammas, rows), fits
