"""A study with D variables x0, x1, ... from 0 to 1, and limits that are made-up functions of them in the place of the march."""

from dataclasses import replace

import numpy as np
import pandas as pd

from sweep.plant import responses
from sweep.study import read_text
from tests.texts import isothermal


def space(size, extra, uncertain="", at=0.5, limits=1, seed=11, unit="J/mol"):
    """Return a study of D variables, each the heat of a reaction of its own, written at `at` (one value or D of them)."""
    where = np.broadcast_to(at, size)
    lines = "\n".join(f'A -> R | 1e-3 1/s | heat = {{ value = "{float(x)!r} {unit}" }}' for x in where)
    lines += '\nA -> R | 1e-3 1/s | heat = { value = "0 J/mol" }'
    bounds = "\n".join(f"{name} = {{ at_least = -1000 }}" for name in ("fraction_A", "fraction_R", "accumulation")[: limits])
    variables = "\n".join(f'x{k} = {{ sets = "reactions.r{k}.heat.value", from = "0 {unit}", to = "1 {unit}" }}' for k in range(size))
    text = isothermal(lines, conversion=0.5) + f"\n[cooling]\nkind = 'isothermal'\n[limits]\n{bounds}\n[variables]\n{variables}\n"
    text += f"[uncertain]\nz = {{ of = \"reactions.r{size}.heat.value\", {uncertain} }}\n" if uncertain else ""
    return replace(read_text(text + extra + "\n"), seed=seed)


def rows(study, *functions, status=None, **others):
    """Return `evaluate`: the margins of the limits are `functions` of the variables (N, D) and of z (N,); others: column -> function."""
    names = [v.name for v in study.variables]
    columns = [limit.response for limit in study.limits]

    def evaluate(points):
        x = np.column_stack([points[name] if name in points else np.full(len(points), study.values[f"reactions.r{k}.heat.value"])
                             for k, name in enumerate(names)])  # fmt: skip
        z = points["z"].to_numpy() if "z" in points else np.zeros(len(points))
        table = pd.DataFrame({one.column: np.zeros(len(points)) for one in responses(study)}, index=points.index)
        table["conversion"] = 1.0
        for column, function in zip(columns, functions, strict=True):
            table[column] = np.asarray(function(x, z), dtype=float) - 1000.0
        for column, function in others.items():
            table[column] = function(x, z)
        table["status"] = "done" if status is None else status(x)
        table["reason"] = ""
        evaluate.marches += len(points)
        return pd.concat([points, table], axis=1)

    evaluate.marches = 0
    return evaluate
