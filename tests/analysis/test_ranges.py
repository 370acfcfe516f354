"""Acceptable ranges: boxes of known largest volume, what corners miss, a set-point that fails, ends in the study's units, and draws."""

from dataclasses import replace
from functools import partial

import numpy as np
import pytest
from scipy.special import ndtri

import sweep
from sweep.analysis.ranges import assess_ranges
from sweep.analysis.ranges.box import Box, empty_boxes
from sweep.analysis.ranges.hunt import hunt
from sweep.analysis.ranges.search import Effort, Search
from sweep.base.seeds import stream
from sweep.chance import Judged
from sweep.plan.sides import inward, sides_of
from sweep.plant import limits, margins
from sweep.study import read_text
from sweep.study.model import Tolerance
from tests.analysis.made_up_space import rows, space
from tests.texts import SMALL

SLACK = 0.025  # of a width: what rounding inwards and the spare margin take at either end


def found(size, *functions, at=0.5, extra="[ranges]", **made):
    study = space(size, extra, at=at, limits=len(functions), **made)
    return assess_ranges(study, rows(study, *functions))


def ends(one):
    return np.array([(line["acceptable"]["low"], line["acceptable"]["high"]) for line in one.summary()["variables"]])


def lies_just_within(one, low, high):
    """The box is inside the largest one, and each end within what rounding takes."""
    box, low, high = ends(one), np.asarray(low, dtype=float), np.asarray(high, dtype=float)
    width = high - low
    return bool(np.all(box[:, 0] >= low - 1e-9) and np.all(box[:, 1] <= high + 1e-9)
                and np.all(box[:, 0] <= low + SLACK * width) and np.all(box[:, 1] >= high - SLACK * width))  # fmt: skip


def ball(x, z):
    return 0.16 - ((x - 0.5) ** 2).sum(axis=1)


@pytest.mark.parametrize("size", [1, 2, 3, 4])
def test_largest_box_in_a_ball_is_its_cube(size):
    half = 0.4 / np.sqrt(size)
    assert lies_just_within(found(size, ball), np.full(size, 0.5 - half), np.full(size, 0.5 + half))


@pytest.mark.parametrize("size", [1, 2, 3, 4])
def test_largest_box_under_a_plane_shares_it_evenly(size):
    """x0 + ... <= 0.9 from zero up: the product of the sides is largest where each is 0.9 / D."""
    one = found(size, lambda x, z: 0.9 - x.sum(axis=1), at=0.05)
    assert lies_just_within(one, np.zeros(size), np.full(size, 0.9 / size)) or 0.94 * (0.9 / size) ** size <= one.summary()["share_of_space"]
    assert (ends(one)[:, 1].sum() <= 0.9) and np.all(ends(one)[:, 0] == 0.0)


def test_weighted_plane():
    """2 x0 + x1 <= 0.8: sides 0.2 and 0.4."""
    assert lies_just_within(found(2, lambda x, z: 0.8 - 2.0 * x[:, 0] - x[:, 1], at=0.05), [0.0, 0.0], [0.2, 0.4])


def test_two_limits_that_meet():
    """x0 <= 0.7 and x0 x1 <= 0.35: the box up to (0.7, 0.5)."""
    one = found(2, lambda x, z: 0.7 - x[:, 0], lambda x, z: 0.35 - x[:, 0] * x[:, 1], at=0.3)
    assert 0.35 * 0.95 <= one.summary()["share_of_space"] <= 0.35


def test_of_two_arms_the_larger_is_taken():
    """x0 <= 0.3 or x1 <= 0.4: an L, of whose two boxes the one of area 0.4 is the larger."""
    assert lies_just_within(found(2, lambda x, z: np.maximum(0.3 - x[:, 0], 0.4 - x[:, 1]), at=0.1), [0.0, 0.0], [1.0, 0.4])


