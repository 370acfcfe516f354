"""Warnings: what is legal and doubtful, each with its reason; and none where nothing is doubtful."""

from pathlib import Path

import pytest

from sweep.study import read_text
from tests.texts import isothermal

TEXT = Path(__file__).with_name("fedbatch.toml").read_text()
CASES = {
    "endothermic": ('"-112 kJ/mol"', '"112 kJ/mol"', "reactions.acylation.heat.value", "112 kJ/mol", "rare"),
    "reference far away": (
        'at = "45 degC", activation_energy = "58',
        'at = "200 degC", activation_energy = "58',
        "reactions.acylation.rate_constant.at",
        "473.15 K",
        "60 K",
    ),
    "validity narrower than the sweep": (
        'amide + acid"',
        'amide + acid"\nvalid = ["20 degC", "64 degC"]',
        "reactions.acylation.valid",
        "337.15 K",
        "outside its range of validity",
    ),
    "set-point outside its range": ('"3 h"', '"8 h"', "recipe.feeds.anhydride.duration", "28800", "outside the range of dosing_time"),
    "jacket too small": (
        '"310 W/m2/K"',
        '"30 W/m2/K"',
        "recipe.feeds.anhydride.duration",
        "kW while anhydride is dosed",
        "cannot carry the dosing heat",
    ),
    "event after the end": ('time = "4 h"', 'time = "7 h"', "events.0.time", "25200 s", "over by then"),
    "batch shorter than its feed": ('batch_time = "6 h"', 'batch_time = "1 h"', "recipe.batch_time", "3600 s", "never ends before its last feed"),
    "no activation energy": (
        ', activation_energy = "135 kJ/mol"',
        "",
        "reactions.decomposition.rate_constant",
        "no activation_energy",
        "this rate does not",
    ),
    "heat capacity that ends": ("[200, 0.2]", "[300, -0.25]", "species.amide.heat_capacity", "zero near 1200 K", "computed wrongly"),
    "set-point without a controller": ('gain      = "0.08 1/K"\n', "", "cooling.set_point", "45 degC", "flow is what is written"),
}


@pytest.mark.parametrize("case", CASES)
def test_warning(case):
    old, new, key, found, because = CASES[case]
    assert old in TEXT
    text = TEXT.replace(old, new, 1)
    seen = [w for w in read_text(text, "slow.toml").warnings if w.key == key and because in w.because]
    assert 1 == len(seen)
    assert found in seen[0].found
    assert key.split(".")[-1] in text.split("\n")[seen[0].line - 1] or "=" in text.split("\n")[seen[0].line - 1]


def test_missing_molar_masses():
    warnings = read_text(isothermal("A -> R | 1e-3 1/s")).warnings
    assert [("reactions.r0.equation", "without them its balance cannot be checked")] == [(w.key, w.because) for w in warnings]


def test_no_warning_without_reason():
    assert () == read_text(TEXT).warnings
    assert () == read_text(TEXT.replace('amide + acid"', 'amide + acid"\nvalid = ["20 degC", "65 degC"]')).warnings


def test_an_event_in_the_time_to_the_target_is_no_warning():
    """Without an end of its own a batch may be as long as `longest`; the event comes before that."""
    assert () == read_text(TEXT.replace('batch_time = "6 h"', 'batch_time = "to target"').replace('time = "4 h"', 'time = "20 h"')).warnings


@pytest.mark.parametrize(("more", "warned"), [("", True), ('variables = ["dosing_time"]\n', True), ("", False)])
def test_shortest_cycle_is_doubtful_where_the_batch_ends_at_a_written_time(more, warned):
    text = TEXT + "\n[optimum]\nminimise = \"cycle_time\"\n" + (more if warned else "")
    if not warned:
        text = text.replace("[variables]", '[variables]\nlong = { sets = "recipe.batch_time", from = "4 h", to = "9 h", levels = 3 }')
    assert warned == any(w.key == "optimum.minimise" and "same cycle" in w.because for w in read_text(text).warnings)
