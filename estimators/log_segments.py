"""Powers averaged between two positive values, in the coordinate in which a volatility x^gamma is one.

Between x and y with the geometric mean m and l = ln(y/x), eta = x^{1 − gamma}/(1 − gamma) moves by
h = m^{1 − gamma} l S((1 − gamma) l/2) with S(z) = sinh(z)/z, and with e = 1 − gamma

    ∫ t^r dt = m^{r+1} l S((r + 1) l/2)    mean over eta of t^p = m^p S((p + e) l/2)/S(e l/2)

    ∫ v (1 − v) (t^p)″ dv = m^{p−2e} (2/l²) (cosh(p l/2) − S((p + e) l/2)/S(e l/2))/S(e l/2)²

with v the share of the way in eta and the derivative by it. Nothing special happens at gamma = ½ or 1. What stands
beside the powers of m are even functions of l: power series in q = (l/2)².
"""

from __future__ import annotations

from math import factorial

import numpy as np

from driftbook.estimators.windows import Array

Series = list[Array]
"""Coefficients of 1, q, q² …"""


def mean_series(c: Array, terms: int) -> Series:
    """S(c l/2)."""
    return [c ** (2 * k) / factorial(2 * k + 1) for k in range(terms)]


def cosh_series(c: Array, terms: int) -> Series:
    """The hyperbolic cosine of c l/2."""
    return [c ** (2 * k) / factorial(2 * k) for k in range(terms)]


def product(a: Series, b: Series) -> Series:
    """Of two series, as long as they are."""
    return [sum((a[i] * b[k - i] for i in range(1, k + 1)), a[0] * b[k]) for k in range(len(a))]


def quotient(a: Series, b: Series) -> Series:
    """Of two series, as long as they are."""
    found: Series = []
    for k, each in enumerate(a):
        found.append(sum((-found[i] * b[k - i] for i in range(k)), each) / b[0])
    return found


def less(a: Series, b: Series) -> Series:
    """a − b."""
    return [left - right for left, right in zip(a, b, strict=True)]


def bridge(p: Array, e: Array, terms: int) -> Series:
    """What stands beside m^{p − 2e} in the bridge mean of (t^p)″."""
    whole = mean_series(e, terms + 1)
    over = quotient(mean_series(p + e, terms + 1), whole)
    top = [0.5 * each for each in less(cosh_series(p, terms + 1), over)[1:]]
    return quotient(top, product(whole, whole)[:terms])


def shapes(gamma: Array, terms: int) -> dict[str, Series]:
    """The series of a likelihood: of h², of first integrals, of means of a drift's square, and of bridges.

    Differences are those of a drift that is measured from the value at the origin of m.
    """
    g, e = gamma, 1 - gamma
    h = mean_series(e, terms)
    first = mean_series(1 - 2 * g, terms)
    second = mean_series(2 * e, terms)
    over = [quotient(mean_series(k - 3 * g, terms), h) for k in (1, 2, 3)]
    one, two = less(over[1], over[0]), less(over[2], over[1])
    return {
        "hh": product(h, h),
        "first": first,
        "second": second,
        "first difference": less(second, first),
        "square": over[0],
        "cross": over[1],
        "cross difference": one,
        "last": over[2],
        "last difference": two,
        "last second difference": less(two, one),
        "inverse": quotient(mean_series(g, terms), h),
        "bridge square": bridge(-2 * g, e, terms),
        "bridge cross": bridge(1 - 2 * g, e, terms),
        "bridge last": bridge(2 - 2 * g, e, terms),
        "bridge inverse": bridge(-np.ones_like(g), e, terms),
        "bridge volatility": bridge(-2 * e, e, terms),
    }
