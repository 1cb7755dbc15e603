"""A floating space whose films depend on its own temperature, in a steady run."""

from __future__ import annotations

import pytest

from coldseam.case import read
from coldseam.study import run

ROOM = """
title = "room that a heater warms"
[model]
dimensions = 2
accuracy = "1 %"
[spaces.out]
temperature = 5
film = 10
[spaces.room]
convection = { kind = "free", surface = "vertical", length = 500 }
radiation = { emissivity = 0.9 }
HELD
[materials.board]
conductivity = 0.2
[[body]]
name = "board"
material = "board"
box = { from = [0, 0], to = [20, 500] }
[[boundary]]
name = "face"
on = { plane = { x = 20 } }
space = "room"
[[boundary]]
name = "back"
on = { plane = { x = 0 } }
space = "out"
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
"""


def test_all_of_the_gain_goes_through_the_wall_at_the_balance():
    floating = run(read.loads(ROOM.replace("HELD", "[spaces.room.floating]\nheat_capacity = 1000\ngain = 50"))).answers
    room = floating.spaces["room"]
    assert room.heat_flow == pytest.approx(50, rel=1e-4)  # W per metre: the balance settles to 1e-4 K of some 30 K
    # The same room held at the temperature found: one nonlinear problem, met from the other side.
    held = run(read.loads(ROOM.replace("HELD", f"temperature = {room.temperature}"))).answers
    assert held.spaces["room"].heat_flow == pytest.approx(50, rel=1e-3)
    # Series resistances with the film that the answer made: 50 W over 0.5 m² through h, board and outer film.
    film = (
        floating.boundaries["face"].heat_flow / 0.5 / (room.temperature - floating.boundaries["face"].temperature.mean)
    )
    assert room.temperature == pytest.approx(5 + 100 * (1 / film + 0.02 / 0.2 + 1 / 10), rel=1e-3)
