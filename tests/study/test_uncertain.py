"""Uncertain inputs, their correlations and what is asked of them: what is read, and every fault with its place."""

from pathlib import Path

import numpy as np
import pytest

from sweep.base.errors import StudyError
from sweep.study import read_text
from sweep.study.model import Correlation, Tolerance
from sweep.study.nearest import matrix_of, nearest_correlation, nearest_possible, possible

TEXT = Path(__file__).with_name("fedbatch.toml").read_text()
K, E, U = "reactions.acylation.rate_constant.value", "reactions.acylation.rate_constant.activation_energy", "vessel.U"


def study(extra, text=TEXT, folder=None):
    return read_text(text + "\n" + extra, "slow.toml", folder)


def faults(extra, text=TEXT, folder=None):
    with pytest.raises(StudyError) as caught:
        study(extra, text, folder)
    return caught.value.faults


def one(entry, extra=""):
    return study(f"[uncertain]\nx = {{ {entry} }}\n{extra}").uncertain[0]


def test_normal():
    found = one(f'of = "{E}", distribution = "normal", sd = "2.5 kJ/mol"')
    assert ("x", E, "normal", 58_000.0, {"sd": 2500.0}, False) == (
        found.name, found.of, found.distribution, found.centre, dict(found.parameters), found.relative,
    )  # fmt: skip


def test_shares_of_the_written_value():
    assert pytest.approx({"sd": 2900.0}) == dict(one(f'of = "{E}", distribution = "normal", relative_sd = 0.05').parameters)
    heat = 'of = "reactions.acylation.heat.value", distribution = "uniform", relative_low = 0.9, relative_high = 1.2'
    assert pytest.approx({"low": -134_400.0, "high": -100_800.0}) == dict(one(heat).parameters)
    assert pytest.approx({"sd": 5600.0}) == dict(
        one('of = "reactions.acylation.heat.value", distribution = "normal", relative_sd = "5 %"').parameters
    )


def test_a_temperature_has_a_difference_for_its_spread():
    found = one('of = "cooling.inlet", distribution = "truncated-normal", sd = "2 K", low = "1 degC", high = "9 degC"')
    assert pytest.approx({"sd": 2.0, "low": 274.15, "high": 282.15}) == dict(found.parameters)


def test_a_heat_capacity_per_mass():
    text = TEXT.replace("[uncertain]", "")
    found = study(
        '[uncertain]\nx = { of = "species.amine.heat_capacity", distribution = "uniform", low = "1.8 J/g/K", high = "200 J/mol/K" }', text
    )
    assert pytest.approx({"low": 1800.0 * 0.1072, "high": 200.0}) == dict(found.uncertain[0].parameters)


def test_the_written_value_is_the_mode_of_a_triangle():
    found = one('of = "vessel.U", distribution = "triangular", low = "240 W/m2/K", high = "340 W/m2/K"')
    assert {"low": 240.0, "mode": 310.0, "high": 340.0} == dict(found.parameters)


def test_tolerances():
    def held(text):
        old = 'levels = 15 }\ndosing'
        found = read_text(TEXT.replace(old, f"levels = 15, tolerance = {text} }}\ndosing"))
        assert 0.0 == found.values["variables.charge_temperature.error"]
        assert 0.5 == found.quantity("variables.charge_temperature.error", "0.5 K")
        return found.variables[0].tolerance

    assert Tolerance("normal", 0.5, False) == held('{ sd = "0.5 K" }')
    assert Tolerance("uniform", 2.0, False) == held('{ plus_minus = "2 K" }')
    relative = TEXT.replace('"2.8 mol/L", levels = 9', '"2.8 mol/L", levels = 9, tolerance = { relative_plus_minus = "2 %" }')
    assert Tolerance("uniform", 0.02, True) == read_text(relative).variables[2].tolerance


def test_settings_have_defaults():
    found = study(f'[uncertain]\nx = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}\n[risk]\n[sensitivity]')
    assert (4096, "latin-hypercube", 0.95, "wilson", "together") == (
        found.risk.draws, found.risk.sampling, found.risk.confidence, found.risk.interval, found.risk.rare,
    )  # fmt: skip
    assert ("uncertain", 20, 512, 1024) == (
        found.sensitivity.over, found.sensitivity.trajectories, found.sensitivity.blocks, found.sensitivity.draws,
    )  # fmt: skip
    assert "variables" == study("[sensitivity]").sensitivity.over


