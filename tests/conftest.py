"""What every test may use."""

import signal
import threading

import pandas as pd
import pytest

from sweep.plant import evaluate
from sweep.study import read_text

if signal.getsignal(signal.SIGINT) == signal.SIG_IGN and threading.current_thread() is threading.main_thread():
    # what a shell starts in the background ignores Ctrl-C, and so would every program that a test starts and then interrupts
    signal.signal(signal.SIGINT, signal.default_int_handler)


@pytest.fixture
def set_point():  # type: ignore[no-untyped-def]
    """Return a function from a study's text to the responses of its set-point."""

    def respond(text: str) -> pd.Series:
        return evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]

    return respond
