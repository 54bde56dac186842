"""Models that are fitted to the level of a series, or to the logarithm of one that stays above zero."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.logs import density_on_logs, on_logs
from driftbook.estimators.model import Column, Model

FITTED_ON = Column(
    "fitted_on",
    "",
    "level or log: whether the fit is to the value, or to the logarithm of the value plus the series' shift, which is "
    "what x then means in units; log for series of prices.",
    kind="word",
    words=("level", "log"),
)


def also_of_logs(model: Model, drift_of_logs: str) -> Model:
    """A model with one of the logarithm beside it, and a column that tells which of the two a fit is of.

    `drift_of_logs` is what `local_drift` is for that of the logarithm: relative to the value.
    """
    columns = (*model.columns[:-1], FITTED_ON, model.columns[-1])
    of_logs = replace(
        model,
        range="positive",
        is_relative=True,
        local_drift=drift_of_logs,
        reaches_zero=False,
        columns=columns,
        kernel=_telling("log", on_logs(model.kernel)),
        log_density=density_on_logs(model.log_density),
    )
    return replace(model, columns=columns, kernel=_telling("level", model.kernel), of_logs=of_logs)


def _telling(word: str, kernel: Kernel) -> Kernel:
    place = float(FITTED_ON.words.index(word))

    def fit_piece(piece: Piece) -> Answer:
        answer = kernel(piece)
        if not piece.intervals:
            return answer
        fitted_on = np.where(np.isnan(answer.columns["loglik"]), np.nan, place)
        return Answer({**answer.columns, "fitted_on": fitted_on}, answer.status)

    return fit_piece
