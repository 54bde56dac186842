"""Windows fitted with ckls: from sums over windows in rolling position, or from the windows themselves."""

from __future__ import annotations

from dataclasses import replace
from functools import partial

import numpy as np

from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.elastic import Elastic, Mask
from driftbook.estimators.elastic_search import top
from driftbook.estimators.elastic_sums import TIERS, Segments, of_windows
from driftbook.estimators.elastic_uncertainty import NAMES as UNCERTAIN
from driftbook.estimators.elastic_uncertainty import uncertainty
from driftbook.estimators.parts import in_parts
from driftbook.estimators.regression import EPS, ROUNDING
from driftbook.estimators.repair import Columns, Statuses, blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array

ESTIMATES = ("kappa", "theta", "sigma", "gamma", "loglik")
COARSEST = 0.5
"""Largest pull over a step up to which the likelihood is trusted."""
PART = 1 << 14  # observations of a piece that are worked on at one time
_DOUBTFUL = np.int8(-1)
_LOSS = 1e-8  # largest share that elimination or what the drift explains may cancel to in sums


def fit_piece(piece: Piece) -> Answer:
    """Fit every window of a piece; see `driftbook.estimators.batches`."""
    piece = replace(piece, x=np.where((piece.x > 0) & np.isfinite(piece.x), piece.x, np.nan))
    answer = _by_parts(piece)
    columns = {name: values.reshape(-1) for name, values in answer.columns.items()}
    status = answer.status.reshape(-1)
    doubtful = np.flatnonzero(status == _DOUBTFUL)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _from_sums(piece: Piece) -> Answer:
    """The same where sums can vouch for it; `_DOUBTFUL` elsewhere."""
    segments = Segments.of(piece)
    status = np.full(segments.level.shape, _DOUBTFUL, dtype=np.int8)
    names = (*ESTIMATES, *UNCERTAIN) if piece.intervals else ESTIMATES
    columns = {name: np.full(status.size, np.nan) for name in names}
    left = np.ones(status.shape, dtype=np.bool_)
    for tier in TIERS:
        wanted = left & segments.within(tier)
        some = np.flatnonzero(wanted.any(axis=1))
        if some.size:
            left &= ~wanted
            sums = segments.sums(tier, some, intervals=piece.intervals).take(np.flatnonzero(wanted[some]))
            at = np.flatnonzero(wanted)
            origin, longest = segments.origin.reshape(-1)[at], segments.longest.reshape(-1)[at]
            found, became, done = _fitted(sums, origin, longest, intervals=piece.intervals, careful=False)
            status.reshape(-1)[at] = np.where(done, became, _DOUBTFUL)
            for name, values in found.items():
                columns[name][at] = values
    return Answer(columns, status.reshape(-1))


_by_parts = in_parts(_from_sums, PART)


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite positive values, shape (m, n + 1), from the middle of their range."""
    n, logs = windows.shape[1] - 1, np.log(windows)
    origin = np.exp(0.5 * (logs.min(axis=1) + logs.max(axis=1)))
    sums, fits = of_windows(windows, steps, origin, intervals=intervals)
    columns, status, done = _fitted(sums, origin, steps.max(axis=1), intervals=intervals, careful=True)
    change = np.log1p(np.diff(windows, axis=1) / windows[:, :-1])
    moved = np.square(change - change.mean(axis=1, keepdims=True)).sum(axis=1)
    flat = moved <= n * ROUNDING**2
    lost = ~flat & ~(fits & done)
    status[lost], status[flat] = Status.NOT_CONVERGED, Status.FLAT
    blank(columns, np.flatnonzero(flat | lost))
    return columns, status


def _fitted(
    sums: Elastic, origin: Array, longest: Array, *, intervals: bool, careful: bool
) -> tuple[Columns, Statuses, Mask]:
    """Columns, status, and whether sums can vouch for them."""
    found = top(sums, careful=careful)
    spot, gamma = found.spot, found.gamma
    kappa = -spot.b
    columns = {
        "kappa": kappa,
        "theta": origin * (1 + np.where(kappa != 0, spot.alpha / kappa, np.nan)),
        "sigma": np.sqrt(spot.u) * np.exp((1 - gamma) * np.log(origin) - gamma * sums.level),
        "gamma": gamma,
        "loglik": spot.loglik - sums.n * np.log(origin),
    }
    if intervals:
        columns |= uncertainty(sums, found, columns, origin)
    status = np.where(kappa > 0, np.int8(Status.OK), np.int8(Status.NO_REVERSION))
    status[found.at_edge] = Status.AT_BOUND
    status[np.abs(kappa) * longest > COARSEST] = Status.TOO_COARSE
    M00, M01, M11 = spot.matrix
    square = found.near.rows[0]
    done: Mask = np.isfinite(spot.loglik) & (M00 * M11 - M01 * M01 > _LOSS * M00 * M11) & (M00 > 0)
    done &= (2 * spot.unexplained > _LOSS * square) & (spot.curvature > 0) & (np.abs(spot.slope) < 1e-6 * sums.n)
    done &= square > sums.n * np.square(1e4 * EPS) / sums.duration
    return columns, status, done
