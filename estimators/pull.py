"""The transition law of an Ornstein–Uhlenbeck process over a step, as functions of the pull z = kappa Δ.

With phi = (1 − e^{−z})/z, the mean of an increment is Δ phi kappa (theta − x) and its variance sigma² Δ/q, where

    p = 2/(1 + e^{−z})    q = p/phi = 2z/(1 − e^{−2z})    tau = p phi.

All are 1 at z = 0, smooth on either side of it, and computed without loss near it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from driftbook.estimators.windows import Array

_SERIES_BELOW = 0.1  # below this |z| a difference loses digits and its series does not
_TINY = 1e-150


@dataclass(frozen=True)
class Pull:
    """Those functions at given z, of any shape, and their derivatives by z."""

    z: Array

    @cached_property
    def _less(self) -> Array:
        """e^{−z} − 1."""
        return np.expm1(-self._z)

    @cached_property
    def _z(self) -> Array:
        return np.where(self.z == 0, _TINY, self.z)

    @cached_property
    def decay(self) -> Array:
        """e^{−z}."""
        return 1 + self._less

    @cached_property
    def phi(self) -> Array:
        """(1 − e^{−z})/z."""
        return -self._less / self._z

    @cached_property
    def p(self) -> Array:
        """2/(1 + e^{−z})."""
        return 2 / (2 + self._less)

    @cached_property
    def q(self) -> Array:
        """2z/(1 − e^{−2z})."""
        return self.p / self.phi

    @cached_property
    def tau(self) -> Array:
        """tanh(z/2)/(z/2)."""
        return self.p * self.phi

    @cached_property
    def phi_slope(self) -> Array:
        """The derivative (e^{−z} − phi)/z of phi."""
        z = self._z
        slope = (self.decay - self.phi) / z
        small = np.abs(z) < _SERIES_BELOW
        if small.any():
            slope[small] = _phi_slope_series(z[small])
        return slope

    @cached_property
    def p_slope(self) -> Array:
        """The derivative of p."""
        return self.p * (1 - self.p / 2)

    @cached_property
    def tau_slope(self) -> Array:
        """The derivative of tau."""
        return self.p_slope * self.phi + self.p * self.phi_slope

    @cached_property
    def log_q_slope(self) -> Array:
        """The derivative of ln q."""
        return 1 - self.p / 2 - self.phi_slope / self.phi


def _phi_slope_series(z: Array) -> Array:
    """−1/2 + z/3 − z²/8 + z³/30 − … ; the next term is below 3e-15 for |z| < 0.1."""
    terms = (-1 / 2, 1 / 3, -1 / 8, 1 / 30, -1 / 144, 1 / 840, -1 / 5760, 1 / 45360, -1 / 403200)
    total = np.full(z.shape, terms[-1])
    for term in terms[-2::-1]:
        total = total * z + term
    return total