ENTRIES = {  # entry of [uncertain], then key, found, expected, because
    "unknown path": ('of = "vessel.V", distribution = "normal", sd = "1 m3"', "of", "vessel.V", "vessel.U", "of nothing"),
    "no path": ('distribution = "normal", sd = "1 m3"', "of", "None", "a path", "of a quantity that is written"),
    "what cannot differ": (
        'of = "limits.mtsr.at_most", distribution = "normal", sd = "1 K"', "of", "limits.mtsr", "a quantity of the batch", "differ",
    ),
    "a variable's path": (
        'of = "recipe.feeds.anhydride.duration", distribution = "normal", sd = "5 min"',
        "of", "recipe.feeds", "variables.dosing_time.tolerance", "chosen",
    ),
    "wrong dimension": (f'of = "{E}", distribution = "normal", sd = "2 K"', "sd", "'2 K'", "energy per amount", "measures something else"),
    "a bare number": (f'of = "{E}", distribution = "normal", sd = 2', "sd", "2", "energy per amount", "energy per amount"),
    "a temperature's spread in degC": ('of = "cooling.inlet", distribution = "normal", sd = "2 degC"', "sd", "'2 degC'", "K", "counts from a zero"),
    "negative sd": (f'of = "{E}", distribution = "normal", sd = "-2 kJ/mol"', "sd", "-2000", "above 0", "a spread is a size"),
    "zero relative sd": (f'of = "{E}", distribution = "normal", relative_sd = 0', "relative_sd", "0", "above 0", "a spread is a size"),
    "two spreads": (
        f'of = "{E}", distribution = "normal", sd = "1 kJ/mol", relative_sd = 0.1', "relative_sd", "relative_sd", "sd or", "one of the two",
    ),
    "two spreads of a lognormal": (
        f'of = "{K}", distribution = "lognormal", log_sd = 0.1, relative_sd = 0.1', "relative_sd", "two", "log_sd", "one spread",
    ),
    "no spread": (f'of = "{E}", distribution = "normal"', "sd", "nothing", "sd or relative_sd", "a standard deviation"),
    "lognormal of a negative": (
        'of = "reactions.acylation.heat.value", distribution = "lognormal", relative_sd = 0.1', "of", "-112000", "above 0", "median",
    ),
    "a share of a temperature": (
        'of = "cooling.inlet", distribution = "normal", relative_sd = 0.1', "relative_sd", "relative_sd", "in K", "zero is far",
    ),
    "low above mode": (
        f'of = "{U}", distribution = "triangular", low = "320 W/m2/K", mode = "310 W/m2/K", high = "340 W/m2/K"',
        "mode", "310", "320 and 340", "between",
    ),
    "low above high": (
        f'of = "{U}", distribution = "uniform", low = "340 W/m2/K", high = "300 W/m2/K"', "high", "300", "above low, 340", "upside down",
    ),
    "no width": (f'of = "{U}", distribution = "uniform", low = "340 W/m2/K", high = "340 W/m2/K"', "high", "340", "above low, 340", "upside down"),
    "one end": (f'of = "{U}", distribution = "uniform", low = "300 W/m2/K"', "high", "nothing", "high or relative_high", "two ends"),
    "truncated without ends": (f'of = "{U}", distribution = "truncated-normal", relative_sd = 0.1', "low", "nothing", "low, high or both", "normal"),
    "truncated away": (
        f'of = "{U}", distribution = "truncated-normal", relative_sd = 0.1, low = "320 W/m2/K"', "low", "310", "320 and inf", "between the ends",
    ),
    "an end out of bounds": (f'of = "{U}", distribution = "uniform", low = "-3 W/m2/K", high = "400 W/m2/K"', "low", "-3", "at least 0", ""),
    "another distribution": (f'of = "{U}", distribution = "cauchy"', "distribution", "'cauchy'", "lognormal", "follow a distribution"),
    "another's key": (f'of = "{U}", distribution = "normal", relative_sd = 0.1, mode = "3 W/m2/K"', "mode", "mode", "of", "not known here"),
    "no file": (f'of = "{U}", distribution = "table"', "file", "None", "draws.csv", "beside the study"),
    "a file that is not there": (f'of = "{U}", distribution = "table", file = "no.csv"', "file", "No such file", "can be read", "stand in it"),
}  # fmt: skip


@pytest.mark.parametrize("case", ENTRIES)
def test_fault(case):
    entry, key, found, expected, because = ENTRIES[case]
    seen = faults(f"[uncertain]\nx = {{ {entry} }}\n")
    assert [f"uncertain.x.{key}"] == [f.key for f in seen]
    assert (True, True, True) == (found in seen[0].found, expected in seen[0].expected, because in seen[0].because), seen[0]
    assert TEXT.count("\n") + 3 == seen[0].line


