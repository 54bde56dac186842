"""Where the profile of the ckls likelihood in gamma is largest: next to the best of a few points, or at an edge."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.elastic import HIGHEST, LOWEST, Elastic, Mask, Near, Places, Spot
from driftbook.estimators.solve import roots
from driftbook.estimators.windows import Array

TOLERANCE = 1e-8  # of gamma, whose standard error is 0.05 or more
NEAR = 0.2  # farthest that the secant method goes on sums to second order about its start
SETTLED = 2e-3  # longest last step on sums about where it ended; larger ones are looked into with care
REST = 1e-4  # farthest from the place that sums are about in the end
STRIDES = (1, 2, 4, 8, 16, 32)  # in nodes, on the way up


@dataclass(frozen=True)
class Top:
    """The maximum: gamma, sums and their derivatives there, the rest, and whether gamma stopped at an edge."""

    gamma: Array
    near: Near
    spot: Spot
    at_edge: Mask


def top(sums: Elastic, *, careful: bool) -> Top:
    """Where the profile is largest.

    The secant method goes on sums to second order about its start, and once more about where it ended. Where it does
    not settle, gamma is NaN, or if care is to be taken looked for between nodes.
    """
    best, start, bend = _started(sums)
    gamma, u, bend = _climbed(sums, sums.near(start), start, bend)
    near = sums.near(gamma)
    slope, u = sums.slope_of(gamma, near.rows, near.slopes, u, 0)
    at_edge = ((gamma == LOWEST) & (slope < 0)) | ((gamma == HIGHEST) & (slope > 0))
    first = np.where(at_edge, 0.0, np.clip(-slope / bend, -SETTLED, SETTLED))
    there, u = sums.slope_of(gamma + first, *near.at(first), u, 0)
    bend = np.where(np.abs(first) > TOLERANCE, (there - slope) / np.where(first == 0, 1.0, first), bend)
    away = np.where(at_edge, 0.0, first - there / bend)
    settled = (bend < 0) & (np.abs(away) < SETTLED) & (gamma + away > LOWEST) & (gamma + away < HIGHEST)
    u = np.where(settled | at_edge, u, near.rows[0] / sums.n)
    lost = np.flatnonzero(~(settled | at_edge))
    if lost.size:
        gamma[lost], bend[lost], away[lost] = np.nan, -np.inf, 0.0
        if careful:
            gamma[lost], at_edge[lost] = _between_nodes(sums.take(lost), best[lost])
    far = np.flatnonzero((np.abs(away) > REST) | ~(settled | at_edge))
    if far.size:
        gamma[far] += away[far]
        away[far] = 0.0
        near.put(far, sums.take(far).near(gamma[far]))
    slope, u = sums.slope_of(gamma + away, *near.at(away), u, 1)
    away += np.where(at_edge, 0.0, np.clip(-slope / bend, -REST, REST))
    rows, slopes = near.at(away)
    gamma = gamma + away
    return Top(gamma, Near(rows, slopes, near.curvatures), sums.solved(gamma, rows, u, 1), at_edge)


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


def _climbed(sums: Elastic, near: Near, start: Array, bend: Array) -> tuple[Array, Array, Array]:
    """Where the secant method comes to from a start: gamma, u, and the second derivative of the profile."""
    slope, u = sums.slope_of(start, near.rows, near.slopes, None, 1)
    to = np.clip(np.clip(start - slope / bend, start - NEAR, start + NEAR), LOWEST, HIGHEST)
    there, u = sums.slope_of(to, *near.at(to - start), u, 0)
    moved = to - start
    bend = np.where(np.abs(moved) > TOLERANCE, (there - slope) / np.where(moved == 0, 1.0, moved), bend)
    return np.clip(to - there / bend, LOWEST, HIGHEST), u, bend


def _between_nodes(sums: Elastic, best: Places) -> tuple[Array, Mask]:
    """Where the derivative of the profile first vanishes on the way up from the best node, or the edge."""
    ends = np.concatenate([[LOWEST], sums.nodes, [HIGHEST]])
    low = sums.nodes[best]
    at_low = sums.slope_at(low)
    way = np.where(at_low > 0, 1, -1)
    place = best + 1 + way
    high = ends[place]
    at_high = sums.slope_at(high)
    for stride in STRIDES:
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

    return np.where(beyond, high, roots(slope, low, high, at_low, at_high, TOLERANCE)), beyond
