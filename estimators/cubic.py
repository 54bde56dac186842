"""Polynomials of degree three, many at once: values, other origins, and three real roots where they have them.

A polynomial is four arrays of one shape, the coefficients of 1, z, z² and z³.

References
----------
Viète, F. (1615), De aequationum recognitione et emendatione: three real roots by trisecting an angle.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import comb

import numpy as np

from driftbook.estimators.windows import Array

Cubic = Sequence[Array] | Array
_POLISHED = 2  # rounds of Newton's method, which put right what the angle lost where two roots are near each other


def value(p: Cubic, z: Array) -> Array:
    """p(z)."""
    return np.asarray(p[0] + z * (p[1] + z * (p[2] + z * p[3])))


def slope(p: Cubic, z: Array) -> Array:
    """p′(z)."""
    return np.asarray(p[1] + z * (2 * p[2] + 3 * z * p[3]))


def steepest(p: Cubic, low: Array, high: Array) -> Array:
    """The largest |p′| between two places."""
    turn = np.clip(np.where(p[3] != 0, p[2] / (-3 * p[3]), low), low, high)
    at_ends = np.maximum(np.abs(slope(p, low)), np.abs(slope(p, high)))
    return np.asarray(np.maximum(at_ends, np.abs(slope(p, turn))))


def shifts(origin: Array) -> list[list[Array]]:
    """Row k: by what each coefficient of a polynomial in z − origin enters coefficient k of the one in z."""
    powers = [np.ones_like(origin), -origin, origin * origin, -origin * origin * origin]
    return [[comb(j, k) * powers[j - k] if j >= k else np.zeros_like(origin) for j in range(4)] for k in range(4)]


def three_roots(p: Cubic) -> tuple[Array, Array, Array]:
    """The roots in rising order where p has three, the same for each rising or falling; else NaN."""
    third = p[2] / (3 * p[3])
    spread = third * third - p[1] / (3 * p[3])
    offset = third * (third * third - 0.5 * p[1] / p[3]) + 0.5 * p[0] / p[3]
    cosine = -offset / (spread * np.sqrt(spread))
    angle = np.arccos(np.where(np.abs(cosine) < 1, cosine, np.nan)) / 3
    radius = 2 * np.sqrt(spread)
    turns = [angle + 2 * np.pi / 3, angle - 2 * np.pi / 3, angle]
    low, middle, high = (_polished(p, radius * np.cos(turn) - third) for turn in turns)
    return low, middle, high


def _polished(p: Cubic, root: Array) -> Array:
    for _ in range(_POLISHED):
        root = root - value(p, root) / slope(p, root)
    return root
