"""The columns that say how strong a pull is, and how they follow from kappa and its interval."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from driftbook.estimators.model import Column
from driftbook.estimators.windows import Array

LN2 = float(np.log(2.0))

COLUMNS = (
    Column("kappa_median_unbiased", "1/t", "Estimate of kappa that is too high as often as too low."),
    Column("no_reversion_p", "", "One-sided p-value of no pull; below 0.05 speaks for a pull."),
    Column(
        "half_life",
        "t",
        "Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull.",
        "CASE WHEN kappa > 0 THEN ln(2) / nullif(kappa_median_unbiased, 0) END",
    ),
    Column(
        "half_life_lower",
        "t",
        "Lower end of the 95 % interval of half_life; empty: no end on this side.",
        "CASE WHEN kappa_upper > 0 THEN ln(2) / kappa_upper END",
    ),
    Column(
        "half_life_upper",
        "t",
        "Upper end of the 95 % interval of half_life; empty: no end on this side.",
        "CASE WHEN kappa_lower > 0 THEN ln(2) / kappa_lower END",
    ),
    Column(
        "half_life_mle",
        "t",
        "Half-life by kappa itself: too short on average.",
        "CASE WHEN kappa > 0 THEN ln(2) / kappa END",
    ),
    Column(
        "half_life_unbounded",
        "",
        "Whether the data leave the half-life without an upper end.",
        "kappa_lower = 0",
        "boolean",
    ),
)
"""From kappa_median_unbiased to half_life_unbounded, in this order."""


def half_lives(columns: Mapping[str, Array]) -> dict[str, Array]:
    """The formulas among `COLUMNS`, as their SQL has them but for the need of kappa > 0."""
    lower = columns["kappa_lower"]
    return {
        "half_life": finite(LN2 / columns["kappa_median_unbiased"]),
        "half_life_lower": finite(LN2 / columns["kappa_upper"]),
        "half_life_upper": finite(LN2 / lower),
        "half_life_mle": LN2 / columns["kappa"],
        "half_life_unbounded": np.where(np.isnan(lower), np.nan, lower == 0),
    }


def finite(values: Array) -> Array:
    """NaN in place of infinity, which is how a missing end is told; in place."""
    values[np.isinf(values)] = np.nan
    return values