@pytest.mark.parametrize("size", [2, 3])
def test_island_that_corners_miss(size):
    """A failing ball of radius 0.05 in the open: the box ends before it on the side that leaves more room."""
    centre = np.array([0.8, 0.7, 0.5])[:size]
    one = found(size, lambda x, z: np.sqrt(((x - centre) ** 2).sum(axis=1)) - 0.05, at=0.3)
    assert lies_just_within(one, np.zeros(size), np.array([0.75, 1.0, 1.0])[:size])


def test_sliver_that_corners_miss():
    """A failing band 0.008 wide across x0: thinner than the grid that the space is looked at with."""
    one = found(2, lambda x, z: np.abs(x[:, 0] - 0.7) - 0.004, at=0.3)
    assert lies_just_within(one, [0.0, 0.0], [0.696, 1.0])


def test_answer_without_slope():
    """Limits that only hold or fail, and a corner where points have no answer at all."""
    one = found(2, lambda x, z: np.where(x[:, 0] + x[:, 1] > 1.2, np.nan, 1.0), at=0.2)
    assert np.all(ends(one)[:, 1].sum() <= 1.2)
    assert 0.30 <= one.summary()["share_of_space"] <= 0.36


def test_hunt_finds_what_lies_inside_alone():
    """A failing dip of radius 0.02 far from corners and faces is found downhill, and said with its place."""

    def judge(points):
        value = (np.sqrt(((points - [0.62, 0.37]) ** 2).sum(axis=1)) - 0.02)[:, None]
        return Judged(value, value, (value[:, 0] >= 0.0).astype(float), np.zeros(len(points), dtype=np.int64))

    seen = hunt(judge, Box(np.zeros(2), np.ones(2)), 64, stream(1, "hunt"))
    assert len(seen.failing)
    assert pytest.approx([0.62, 0.37], abs=0.02) == seen.failing[0].tolist()
    assert {"corners": 4, "faces": 64, "inside": 64} == {name: seen.counts[name] for name in ("corners", "faces", "inside")}


def test_empty_boxes_against_brute_force():
    """The largest rectangle around a point that holds none of 12 others, among all whose ends lie at them."""
    for seed in range(5):
        points = np.random.default_rng(seed).random((12, 2))
        centre = np.array([0.5, 0.5])
        best = 0.0
        for a in (0.0, *points[points[:, 0] < 0.5, 0]):
            for b in (1.0, *points[points[:, 0] > 0.5, 0]):
                between = points[(points[:, 0] > a) & (points[:, 0] < b)]
                low = max([0.0, *between[between[:, 1] < 0.5, 1]])
                high = min([1.0, *between[between[:, 1] > 0.5, 1]])
                best = max(best, (b - a) * (high - low))
        (box,) = empty_boxes(Box(np.zeros(2), np.ones(2)), Box(centre, centre), points, 1)
        assert not box.inside(points).any()
        assert pytest.approx(best, rel=1e-6) == box.volume


def test_set_point_that_fails_has_no_ranges():
    one = found(2, lambda x, z: x[:, 0] - 0.6, lambda x, z: np.ones(len(x)))
    block = one.summary()
    assert "the set-point itself does not hold fraction_A; there is no range around it to write down" == block["reason"]
    assert [None, None] == [line["acceptable"] for line in block["variables"]]
    assert (None, None, []) == (block["share_of_space"], block["smallest"], block["cautions"])
    assert ["ranges"] == list(one.tables())


def test_set_point_outside_its_range_has_no_ranges():
    with_warning = space(1, "[ranges]", at=1.5)
    block = assess_ranges(with_warning, rows(with_warning, lambda x, z: np.ones(len(x)))).summary()
    assert "outside the range of x0" in block["reason"]


def test_set_point_on_the_edge_must_be_held():
    """x0 <= 0.5 at x0 = 0.5, where 0.5 - x1 keeps x1 in play: no room above, and that is what is said."""
    one = found(2, lambda x, z: 0.5 - x[:, 0])
    assert 0.5 == ends(one)[0, 1]
    assert one.summary()["variables"][0]["acceptable"]["low"] == 0.0


