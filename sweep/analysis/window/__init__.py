"""The safe operating window: where every limit holds, which limit ends it, how far the set-point is from each edge."""

from sweep.analysis.window.slice import NotAssessed, Window, window

__all__ = ["NotAssessed", "Window", "window"]
