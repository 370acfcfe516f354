"""Hostile study texts: a study or its faults, never another exception, and never a long wait."""

import random
import re
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sweep.base.errors import StudyError
from sweep.study import Study, read_text

UNCERTAIN = """
[uncertain]
k = { of = "reactions.acylation.rate_constant.value", distribution = "lognormal", relative_sd = 0.10 }
E = { of = "reactions.acylation.rate_constant.activation_energy", distribution = "normal", sd = "2.5 kJ/mol" }
U = { of = "vessel.U", distribution = "triangular", low = "240 W/m2/K", mode = "310 W/m2/K", high = "340 W/m2/K" }
inlet = { of = "cooling.inlet", distribution = "truncated-normal", sd = "2 K", low = "2 degC" }
flow = { of = "cooling.flow", distribution = "uniform", relative_low = 0.8, relative_high = 1.0 }
[[correlations]]
between = ["k", "E"]
rank = 0.6
[[correlations]]
between = ["U", "E"]
linear = -0.3
[risk]
draws = 4096
[sensitivity]
"""
TEXT = Path(__file__).with_name("fedbatch.toml").read_text().replace('"6 h", levels = 15 }', '"6 h", levels = 15, tolerance = { sd = "5 min" } }')
TEXT += UNCERTAIN
DEADLINE = 4000  # ms; a study reads in 20 ms, on a busy machine in a few times that
PIECES = re.findall(r'"[^"\n]*"|[\w.+-]+|[\[\]{}=,]|->|\n', TEXT)
SIGNS = [*'"\'[]{}=,.#\n\\ \t+-*/^()<>%_\x00\u00e9\u2212\u00b7', "<=>", "->", '"""', "'''", "[[", "]]", "nan", "-inf", "1e999", "0", "-1", "1" * 400,
         '"1 K**9**9**9"', '"1e400 mol/L"', '"\\n"', "true", "1979-05-27T07:32:00Z", "0x10", "1_000"]  # fmt: skip


def read_anything(text: str) -> None:
    try:
        study = read_text(text)
    except StudyError as error:
        assert error.faults
        lines = text.replace("\r\n", "\n").count("\n") + 1
        assert all(1 <= f.line <= lines and f.key and f.expected and f.because for f in error.faults)
    else:
        assert isinstance(study, Study)
        assert all(w.because for w in study.warnings)


@settings(max_examples=300, deadline=DEADLINE, suppress_health_check=[HealthCheck.too_slow])
@given(st.lists(st.tuples(st.integers(0, len(TEXT)), st.integers(0, 12), st.sampled_from(["", *SIGNS, *PIECES])), min_size=1, max_size=4))
def test_characters_replaced(changes):
    text = TEXT
    for place, length, new in changes:
        text = text[:place] + new + text[place + length :]
    read_anything(text)


@settings(max_examples=300, deadline=DEADLINE, suppress_health_check=[HealthCheck.too_slow])
@given(st.integers(0, 2**32), st.integers(1, 6))
def test_pieces_exchanged(seed, count):
    """Values and names change places: what is written stays well formed and means something else."""
    draw = random.Random(seed)
    spans = [m.span() for m in re.finditer(r'"[^"\n]*"|[A-Za-z_]\w*|\d+(\.\d+)?', TEXT)]
    text = TEXT
    for start, end in sorted(draw.sample(spans, count), reverse=True):
        other = TEXT[slice(*draw.choice(spans))]
        text = text[:start] + other + text[end:]
    read_anything(text)


@settings(max_examples=150, deadline=DEADLINE, suppress_health_check=[HealthCheck.too_slow])
@given(st.integers(0, 2**32))
def test_lines_exchanged_dropped_and_doubled(seed):
    draw = random.Random(seed)
    lines = TEXT.split("\n")
    for _ in range(draw.randint(1, 5)):
        k = draw.randrange(len(lines))
        lines[k : k + 1] = draw.choice([[], [lines[k]] * 2, [draw.choice(lines)], [draw.choice(lines), lines[k]]])
    read_anything("\n".join(lines))


@pytest.mark.parametrize(
    "value",
    ['"' + "1" * 200_000 + '"', '"1 ' + "(" * 50_000 + '"', '"""1' + "1" * 50_000 + '\nx\ny"""', "[" * 300 + "]" * 300, "1" * 5000,
     '"' + "A + " * 20_000 + 'B -> C"', '"1 ' + " " * 100_000 + 'K K"', "{ a = " * 300 + "1" + " }" * 300],
)  # fmt: skip
@pytest.mark.parametrize("old", ['"6 h"', '"amide -> tar"', "{ at_most = 0.004 }", '"2.2 mol/L"', '["charge_temperature", "dosing_time"]'])
def test_long_values_do_not_hang(value, old):
    read_anything(TEXT.replace(old, value, 1))
