"""What a run over time needs of a case: one clear error at the place for each thing that is missing."""

from __future__ import annotations

import pytest

from coldseam.case.read import loads
from coldseam.errors import CaseError

CASE = """
title = "wall"
[model]
dimensions = 2
[time]
duration = "2 h"
start = 20
[spaces.room]
film = 8
[spaces.room.floating]
heat_capacity = 5000
[spaces.hall]
temperature = 25
film = 8
[materials.foam]
conductivity = 0.03
density = 30
specific_heat = 1400
[[body]]
name = "wall"
material = "foam"
box = { from = [0, 0], to = [100, 200] }
[[boundary]]
name = "in"
on = { plane = { x = 0 } }
space = "room"
[[boundary]]
name = "rest"
on = "rest"
space = "hall"
"""
SKIN = '[materials.steel]\nconductivity = 50\n[[sheet]]\nname = "skin"\nmaterial = "steel"\nthickness = 1\non = { plane = { x = 0 } }\n'
FAULTS = {
    "no density": ("density = 30\n", "", "materials.foam: a run over time needs density of every body's material"),
    "no capacity": (
        "density = 30\nspecific_heat = 1400\n",
        "",
        "materials.foam: a run over time needs density and specific_heat of every body's material",
    ),
    "a sheet stores heat too": ("[[body]]", SKIN + "[[body]]", "materials.steel: a run over time needs density and spec"),
    "space without capacity": ("heat_capacity = 5000\n", "", "spaces.room.floating.heat_capacity: is needed in a run over"),
    "schedule shorter than the run": (
        "temperature = 25",
        'temperature = { table = [["0 h", 20], ["1 h", 30]] }',
        "spaces.hall.temperature: ends at 3600 s, before the run does at 7200 s",
    ),
    "schedule not in order": (
        "temperature = 25",
        'temperature = { table = [["0 h", 20], ["3 h", 30], ["2 h", 30]] }',
        "the times are not in order: 7200 s comes after 10800 s",
    ),
    "no duration": ('duration = "2 h"', 'duration = "0 h"', "time.duration: must be above 0"),
    "an event of no space": (
        "[[body]]",
        '[[event]]\nname = "e"\nwhen = { space = "romm", falls_below = 1 }\n[[body]]',
        'no space is called "romm"; did you mean "room"?',
    ),
}  # fmt: skip


def test_the_case_itself_is_good():
    assert loads(CASE).time.duration == 7200


@pytest.mark.parametrize("which", FAULTS)
def test_fault(which):
    old, new, told = FAULTS[which]
    assert old in CASE
    with pytest.raises(CaseError) as caught:
        loads(CASE.replace(old, new, 1))
    assert len(caught.value.faults) == 1
    assert told in str(caught.value)


def test_a_repeated_schedule_is_long_enough():
    schedule = '{ table = [["0 h", 20], ["1 h", 30]], repeat = true }'
    assert (
        loads(CASE.replace("temperature = 25", f"temperature = {schedule}")).spaces["hall"].temperature.period == 3600
    )
