"""How far a parameter may lie from the edge of its range where its likelihood is largest at the edge.

There the likelihood falls from its first step on, and where it has lost half the 95 % point of χ² with one degree of
freedom is the end of an interval that begins at the edge. The way there is taken for a parabola; where the likelihood
falls faster than that, the interval is longer than it need be.
"""

from __future__ import annotations

import numpy as np

from driftbook.estimators.maximise import Maximum
from driftbook.estimators.windows import Array

HALF_POINT = 1.92


def reach(slope: Array, bend: Array) -> Array:
    """The distance, from the first and second derivative of the log-likelihood at the edge, in the way that it falls.

    A second derivative above zero, which would end the fall, is taken for zero.
    """
    fall = np.maximum(-slope, 0.0)
    return np.asarray(2 * HALF_POINT / (fall + np.sqrt(fall * fall - 2 * HALF_POINT * np.minimum(bend, 0.0))))


def reach_of(found: Maximum, parameter: int) -> tuple[Array, Array]:
    """The distance for one of two parameters, and by how much the best other one moves on the way."""
    other = 1 - parameter
    per_step = -found.hessian[parameter, other] / found.hessian[other, other]
    slope = found.gradient[parameter] + per_step * found.gradient[other]
    bend = found.hessian[parameter, parameter] + per_step * found.hessian[parameter, other]
    distance = reach(slope, bend)
    return distance, per_step * distance
