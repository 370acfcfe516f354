"""The physics as numbers: a study and its points to arrays, and what a march left to responses."""

from sweep.plant.cost import cost_of
from sweep.plant.criticality import class_sentence
from sweep.plant.deviations import Deviated, deviations_of
from sweep.plant.failed_batch import FailurePath, failure_path, failure_times
from sweep.plant.fired import Fired, events_of
from sweep.plant.limits import LimitRow, holds, limits, margins
from sweep.plant.profile import batch_longest, productivity_of, profile
from sweep.plant.responses import Response, crashed, evaluate, responses
from sweep.plant.understood import Understood, understood

__all__ = [
    "Deviated", "FailurePath", "Fired", "LimitRow", "Response", "Understood", "batch_longest", "class_sentence", "cost_of", "crashed",
    "deviations_of", "evaluate", "events_of", "failure_path", "failure_times", "holds", "limits", "margins", "productivity_of", "profile",
    "responses", "understood",
]  # fmt: skip
