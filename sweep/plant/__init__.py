"""The physics as numbers: a study and its points to arrays, and what a march left to responses."""

from sweep.plant.failed_batch import FailurePath, failure_path, failure_times
from sweep.plant.limits import LimitRow, holds, limits, margins
from sweep.plant.profile import profile
from sweep.plant.responses import Response, evaluate, responses

__all__ = [
    "FailurePath", "LimitRow", "Response", "evaluate", "failure_path", "failure_times", "holds", "limits", "margins", "profile", "responses",
]  # fmt: skip
