"""Intake: everything from a source's bytes to the observations of the book."""

from driftbook.store.intake.known import KnownFiles
from driftbook.store.intake.options import Options
from driftbook.store.intake.outcome import Outcome, Refused
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.taking_in import take_in
from driftbook.store.intake.taking_up import take_up

__all__ = ["KnownFiles", "Options", "Outcome", "Reason", "Refused", "take_in", "take_up"]
