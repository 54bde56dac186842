"""The models, by name."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from numpy.typing import ArrayLike

from driftbook.estimators.model import Model
from driftbook.estimators.models.abm import MODEL as ABM
from driftbook.estimators.models.cir import MODEL as CIR
from driftbook.estimators.models.ckls import MODEL as CKLS
from driftbook.estimators.models.exp_ou import MODEL as EXP_OU
from driftbook.estimators.models.gbm import MODEL as GBM
from driftbook.estimators.models.inertial import MODEL as INERTIAL
from driftbook.estimators.models.merton import MODEL as MERTON
from driftbook.estimators.models.ou import MODEL as OU
from driftbook.estimators.models.ou_noise import MODEL as OU_NOISE
from driftbook.estimators.models.quartic import MODEL as QUARTIC
from driftbook.estimators.result import Fit

_ALL = (
    ABM,
    GBM,
    OU,
    EXP_OU,
    CIR,
    CKLS,
    QUARTIC,
    MERTON,
    INERTIAL,
    OU_NOISE,
)

MODELS: Mapping[str, Model] = MappingProxyType({model.name: model for model in _ALL})


def rolling(
    name: str,
    x: ArrayLike,
    dt: ArrayLike,
    lookback: int,
    *,
    intervals: bool = True,
    threads: int = 1,
    first: int = 0,
) -> Fit:
    """Fit the model of that name to every window of series: `Model.rolling`, which describes the rest.

    Raises
    ------
    ValueError
        If there is no model of that name.

    Examples
    --------
    >>> import numpy as np
    >>> fit = rolling("ou", np.array([1.0, 3.0, 2.0, 2.5, 1.5, 2.0, 1.0]), 0.1, 5)
    >>> fit.kappa.shape
    (2,)
    """
    if name not in MODELS:
        raise ValueError(f"no model is called {name!r}; there are {', '.join(MODELS)}")
    return MODELS[name].rolling(x, dt, lookback, intervals=intervals, threads=threads, first=first)