WHOLE = {  # text, key, found, because
    "two inputs on one path": (
        f'[uncertain]\nx = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}\n'
        f'y = {{ of = "{U}", distribution = "normal", relative_sd = 0.2 }}',
        "uncertain.y.of", U, "x is of it already",
    ),
    "a variable's name": (
        f'[uncertain]\namine = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}', "uncertain.amine", "amine", "a variable has",
    ),
    "a response's name": (
        f'[uncertain]\nmtsr_K = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}', "uncertain.mtsr_K", "mtsr_K", "a response",
    ),
    "risk of nothing": ("[risk]", "risk", "nothing uncertain", "nothing is at risk"),
    "sensitivity to nothing uncertain": ('[sensitivity]\nover = "uncertain"', "sensitivity.over", "uncertain", "nothing is uncertain"),
}  # fmt: skip


@pytest.mark.parametrize("case", WHOLE)
def test_fault_of_the_whole(case):
    text, key, found, because = WHOLE[case]
    seen = faults(text)
    assert [(key, found)] == [(f.key, f.found) for f in seen]
    assert because in seen[0].because


TWO = f'[uncertain]\nk = {{ of = "{K}", distribution = "lognormal", relative_sd = 0.1 }}\n'
TWO += f'E = {{ of = "{E}", distribution = "normal", relative_sd = 0.1 }}\n'
THREE = TWO + f'U = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}\n'
SETTINGS = {  # text, key, because
    "few draws": ("[risk]\ndraws = 3", "risk.draws", "how many"),
    "odd Sobol'": ('[risk]\ndraws = 1000\nsampling = "sobol"', "risk.draws", "balanced"),
    "blocks": ("[sensitivity]\nblocks = 100", "sensitivity.blocks", "balanced"),
    "a part of a draw": ("[risk]\ndraws = 3.5", "risk.draws", "how many"),
    "certain": ("[risk]\nconfidence = 1", "risk.confidence", "with this probability"),
    "another sampling": ('[risk]\nsampling = "halton"', "risk.sampling", "no other word"),
    "another interval": ('[risk]\ninterval = "wald"', "risk.interval", "no other word"),
    "an unknown key": ("[risk]\nseed = 3", "risk.seed", "not known here"),
    "a correlation with nothing": ('[[correlations]]\nbetween = ["k", "q"]\nrank = 0.1', "correlations.0.between", "two uncertain inputs"),
    "a correlation with itself": ('[[correlations]]\nbetween = ["k", "k"]\nrank = 0.1', "correlations.0.between", "two uncertain inputs"),
    "a correlation without a number": ('[[correlations]]\nbetween = ["k", "E"]', "correlations.0", "of rank, or linear"),
    "a correlation beyond one": ('[[correlations]]\nbetween = ["k", "E"]\nrank = 1.1', "correlations.0.rank", "no correlation lies beyond"),
    "one pair twice": (
        '[[correlations]]\nbetween = ["k", "E"]\nrank = 0.1\n[[correlations]]\nbetween = ["E", "k"]\nlinear = 0.2',
        "correlations.1.between", "one already",
    ),
    "correlations that are no tables": ("correlations = 3", "correlations", "between two inputs"),
}  # fmt: skip


@pytest.mark.parametrize("case", SETTINGS)
def test_fault_of_a_setting(case):
    text, key, because = SETTINGS[case]
    seen = faults(TWO + text) if text.startswith("[") else faults("", text + "\n" + TEXT + "\n" + TWO)
    assert [key] == [f.key for f in seen]
    assert because in seen[0].because


def test_an_impossible_matrix_is_refused_with_the_nearest():
    pairs = (("k", "E", 0.9), ("E", "U", 0.9), ("k", "U", -0.9))
    text = THREE + "".join(f'[[correlations]]\nbetween = ["{a}", "{b}"]\nlinear = {r}\n' for a, b, r in pairs)
    (seen,) = faults(text)
    assert "correlations" == seen.key
    assert "k and E 0.9, E and U 0.9, k and U -0.9" == seen.found
    shown = tuple(
        Correlation((a, b), "linear", float(r)) for a, _, b, r in (part.split() for part in seen.expected.split("the nearest: ")[1].split(", "))
    )
    assert possible(matrix_of(["k", "E", "U"], shown))
    assert pytest.approx([0.5, 0.5, -0.5], abs=2e-3) == [c.value for c in shown]  # by symmetry: the three-way boundary 1 - 3 r^2 - 2 r^3 = 0


def test_nearest_correlation_matrix_as_published():
    """Higham, IMA J. Numer. Anal. 22 (2002) 329, section 4, four digits (from memory)."""
    given = np.array([[1.0, 1.0, 0.0], [1.0, 1.0, 1.0], [0.0, 1.0, 1.0]])
    expected = [[1.0, 0.7607, 0.1573], [0.7607, 1.0, 0.7607], [0.1573, 0.7607, 1.0]]
    assert pytest.approx(np.array(expected), abs=5e-5) == nearest_correlation(given)


def test_what_is_possible_is_left_alone():
    assert nearest_possible((Correlation(("a", "b"), "rank", 1.0), Correlation(("b", "c"), "rank", 1.0))) is not None
    assert nearest_possible((Correlation(("a", "b"), "rank", -0.99),)) is None


