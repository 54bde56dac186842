"""The exponential Ornstein–Uhlenbeck process d ln X = kappa (theta − ln X) dt + sigma dW, at any steps.

It is `driftbook.estimators.models.ou` of ln X, with the log-likelihood of X itself; its median in the long run is
e^theta. By Itô's formula dX/X = (kappa (theta − ln X) + sigma²/2) dt + sigma dW.

References
----------
Schwartz, E. S. (1997), The stochastic behavior of commodity prices, J. Finance 52, 923–973 (the one-factor model).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.logs import density_on_logs, on_logs
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou

PARAMETERS = (
    ou.PARAMETERS[0],
    Parameter("theta", "", "Logarithm of the median in the long run."),
    Parameter("sigma", "1/√t", "Volatility, as a share of the value."),
)

LARGEST_LOG = 700  # of a number that is still one

LONG_RUN_MEDIAN = Column(
    "long_run_median",
    "x",
    "Level that the value is pulled to: its median in the long run, of the value plus the series' shift.",
    f"CASE WHEN kappa > 0 AND theta < {LARGEST_LOG} THEN exp(theta) END",
)


def _columns() -> tuple[Column, ...]:
    """Those of `ou`, in units of ln X, and the median before the kurtosis."""
    own = {column.name: column for parameter in PARAMETERS for column in parameter_columns(parameter)}
    columns = [own.get(column.name, column) for column in ou.COLUMNS]
    columns = [
        replace(c, unit="", meaning=f"{c.meaning[:-1]}, of the logarithm.") if c.unit == "x" else c for c in columns
    ]
    at = next(place for place, column in enumerate(columns) if column.name == "kurtosis")
    return (*columns[:at], LONG_RUN_MEDIAN, *columns[at:])


def _kernel() -> Kernel:
    on_log = on_logs(ou.fit_piece)

    def fit_piece(piece: Piece) -> Answer:
        answer = on_log(piece)
        if not piece.intervals:
            return answer
        kappa, theta = answer.columns["kappa"], answer.columns["theta"]
        median = np.where((kappa > 0) & (theta < LARGEST_LOG), np.exp(theta), np.nan)
        return Answer({**answer.columns, "long_run_median": median}, answer.status)

    return fit_piece


MODEL = Model(
    name="exp_ou",
    revision=1,
    equation="d ln X = kappa (theta - ln X) dt + sigma dW",
    range="positive",
    has_pull=True,
    is_relative=True,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="kappa * (theta - ln(x)) + sigma * sigma / 2",
    reaches_zero=False,
    steps="any",
    shortest=ou.SHORTEST,
    parameters=PARAMETERS,
    columns=_columns(),
    kernel=_kernel(),
    log_density=density_on_logs(ou.log_density),
)
