"""From a model of real numbers to one of positive numbers: the same on the logarithm.

The density of x_{i+1} is that of ln x_{i+1}, divided by x_{i+1}, so the log-likelihood loses Σ ln x_{i+1}. Values that
are not positive have no logarithm, and their windows are out of range.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.model import Loglik
from driftbook.estimators.windows import Array


def on_logs(kernel: Kernel) -> Kernel:
    """The kernel that fits the logarithm of a series, with the log-likelihood of the series itself."""

    def fit_piece(piece: Piece) -> Answer:
        logs = replace(piece, x=logarithm(piece.x))
        answer = kernel(logs)
        jacobian = logs.sums(logs.by_step(logs.x[:, 1:])).reshape(-1)
        loglik = answer.columns["loglik"].reshape(-1) - jacobian
        return Answer({**answer.columns, "loglik": loglik}, answer.status)

    return fit_piece


def density_on_logs(log_density: Loglik) -> Loglik:
    """The log-likelihood of a series, from that of its logarithm."""

    def loglik(x: Array, steps: Array, *parameters: Array) -> Array:
        logs = logarithm(x)
        return np.asarray(log_density(logs, steps, *parameters) - logs[..., 1:].sum(axis=-1))

    return loglik


def logarithm(x: Array) -> Array:
    """The natural logarithm; NaN where there is none."""
    return np.log(x, out=np.full(x.shape, np.nan), where=x > 0)