def test_ranges_alone_are_warned_of_where_their_box_fails():
    block = found(2, ball).summary()
    assert [(0.11, 0.89)] * 2 == [tuple(round(x, 2) for x in (line["alone"]["low"], line["alone"]["high"])) for line in block["variables"]]
    assert not block["alone_together"]["holds"]
    assert block["alone_together"]["smallest"]["margin"] == pytest.approx(0.16 - 2 * 0.39**2, abs=0.01)
    block = found(2, lambda x, z: 0.4 - np.abs(x - 0.5).max(axis=1)).summary()
    assert block["alone_together"]["holds"]


def test_smallest_margin_is_in_the_limit_s_own_unit_and_place():
    block = found(2, lambda x, z: 1.0 - x[:, 0], lambda x, z: 100.0 * (1.5 - x[:, 0] - x[:, 1]), at=0.1).summary()
    low = block["smallest"]
    at = [low["at"][name]["value"] for name in ("x0", "x1")]
    assert pytest.approx({"fraction_A": 1.0 - at[0], "fraction_R": 100.0 * (1.5 - sum(at))}[low["limit"]], abs=1e-6) == low["margin"]
    assert low["margin"] >= 0.0


def test_which_limit_ends_each_side():
    one = found(2, lambda x, z: 0.7 - x[:, 0], lambda x, z: x[:, 1] - 0.2, at=0.4)
    assert [[None, "fraction_A"], ["fraction_R", None]] == [line["acceptable"]["ended_by"] for line in one.summary()["variables"]]


def test_same_seed_same_ranges_and_another_seed_other_points():
    one, same, other = (found(2, lambda x, z: ball(x, z) - 0.01 * np.sin(40.0 * x[:, 0]), seed=seed) for seed in (3, 3, 4))
    assert one.summary() == same.summary()
    assert np.array_equal(one.found.hunt.points, same.found.hunt.points)
    assert not np.array_equal(one.found.hunt.points, other.found.hunt.points)


def test_ends_are_round_in_the_units_written_and_within():
    """Degrees, not kelvins: 31.27 to 58.04 degC becomes 31.5 to 58.0, or finer, and each end turns back into what is written."""
    study = read_text(SMALL + "[ranges]\n")
    sides = sides_of(study, study.ranges.variables)
    low, high = np.array([0.1234, (31.27 - 25.0) / 40.0]), np.array([0.9, (58.04 - 25.0) / 40.0])
    small = inward(sides, low, high)
    shown = [[sides[k].shown(sides[k].at(float(share))) for share in ends]
             for k, ends in enumerate(zip(*small, strict=True))]  # fmt: skip
    assert pytest.approx([31.3, 58.0], abs=1e-9) == shown[1]
    assert pytest.approx([0.75, 2.3], abs=1e-9) == shown[0]
    assert "31.3 degC" == sides[1].written(273.15 + 31.3)


CHANCE = '[ranges]\nprobability = 0.9\ndraws = 512\npoints = 32'


def test_with_a_probability_the_box_keeps_a_quantile_away():
    """x0 + z <= 0.8 with z normal of 0.1 in nine of ten: x0 <= 0.8 - 0.128, less what the confidence takes."""
    one = found(1, lambda x, z: 0.8 - x[:, 0] - z, at=0.3, extra=CHANCE, uncertain='distribution = "normal", sd = "0.1 J/mol"')
    exact = 0.8 - 0.1 * ndtri(0.9)
    assert exact - 0.03 <= ends(one)[0, 1] <= exact
    block = one.summary()
    assert {"probability": 0.9, "confidence": 0.95, "draws": 512, "need": 472} == block["assurance"]
    assert block["worst_setting"]["low"] >= 0.9
    nominal = found(1, lambda x, z: 0.8 - x[:, 0] - z, at=0.3)
    assert ends(nominal)[0, 1] > exact + 0.05


