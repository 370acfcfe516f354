"""The four plans."""

from dataclasses import replace

import numpy as np
import pytest

from sweep.base.errors import StudyError, SweepError
from sweep.plan import planned, points, set_point
from sweep.study import read_text
from tests.texts import isothermal

VARIABLES = """
[variables]
dose = { sets = "recipe.charge.concentration.A", from = "1 mol/L", to = "3 mol/L", levels = 3 }
time = { sets = "recipe.batch_time", from = "1 h", to = "2 h", levels = 5 }
"""


def _study(plan: str = "", seed: int = 3, folder=None):
    text = f"[study]\nseed = {seed}\n" + isothermal("A -> R | 1e-3 1/s") + VARIABLES + plan
    return read_text(text, folder=folder)


def test_full_factorial_has_every_combination_last_variable_fastest():
    table = points(_study())
    assert 15 == len(table) == len(table.drop_duplicates())
    assert ["dose", "time"] == list(table.columns)
    assert pytest.approx([1000.0, 1000.0, 2000.0]) == table["dose"].iloc[[0, 4, 5]].tolist()
    assert [3600.0, 7200.0] == table["time"].iloc[[0, 4]].tolist()


def test_any_slice_of_a_plan_is_the_slice_of_the_whole():
    for plan in ('[plan]\nkind = "factorial"', '[plan]\nkind = "sobol"\npoints = 100', '[plan]\nkind = "latin-hypercube"\npoints = 100'):
        whole = planned(_study(plan))
        table = whole.rows(0, whole.size)
        np.testing.assert_array_equal(table.iloc[5:12].to_numpy(), whole.rows(5, 12).to_numpy())
        assert list(range(5, 12)) == list(whole.rows(5, 12).index)


def test_latin_hypercube_has_one_point_in_every_stratum():
    """McKay, Beckman & Conover, Technometrics 21 (1979) 239: floor(n u) is a permutation in every column (from memory)."""
    table = points(_study('[plan]\nkind = "latin-hypercube"\npoints = 40'))
    for name, low, high in (("dose", 1000.0, 3000.0), ("time", 3600.0, 7200.0)):
        strata = np.floor(40 * (table[name].to_numpy() - low) / (high - low)).astype(int)
        assert list(range(40)) == sorted(strata)


def test_seed_decides_the_draws():
    text = '[plan]\nkind = "sobol"\npoints = 64'
    np.testing.assert_array_equal(points(_study(text)).to_numpy(), points(_study(text)).to_numpy())
    assert not np.array_equal(points(_study(text)).to_numpy(), points(_study(text, seed=4)).to_numpy())


def test_sobol_balances_its_halves():
    table = points(_study('[plan]\nkind = "sobol"\npoints = 64'))
    assert 32 == (table["dose"] < 2000.0).sum() == (table["time"] < 5400.0).sum()


def test_without_variables_the_plan_is_the_set_point():
    study = read_text(isothermal("A -> R | 1e-3 1/s"))
    assert (1, 0) == points(study).shape
    assert {} == set_point(study)


def test_set_point_is_what_is_written():
    assert pytest.approx({"dose": 2000.0, "time": 60000.0}) == set_point(_study())


def test_list_reads_units_from_its_header(tmp_path):
    (tmp_path / "points.csv").write_text("dose [mol/L],recipe.batch_time [min]\n1.5,60\n\n2,90\n", encoding="utf-8")
    table = points(_study('[plan]\nkind = "list"\nfile = "points.csv"', folder=tmp_path))
    np.testing.assert_allclose(table.to_numpy(), [[1500.0, 3600.0], [2000.0, 5400.0]])


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("dose [min]\n1\n", "measures something else"),
        ("doze [mol/L]\n1\n", "did you mean dose"),
        ("dose [mol/L]\nx\n", "'x'"),
        ("dose [mol/L],dose [mol/L]\n1,1\n", "two columns"),
        ("dose [mol/L],time [h]\n1\n", "1 cells"),
        ("dose mol/L?\n1\n", "name [unit]"),
    ],
)
def test_list_faults_name_file_line_and_column(tmp_path, text, words):
    (tmp_path / "points.csv").write_text(text, encoding="utf-8")
    with pytest.raises(StudyError) as caught:
        points(_study('[plan]\nkind = "list"\nfile = "points.csv"', folder=tmp_path))
    assert words in str(caught.value)
    assert "points.csv:" in str(caught.value)


@pytest.mark.parametrize("text", ["", "dose [mol/L]\n"])
def test_list_without_points(tmp_path, text):
    (tmp_path / "points.csv").write_text(text, encoding="utf-8")
    with pytest.raises(SweepError, match="holds no points"):
        points(_study('[plan]\nkind = "list"\nfile = "points.csv"', folder=tmp_path))


def test_list_that_is_not_there(tmp_path):
    with pytest.raises(SweepError, match="cannot be read"):
        points(_study('[plan]\nkind = "list"\nfile = "none.csv"', folder=tmp_path))


def test_sensible_plan_where_levels_are_missing():
    study = _study()
    bare = replace(study, variables=tuple(replace(v, levels=None) for v in study.variables))
    assert ("sobol", 1024) == (planned(bare).kind, planned(bare).size)
