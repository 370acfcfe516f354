"""Curves to ink: stacked panels that share their x; every line labelled where it ends, outside the axes."""

from typing import Any

import numpy as np

from sweep.report.curves import Array, Curves, Moment, Panel
from sweep.report.draw import COLOURS, GREY, INK, LIMIT, MARKERS, STYLES, WIDTH, Axes, Figure, outline, plain_ticks, sheet, spread, time_ticks, wrap

LEFT, RIGHT, BOTTOM, GAP = 0.78, 2.05, 0.55, 0.14  # inches around and between the panels
LINE = 0.15  # inches of one line of label text
ROW = 0.18  # inches of one row of moments
LABEL = 8.5  # points
STEADY = 2.0  # K: the least that a panel of temperatures spans


def _limits(panel: Panel) -> tuple[float, float]:
    """Return the y range: all lines and levels, with air; per cent from zero to at least a hundred where near it."""
    values = np.concatenate([line.y[np.isfinite(line.y)] for line in panel.lines] + [np.array([level.value for level in panel.levels])])
    low, high = float(values.min()), float(values.max())
    if panel.label.endswith("(%)") and low > 50.0:
        return low - 0.07 * ((high - low) or 1.0), high + 0.07 * ((high - low) or 1.0)
    if panel.label.endswith("(%)") or panel.label.endswith("(kW)"):
        low = min(low, 0.0)
    if panel.label.endswith("(°C)") and high - low < STEADY:  # what is held is drawn level: its rounding is no excursion
        low, high = (low + high - STEADY) / 2, (low + high + STEADY) / 2
    air = 0.07 * ((high - low) or abs(high) or 1.0)
    return (low - air if low < 0.0 or not panel.label.endswith(("(%)", "(kW)")) else 0.0), high + air if panel.top is None else panel.top


def _draw_lines(axes: Axes, x: Array, panel: Panel, high: float) -> list[tuple[float, str, str]]:
    """Draw the lines and levels; return the labels to come: place, text, colour. A line that ends within the axes is labelled there."""
    labels = []
    for k, line in enumerate(panel.lines):
        colour, last = COLOURS[k % len(COLOURS)], np.flatnonzero(np.isfinite(line.y))
        if last.size:
            marks: dict[str, Any] = {"marker": MARKERS[k % len(MARKERS)], "markevery": 0.13, "markersize": 3.6}
            axes.plot(x, line.y, color=colour, linestyle=STYLES[k % len(STYLES)], zorder=3, **marks)
            if x[last[-1]] < 0.7 * high:
                _label_within(axes, x[last], line.y[last], line.name, colour)
            else:
                labels.append((float(line.y[last[-1]]), line.name, colour))
    for k, level in enumerate(panel.levels):
        colour, dashes = (LIMIT, (0, (9, 3))) if level.limit else (GREY, STYLES[1 + k % (len(STYLES) - 1)])
        axes.axhline(level.value, color=colour, linestyle=dashes, linewidth=1.2, zorder=2)
        labels.append((level.value, level.name, colour))
    return labels


def _label_within(axes: Axes, x: Array, y: Array, name: str, colour: str) -> None:
    middle = x.size // 2
    place = (float(x[middle]), float(y[middle]))
    beside: dict[str, Any] = {"textcoords": "offset points", "ha": "left", "va": "top"}
    outline(axes.annotate(wrap(name, 27), place, (8, -8), fontsize=LABEL, color=colour, zorder=4, **beside))


def _label(axes: Axes, labels: list[tuple[float, str, str]], height: float) -> None:
    """Write the labels to the right of the axes, moved apart where they would overlap, each tied to its line."""
    low, high = axes.get_ylim()
    texts = [wrap(text, 27) for _, text, _ in labels]
    sizes = np.array([LINE * (text.count("\n") + 1) + 0.03 for text in texts])
    places = np.clip(np.array([(value - low) / (high - low) * height for value, _, _ in labels]), 0.0, height)
    centres = spread(places, sizes, -0.05, height + 0.05)
    inch = 1.0 / (WIDTH - LEFT - RIGHT)
    for (_, _, colour), text, place, centre in zip(labels, texts, places, centres, strict=True):
        tie = [1.0, 1.0 + 0.05 * inch, 1.0 + 0.17 * inch, 1.0 + 0.22 * inch]
        axes.plot(tie, np.array([place, place, centre, centre]) / height, color=colour, linewidth=0.9, transform=axes.transAxes, clip_on=False)
        axes.text(
            1.0 + 0.26 * inch, centre / height, text, color=INK if colour == GREY else colour, fontsize=LABEL, va="center", ha="left",
            transform=axes.transAxes, linespacing=1.1,
        )  # fmt: skip