def test_a_pair_that_would_have_to_be_correlated_is_shown():
    found = nearest_possible((Correlation(("a", "b"), "linear", 0.9), Correlation(("b", "c"), "linear", 0.9)))
    assert {"a", "c"} in [set(pair) for pair in found]
    assert found[("a", "b")] == found[("b", "c")] < 0.9


def table(tmp_path, text):
    (tmp_path / "draws.csv").write_text(text)
    return f'[uncertain]\nx = {{ of = "{E}", distribution = "table", file = "draws.csv" }}\n', tmp_path


def test_a_table_of_draws(tmp_path):
    text, folder = table(tmp_path, f"{K} [L/mol/s], {E} [kJ/mol]\n1e-3, 57\n1.1e-3,59.5\n\n")
    found = study(text, folder=folder)
    assert (57_000.0, 59_500.0) == found.uncertain[0].table
    other, _ = table(tmp_path, f"{K} [L/mol/s], {E} [kJ/mol]\n1e-3, 57\n1.1e-3,59.6\n\n")
    assert found.digest != study(other, folder=folder).digest


TABLES = {  # text of the file, key, found, because; line None: of the study
    "unknown column": ("vessel.U [W/m2/K]\n300\n", "uncertain.x.file", "vessel.U", "no such column", None),
    "no rows": (f"{E} [kJ/mol]\n", "uncertain.x.file", "no rows", "nothing to draw from", None),
    "nothing": ("", "uncertain.x.file", "no rows", "nothing to draw from", None),
    "two columns": (f"{E} [kJ/mol],x [kJ/mol],x [kJ/mol]\n1,2,3\n", "uncertain.x.file", "2 columns x", "the same thing", None),
    "NaN": (f"{E} [kJ/mol]\n57\nnan\n", E, "nan", "a number and its unit", 3),
    "an empty cell": (f"{E} [kJ/mol],b\n57,1\n,2\n", E, "kJ/mol", "a number and its unit", 3),
    "another unit": (f"{E} [kg]\n57\n", E, "57 kg", "measures something else", 2),
    "a short line": (f"{E} [kJ/mol],b\n57,1\n58\n", "line", "1 cells", "each column has a value", 3),
}


@pytest.mark.parametrize("case", TABLES)
def test_fault_of_a_table(case, tmp_path):
    content, key, found, because, line = TABLES[case]
    text, folder = table(tmp_path, content)
    seen = list(faults(text, folder=folder))
    assert [key] == [f.key for f in seen]
    assert (True, True) == (found in seen[0].found, because in seen[0].because), seen[0]
    assert (TEXT.count("\n") + 3 if line is None else line) == seen[0].line
    assert ("slow.toml" if line is None else str(tmp_path / "draws.csv")) == seen[0].file


def test_a_drawn_value_out_of_bounds(tmp_path):
    (tmp_path / "draws.csv").write_text("x [W/m2/K]\n300\n-3\n")
    (seen,) = faults(f'[uncertain]\nx = {{ of = "{U}", distribution = "table", file = "draws.csv" }}\n', folder=tmp_path)
    assert (3, "x", "-3 (SI)", "at least 0") == (seen.line, seen.key, seen.found, seen.expected)


@pytest.mark.parametrize(
    ("given", "because"),
    [
        ('"0.5 K"', "a tolerance is one number"),
        ('{ sd = "0.5 K", plus_minus = "1 K" }', "a tolerance is one number"),
        ('{ spread = "0.5 K" }', "a tolerance is one number"),
        ('{ sd = "0.5 degC" }', "counts from a zero"),
        ('{ sd = "-1 K" }', "a spread is a size"),
        ('{ relative_sd = 0.1 }', "zero is far"),
        ('{ sd = "1 min" }', "measures something else"),
    ],
)
def test_fault_of_a_tolerance(given, because):
    with pytest.raises(StudyError) as caught:
        read_text(TEXT.replace("levels = 15 }\ndosing", f"levels = 15, tolerance = {given} }}\ndosing"))
    (seen,) = caught.value.faults
    assert seen.key.startswith("variables.charge_temperature.tolerance")
    assert because in seen.because


def test_doubts():
    def warned(entry):
        return [w.because for w in study(f"[uncertain]\nx = {{ {entry} }}").warnings if w.key == "uncertain.x"]

    (wide,) = warned(f'of = "{U}", distribution = "normal", relative_sd = 0.4')
    assert "cannot be computed and count as not holding" in wide
    assert [] == warned(f'of = "{U}", distribution = "normal", relative_sd = 0.3')
    (outside,) = warned(f'of = "{U}", distribution = "uniform", low = "320 W/m2/K", high = "340 W/m2/K"')
    assert "outside its own uncertainty" in outside
