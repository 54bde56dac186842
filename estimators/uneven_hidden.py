"""Windows of processes with a hidden number at unequal steps: the transitions, and the search for two parameters.

`noisy_steps` is the Ornstein–Uhlenbeck process with noise, by u = kappa T and v = noise²/(sigma² Δ), with Δ = T/n the
mean step; `inertial_steps` the damped oscillator, by the s and b of `driftbook.estimators.swings` for a mean step.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.filtering import Filtered, Steps, Transition, by_length, filtered
from driftbook.estimators.jets import Jet, exponential, inverse, relative, surface, times, variables
from driftbook.estimators.maximise import Limits, Maximum, Surface, maximise
from driftbook.estimators.oscillator import motion
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.swings import chart
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]


@dataclass(frozen=True)
class Hidden:
    """A process at given parameters: its transitions, and the hidden number's variance before the first step."""

    steps: Steps
    variance: Jet


Process = Callable[[Array, Array, StepLengths], Hidden]
"""Of two parameters, shape (m,), and steps."""


def noisy_steps(u: Array, v: Array, steps: StepLengths) -> Hidden:
    """The Ornstein–Uhlenbeck process with noise, for sigma = 1; the hidden number is X less the first observation."""
    kappa, noise = noisy_parameters(u, v, steps)

    def transition(length: Array) -> Transition:
        z = -length * kappa
        rho, lift, variance = exponential(z), length * relative(z), length * relative(2 * z)
        return Transition(None, None, rho, rho, lift, lift, variance + noise, variance, variance)

    return Hidden(by_length(steps, transition), noise)


def noisy_parameters(u: Array, v: Array, steps: StepLengths) -> tuple[Jet, Jet]:
    """Kappa, and noise²/sigma²."""
    kappa, noise = variables(u, v)
    return kappa / steps.duration, noise * (steps.duration / steps.n)


def inertial_steps(s: Array, b: Array, steps: StepLengths) -> Hidden:
    """The damped oscillator, for eta = 1; the hidden number is its velocity."""
    damping, stiffness = inertial_parameters(s, b, steps)

    def transition(length: Array) -> Transition:
        t = motion(length * damping, length**2 * stiffness)
        held, push = length**2 * t.held, length * t.a12
        return Transition(
            times(stiffness, held),
            -times(stiffness, push),
            push,
            t.a22,
            held,
            push,
            length**3 * t.q11,
            length**2 * t.q12,
            length * t.q22,
        )

    return Hidden(by_length(steps, transition), 0.5 * inverse(damping))


def inertial_parameters(s: Array, b: Array, steps: StepLengths) -> tuple[Jet, Jet]:
    """Damping and omega²."""
    step = steps.duration / steps.n
    g, w = chart(s, b)
    return g / step, w / step**2


def search(process: Process, start: Array, z: Array, steps: StepLengths, limits: Limits) -> tuple[Maximum, Filtered]:
    """The best two parameters of each window, and what the filter finds there.

    Parameters
    ----------
    process : callable
    start : array, shape (2, m)
    z : array, shape (n + 1, m)
        Observations less the first; time first.
    steps : StepLengths
    limits : Limits
    """
    m = z.shape[1]
    jets = np.full((3, 6, m), np.nan)
    last = Filtered(jets[0], jets[1], jets[2], np.full(m, np.nan))
    where = np.full((2, m), np.nan)

    def objective(point: Array, at: Places) -> Surface:
        loglik = np.empty((6, at.size))
        for start in range(0, at.size, LANES):
            part = slice(start, start + LANES)
            hidden = process(point[0, part], point[1, part], steps.take(at[part]))
            found = filtered(z[:, at[part]], hidden.variance, hidden.steps)
            last.put(at[part], found)
            loglik[:, part] = found.loglik
        where[:, at] = point
        return surface(loglik)

    best = maximise(objective, start, limits, most_rounds=MOST_ROUNDS)
    to = best.point - where
    return best, last.moved(to[0], to[1])  # the last step is so small that nothing is left after second order


MOST_ROUNDS = 40
LANES = 1 << 12  # windows that go through the filter at one time
