"""A study whose responses are made up: uncertain inputs x0, x1, ... and a function of them in the place of the march."""

from dataclasses import replace

import numpy as np
import pandas as pd

from sweep.plant import responses
from sweep.study import read_text
from tests.texts import isothermal


def study_of(entries, extra="", conversion=0.5, seed=7, correlations=""):
    """Return a study with an uncertain input for each entry, such as 'distribution = "normal", sd = "1 J/mol"', around zero."""
    lines = "\n".join('A -> R | 1e-3 1/s | heat = { value = "0 J/mol" }' for _ in entries)
    inputs = "\n".join(f'x{k} = {{ of = "reactions.r{k}.heat.value", {entry} }}' for k, entry in enumerate(entries))
    text = isothermal(lines, conversion=conversion) + f"\n[cooling]\nkind = 'isothermal'\n[uncertain]\n{inputs}\n{correlations}\n{extra}\n"
    return replace(read_text(text), seed=seed)


def uniform(low, high):
    return f'distribution = "uniform", low = "{low!r} J/mol", high = "{high!r} J/mol"'


def normal(sd):
    return f'distribution = "normal", sd = "{sd} J/mol"'


def evaluating(study, function, column="conversion", status=None, **others):
    """Return a function from points to rows: one response is `function` of the inputs (N, D), the others are zero or as given."""
    names = [one.name for one in study.uncertain]

    def evaluate(points):
        inputs = points[names].to_numpy()
        table = pd.DataFrame({one.column: np.zeros(len(points)) for one in responses(study)}, index=points.index)
        table[column] = function(inputs)
        for name, other in others.items():
            table[name] = other(inputs)
        table["status"] = "done" if status is None else status(inputs)
        table["reason"] = ""
        return pd.concat([points, table], axis=1)

    return evaluate
