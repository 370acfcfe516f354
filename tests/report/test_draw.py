"""Ink: what cannot be seen from the numbers."""

import xml.etree.ElementTree as ElementTree
from pathlib import Path

import matplotlib
import numpy as np
import pandas as pd
import pytest

from sweep.report import draw, draw_curves, draw_maps
from sweep.report.curves import ContourMap, Curves, Field, Ground, Level, Line, Moment, Panel


def one_panel(y: np.ndarray, moments: tuple[Moment, ...] = (), levels: tuple[Level, ...] = ()) -> Curves:
    x = np.linspace(0.0, 6.0, y.size)
    return Curves("c", "", "", "", "time (h)", x, (Panel("Temperature (°C)", (Line("contents", y),), levels),), moments, pd.DataFrame())


def ink(curves: Curves) -> draw.Ink:
    with draw.style("c"):
        return draw.finish(draw_curves.draw(curves))


def test_labels_are_moved_apart_and_stay_in_order() -> None:
    places, sizes = np.array([1.0, 1.05, 1.02, 3.0]), np.full(4, 0.3)
    found = draw.spread(places, sizes, 0.0, 4.0)
    ranked = found[np.argsort(places)]
    assert (np.diff(ranked) >= 0.3 - 1e-6).all()
    assert found[3] == 3.0


def test_labels_above_the_panels_never_overlap_nor_leave_the_sheet() -> None:
    moments = tuple(Moment("a rather long label of a moment", place) for place in (0.0, 0.1, 4.4, 4.5))
    places = np.array([moment.x for moment in moments])
    rows, lefts = draw_curves._rows(moments, places, 4.57)
    assert len(set(rows[:2])) == 2 == len(set(rows[2:]))
    assert (lefts + 0.066 * 31 + 0.1 <= 4.57 + draw_curves.RIGHT).all()


def test_the_users_settings_do_not_reach_the_figures() -> None:
    plain = ink(one_panel(np.linspace(40.0, 60.0, 50)))
    with matplotlib.rc_context({"lines.linewidth": 9.0, "font.size": 30.0, "svg.hashsalt": "other"}):
        assert plain == ink(one_panel(np.linspace(40.0, 60.0, 50)))


@pytest.mark.parametrize("y", [np.full(50, 45.0), np.array([45.0, np.nan, np.nan]), np.zeros(10)])
def test_a_level_curve_and_gaps_are_drawn(y: np.ndarray) -> None:
    assert ink(one_panel(y, (Moment("end", 6.0, 45.0),), (Level("limit", 45.0),))).png.startswith(b"\x89PNG")


def test_a_held_temperature_is_drawn_level_though_its_last_digit_moves() -> None:
    axes = draw_curves.draw(one_panel(np.array([50.0, 50.0, np.nextafter(50.0, 51.0), 50.0]))).axes[0]
    low, high = axes.get_ylim()
    assert 2.0 <= high - low <= 2.5
    assert 50.0 == pytest.approx((low + high) / 2)


def test_text_of_the_user_is_neither_mathematics_nor_markup_nor_missing_glyphs_an_error() -> None:
    svg = ink(one_panel(np.arange(5.0), (Moment("$\\frac{$ <b> --> & 反応 🜁", 1.0),), (Level("$x^", 2.0),))).svg
    assert ElementTree.fromstring(svg).tag.endswith("svg")


@pytest.mark.parametrize("values", [np.full((4, 4), 5.0), np.where(np.eye(4) > 0, np.nan, 2.0 + np.arange(4.0)), np.full((4, 4), 5.0) + 1e-12])
def test_a_constant_or_holed_field_is_drawn(values: np.ndarray) -> None:
    ground = Ground(("a", "b"), np.arange(4.0), np.arange(4.0), None, ())
    with draw.style("f"):
        figure = draw_maps.draw_contours(ContourMap("f", "", "", "", ground, (Field("time", "h", values, "not reached"),)))
        assert draw.finish(figure).svg


def test_no_other_module_imports_matplotlib() -> None:
    folder = Path(draw.__file__).parent
    importers = {path.name for path in folder.glob("*.py") if "import matplotlib" in path.read_text() or "from matplotlib" in path.read_text()}
    assert {"draw.py"} == importers
