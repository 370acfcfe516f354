"""A measured batch laid over the model: residuals of each quantity, measured less computed."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.plant import profile
from sweep.study.model import Study


@dataclass(frozen=True)
class Overlay:
    """table: time_s and, per quantity, <name>_measured, <name>_model, <name>_residual (SI); names: the quantities; beyond: moments after the
    batch's march."""

    table: pd.DataFrame
    names: tuple[str, ...]
    beyond: int

    def lines(self) -> list[dict[str, Any]]:
        """Return for each quantity how many values were compared, their mean residual, root mean square and largest residual, and when."""
        found = []
        for name in self.names:
            residual = self.table[f"{name}_residual"].to_numpy()
            known = np.flatnonzero(np.isfinite(residual))
            line: dict[str, Any] = {"name": name, "values": int(known.size), "mean": None, "rms": None, "largest": None, "largest_at_s": None}
            if known.size:
                worst = known[np.abs(residual[known]).argmax()]
                line.update(
                    mean=float(residual[known].mean()), rms=float(np.sqrt((residual[known] ** 2).mean())), largest=float(residual[worst]),
                    largest_at_s=float(self.table["time_s"].iloc[worst]),
                )  # fmt: skip
            found.append(line)
        return found

    def summary(self) -> dict[str, Any]:
        """Return the block measured."""
        return {"moments": len(self.table), "beyond_the_batch": self.beyond, "quantities": self.lines()}

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return measured, computed and residual side by side, and the residuals in figures."""
        return {"measured": self.table, "measured_residuals": pd.DataFrame(self.lines())}


def lay_over(study: Study, point: Mapping[str, float], measured: pd.DataFrame) -> Overlay:
    """Compute a batch (SI) at the moments measured and compare; measured: time_s and columns named as in a profile, or c_<species>_mol_per_m3."""
    model = profile(study, point, measured["time_s"].tolist())
    table, names = {"time_s": measured["time_s"].to_numpy()}, []
    for name in measured.columns:
        if name == "time_s":
            continue
        names.append(str(name))
        if name in model:
            computed = model[name].to_numpy()
        else:  # a concentration
            computed = (model[f"n_{str(name)[2:].removesuffix('_mol_per_m3')}_mol"] / model["volume_m3"]).to_numpy()
        table[f"{name}_measured"], table[f"{name}_model"] = measured[name].to_numpy(), computed
        table[f"{name}_residual"] = measured[name].to_numpy() - computed
    return Overlay(pd.DataFrame(table), tuple(names), int(model["temperature_K"].isna().sum()))
