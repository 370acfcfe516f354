"""Maps to ink: the window with its edge, and contours over its plane."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from sweep.report.curves import ContourMap, Field, Ground, WindowMap, within
from sweep.report.draw import COLOURS, GREY, HATCHES, INK, STYLES, WIDTH, Axes, Figure, outline, plain_ticks, round_levels, sheet, wrap
from sweep.report.region import FINE, HOLDS, NO_VALUE, Region, region
from sweep.report.wording import words

PAPER = "#f1f1f1"  # where some limit does not hold
LABEL = 8.5
HALF = 0.0065  # half a sign's width as a share of the map
ROOM = 0.08  # least share of the map in which a region is named on the map itself


def colour_of(k: int) -> str:
    """Return a limit's colour: after a round of all, the same hatches come with other colours."""
    return COLOURS[(k + k // len(COLOURS)) % len(COLOURS)]


def deepest(inside: NDArray[np.bool_]) -> tuple[int, int, float]:
    """Return the place (i, j) of a region's inside farthest from its outside, and that distance in cells along rows and columns."""
    padded = np.pad(inside, 1)
    steps = np.where(padded, padded.size, 0)
    for turn in (0, 1):
        for k in range(1, padded.shape[turn]):
            line, before = np.moveaxis(steps, turn, 0)[k], np.moveaxis(steps, turn, 0)[k - 1]
            np.minimum(line, before + 1, out=line)
        for k in range(padded.shape[turn] - 2, -1, -1):
            line, after = np.moveaxis(steps, turn, 0)[k], np.moveaxis(steps, turn, 0)[k + 1]
            np.minimum(line, after + 1, out=line)
    i, j = np.unravel_index(int(np.argmax(steps)), steps.shape)
    return int(i) - 1, int(j) - 1, float(steps[i, j])


def _fill(axes: Axes, found: Region, inside: NDArray[np.bool_], colour: str, hatch: str) -> None:
    shown = axes.contourf(found.x, found.y, inside.T.astype(float), levels=[0.5, 1.5], colors=[PAPER], hatches=[hatch], zorder=1)
    shown.set_edgecolor(colour)
    shown.set_linewidth(0.0)


def _regions(axes: Axes, window: WindowMap, found: Region) -> None:
    """Paint the whole map as unsafe, hatch by the limit crossed, then leave plain only what is known to hold."""
    axes.set_facecolor(PAPER)
    for k in range(len(window.limits)):
        if (found.kind == k).any():
            _fill(axes, found, found.kind == k, colour_of(k), HATCHES[k % len(HATCHES)])
    if (found.kind == NO_VALUE).any():
        _fill(axes, found, found.kind == NO_VALUE, GREY, "oo")
    if (found.least >= 0.0).any():
        least = np.where(np.isnan(found.least), -1.0, found.least)
        axes.contourf(found.x, found.y, least.T, levels=[0.0, max(float(least.max()) * 2, 1.0)], colors=["white"], zorder=1.2)


def _clear(ground: Ground, found: Region) -> NDArray[np.bool_]:
    """Return where a text may be centred and stay clear of the set-point, its arrows and their lengths (FINE, FINE)."""
    if ground.set_point is None:
        return np.ones((FINE, FINE), dtype=np.bool_)
    x, y = ((places - at) / np.ptp(places) for places, at in zip((found.x, found.y), ground.set_point, strict=True))
    upright, level = (x > -0.15) & (x < 0.29), (y > -0.04) & (y < 0.09)
    return np.asarray(~(upright[:, None] | level[None, :]))


def _name(axes: Axes, found: Region, kind: int, text: str, clear: NDArray[np.bool_]) -> bool:
    """Write a region's name in it where it is wide enough; say whether it was."""
    inside = found.kind == kind
    i, j, depth = deepest(inside & clear if kind == HOLDS else inside)
    if depth < ROOM * FINE:
        return False
    place = (int(min(max(i, 0.17 * FINE), 0.83 * FINE)), j)
    half = int(HALF * max(map(len, wrap(text, 22).split("\n"))) * FINE)
    sides = np.clip([place[0] - half, place[0], place[0] + half], 0, FINE - 1)
    if not inside[sides, j].all():
        return False
    written = axes.text(
        found.x[place[0]], found.y[place[1]], wrap(text, 22), ha="center", va="center", fontsize=LABEL, zorder=4, linespacing=1.1,
        bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.9, "pad": 2.0},
    )  # fmt: skip
    written.set_fontweight("bold" if kind == HOLDS else "normal")
    return True


def _edge(axes: Axes, window: WindowMap) -> None:
    for piece in window.ground.boundaries:
        k = window.limits.index(piece.limit) if piece.limit in window.limits else len(window.limits)
        axes.plot(piece.x, piece.y, color=colour_of(k), linestyle=STYLES[k % len(STYLES)], linewidth=2.4, zorder=3)


def _crossed_ring(axes: Axes, x: float, y: float, **where: Any) -> None:
    axes.plot([x], [y], marker="o", markersize=9, color="white", markeredgecolor=INK, markeredgewidth=1.6, **where)
    axes.plot([x], [y], marker="+", markersize=9, color=INK, markeredgewidth=1.4, **where)


def mark_set_point(axes: Axes, ground: Ground) -> None:
    """Draw the set-point where it lies in the range mapped."""
    if ground.set_point is not None and within(ground):
        _crossed_ring(axes, *ground.set_point, zorder=6)


def _arrows(axes: Axes, window: WindowMap) -> None:
    """Draw the distances from the set-point to the edge along both axes, each with its length."""
    if window.ground.set_point is None or not within(window.ground):
        return
    point, ends = window.ground.set_point, (axes.get_xlim(), axes.get_ylim())
    for reach in window.reaches:
        low, high = ends[reach.axis]
        tip = list(point)
        tip[reach.axis] = reach.edge if reach.edge is not None else high if reach.up else low
        far = abs(tip[reach.axis] - point[reach.axis]) / (high - low)
        if far > 0.03:
            arrow = {"arrowstyle": "-|>", "color": INK, "linewidth": 1.1, "shrinkA": 6, "shrinkB": 0}
            arrow["linestyle"] = "-" if reach.edge is not None else ":"
            axes.annotate("", xy=(tip[0], tip[1]), xytext=point, arrowprops=arrow, zorder=5)
        _length(axes, reach.axis, reach.up, point, tip, far, reach.label)


def _length(axes: Axes, axis: int, up: bool, point: tuple[float, float], tip: list[float], far: float, label: str) -> None:
    """Write a distance beside its arrow: above a level one, to the right of an upright one; near the set-point where the arrow is short."""
    middle = [(a + b) / 2 for a, b in zip(point, tip, strict=True)]
    short = far < (0.2 if axis == 0 else 0.07)
    if axis == 0:
        shift, ha, va = (0, 5), "center", "bottom"
        if short:
            middle, shift, ha = tip, (4 if up else -4, 5), "left" if up else "right"
    else:
        shift, ha, va = (6, 0), "left", "center"
        if short:
            middle, shift, va = tip, (6, 3 if up else -3), "bottom" if up else "top"
    outline(axes.annotate(label, xy=(middle[0], middle[1]), xytext=shift, textcoords="offset points", ha=ha, va=va, fontsize=LABEL, zorder=8))


def _key(axes: Axes, window: WindowMap, present: list[int], unnamed: bool) -> None:
    """Write beside the map what hatches and lines stand for."""
    top = 0.98
    entries = [(colour_of(k), STYLES[k % len(STYLES)], HATCHES[k % len(HATCHES)], words(window.limits[k])) for k in present]
    others = dict.fromkeys(piece.limit for piece in window.ground.boundaries if piece.limit not in window.limits)
    entries += [(colour_of(len(window.limits)), STYLES[len(window.limits) % len(STYLES)], "oo", words(name)) for name in others]
    if unnamed and not others:
        entries.append((GREY, "none", "oo", "no value: a point nearby could not be judged"))
    axes.text(1.04, top, "Edge and beyond, by limit", transform=axes.transAxes, fontsize=LABEL, va="top", fontweight="bold")
    top -= 0.08
    for colour, line, hatch, text in entries:
        written = wrap(text, 20)
        patch = axes.fill([1.04, 1.13, 1.13, 1.04], [top, top, top - 0.055, top - 0.055], facecolor=PAPER, edgecolor=colour, hatch=hatch, linewidth=0)
        patch[0].set(transform=axes.transAxes, clip_on=False)
        if line != "none":
            axes.plot([1.04, 1.13], [top, top], color=colour, linestyle=line, linewidth=2.4, transform=axes.transAxes, clip_on=False)
        axes.text(1.15, top - 0.0275, written, transform=axes.transAxes, fontsize=LABEL, va="center", linespacing=1.1)
        top -= 0.09 + 0.022 * written.count("\n")
    plain = axes.fill([1.04, 1.13, 1.13, 1.04], [top, top, top - 0.055, top - 0.055], facecolor="white", edgecolor=GREY, linewidth=0.8)
    plain[0].set(transform=axes.transAxes, clip_on=False)
    axes.text(1.15, top - 0.0275, "every limit holds", transform=axes.transAxes, fontsize=LABEL, va="center")
    top -= 0.09
    if within(window.ground):
        _crossed_ring(axes, 1.085, top - 0.03, transform=axes.transAxes, clip_on=False)
        axes.text(1.15, top - 0.03, "set-point", transform=axes.transAxes, fontsize=LABEL, va="center")


def frame(axes: Axes, ground: Ground) -> None:
    """Set the axes' range, labels and ticks."""
    axes.set_xlim(ground.x.min(), ground.x.max())
    axes.set_ylim(ground.y.min(), ground.y.max())
    axes.set_xlabel(wrap(ground.labels[0], 60))
    axes.set_ylabel(wrap(ground.labels[1], 40))
    axes.grid(False)
    plain_ticks(axes)


def draw_window(window: WindowMap) -> Figure:
    """Return the map of the operating window."""
    height = 5.0
    figure = sheet(height)
    axes = figure.add_axes((0.78 / WIDTH, 0.58 / height, 4.6 / WIDTH, 4.25 / height))
    found = region(window)
    frame(axes, window.ground)
    _regions(axes, window, found)
    _edge(axes, window)
    clear = _clear(window.ground, found)
    edged = {piece.limit for piece in window.ground.boundaries}
    present = [k for k, limit in enumerate(window.limits) if (found.kind == k).any() or limit in edged]
    for k in present:
        _name(axes, found, k, words(window.limits[k]), clear)
    if (found.kind == HOLDS).any():
        _name(axes, found, HOLDS, "every limit holds", clear)
    mark_set_point(axes, window.ground)
    _arrows(axes, window)
    _key(axes, window, present, bool((found.kind == NO_VALUE).any()))
    axes.set_xlim(window.ground.x.min(), window.ground.x.max())
    axes.set_ylim(window.ground.y.min(), window.ground.y.max())
    return figure


def _contour(axes: Axes, ground: Ground, field: Field) -> None:
    """Draw one field's labelled contours, the places without value hatched, the window's edge and the set-point over them."""
    values = field.values
    finite = values[np.isfinite(values)]
    if np.isnan(values).any():
        _absent(axes, ground, field)
    whole = np.isfinite(values)
    cells = whole[1:, 1:] & whole[:-1, 1:] & whole[1:, :-1] & whole[:-1, :-1]
    if float(np.ptp(finite)) <= 1e-9 * max(abs(float(finite.max())), 1e-300):
        _remark(axes, f"the same everywhere: {finite[0]:.4g} {field.unit}")
    elif not cells.any():
        _remark(axes, "too few values for contours")
    else:
        levels = round_levels(float(finite.min()), float(finite.max()))
        lines = axes.contour(ground.x, ground.y, np.ma.masked_invalid(values.T), levels=levels, colors=[COLOURS[0]], linewidths=1.3, zorder=3)
        _thin(axes, axes.clabel(lines, fmt=lambda value: f"{value:.4g}", fontsize=LABEL, inline=False, colors=[INK]))


def _thin(axes: Axes, labels: list[Any]) -> None:
    """Leave of the contours' labels those that stand clear of the frame and of each other."""
    (left, right), (low, high) = axes.get_xlim(), axes.get_ylim()
    kept: list[tuple[float, float]] = []
    for text in labels:
        outline(text)
        x, y = ((text.get_position()[0] - left) / (right - left), (text.get_position()[1] - low) / (high - low))
        clear = 0.04 < x < 0.96 and 0.04 < y < 0.96 and all(abs(x - a) > 0.12 or abs(y - b) > 0.07 for a, b in kept)
        text.set_visible(clear)
        kept += [(x, y)] if clear else []


def _remark(axes: Axes, text: str) -> None:
    outline(axes.text(0.5, 0.05, text, ha="center", transform=axes.transAxes, fontsize=LABEL, zorder=4))


def _absent(axes: Axes, ground: Ground, field: Field) -> None:
    missing = np.isnan(field.values).astype(float)
    shown = axes.contourf(ground.x, ground.y, missing.T, levels=[1e-9, 1.5], colors=[PAPER], hatches=["xxx"], zorder=1)
    shown.set_edgecolor("#9a9a9a")
    shown.set_linewidth(0.0)
    i, j, _ = deepest(missing > 0)
    inset = [min(max((at - ends.min()) / np.ptp(ends), 0.16), 0.84) for at, ends in ((ground.x[i], ground.x), (ground.y[j], ground.y))]
    outline(axes.text(inset[0], inset[1], wrap(field.absent, 12), fontsize=LABEL, ha="center", va="center", zorder=4, transform=axes.transAxes))


def draw_contours(contours: ContourMap) -> Figure:
    """Return the contour maps side by side."""
    count, height = len(contours.fields), 3.95
    figure = sheet(height)
    width = 2.95 if count == 2 else 4.6
    for k, field in enumerate(contours.fields):
        axes = figure.add_axes(((0.78 + k * (width + 0.5)) / WIDTH, 0.58 / height, width / WIDTH, (height - 1.1) / height))
        frame(axes, contours.ground)
        axes.set_title(f"{field.title} ({field.unit})", fontsize=9.5, loc="left")
        if k:
            axes.set_ylabel("")
            axes.tick_params(labelleft=False)
        _contour(axes, contours.ground, field)
        for piece in contours.ground.boundaries:
            axes.plot(piece.x, piece.y, color=GREY, linewidth=3.2, alpha=0.75, zorder=2, solid_capstyle="butt")
        mark_set_point(axes, contours.ground)
    return figure
