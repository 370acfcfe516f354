"""What every test may use."""

import pandas as pd
import pytest

from sweep.plant import evaluate
from sweep.study import read_text


@pytest.fixture
def set_point():  # type: ignore[no-untyped-def]
    """Return a function from a study's text to the responses of its set-point."""

    def respond(text: str) -> pd.Series:
        return evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]

    return respond
