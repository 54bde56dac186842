"""The model in force: the one that `latest` speaks of.

The heaviest usable model by bic, but a model with a pull only where the pull is significant. It changes only when
another leads by 6 in bic on two runs in a row, or when it no longer gives numbers; a plan may pin a model.

A pull is significant where the model's own p-value of no pull says so: that of `ou` for what is an AR(1) when sampled,
for cir, ckls, ou_noise and inertial that of their own slope. quartic has none. Its drift has to confine (status ok),
and it has to be ahead by bic of a model without a pull that is estimated beside it. Of random walks with Gaussian or
Student-5 steps that lets through 0.4 % at 250 steps and 0.3 % at 1000 (8000 and 3000 simulated), since it pays for
three parameters more, and its log-likelihood leads by more than 6.2 to 6.8 in 5 % of random walks of 60 to 2500 steps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf

from driftbook.store.plan import BEST

LEAD = 6.0
SIGNIFICANT = 0.05
_USABLE = ("ok", "no_reversion", "at_bound")


@dataclass(frozen=True)
class Candidate:
    """One model's fit of the latest window, as far as the choice needs it; no_reversion_p is None without a pull.

    `without_pull` is the least bic of models without a pull, for a model that has a pull and no p-value of its own.
    """

    model: str
    status: str
    bic: float | None
    has_pull: bool
    no_reversion_p: float | None
    without_pull: float | None = None

    @property
    def is_usable(self) -> bool:
        """Whether the fit has numbers to speak of."""
        return self.status in _USABLE and self.bic is not None

    @property
    def may_be_in_force(self) -> bool:
        """Whether the data support what the model assumes."""
        supported = self.no_reversion_p is not None and self.no_reversion_p < SIGNIFICANT
        if self.without_pull is not None and self.bic is not None:
            supported = self.status == "ok" and self.bic < self.without_pull
        return self.is_usable and (supported or not self.has_pull)


@dataclass(frozen=True)
class Choice:
    """The model in force, and the one that led on this run and takes over if it leads on the next."""

    model: str | None
    challenger: str | None


def choose(candidates: Sequence[Candidate], pinned: str, before: Choice | None) -> Choice:
    """The model in force after this run; `before` is the choice of the run before."""
    by_name = {one.model: one for one in candidates}
    if pinned != BEST:
        return Choice(pinned if pinned in by_name else None, None)
    leader = _leader(by_name)
    incumbent = by_name.get(before.model) if before and before.model else None
    if incumbent is None or not incumbent.is_usable or before is None:
        return Choice(leader.model if leader else None, None)
    if leader is None or leader.model == incumbent.model or _lead(leader, incumbent) <= LEAD:
        return Choice(incumbent.model, None)
    if before.challenger == leader.model:
        return Choice(leader.model, None)
    return Choice(incumbent.model, leader.model)


def _leader(candidates: Mapping[str, Candidate]) -> Candidate | None:
    """The best by bic of those that may be in force, else of those that are usable at all."""
    usable = [one for one in candidates.values() if one.is_usable]
    eligible = [one for one in usable if one.may_be_in_force] or usable
    return min(eligible, key=_bic, default=None)


def _lead(leader: Candidate, incumbent: Candidate) -> float:
    """By how much bic a leader is ahead; without limit where the data no longer support the incumbent."""
    if not incumbent.may_be_in_force and leader.may_be_in_force:
        return inf
    return _bic(incumbent) - _bic(leader)


def _bic(candidate: Candidate) -> float:
    return inf if candidate.bic is None else candidate.bic
