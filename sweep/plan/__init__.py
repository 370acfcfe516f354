"""Which points are evaluated."""

from sweep.plan.points import Planned, planned, points, set_point

__all__ = ["Planned", "planned", "points", "set_point"]
