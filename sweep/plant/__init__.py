"""The physics as numbers: a study and its points to arrays, and what a march left to responses."""

from sweep.plant.cost import cost_of
from sweep.plant.criticality import class_sentence
from sweep.plant.failed_batch import FailurePath, failure_path, failure_times
from sweep.plant.limits import LimitRow, holds, limits, margins
from sweep.plant.profile import batch_longest, productivity_of, profile
from sweep.plant.responses import Response, evaluate, responses
from sweep.plant.understood import Understood, understood

__all__ = [
    "FailurePath", "LimitRow", "Response", "Understood", "batch_longest", "class_sentence", "cost_of", "evaluate", "failure_path", "failure_times",
    "holds", "limits", "margins", "productivity_of", "profile", "responses", "understood",
]  # fmt: skip
