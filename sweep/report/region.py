"""The window between the points computed: margins interpolated on a fine raster, on the safe side where a point has none."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sweep.report.curves import Array, WindowMap

FINE = 361  # cells along each axis: below a printed line's width
NO_VALUE, HOLDS = -2, -1


@dataclass(frozen=True)
class Region:
    """Raster of a map: x (FINE,), y (FINE,).

    `least` (FINE, FINE) is the least margin, NaN where a neighbour has none; `kind` the limit crossed there, or HOLDS, or NO_VALUE.
    """

    x: Array
    y: Array
    least: Array
    kind: NDArray[np.int64]


def _between(nodes: Array, fine: Array) -> tuple[NDArray[np.intp], Array]:
    """Return the node below each fine place and the share of the way to the next, nodes rising or falling."""
    place = np.interp(fine, np.sort(nodes), np.arange(len(nodes), dtype=np.float64))
    below = np.minimum(place.astype(np.intp), len(nodes) - 2)
    return below, place - below


def interpolate(x: Array, y: Array, values: Array, fine_x: Array, fine_y: Array) -> Array:
    """Return values (n, m, ...) at fine places, bilinear, (X, Y, ...); NaN wherever one of the four neighbours is NaN."""
    i, s = _between(x, fine_x)
    j, t = _between(y, fine_y)
    extra = (1,) * (values.ndim - 2)
    s, t = s.reshape(-1, 1, *extra), t.reshape(1, -1, *extra)
    low = values[i][:, j] * (1 - t) + values[i][:, j + 1] * t
    high = values[i + 1][:, j] * (1 - t) + values[i + 1][:, j + 1] * t
    return np.asarray(low * (1 - s) + high * s, dtype=np.float64)


def region(window: WindowMap) -> Region:
    """Return what each fine place of the map is: safe, beyond a limit, or without value.

    Of the limits crossed it is the one that binds at most of the points around.
    """
    ground = window.ground
    x, y = (np.linspace(values.min(), values.max(), FINE) for values in (ground.x, ground.y))
    fine = interpolate(ground.x, ground.y, window.margins, x, y)
    least = fine.min(axis=-1)
    named = (window.binding[..., None] == np.arange(len(window.limits))).astype(np.float64)
    weights = interpolate(ground.x, ground.y, named, x, y)
    crossed = fine < 0.0
    binding = np.argmax(np.where(crossed, weights, -1.0), axis=-1)
    unnamed = np.take_along_axis(weights, binding[..., None], axis=-1)[..., 0] == 0.0
    kind = np.where(unnamed, np.argmin(np.where(crossed, fine, np.inf), axis=-1), binding)
    kind = np.where(np.isnan(least) & ~crossed.any(axis=-1), NO_VALUE, np.where(least >= 0.0, HOLDS, kind))
    return Region(x, y, least, kind.astype(np.int64))
