"""Ink: the only module that imports matplotlib. A blank sheet in the house style, small marks, and the finished bytes."""

import io
import textwrap
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib
import numpy as np
from matplotlib import patheffects
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator
from numpy.typing import NDArray

__all__ = [
    "Axes", "Figure", "Ink", "decade_ticks", "finish",
    "outline", "plain_ticks", "round_levels", "sheet", "spread", "style", "time_ticks", "wrap",
]  # fmt: skip

# Okabe and Ito, Color universal design (2008), from memory; ordered so that neighbours differ in grey too.
COLOURS = ("#0072B2", "#D55E00", "#000000", "#009E73", "#CC79A7", "#56B4E9", "#E69F00")
STYLES: tuple[Any, ...] = ("-", (0, (5, 1.6)), (0, (6, 1.6, 1.2, 1.6)), (0, (1.4, 1.3)), (0, (3, 1.2, 1, 1.2, 1, 1.2)), (0, (9, 2.2)), (0, (2.5, 1)))
MARKERS = ("o", "s", "^", "D", "v", "P", "X")
HATCHES = ("////", "\\\\\\\\", "....", "xxxx", "----", "||||", "++++")
INK, GREY, LIMIT = "#1a1a1a", "#5c5c5c", "#B23B00"
_TIMES = (
    (0.1 / 3600, "0.1 s"), (1 / 3600, "1 s"), (10 / 3600, "10 s"), (1 / 60, "1 min"), (1 / 6, "10 min"), (1.0, "1 h"), (6.0, "6 h"),
    (24.0, "1 d"), (168.0, "7 d"), (720.0, "30 d"), (8766.0, "1 year"),
)  # fmt: skip
WIDTH = 7.4  # inches: the text width of a printed A4 page
_STYLE: dict[Any, Any] = {
    "font.family": "DejaVu Sans", "font.size": 9.0, "axes.labelsize": 9.0, "xtick.labelsize": 8.5, "ytick.labelsize": 8.5,
    "axes.edgecolor": GREY, "axes.labelcolor": INK, "xtick.color": INK, "ytick.color": INK, "text.color": INK, "axes.linewidth": 0.8,
    "axes.spines.top": False, "axes.spines.right": False, "axes.grid": True, "grid.color": "#e2e2e2", "grid.linewidth": 0.6,
    "axes.axisbelow": True, "lines.linewidth": 1.7, "hatch.linewidth": 0.7, "svg.fonttype": "path", "text.parse_math": False,
    "axes.unicode_minus": True, "figure.facecolor": "white", "axes.facecolor": "white", "text.usetex": False,
}  # fmt: skip


@dataclass(frozen=True)
class Ink:
    """A finished figure."""

    svg: bytes
    png: bytes


@contextmanager
def style(name: str) -> Iterator[None]:
    """Make figures in the house style alone, whatever the user's settings, with ids in the SVG that belong to this name."""
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update({**_STYLE, "svg.hashsalt": f"sweep {name}"})
        yield


def sheet(height: float) -> Figure:
    """Return an empty figure as wide as the printed text, its height in inches."""
    return Figure(figsize=(WIDTH, height))


def finish(figure: Figure) -> Ink:
    """Return the figure's bytes, free of dates and versions, so that the same numbers give the same file."""
    svg, png = io.BytesIO(), io.BytesIO()
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from")  # a user's script without glyphs here: a box is drawn
        figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": None})
        figure.savefig(png, format="png", dpi=160, metadata={"Software": None})
    return Ink(svg.getvalue(), png.getvalue())


def wrap(text: str, width: int) -> str:
    """Return text in lines of at most so many signs, cut short after three of them."""
    return "\n".join(textwrap.wrap(text, width, max_lines=3, placeholder=" …", break_long_words=True)) or " "


def spread(places: NDArray[np.float64], sizes: NDArray[np.float64], low: float, high: float) -> NDArray[np.float64]:
    """Return centres near `places` (N,) for things of these sizes that do not overlap within low..high, kept in order."""
    order = np.argsort(places, kind="stable")
    centres = np.clip(places, low + sizes / 2, np.maximum(high - sizes / 2, low + sizes / 2))
    for _ in range(200):
        ranked = centres[order]
        overlap = (sizes[order][1:] + sizes[order][:-1]) / 2 - np.diff(ranked)
        if not (overlap > 1e-9).any():
            break
        push = np.where(overlap > 0, overlap / 2 + 1e-6, 0.0)
        ranked[1:] += push
        ranked[:-1] -= push
        centres[order] = np.clip(ranked, low + sizes[order] / 2, np.maximum(high - sizes[order] / 2, low + sizes[order] / 2))
    return np.asarray(centres)


def outline(text: Any) -> None:
    """Give a text a white rim, so that it reads over lines and hatches."""
    text.set_path_effects([patheffects.withStroke(linewidth=3.0, foreground="white")])


def plain_ticks(axes: Axes, which: str = "both", count: int = 6) -> None:
    """Set few ticks at round numbers, written out without powers or offsets."""
    for axis in [axes.xaxis] * (which != "y") + [axes.yaxis] * (which != "x"):
        axis.set_major_locator(MaxNLocator(count, steps=[1, 2, 2.5, 5, 10]))
        axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.6g}".replace("-", "−")))


def time_ticks(axes: Axes) -> None:
    """Set the ticks of a logarithmic axis in hours at times a reader thinks in, each with its unit."""
    axes.xaxis.set_major_locator(FixedLocator([hours for hours, _ in _TIMES]))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: min(_TIMES, key=lambda tick: abs(tick[0] - value))[1]))
    axes.xaxis.set_minor_locator(FixedLocator([]))


def decade_ticks(axes: Axes) -> None:
    """Set the ticks of a logarithmic y axis at powers of ten, written out."""
    axes.yaxis.set_major_locator(FixedLocator([10.0**power for power in range(-6, 4)]))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_locator(FixedLocator([]))


def round_levels(low: float, high: float, count: int = 8) -> NDArray[np.float64]:
    """Return about so many round numbers strictly between two; the middle where there is none."""
    levels = np.asarray(MaxNLocator(count, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high), dtype=np.float64)
    inside = levels[(levels > low) & (levels < high)]
    return inside if inside.size else np.array([(low + high) / 2])
