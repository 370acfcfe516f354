"""A measured batch over the model: residuals as they were put in, figure and table, and faults with file and line."""

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.base.errors import StudyError, SweepError
from sweep.cli.main import main
from sweep.plant import profile
from sweep.study import read_text
from sweep.study.measured import read_measured
from sweep.workflow.batch import batch

STUDY = read_text(Path("studies/acylation.toml").read_text(encoding="utf-8"), "acylation.toml")


@pytest.fixture(scope="module")
def measured(tmp_path_factory) -> Path:
    """The model's own batch, 2 K too warm, 3 kW too hot, every second conversion missing; two moments after the march's end."""
    times = np.append(np.linspace(0.0, 21_600.0, 61), [100_000.0, 110_000.0])
    lines = profile(STUDY, {}, times).ffill()
    path = tmp_path_factory.mktemp("data") / "batch.csv"
    rows = ["time [min],temperature [degC],jacket_temperature [degF],conversion [%],heat_release [kW],c_amine [mol/L]"]
    for k, line in lines.iterrows():
        share = 100.0 * line["conversion"]
        amine = line["n_amine_mol"] / line["volume_m3"] / 1000.0 + 0.01
        jacket = (line["jacket_temperature_K"] - 273.15) * 1.8 + 32.0
        cells = [times[k] / 60.0, line["temperature_K"] - 271.15, jacket, share, line["heat_release_W"] / 1e3 + 3.0, amine]
        rows.append(",".join("" if n == 3 and k % 2 else repr(float(cell)) for n, cell in enumerate(cells)))
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    return path


def test_residuals_are_those_put_in(measured, tmp_path):
    found = batch(STUDY, out=tmp_path, data=measured)
    lines = {line["name"]: line for line in found.overlay.lines()}
    assert ["temperature_K", "jacket_temperature_K", "conversion", "heat_release_W", "c_amine_mol_per_m3"] == list(lines)
    assert 2 == found.overlay.beyond
    off = {"temperature_K": 2.0, "jacket_temperature_K": 0.0, "conversion": 0.0, "heat_release_W": 3e3, "c_amine_mol_per_m3": 10.0}
    for name, expected in off.items():
        for key in ("mean", "rms", "largest"):
            assert expected == pytest.approx(lines[name][key], abs=1e-6, rel=1e-6)
    assert 61 == lines["temperature_K"]["values"]
    assert 31 == lines["conversion"]["values"]
    assert (tmp_path / "batch/figures/measured.svg").is_file()
    drawn = pd.read_csv(tmp_path / "batch/figures/measured.csv")
    assert 1 + 3 * 5 == drawn.shape[1]
    assert drawn["jacket temperature: measured less model (K)"].abs().max() < 1e-6
    assert drawn["heat release: measured (kW)"].notna().all()
    table = pd.read_csv(tmp_path / "batch/analyses/measured.csv")
    assert 63 == len(table)
    assert {"temperature_K_measured", "temperature_K_model", "temperature_K_residual"} <= set(table.columns)
    assert 63 == json.loads((tmp_path / "batch/summary.json").read_text())["measured"]["moments"]
    batch(STUDY, out=tmp_path)  # without data nothing of the earlier overlay is left
    assert not (tmp_path / "batch/figures/measured.svg").exists()
    assert not (tmp_path / "batch/analyses/measured.csv").exists()


def test_the_command_prints_them(measured, tmp_path, capsys):
    assert 0 == main(["batch", "studies/acylation.toml", "--data", str(measured), "--out", str(tmp_path), "--no-figures"])
    printed = capsys.readouterr().out
    assert "temperature: 61 values, mean +2 K, root mean square 2 K, largest +2 K" in printed
    assert "heat_release: 61 values, mean +3 kW" in printed
    assert "2 moments lie beyond the computed batch" in printed


WRONG = {
    "no time": ("temperature [degC]\n20\n", 1, "time", "measured over time"),
    "time alone": ("time [min]\n0\n", 1, "header", "nothing to lay over"),
    "an unknown quantity": ("time [min],ph\n0,7\n", 1, "ph", "nothing else is laid over"),
    "an unknown species": ("time [min],n_water [mol]\n0,7\n", 1, "n_water", "nothing else is laid over"),
    "no unit": ("time [min],temperature\n0,20\n", 1, "temperature", "stands with its unit"),
    "a wrong unit": ("time [min],temperature [bar]\n0,20\n", 1, "temperature", "measures something else"),
    "two columns": ("time [min],temperature [degC],temperature [K]\n0,20,293\n", 1, "temperature_K", "say the same thing"),
    "a word": ("time [min],temperature [degC]\n0,20\n5,warm\n", 3, "temperature_K", "unit stands in the header"),
    "a comma": ('time [min],temperature [degC]\n0,"20,5"\n', 2, "temperature_K", "unit stands in the header"),
    "a cell too many": ("time [min],temperature [degC]\n\n0,20,30\n", 3, "line", "each column has a cell"),
    "back in time": ("time [min],temperature [degC]\n5,20\n4,21\n", 3, "time", "in the order of time"),
    "before the start": ("time [min],temperature [degC]\n-5,20\n4,21\n", 2, "time", "from the batch's start"),
    "no time in a line": ("time [min],temperature [degC]\n,20\n", 2, "time_s", "unit stands in the header"),
    "below absolute zero": ("time [min],temperature [degC]\n0,-300\n", 2, "temperature_K", "below it"),
    "not finite": ("time [min],temperature [degC]\n0,inf\n", 2, "temperature_K", "unit stands in the header"),
}


@pytest.mark.parametrize("name", list(WRONG))
def test_faults_name_file_and_line(name, tmp_path):
    text, line, key, because = WRONG[name]
    path = tmp_path / "bad.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(StudyError) as caught:
        read_measured(STUDY, path)
    assert [(str(path), line, key)] == [(f.file, f.line, f.key) for f in caught.value.faults]
    assert because in caught.value.faults[0].because


@pytest.mark.parametrize(("text", "said"), [(None, "cannot be read"), ("time [min],temperature [degC]\n", "holds 0 moments")])
def test_a_file_without_a_batch(text, said, tmp_path):
    path = tmp_path / "none.csv"
    if text is not None:
        path.write_text(text, encoding="utf-8")
    with pytest.raises(SweepError, match=said):
        read_measured(STUDY, path)
