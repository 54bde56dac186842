"""Numbers that carry their first and second derivatives by two parameters, for many windows at once.

A jet is an array of shape (6, ...): the value, its derivatives by u and by v, and the second ones by u twice, by u and
v, and by v twice. Sums of jets are sums of arrays; products and functions follow the rules of Leibniz and Faà di Bruno,
so that a formula written once gives exact derivatives.

References
----------
Griewank, A. & Walther, A. (2008), Evaluating Derivatives, 2nd ed., SIAM, chapter 13.
"""

from __future__ import annotations

import numpy as np

from driftbook.estimators.maximise import Surface
from driftbook.estimators.windows import Array

Jet = Array


def variables(u: Array, v: Array) -> tuple[Jet, Jet]:
    """The two parameters themselves."""
    jets = np.zeros((2, 6, *u.shape))
    jets[0, 0], jets[1, 0] = u, v
    jets[0, 1] = jets[1, 2] = 1.0
    return jets[0], jets[1]


def constant(value: Array | float, shape: tuple[int, ...]) -> Jet:
    """A number that depends on neither."""
    jet = np.zeros((6, *shape))
    jet[0] = value
    return jet


def times(a: Jet, b: Jet) -> Jet:
    """The product."""
    product: Jet = a * b[0]
    product[1:] += a[0] * b[1:]
    cross = a[1:3] * b[1:3]
    product[3::2] += cross
    product[3::2] += cross
    product[4] += a[1] * b[2]
    product[4] += a[2] * b[1]
    return product


def square(a: Jet) -> Jet:
    """The square, in less time than a product."""
    twice = 2 * a[0]
    found: Jet = a * twice
    found[0] *= 0.5
    slopes = a[1:3] * 2
    found[3] += slopes[0] * a[1]
    found[4] += slopes[0] * a[2]
    found[5] += slopes[1] * a[2]
    return found


def function(a: Jet, value: Array, slope: Array, bend: Array) -> Jet:
    """A function of a jet, from the value of the function and of its first two derivatives."""
    found = a * slope
    found[0] = value
    bent = a[1:3] * bend
    found[3] += bent[0] * a[1]
    found[4] += bent[0] * a[2]
    found[5] += bent[1] * a[2]
    return found


def inverse(a: Jet) -> Jet:
    """One over a jet."""
    return inverse_and_logarithm(a)[0]


def inverse_and_logarithm(a: Jet) -> tuple[Jet, Jet]:
    """One over a jet, and its natural logarithm but for the value, which is zero: in less time than one by one."""
    value = 1 / a[0]
    log: Jet = a * value
    log[0] = 0.0
    log[3] -= log[1] * log[1]
    log[4] -= log[1] * log[2]
    log[5] -= log[2] * log[2]
    found: Jet = log * -value
    found[0] = value
    found[3] -= found[1] * log[1]
    found[4] -= found[1] * log[2]
    found[5] -= found[2] * log[2]
    return found, log


def moved(a: Jet, du: Array, dv: Array) -> Jet:
    """A jet at a place nearby: its value and slopes to second order there, and its second derivatives."""
    found = a.copy()
    found[1] += a[3] * du + a[4] * dv
    found[2] += a[4] * du + a[5] * dv
    found[0] += 0.5 * (du * (a[1] + found[1]) + dv * (a[2] + found[2]))
    return found


def logarithm(a: Jet) -> Jet:
    """The natural logarithm."""
    log: Jet = a * (1 / a[0])  # nothing is squared that has a unit, so that jets of any size stay in range
    log[0] = np.log(a[0])
    log[3] -= log[1] * log[1]
    log[4] -= log[1] * log[2]
    log[5] -= log[2] * log[2]
    return log


def exponential(a: Jet) -> Jet:
    """The exponential."""
    value = np.exp(a[0])
    return function(a, value, value, value)


def root(a: Jet) -> Jet:
    """The square root."""
    value = np.sqrt(a[0])
    slope = 0.5 / value
    return function(a, value, slope, -0.5 * slope / a[0])


def less_one(a: Jet) -> Jet:
    """exp(a) − 1, without loss near zero."""
    value = np.expm1(a[0])
    return function(a, value, 1 + value, 1 + value)


def relative(a: Jet) -> Jet:
    """(exp(a) − 1)/a, 1 at zero, without loss near it."""
    z = a[0]
    small = np.abs(z) < _SERIES_BELOW
    away = np.where(small, 1.0, z)
    less = np.expm1(away)
    value = less / away
    slope = (1 + less - value) / away
    bend = (1 + less - 2 * slope) / away
    if small.any():
        near = np.where(small, z, 0.0)
        value, slope, bend = (
            np.where(small, _series(near, terms), far) for terms, far in zip(_TERMS, (value, slope, bend), strict=True)
        )
    return function(a, value, slope, bend)


_SERIES_BELOW = 0.3
_COUNT = 14
_FACTORIALS = np.cumprod(np.arange(1.0, _COUNT + 4))  # 1!, 2!, …
_TERMS = (
    tuple(1 / _FACTORIALS[k] for k in range(_COUNT)),
    tuple((k + 1) / _FACTORIALS[k + 1] for k in range(_COUNT)),
    tuple((k + 1) * (k + 2) / _FACTORIALS[k + 2] for k in range(_COUNT)),
)


def _series(z: Array, terms: tuple[float, ...]) -> Array:
    total = np.full(z.shape, terms[-1])
    for term in terms[-2::-1]:
        total = total * z + term
    return total


def covariance(a: Jet, b: Jet, of_parameters: Array) -> Array:
    """Covariance of two functions of the parameters, from that of these, shape (2, 2, m), by the delta method."""
    found: Array = np.zeros_like(a[0])
    for i in range(2):
        for j in range(2):
            found += a[1 + i] * b[1 + j] * of_parameters[i, j]
    return found


def surface(jet: Jet) -> Surface:
    """Value, gradient and Hessian, as `driftbook.estimators.maximise.maximise` takes them."""
    return Surface(jet[0], jet[1:3], np.stack([jet[3:5], jet[4:6]]))
