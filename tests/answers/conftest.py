"""Small cases for the answers' tests, each solved once a session."""

from __future__ import annotations

import pytest

from coldseam.case import read
from coldseam.study import run

CORNER = """
title = "homogeneous corner"
[model]
dimensions = 2
accuracy = "0.02 %"
[spaces.room]
temperature = 20
surface_resistance = 0
[spaces.outside]
temperature = -5
surface_resistance = 0
[materials.wall]
conductivity = 2.5
[[body]]
name = "walls"
material = "wall"
polygon = { points = [[0, 0], [1100, 0], [1100, 100], [100, 100], [100, 1100], [0, 1100]] }
[[boundary]]
name = "outside"
on = { shell = "outer", within = { from = [0, 0], to = [1100, 0] } }
space = "outside"
[[boundary]]
name = "outside too"
on = { plane = { x = 0 } }
space = "outside"
[[boundary]]
name = "inside"
on = { within = { from = [100, 100], to = [1100, 1100] } }
space = "room"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
[[bridge]]
name = "corner"
kind = "linear"
basis = "both"
flanking = [
  { layers = [["wall", 100]], length = 1000, length_external = 1100, between = ["room", "outside"] },
  { layers = [["wall", 100]], length = 1000, length_external = 1100, between = ["room", "outside"] },
]
"""

# Three rooms round a tee of two walls; a contact, a sheet, a turned material and a film of its own among them.
TEE = """
title = "three rooms"
[model]
dimensions = 2
accuracy = "2 %"
[spaces.left]
temperature = 21
surface_resistance = 0.13
relative_humidity = "70 %"
[spaces.right]
temperature = 12
surface_resistance = 0.13
relative_humidity = "95 %"
[spaces.outside]
temperature = -10
film = 25
relative_humidity = "90 %"
[materials.brick]
conductivity = 0.8
uncertainty = "10 %"
[materials.foam]
conductivity = 0.04
uncertainty = "20 %"
[materials.skin]
conductivity = 50
[materials.board]
conductivity = [0.3, 0.1]
axes = [[0.8, 0.6], [-0.6, 0.8]]
[[body]]
name = "brick"
material = "brick"
box = { from = [0, 0], to = [1000, 200] }
[[body]]
name = "foam"
material = "foam"
box = { from = [0, 0], to = [1000, 80] }
[[body]]
name = "partition"
material = "board"
box = { from = [450, 200], to = [550, 900] }
[[contact]]
name = "joint"
between = ["brick", "partition"]
resistance = 0.05
[[sheet]]
name = "skin"
material = "skin"
thickness = 0.5
on = { plane = { y = 0 } }
[[boundary]]
name = "facade"
on = { plane = { y = 0 } }
space = "outside"
[[boundary]]
name = "left wall"
on = { within = { from = [0, 200], to = [450, 200] } }
space = "left"
[[boundary]]
name = "left partition"
on = { plane = { x = 450 } }
space = "left"
film = 4
[[boundary]]
name = "right"
on = { within = { from = [550, 200], to = [1000, 900] } }
space = "right"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
[[probe]]
name = "in the brick"
at = [500, 150]
"""

# A heater in the middle of the tee's foam.
HEATED = (
    TEE
    + """
[[body]]
name = "heater"
material = "skin"
heat_source = 6
box = { from = [480, 60], to = [520, 70] }
"""
)

# A pin through foam, turned: quick to solve, and its chi is large enough to be known well.
PIN = """
title = "pin"
[model]
dimensions = 2
axisymmetric = true
accuracy = "2 %"
[spaces.warm]
temperature = 20
surface_resistance = 0.13
[spaces.cold]
temperature = -20
surface_resistance = 0.13
[materials.foam]
conductivity = 0.03
[materials.pin]
conductivity = 17
[[body]]
name = "foam"
material = "foam"
box = { from = [0, 0], to = [150, 100] }
[[body]]
name = "pin"
material = "pin"
box = { from = [0, 0], to = [6, 100] }
[[body]]
name = "head"
material = "pin"
box = { from = [0, 100], to = [15, 105] }
[[boundary]]
name = "cold face"
on = { plane = { y = 0 } }
space = "cold"
[[boundary]]
name = "warm face"
on = { plane = { y = 100 } }
space = "warm"
[[boundary]]
name = "warm head"
on = { body = "head" }
space = "warm"
[[boundary]]
name = "cut"
on = "rest"
adiabatic = true
[[bridge]]
name = "pin"
kind = "point"
without = ["pin", "head"]
"""


@pytest.fixture(scope="session")
def corner():
    return run(read.loads(CORNER))


@pytest.fixture(scope="session")
def tee():
    return run(read.loads(TEE))


@pytest.fixture(scope="session")
def heated():
    return run(read.loads(HEATED))


@pytest.fixture(scope="session")
def pin():
    return run(read.loads(PIN))


@pytest.fixture(scope="session")
def texts():
    return {"corner": CORNER, "tee": TEE, "heated": HEATED, "pin": PIN}
