"""What reaches the terminal."""

from sweep.cli.tell_batch import difference, in_words
from sweep.cli.terminal import Terminal, duration, printable


def test_control_characters_do_not_reach_the_terminal():
    assert "a\N{REPLACEMENT CHARACTER}[31mb\nc" == printable("a\x1b[31mb\nc")


def test_durations_read_well():
    assert ["12 s", "3.5 min", "5 h", "3 d"] == [duration(s) for s in (12.0, 210.0, 18_000.0, 259_200.0)]


def test_margins_of_temperatures_are_differences():
    assert "+9.9 K" == difference(9.9, "K")
    assert "-1.5 kW" == difference(-1500.0, "W")
    assert "65 degC" == in_words(338.15, "K")
    assert "-" == in_words(None, "K")


def test_plain_lines_of_progress_off_terminal(capsys):
    from sweep.runner import Progress

    terminal = Terminal()
    terminal.progress(Progress(10, 100, 5.0, 18.0))
    terminal.progress(Progress(20, 100, 5.0, 16.0))
    terminal.progress(Progress(100, 100, 5.0, 0.0))
    said = capsys.readouterr().err.splitlines()
    assert ["10 of 100 points, 5 points/s, 18 s left", "100 of 100 points, 5 points/s"] == said


def test_quiet_prints_no_progress(capsys):
    from sweep.runner import Progress

    Terminal(quiet=True).progress(Progress(100, 100, 5.0, 0.0))
    assert "" == capsys.readouterr().err
