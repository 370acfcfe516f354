"""The best setting within the limits: one objective, or the trade between two."""

from sweep.analysis.optimum.assess import Optimum, assess_optimum

__all__ = ["Optimum", "assess_optimum"]
