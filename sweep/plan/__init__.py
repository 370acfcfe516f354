"""Which points are evaluated, and what is drawn where inputs are uncertain."""

from sweep.plan.draws import Draws, dimensions_of, draw, groups_of, inputs_of
from sweep.plan.points import Planned, planned, points, set_point

__all__ = ["Draws", "Planned", "dimensions_of", "draw", "groups_of", "inputs_of", "planned", "points", "set_point"]
