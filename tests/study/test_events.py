"""Events in a study file: conditions, delays, changes, and what is wrong with them in clear words."""

import pytest

from sweep.base.errors import StudyError
from sweep.study import read_text
from sweep.study.model import Change
from tests.study.test_faults import TEXT

EVENT = """
[[events]]
{cause}
set = {{ {sets} }}
"""


def _with(cause: str, sets: str = '"vessel.U" = { times = 0.5 }') -> str:
    return TEXT.replace("[target]", EVENT.format(cause=cause, sets=sets) + "[target]")


def _faults(cause: str, sets: str = '"vessel.U" = { times = 0.5 }') -> list[tuple[str, str, str]]:
    with pytest.raises(StudyError) as caught:
        read_text(_with(cause, sets))
    return [(f.key, f.expected, f.because) for f in caught.value.faults]


def test_a_condition_is_understood():
    study = read_text(_with('when = { temperature = { above = "75 degC" } }\ndelay = "2 min"\nonce = false\nhysteresis = "2 K"'))
    event = next(event for event in study.events if event.when is not None)
    assert ("temperature", None, "above", False) == (event.when.quantity, event.when.species, event.when.sense, event.once)
    assert {"vessel.U": Change("times")} == event.sets
    keys = ("when.temperature.above", "delay", "hysteresis", "set.vessel.U.times")
    assert [348.15, 120.0, 2.0, 0.5] == [study.values[f"{event.path}.{key}"] for key in keys]


WRONG = {
    "two levels": ('when = { temperature = { above = "75 degC", below = "20 degC" } }', "when", "one quantity, above or below one level"),
    "no table": ('when = "temperature > 75 degC"', "when", "one quantity, above or below one level"),
    "a response": ("when = { accumulation = { above = 0.2 } }", "when.accumulation", "not known here"),
    "another species": ('when = { c_water = { above = "1 mol/L" } }', "when.c_water", "not known here"),
    "neither above nor below": ('when = { temperature = { over = "75 degC" } }', "when.temperature.over", "not known here"),
    "another unit": ('when = { temperature = { above = "75 min" } }', "when.temperature.above", "measures something else"),
    "time beside it": ('time = "1 h"\nwhen = { temperature = { above = "75 degC" } }', "time", "an event has one cause"),
    "delay of a time": ('time = "1 h"\ndelay = "1 min"', "delay", "delay belongs to a condition"),
    "a delay back in time": ('when = { temperature = { above = "75 degC" } }\ndelay = "-1 min"', "delay", "nothing acts before its cause"),
    "hysteresis missing": ('when = { temperature = { above = "75 degC" } }\nonce = false', "hysteresis", "gone back by the hysteresis"),
    "hysteresis of one that fires once": (
        'when = { temperature = { above = "75 degC" } }\nhysteresis = "1 K"', "hysteresis", "only an event that is armed again",
    ),
    "hysteresis from a zero": (
        'when = { temperature = { above = "75 degC" } }\nonce = false\nhysteresis = "1 degC"', "hysteresis", "a difference does not",
    ),
    "no cause": ("", "time", "an event happens at a time, or when a condition is met"),
}  # fmt: skip


@pytest.mark.parametrize("name", list(WRONG))
def test_wrong_causes(name):
    cause, key, because = WRONG[name]
    found = _faults(cause)
    assert 1 == len(found)
    assert found[0][0].startswith("events.")
    assert key == found[0][0].split(".", 2)[2]
    assert because in found[0][2]


@pytest.mark.parametrize(
    ("sets", "because"),
    [
        ('"vessel.U" = { times = 0.5, plus = "1 W/m2/K" }', "a change multiplies or adds"),
        ('"vessel.U" = { times = -0.5 }', "not negative"),
        ('"cooling.inlet" = { plus = "10 degC" }', "a difference does not"),
        ('"recipe.feeds.anhydride.rate_factor" = -1', "a feed runs forward"),
        ('"recipe.feeds.nothing.rate_factor" = 0', "not known here"),
        ('"cooling.duty" = { times = 0.5 }', "a change is of what was written"),
        ('"vessel.U" = "restored"', "a quantity is a number and its unit"),
    ],
)
def test_wrong_changes(sets, because):
    found = _faults('time = "1 h"', sets)
    assert 1 == len(found)
    assert because in found[0][2]


def test_two_events_that_set_one_thing():
    second = EVENT.format(cause='time = "60 min"', sets='"vessel.U" = "200 W/m2/K"')
    same = _with('time = "1 h"', '"vessel.U" = "100 W/m2/K"').replace("[target]", second + "[target]")
    with pytest.raises(StudyError, match="event 1 sets it too"):
        read_text(same)
    hot = 'when = { temperature = { above = "75 degC" } }'
    same = _with(hot, '"vessel.U" = "100 W/m2/K"').replace("[target]", EVENT.format(cause=hot, sets='"vessel.U" = "200 W/m2/K"') + "[target]")
    with pytest.raises(StudyError, match="one event for it at one condition"):
        read_text(same)
    read_text(same.replace("200 W/m2/K", "100 W/m2/K"))  # to the same value: no harm


@pytest.mark.parametrize("cause", ["when = { conversion = { above = 1.0 } }", 'when = { n_amine = { below = "0 mol" } }'])
def test_an_event_that_can_never_fire_is_a_warning(cause):
    assert "the event can never fire" in [w.because for w in read_text(_with(cause)).warnings]


def test_conditions_without_what_they_need():
    from tests.texts import isothermal

    event = '[[events]]\nwhen = {{ {0} }}\nset = {{ "reactions.r0.rate_constant.value" = {{ times = 0.5 }} }}\n'
    text = isothermal("A -> R | 1e-3 1/s")
    for condition, because in (
        ('jacket_temperature = { above = "50 degC" }', "without a jacket it has no temperature"),
        ('heat_release = { above = "5 kW" }', "the condition on heat_release needs the heats"),
    ):
        with pytest.raises(StudyError, match=because):
            read_text(text.replace("[target]", event.format(condition) + "[target]"))
    bare = text.split("[target]")[0] + event.format("conversion = { above = 0.5 }")
    with pytest.raises(StudyError, match="it counts on the target species"):
        read_text(bare)


def _named(*entries: str) -> str:
    events = "".join(f'[[events]]\n{entry}\nset = {{ "vessel.U" = {{ times = 0.{k + 1} }} }}\n' for k, entry in enumerate(entries))
    return TEXT.replace("[target]", events + "[target]")


@pytest.mark.parametrize(
    ("entries", "because"),
    [
        (('after = "trip"',), "no event of this list has that name"),
        (('name = "a"\nafter = "b"', 'name = "b"\nafter = "a"'), "they wait for each other"),
        (('name = "a"\ntime = "1 h"', 'name = "a"\ntime = "2 h"'), "another event has it"),
        (('name = "a"\ntime = "1 h"', 'after = "a"\ntime = "2 h"'), "an event has one cause"),
        (
            ('name = "a"\ntime = "1 h"', 'after = "a"\nwhen = { temperature = { above = "75 degC" } }\nonce = false\nhysteresis = "1 K"'),
            "is armed by it each time",
        ),
        (("name = 3\ntime = \"1 h\"",), "events are named for those that wait for them"),
    ],
)
def test_wrong_order_of_events(entries, because):
    with pytest.raises(StudyError, match=because):
        read_text(_named(*entries))
