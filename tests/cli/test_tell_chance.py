"""What the terminal says of risk and sensitivity: bounds where nothing failed, reasons where there is no answer."""

import copy

from sweep.cli.tell_chance import tell_risk, tell_sensitivity
from sweep.cli.terminal import Terminal
from tests.report.chance_folder import RISK, SENSITIVITY


def said(capsys, tell, block):
    tell(block, Terminal())
    return capsys.readouterr().out


def test_risk(capsys):
    text = said(capsys, tell_risk, RISK)
    for line in (
        "5 failed, 1 ran away",
        "mtsr: holds in all 4,096 draws; the probability of failing is at most 0.0940 %",
        "conversion: 92.7 % (91.9 % to 93.5 %); driven by k_acylation, variables.charge_temperature.error",
        "all limits together: 92.7 % (91.9 % to 93.5 %)",
        "failing of mtsr: 3.2e-05, 1.1e-05 to 9.3e-05 (subset simulation)",
        "failing of any limit: below 2e-08; no failure down to 1e-08",
        "95 % of batches reach the target within 6.1 h (at most 6.12 h with 95 % confidence)",
    ):
        assert line in text


def test_a_target_that_is_not_always_reached(capsys):
    block = copy.deepcopy(RISK)
    block["batch_time"] |= {"time_s": None, "bound_s": None, "reason": "205 of 4096 draws never reach the target within the time marched"}
    assert "no batch time reaches the target in 95 % of batches: 205 of 4096 draws" in said(capsys, tell_risk, block)


def test_sensitivity(capsys):
    text = said(capsys, tell_sensitivity, SENSITIVITY)
    for line in (
        "mtsr_K, shares of its variance: k_acylation + Ea_acylation 95.7 %",
        "criticality_class: undefined, the response does not move",
        "with one input's spread halved (now 92.8 % (91 % to 94.2 %))",
        "k_acylation: 97.1 %, +4.2 points (+2.9 to +5.4)",
    ):
        assert line in text


def test_shares_beyond_one_are_shown_as_they_are(capsys):
    block = copy.deepcopy(SENSITIVITY)
    block["responses"][0]["shares"][0]["total"], block["responses"][0]["shares"][1]["total"] = 1.38, -0.012
    text = said(capsys, tell_sensitivity, block)
    assert "k_acylation + Ea_acylation 138 %" in text and "error -1.2 %" in text


def test_nothing_is_said_of_what_was_not_asked(capsys):
    assert "" == said(capsys, tell_risk, {"not_assessed": "no"}) == said(capsys, tell_sensitivity, {"not_assessed": "no"})


def test_why_no_spread_was_halved(capsys):
    block = {**SENSITIVITY, "halved_spread": {"not_assessed": "the study has no limits"}}
    assert "which input should be known better: not assessed, the study has no limits" in said(capsys, tell_sensitivity, block)