def test_two_limits_share_one_probability():
    """Each alone holds in more than nine of ten at 0.5; both at once do not, and the set-point has no ranges."""
    both = [lambda x, z: 0.5 + 0.15 - x[:, 0] - z, lambda x, z: x[:, 0] - 0.5 + 0.15 + z]
    noise = 'distribution = "normal", sd = "0.1 J/mol"'
    assert "do not hold with a probability of 0.9" in found(1, *both, extra=CHANCE, uncertain=noise).summary()["reason"]
    assert found(1, both[0], extra=CHANCE, uncertain=noise).summary()["reason"] is None


def test_normal_operating_range_is_kept_apart():
    study = read_text(SMALL.replace("levels = 30 }", 'levels = 30, tolerance = { sd = "0.5 K" } }') + "[ranges]\npoints = 16\n")
    one = assess_ranges(study, partial(sweep.simulate, study, workers=1))
    line = one.summary()["variables"][1]
    assert pytest.approx([313.15 - 0.98, 313.15 + 0.98]) == [line["normal"]["low"], line["normal"]["high"]]
    assert line["acceptable"]["low"] <= line["set_point"] <= line["acceptable"]["high"]
    corners = one.tables()["ranges_corners"]
    table = sweep.simulate(study, corners[["dose", "start"]], workers=1)
    assert (margins(study, table) >= 0.0).all()
    assert [f"margin_{row.label}" for row in limits(study)] == [name for name in corners if name.startswith("margin_")]


def test_box_holds_where_the_plant_holds_the_set_point():
    """x0 >= 0.4 and x0 x1 <= 0.4 from (0.5, 0.5): without a tolerance the largest box may leave no room; with one it holds the normal range."""
    limit = [lambda x, z: x[:, 0] - 0.4, lambda x, z: 0.35 - x[:, 0] * x[:, 1]]
    free = found(2, *limit)
    study = space(2, "[ranges]", limits=2)
    held = replace(study.variables[1], tolerance=Tolerance("uniform", 0.08, False))
    study = replace(study, variables=(study.variables[0], held))
    block = assess_ranges(study, rows(study, *limit)).summary()
    line = block["variables"][1]
    assert line["acceptable"]["low"] <= line["normal"]["low"] and line["normal"]["high"] <= line["acceptable"]["high"]
    assert pytest.approx([0.42, 0.58]) == [line["normal"]["low"], line["normal"]["high"]]
    assert not any("less well" in caution for caution in block["cautions"])
    assert block["share_of_space"] <= free.summary()["share_of_space"] + 1e-9


def test_a_normal_range_that_does_not_hold_is_said():
    study = space(1, "[ranges]")
    study = replace(study, variables=(replace(study.variables[0], tolerance=Tolerance("uniform", 0.2, False)),))
    block = assess_ranges(study, rows(study, lambda x, z: x[:, 0] - 0.4)).summary()
    assert any("x0: the plant holds it less well than the acceptable range is wide" in caution for caution in block["cautions"])
    assert pytest.approx(0.4, abs=0.02) == block["variables"][0]["acceptable"]["low"]


def test_a_core_in_which_a_failure_turns_up_gives_way_to_the_set_point():
    """Where the plant holds the set-point was looked through in vain; a failure found there later leaves the set-point alone to be held."""

    def judge(points):
        value = np.where(np.hypot(points[:, 0] - 0.6, points[:, 1] - 0.5) < 0.05, -1.0, 1.0)[:, None]
        return Judged(value, value, (value[:, 0] >= 0.0).astype(float), np.zeros(len(points), dtype=np.int64))

    point = np.array([0.5, 0.5])
    search = Search(judge, point, Box(point - 0.2, point + 0.2), Effort(64, 2, 10, 100, 64), lambda box, core: box, 1)
    search._noted(np.array([[0.9, 0.9]]))
    assert np.array_equal(point - 0.2, search.core.low)
    found = search.largest(np.array([[0.6, 0.5]]))
    assert np.array_equal(point, search.core.low) and np.array_equal(point, search.core.high)
    assert not len(found.hunt.failing) and not found.box.inside(np.array([[0.6, 0.5]]))[0]
    assert 0.5 <= found.box.volume <= 0.6