def _rows(moments: tuple[Moment, ...], places: Array, width: float) -> tuple[list[int], Array]:
    """Return for each moment the row of its label above the panels and the label's left end (inches).

    A label stands to the right of its line like a flag, the rightmost lowest, so that no line runs through another's label.
    """
    lengths = np.array([0.07 * len(moment.name) + 0.1 for moment in moments])
    lefts = np.maximum(np.minimum(places - 0.03, width + RIGHT - 0.08 - lengths), 0.08 - LEFT)
    taken: list[list[tuple[float, float]]] = []
    rows = [0] * len(moments)
    for k in np.argsort(-places, kind="stable"):
        left, right = min(lefts[k], places[k]), lefts[k] + lengths[k]
        row = 1 + max((r for r, spans in enumerate(taken) if any(right > a and left < b for a, b in spans)), default=-1)
        if row == len(taken):
            taken.append([])
        taken[row].append((left, right))
        rows[k] = row
    return rows, lefts


def _mark(panels: list[Axes], curves: Curves, height: float, places: Array) -> None:
    """Draw each moment as a thin line through all panels, its label above the top one."""
    width, top = WIDTH - LEFT - RIGHT, panels[0]
    rows, lefts = _rows(curves.moments, places, width)
    for moment, row, left, place in zip(curves.moments, rows, lefts, places / width, strict=True):
        for axes in panels:
            axes.axvline(moment.x, color=INK, linewidth=0.8, linestyle=(0, (1.5, 2)), zorder=1.5)
        base = 0.08 + row * ROW
        if moment.y is not None:
            ring: dict[str, Any] = {"marker": "o", "markersize": 7, "markerfacecolor": "white", "markeredgecolor": INK, "markeredgewidth": 1.4}
            top.plot([moment.x], [moment.y], zorder=5, clip_on=False, **ring)
        top.plot([place, place], [1.0, 1.0 + (base + 0.12) / height], color=INK, linewidth=0.7, transform=top.transAxes, clip_on=False)
        top.text((left + 0.07) / width, 1.0 + base / height, moment.name, fontsize=LABEL, ha="left", va="bottom", transform=top.transAxes)


def _span(curves: Curves) -> tuple[float, float]:
    """Return the x range: the curves and the moments, from zero where the curves start near it."""
    x = curves.x[curves.x > 0] if curves.logarithmic else curves.x
    low, high = float(x.min()), max(float(x.max()), *(moment.x for moment in curves.moments), 1e-12)
    if curves.logarithmic:
        return low, high * 1.35
    return (0.0 if 0.0 < low < 0.1 * high else low), high if high > low else low + 1.0


def _places(curves: Curves, low: float, high: float) -> Array:
    """Return where the moments stand along the axis, in inches from its left end."""
    at = np.array([moment.x for moment in curves.moments], dtype=np.float64)
    if curves.logarithmic:
        at, low, high = np.log(np.maximum(at, low)), float(np.log(low)), float(np.log(high))
    return np.asarray((at - low) / (high - low) * (WIDTH - LEFT - RIGHT))


def draw(curves: Curves) -> Figure:
    """Return the figure of stacked panels."""
    count = len(curves.panels)
    height = {1: 3.6, 2: 1.9, 3: 1.6}.get(count, 1.45)
    low, high = _span(curves)
    places = _places(curves, low, high)
    rows = _rows(curves.moments, places, WIDTH - LEFT - RIGHT)[0]
    top = 0.14 + (0.06 + (max(rows) + 1) * ROW if rows else 0.0)
    total = top + BOTTOM + count * height + (count - 1) * GAP
    figure = sheet(total)
    figure.subplots_adjust(left=LEFT / WIDTH, right=1 - RIGHT / WIDTH, top=1 - top / total, bottom=BOTTOM / total, hspace=GAP / height)
    panels = list(figure.subplots(count, 1, sharex=True, squeeze=False)[:, 0])
    for axes, panel in zip(panels, curves.panels, strict=True):
        _draw_panel(axes, curves, panel, height, high)
    _finish_x(panels[-1], curves, low, high)
    _mark(panels, curves, height, places)
    figure.align_ylabels(panels)
    return figure


def _draw_panel(axes: Axes, curves: Curves, panel: Panel, height: float, high: float) -> None:
    if curves.logarithmic:
        axes.set_xscale("log")
    labels = _draw_lines(axes, curves.x, panel, high)
    axes.set_ylim(*_limits(panel))
    axes.set_ylabel(panel.label)
    plain_ticks(axes, "y", 5)
    _label(axes, labels, height)


def _finish_x(axes: Axes, curves: Curves, low: float, high: float) -> None:
    axes.set_xlim(low, high)
    axes.set_xlabel(curves.x_label)
    if curves.logarithmic:
        time_ticks(axes)
    else:
        plain_ticks(axes, "x", 8)
