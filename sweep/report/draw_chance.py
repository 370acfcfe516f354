"""Probabilities to ink: exceedance curves in panels of their own, and ranked bars with intervals."""

import numpy as np

from sweep.report.curves import Facet, Facets, Ranking, Rankings
from sweep.report.draw import COLOURS, GREY, INK, LIMIT, MARKERS, WIDTH, Axes, Figure, decade_ticks, plain_ticks, sheet, wrap

COLUMNS = 2
PANEL, GAP = 1.75, 1.05  # inches: a panel's height, and between two rows
LEFT, RIGHT, TOP, BOTTOM = 0.78, 0.2, 0.5, 0.58
BAR, HEAD = 0.24, 0.34  # inches: a bar's row, and the title of a panel of bars
NAMES = 2.35  # inches for the inputs' names
FAR = 5.0  # a limit so many widths of the curve away is named, not drawn


def draw_facets(figure: Facets) -> Figure:
    """Return the figure of exceedance curves, two panels a row."""
    count = len(figure.facets)
    columns = min(COLUMNS, count)
    rows = -(-count // columns)
    height = TOP + BOTTOM + rows * PANEL + (rows - 1) * GAP
    page = sheet(height)
    page.subplots_adjust(
        left=LEFT / WIDTH, right=1 - RIGHT / WIDTH, top=1 - TOP / height, bottom=BOTTOM / height, hspace=GAP / PANEL, wspace=0.3
    )  # fmt: skip
    panels = page.subplots(rows, columns, squeeze=False)
    for k, axes in enumerate(panels.flat):
        if k < count:
            _draw_facet(axes, figure.facets[k], figure.least, k % columns == 0)
        else:
            axes.set_visible(False)
    return page


def _draw_facet(axes: Axes, facet: Facet, least: float, first: bool) -> None:
    axes.set_yscale("log")
    axes.set_ylim(least, 130.0)
    drawn = np.where(facet.y > 0.0, facet.y, np.nan)
    axes.fill_between(facet.x, np.maximum(facet.low, least / 10.0), facet.high, color=COLOURS[0], alpha=0.18, linewidth=0, zorder=2)
    axes.plot(facet.x, drawn, color=COLOURS[0], zorder=3)
    low, high = float(facet.x.min()), float(facet.x.max())
    width = (high - low) or abs(high) or 1.0
    near = low - FAR * width <= facet.limit <= high + FAR * width
    ends = [low - 0.06 * width, high + 0.06 * width]
    if near:
        axes.axvline(facet.limit, color=LIMIT, linestyle=(0, (9, 3)), linewidth=1.2, zorder=2)
        ends = [min(ends[0], facet.limit - 0.06 * width), max(ends[1], facet.limit + 0.06 * width)]
    axes.set_xlim(*ends)
    off = "" if near else "; off the axis"
    axes.set_title(f"{wrap(facet.title, 44)}\n{wrap(facet.said + off, 50)}", fontsize=8.5, loc="left", color=INK, pad=5, linespacing=1.25)
    axes.set_xlabel(facet.x_label)
    if first:
        axes.set_ylabel("Beyond the value (%)")
    decade_ticks(axes)
    plain_ticks(axes, "x", 5)


def draw_rankings(figure: Rankings) -> Figure:
    """Return panels of ranked bars, one under the other, on one scale."""
    heights = [HEAD * bool(panel.title) + BAR * len(panel.labels) + 0.1 for panel in figure.panels]
    total = sum(heights) + BOTTOM + 0.1
    page = sheet(total)
    low, high = _span(figure.panels)
    top = total - 0.05
    for k, (panel, height) in enumerate(zip(figure.panels, heights, strict=True)):
        head = HEAD * bool(panel.title)
        bottom = top - height
        axes = page.add_axes((NAMES / WIDTH, bottom / total, (WIDTH - NAMES - RIGHT) / WIDTH, (height - head) / total))
        _draw_bars(axes, panel, low, high)
        last = k == len(figure.panels) - 1
        if panel.title:
            axes.set_title(wrap(panel.title, 70), fontsize=9.0, loc="left", color=INK, pad=4, x=-(NAMES - 0.1) / (WIDTH - NAMES - RIGHT))
        axes.tick_params(axis="x", labelbottom=last)
        if last:
            axes.set_xlabel(figure.x_label)
        top = bottom
    return page


def _span(panels: tuple[Ranking, ...]) -> tuple[float, float]:
    """Return the scale that all panels share: from zero, or below where a bar or an interval is."""
    low = min(0.0, *(float(np.nanmin(panel.low)) for panel in panels), *(float(np.nanmin(panel.size)) for panel in panels))
    high = max(*(float(np.nanmax(panel.high)) for panel in panels), *(float(np.nanmax(panel.size)) for panel in panels), 1e-6)
    return low - 0.03 * (high - low) * (low < 0.0), high + 0.04 * (high - low)


def _draw_bars(axes: Axes, panel: Ranking, low: float, high: float) -> None:
    places = np.arange(len(panel.labels))[::-1].astype(float)
    shift = 0.0 if panel.marks is None else -0.12
    axes.barh(places, panel.size, height=0.52, color=COLOURS[5], edgecolor=COLOURS[0], linewidth=0.7, zorder=2)
    axes.hlines(places + shift, panel.low, panel.high, color=INK, linewidth=1.1, zorder=4)
    if panel.marks is not None:
        axes.plot(panel.marks, places - shift, linestyle="", marker=MARKERS[0], markersize=4.2, color=COLOURS[1], zorder=5)
    axes.axvline(0.0, color=GREY, linewidth=0.8, zorder=3)
    axes.set_yticks(places, [wrap(label, 38) for label in panel.labels], fontsize=8.0)
    axes.tick_params(axis="y", length=0)
    axes.grid(axis="y", visible=False)
    axes.set_ylim(-0.6, len(panel.labels) - 0.4)
    axes.set_xlim(low, high)
    plain_ticks(axes, "x", 7)
