"""The physics as numbers: a study and its points to arrays, and what a march left to responses."""

from sweep.plant.profile import profile
from sweep.plant.responses import Response, evaluate, responses

__all__ = ["Response", "evaluate", "profile", "responses"]
