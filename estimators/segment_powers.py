"""Powers averaged over the segment between two values: plainly, and with the weight of a Brownian bridge.

With t(v) = x + v (y − x), for v from 0 to 1,

    ∫ t^p dv = h_p/(p + 1)    ∫ v (1 − v) t^p dv = g_p p!/(p + 3)!

where h_p = Σ x^j y^{p−j} and g_p = Σ (j + 1)(p − j + 1) x^j y^{p−j}. Their generating functions are
1/((1 − xs)(1 − ys)) and its square, so that each follows from the one before it: nothing is divided by y − x, and
nothing special happens where it vanishes.
"""

from __future__ import annotations

import numpy as np

from driftbook.estimators.windows import Array


def homogeneous(x: Array, y: Array, weight: Array, highest: int) -> list[Array]:
    """Weight times h_0 … h_highest, each of the common shape.

    Parameters
    ----------
    x, y : array
        Ends of segments.
    weight : array, broadcasts with them
    highest : int
    """
    shape = np.broadcast_shapes(x.shape, y.shape, weight.shape)
    power = found = np.broadcast_to(weight, shape)
    every = [found]
    for _ in range(highest):
        power = power * y
        found = found * x
        found += power
        every.append(found)
    return every


def squared(x: Array, y: Array, first: list[Array]) -> list[Array]:
    """The same weight times g_0, g_1 …, from that times h_0, h_1 …"""
    once = twice = first[0]
    every = [twice]
    for each in first[1:]:
        once = once * x
        once += each
        twice = twice * y
        twice += once
        every.append(twice)
    return every


def mean_share(p: int) -> float:
    """The factor of h_p in the mean of the power p."""
    return 1.0 / (p + 1)


def bridge_share(p: int) -> float:
    """The factor of g_p in its mean with the weight v (1 − v)."""
    return 1.0 / ((p + 1) * (p + 2) * (p + 3))
