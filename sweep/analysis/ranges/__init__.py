"""Proven acceptable ranges: the largest box around the set-point in which every limit holds, and the hunt that failed to break it."""

from sweep.analysis.ranges.assess import Ranges, assess_ranges

__all__ = ["Ranges", "assess_ranges"]
