"""What 10^9 points would cost on a cluster, on paper: points a core and second, bytes a point, the caller's work a file (`-m benchmark -s`)."""

import pickle
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.plan import planned
from sweep.runner import remote
from sweep.runner.parquet import schema_of, to_bytes
from sweep.runner.store import ROWS, Store
from sweep.study import read_study
from sweep.study.model import Study

DEMO = Path(__file__).parents[2] / "studies" / "acylation.toml"
MANY = 10**9


def _spent(begun: float) -> float:
    return time.process_time() - begun


def _measured(study: Study, folder: Path) -> dict[str, float]:
    """Return points a core and second; bytes a point on disk and through the scheduler; the caller's processor time (s) a file."""
    plan, packed = planned(study), pickle.dumps(study, protocol=5)
    remote.work(packed, remote.depends_on(), plan.rows(0, 256))
    rates = []
    for _ in range(5):
        begun = time.process_time()
        table = remote.work(packed, remote.depends_on(), plan.rows(0, plan.size))
        rates.append(len(table) / _spent(begun))
    answers = [pickle.dumps(table, protocol=5)] * (ROWS // len(table) + 1)
    with Store(folder, study, plan) as store:
        files = []
        for _ in range(9):
            begun = time.process_time()
            store.add_points(0, pd.concat([pickle.loads(answer) for answer in answers]).iloc[:ROWS])
            files.append(_spent(begun))
    disk = len(to_bytes(table, schema_of(study, plan.columns))) / len(table)
    return {"rate": float(np.median(rates)), "disk": disk, "back": len(answers[0]) / len(table), "file": float(np.median(files))}


@pytest.mark.benchmark
def test_a_thousand_million_points_on_paper(tmp_path, capsys):
    study = read_study(DEMO)
    for name, each in (("with failure figures", study), ("without", study.without_failure())):
        found = _measured(each, tmp_path / name)
        hours, writing = MANY / found["rate"] / 3600.0, MANY / ROWS * found["file"] / 3600.0
        with capsys.disabled():
            print(
                f"\n{name}: {found['rate']:,.0f} points a core and second, {hours:,.0f} core-hours; {found['disk']:.0f} B a point on disk, "
                f"{found['disk']:,.0f} GB; {found['back']:.0f} B through the scheduler; {found['file']:.3f} s a file here, {writing:.1f} h, "
                f"which sets the pace from {hours / writing:,.0f} cores on"
            )
        assert hours < 2000.0
        assert found["disk"] < 400.0
