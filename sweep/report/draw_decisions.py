"""Ranges, front and probability map to ink."""

import numpy as np

from sweep.report.curves import ChanceField, Front, RangeBar, RangeBars
from sweep.report.draw import COLOURS, GREY, INK, LIMIT, WIDTH, Axes, Figure, outline, plain_ticks, sheet, wrap
from sweep.report.draw_maps import frame, mark_set_point

SHADES = ("#ffffff", "#dce9f3", "#b3d0e6", "#86b4d6", "#5796c4")  # light where limits hardly hold, dark where they surely do
ROW = 0.62  # inches: a variable's row
LABEL = 8.5


def draw_chance(field: ChanceField) -> Figure:
    """Return the map of the probability that all limits hold."""
    height = 5.0
    figure = sheet(height)
    axes = figure.add_axes((0.78 / WIDTH, 0.58 / height, 4.6 / WIDTH, 4.25 / height))
    frame(axes, field.ground)
    edges = [-1.0, *field.levels, 101.0]
    axes.contourf(field.ground.x, field.ground.y, field.values.T, levels=edges, colors=list(SHADES), zorder=1)
    reached = [level for level in field.levels if field.values.min() < level <= field.values.max()]
    if reached:
        lines = axes.contour(field.ground.x, field.ground.y, field.values.T, levels=reached, colors=[INK], linewidths=1.1, zorder=3)
        for text in axes.clabel(lines, fmt=lambda value: f"{value:.3g} %", fontsize=LABEL, colors=[INK]):
            outline(text)
    for piece in field.ground.boundaries:
        axes.plot(piece.x, piece.y, color=LIMIT, linestyle=(0, (5, 1.6)), linewidth=2.4, zorder=4)
    mark_set_point(axes, field.ground)
    _key(axes, field)
    return figure


def _key(axes: Axes, field: ChanceField) -> None:
    """Write beside the map what shades and lines stand for."""
    top = 0.98
    axes.text(1.04, top, "All limits hold in", transform=axes.transAxes, fontsize=LABEL, va="top", fontweight="bold")
    top -= 0.08
    names = [f"{field.levels[-1]:.3g} % or more", *(f"{low:.3g} to {high:.3g} %" for low, high in
             zip(field.levels[-2::-1], field.levels[:0:-1], strict=True)), f"less than {field.levels[0]:.3g} %"]  # fmt: skip
    for shade, text in zip(SHADES[::-1], names, strict=True):
        patch = axes.fill([1.04, 1.13, 1.13, 1.04], [top, top, top - 0.055, top - 0.055], facecolor=shade, edgecolor=GREY, linewidth=0.8)
        patch[0].set(transform=axes.transAxes, clip_on=False)
        axes.text(1.15, top - 0.0275, text, transform=axes.transAxes, fontsize=LABEL, va="center")
        top -= 0.08
    axes.plot([1.04, 1.13], [top - 0.03] * 2, color=LIMIT, linestyle=(0, (5, 1.6)), linewidth=2.4, transform=axes.transAxes, clip_on=False)
    axes.text(1.15, top - 0.03, "nominal edge", transform=axes.transAxes, fontsize=LABEL, va="center")


def draw_bars(figure: RangeBars) -> Figure:
    """Return the ranges, a bar a variable."""
    height = 0.55 + ROW * len(figure.rows)
    page = sheet(height)
    axes = page.add_axes((1.9 / WIDTH, 0.1 / height, (WIDTH - 2.1) / WIDTH, (height - 0.2) / height))
    axes.set_xlim(-0.01, 1.01)
    axes.set_ylim(-0.75, len(figure.rows) - 0.4)
    axes.axis("off")
    for k, row in enumerate(figure.rows):
        _bar(axes, len(figure.rows) - 1 - k, row)
    return page


def _bar(axes: Axes, y: float, row: RangeBar) -> None:
    axes.text(-0.03, y, wrap(row.label, 24), ha="right", va="center", fontsize=9)
    axes.plot([0.0, 1.0], [y, y], color=GREY, linewidth=1.0, zorder=1)
    for x, text, side in ((0.0, row.studied[0], "left"), (1.0, row.studied[1], "right")):
        axes.plot([x, x], [y - 0.1, y + 0.1], color=GREY, linewidth=1.0, zorder=1)
        axes.text(x, y - 0.27, text, ha=side, va="top", fontsize=7.5, color=GREY)
    if row.alone is not None:
        axes.fill_between(row.alone, y - 0.2, y + 0.2, facecolor="none", edgecolor=COLOURS[1], linewidth=1.1, zorder=2)
    low, high = row.acceptable
    axes.fill_between([low, high], y - 0.13, y + 0.13, color=COLOURS[0], alpha=0.55, linewidth=0, zorder=3)
    if row.normal is not None:
        axes.fill_between(np.clip(row.normal, 0.0, 1.0), y - 0.06, y + 0.06, color=INK, linewidth=0, zorder=4)
    axes.plot([row.set_point] * 2, [y - 0.2, y + 0.2], color=INK, linewidth=1.6, zorder=5)
    middle, narrow = 0.5 * (low + high), high - low < 0.3
    if narrow:
        at = min(max(middle, 0.14), 0.86)
        outline(axes.text(at, y + 0.22, f"{row.ends[0]} to {row.ends[1]}", ha="center", va="bottom", fontsize=LABEL, zorder=6))
    else:
        for x, text, side in ((low, row.ends[0], "left"), (high, row.ends[1], "right")):
            outline(axes.text(x, y + 0.22, text, ha=side, va="bottom", fontsize=LABEL, zorder=6))


def draw_front(front: Front) -> Figure:
    """Return the settings of the front over both objectives."""
    height = 3.6
    figure = sheet(height)
    axes = figure.add_axes((0.9 / WIDTH, 0.6 / height, 5.6 / WIDTH, (height - 0.8) / height))
    axes.plot(front.x, front.y, color=COLOURS[0], marker="o", markersize=4.5, linewidth=0.9, linestyle=(0, (1.4, 1.3)), zorder=3)
    if front.set_point is not None:
        axes.plot(*([value] for value in front.set_point), marker="+", markersize=11, markeredgewidth=2.0, color=INK, linestyle="none", zorder=4)
        said = "set-point" if front.acceptable else "set-point (not every limit holds)"
        outline(axes.annotate(said, front.set_point, xytext=(7, 6), textcoords="offset points", fontsize=LABEL))
    axes.margins(0.08)
    axes.set_xlabel(wrap(front.labels[0], 60))
    axes.set_ylabel(wrap(front.labels[1], 40))
    plain_ticks(axes)
    return figure
