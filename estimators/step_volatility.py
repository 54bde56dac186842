"""Volatility of what is seen of a motion whose velocity is hidden: that of a change over one step, in SQL.

The path of such a motion is smooth, so that over ever shorter times it has no volatility at all, and over long ones
sigma_s = eta/damping. Over a step Δ, with the velocity from its stationary law and the pull left out, a change has the
variance sigma_s² Δ φ(u) with φ(u) = 1 − (1 − e^{−u})/u and u = damping Δ: the figure that compares with the volatility
of models without inertia is sigma_s √φ. The variance of its logarithm follows from those of the logarithms of sigma_s
(S), damping (D) and eta (E), of which the last is the sum of the others: S + e² D + e (E − D − S), e = u φ′/(2 φ).
"""

from __future__ import annotations

from statistics import NormalDist

_TWO_SIDED = NormalDist().inv_cdf(0.975)
_U = "(damping * step)"
_FEW = f"{_U} < 1e-4"  # where differences lose digits, and the first terms of the series do not
_PHI = f"(CASE WHEN {_FEW} THEN {_U} / 2 - {_U} * {_U} / 6 ELSE 1 - (1 - exp(-{_U})) / {_U} END)"
_E = (
    f"(CASE WHEN {_FEW} THEN 0.5 - {_U} / 6 "
    f"ELSE (1 - (1 + {_U}) * exp(-{_U})) / (2 * {_U} * (1 - (1 - exp(-{_U})) / {_U})) END)"
)
_VOLATILITY = f"sigma_s * sqrt({_PHI})"
_S, _D, _ETA = ("pow(sigma_s_se / sigma_s, 2)", "pow(damping_se / damping, 2)", "pow(eta_se / eta, 2)")
_REACH = f"exp({_TWO_SIDED!r} * sqrt(greatest({_S} + {_E} * {_E} * {_D} + {_E} * ({_ETA} - {_D} - {_S}), 0)))"

STEP_VOLATILITY = (
    f"coalesce({_VOLATILITY}, sigma_s)",
    f"CASE WHEN damping > 0 THEN {_VOLATILITY} / {_REACH} ELSE sigma_s_lower END",
    f"CASE WHEN damping > 0 THEN {_VOLATILITY} * {_REACH} ELSE sigma_s_upper END",
)
"""As `Model.local_volatility`; where damping is too strong to be told, sigma_s."""
