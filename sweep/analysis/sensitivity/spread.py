"""Which constant should be measured better: by how much the probability that all limits hold rises when one input's spread is halved."""

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.chance import Share, change, share
from sweep.plan import draw, inputs_of, set_point
from sweep.plant import holds, margins
from sweep.study.model import Study

HALF = 0.5


def halved_spreads(study: Study, evaluate: Callable[[pd.DataFrame], pd.DataFrame], draws: int, confidence: float) -> tuple[Share, pd.DataFrame]:
    """Return the probability that all limits hold, and for each input by how much it rises, the largest rise first.

    The same draws serve each input (common random numbers): what differs is its spread alone.
    """
    drawn, point = draw(study, draws, "latin-hypercube", "spread"), set_point(study)

    def held(spread: dict[str, float]) -> NDArray[np.bool_]:
        return holds(margins(study, evaluate(drawn.at(point, spread))))

    base, rows = held({}), []
    for name in inputs_of(study):
        after = held({name: HALF})
        rows.append((name, float(after.mean()), *change(base, after, confidence)))
    table = pd.DataFrame(rows, columns=["input", "probability", "rise", "rise_low", "rise_high"])
    return share(base, confidence), table.sort_values("rise", ascending=False, kind="stable", ignore_index=True)
