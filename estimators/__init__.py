"""Pure numerics: arrays in, arrays out."""

from driftbook.estimators.model import Model
from driftbook.estimators.registry import MODELS, rolling
from driftbook.estimators.result import Fit
from driftbook.estimators.status import Status
from driftbook.estimators.windows import aligned_start

__all__ = ["MODELS", "Fit", "Model", "Status", "aligned_start", "rolling"]
