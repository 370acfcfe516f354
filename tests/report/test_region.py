"""Between the points computed: interpolation errs on the safe side."""

import numpy as np
import pytest

from sweep.report.curves import Array, Ground, WindowMap
from sweep.report.draw_maps import deepest
from sweep.report.region import FINE, HOLDS, NO_VALUE, interpolate, region


def window(margins: Array, binding: Array) -> WindowMap:
    n, m, count = margins.shape
    ground = Ground(("a", "b"), np.linspace(0.0, 1.0, n), np.linspace(0.0, 1.0, m), (0.5, 0.5), ())
    return WindowMap("w", "", "", "", ground, tuple("xyz"[:count]), margins, binding.astype(np.int64), ())


def test_interpolation_is_exact_for_a_bilinear_field() -> None:
    x, y = np.array([0.0, 0.3, 1.0]), np.array([0.0, 2.0])
    fine_x, fine_y = np.linspace(0.0, 1.0, 7), np.linspace(0.0, 2.0, 5)

    def plane(a: Array, b: Array) -> Array:
        return 2.0 + 3.0 * a[:, None] - b[None, :] + 0.5 * a[:, None] * b[None, :]

    assert np.allclose(plane(fine_x, fine_y), interpolate(x, y, plane(x, y), fine_x, fine_y))


def test_each_place_belongs_to_the_limit_crossed_there() -> None:
    x = np.linspace(0.0, 1.0, 11)[:, None] * np.ones((1, 11))
    margins = np.stack([x - 0.305, 0.705 - x], axis=-1)
    found = region(window(margins, np.where(x < 0.5, 0, 1)))
    assert [0, HOLDS, 1] == [int(found.kind[int(FINE * share), 100]) for share in (0.1, 0.5, 0.9)]
    assert 0.4 == pytest.approx(float((found.kind == HOLDS).mean()), abs=0.01)


def test_beside_a_point_without_value_nothing_is_called_safe() -> None:
    margins = np.ones((5, 5, 2))
    margins[2, 2, 1] = np.nan
    found = region(window(margins, np.zeros((5, 5))))
    inside = (np.abs(found.x - 0.5) < 0.25)[:, None] & (np.abs(found.y - 0.5) < 0.25)[None, :]
    assert (found.kind[inside] == NO_VALUE).all()
    assert (found.kind[~inside] == HOLDS).mean() > 0.99


def test_a_limit_known_to_be_crossed_is_named_beside_a_missing_one() -> None:
    margins = np.ones((3, 3, 2))
    margins[..., 0] = -1.0
    margins[1, 1, 1] = np.nan
    assert (region(window(margins, np.full((3, 3), -1.0))).kind == 0).all()


def test_the_deepest_place_is_the_middle_of_the_larger_part() -> None:
    inside = np.zeros((20, 20), dtype=np.bool_)
    inside[1:4, 1:4] = True
    inside[8:17, 6:15] = True
    assert (12, 10, 5.0) == deepest(inside)
