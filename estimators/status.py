"""What became of a fit: one small code a window."""

from __future__ import annotations

from enum import IntEnum


class Status(IntEnum):
    """The outcome of a fit; every fit has one, so that no failure is silent.

    Attributes
    ----------
    word : str
        The name in lower case, as tables, SQL and messages show it.
    sentence : str
        What it means and what to try, for a reader who sees it for the first time.
    """

    sentence: str

    def __new__(cls, value: int, sentence: str) -> Status:
        """Make a member that owns its sentence."""
        member = int.__new__(cls, value)
        member._value_ = value
        member.sentence = sentence
        return member

    OK = 0, "The fit is usable."
    NO_REVERSION = (
        1,
        "Mean reversion is not in the data: the slope is at or beyond a unit root. "
        "There is no half-life; try a longer lookback, or a model without a pull.",
    )
    ALTERNATING = (
        2,
        "Values swing about their mean from step to step, which no pull in continuous time can do. "
        "Look for a bid-ask bounce, a season or two sources in turn; try a coarser step or a model with noise.",
    )
    AT_BOUND = (
        3,
        "A parameter stopped at the edge of its range, so its standard error means nothing. "
        "Try a longer lookback, or the simpler model that lies at that edge.",
    )
    FLAT = (
        4,
        "The values do not vary beyond the rounding of their digits, or follow a line or curve exactly, so there is "
        "nothing to estimate. Check whether the source stopped or was filled in; try a longer lookback.",
    )
    OUT_OF_RANGE = (
        5,
        "The window holds values outside the model's range, a price that is not positive or a number that is not "
        "finite. Correct them, set a shift, or use a model for values of any sign.",
    )
    TOO_SHORT = (
        6,
        "There are too few steps for this model or this lookback. Try a shorter lookback, or wait for more data.",
    )
    NOT_CONVERGED = (
        7,
        "The search for the best fit did not settle, so nothing is reported. Try a longer lookback or a simpler model.",
    )
    TOO_COARSE = (
        8,
        "The steps are too long for the model's density at these parameters. Try data with shorter steps.",
    )
    DISCRETE = (
        9,
        "Too many values are unchanged from one step to the next for this model. Try a coarser step.",
    )

    @property
    def word(self) -> str:
        """The name in lower case: ``ok``, ``no_reversion``, …"""
        return self.name.lower()
