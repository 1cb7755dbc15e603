"""What must not change an answer: shifted temperatures, scaled conductivities and lengths, turned and cut models.

Where both runs use the same mesh, answers agree to round-off; where the meshes differ, two intervals of the same
number must meet. ``max_nodes = 10`` stops at the first mesh, so that runs of the same geometry share it.
"""

from __future__ import annotations

import pytest
from published.runs import as_json

from coldseam.case import read
from coldseam.study import run

SAME = 1e-7
"""Relative difference of two runs on one mesh: solvers stop at an energy error of some 1e-8."""

SECTION = """
title = "Angle of two materials"
[model]
dimensions = 2
accuracy = {accuracy}
max_nodes = {nodes}
[spaces.warm]
temperature = {warm}
film = {h}
[spaces.cold]
temperature = {cold}
surface_resistance = {r}
[materials.foam]
conductivity = {foam}
[materials.post]
conductivity = {post}
[[body]]
name = "walls"
material = "foam"
polygon = {{ points = {points} }}
[[body]]
name = "post"
material = "post"
heat_density = {heat}
polygon = {{ points = {square} }}
[[boundary]]
name = "outside"
on = {{ {outside} }}
space = "warm"
[[boundary]]
name = "outside too"
on = {{ {outside_too} }}
space = "warm"
[[boundary]]
name = "inside"
on = {{ {inside} }}
space = "cold"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
[[probe]]
name = "corner"
at = {corner}
"""

PLAIN = dict(accuracy=0.01, nodes=10, warm=20.0, cold=-10.0, h=8.0, r=0.125, foam=0.03, post=0.15, heat=0.0)


def section(scale=1.0, turn=(1.0, 0.0), **more) -> dict:
    """Return the answers of an L-shaped section, its lengths scaled and its plane turned by (cos, sin)."""
    c, s = turn

    def at(x, y):
        return [scale * (c * x - s * y), scale * (s * x + c * y)]

    def around(*points):
        xs, ys = zip(*(at(*point) for point in points), strict=True)
        return f"within = {{ from = [{min(xs)}, {min(ys)}], to = [{max(xs)}, {max(ys)}] }}"

    places = dict(
        points=[at(*p) for p in ((0, 0), (300, 0), (300, 100), (100, 100), (100, 300), (0, 300))],
        square=[at(*p) for p in ((0, 0), (100, 0), (100, 100), (0, 100))],
        outside=around((0, 0), (300, 0)),
        outside_too=around((0, 0), (0, 300)),
        inside=around((100, 100), (300, 100), (100, 300)),
        corner=at(100, 100),
    )
    return as_json(run(read.loads(SECTION.format(**(PLAIN | places | more)))))


def flow(answers: dict, space: str = "cold") -> float:
    return answers["spaces"][space]["heat_flow"]


def corner(answers: dict) -> float:
    return answers["probes"]["corner"]["temperature"]


def meet(one: dict, other: dict, factor: float = 1.0, space: str = "cold") -> bool:
    """Return whether two intervals hold a common value, the first one multiplied by ``factor``."""
    a, b = (answers["spaces"][space] for answers in (one, other))
    low, high = sorted((factor * a["heat_flow_low"], factor * a["heat_flow_high"]))
    slack = 1e-9 * abs(high)
    return low - slack <= b["heat_flow_high"] and b["heat_flow_low"] - slack <= high


@pytest.fixture(scope="module")
def plain():
    return section()


def test_a_shift_of_all_temperatures_shifts_temperatures_and_no_flow(plain):
    shifted = section(warm=PLAIN["warm"] + 100, cold=PLAIN["cold"] + 100)
    assert flow(shifted) == pytest.approx(flow(plain), rel=SAME)
    assert corner(shifted) == pytest.approx(corner(plain) + 100, abs=SAME * 30)


def test_the_size_of_the_temperature_difference_scales_the_flow(plain):
    doubled = section(warm=40.0, cold=-20.0)
    assert flow(doubled) == pytest.approx(2 * flow(plain), rel=SAME)
    assert corner(doubled) == pytest.approx(2 * corner(plain), abs=SAME * 60)


def test_exchanged_temperatures_turn_the_flow_round(plain):
    turned = section(warm=-10.0, cold=20.0)
    assert flow(turned) == pytest.approx(-flow(plain), rel=SAME)


def test_conductivities_and_films_times_c_give_flows_times_c(plain):
    c = 37.0
    scaled = section(h=c * 8.0, r=0.125 / c, foam=c * 0.03, post=c * 0.15)
    assert flow(scaled) == pytest.approx(c * flow(plain), rel=SAME)
    assert corner(scaled) == pytest.approx(corner(plain), abs=SAME * 30)


@pytest.mark.parametrize("scale", [0.01, 2.0, 50.0])
def test_lengths_times_s_with_films_over_s_keep_the_flow_per_depth(plain, scale):
    scaled = section(scale=scale, h=8.0 / scale, r=0.125 * scale)
    assert meet(plain, scaled)
    # Sizes of elements follow the model's size, so the meshes are alike: 1 % is far below the width of the interval.
    assert flow(scaled) == pytest.approx(flow(plain), rel=0.01)


@pytest.mark.parametrize("turn", [(0.0, 1.0), (-1.0, 0.0), (0.8, 0.6)], ids=["90", "180", "36.87"])
def test_a_turned_model_answers_the_same(turn):
    straight, turned = section(accuracy=0.005, nodes=100000), section(accuracy=0.005, nodes=100000, turn=turn)
    assert meet(straight, turned)
    assert flow(turned) == pytest.approx(flow(straight), rel=0.01)
    assert corner(turned) == pytest.approx(corner(straight), abs=0.05)


def test_temperatures_and_sources_superpose(plain):
    source = section(warm=0.0, cold=0.0, heat=500.0)
    both = section(heat=500.0)
    assert flow(both) == pytest.approx(flow(plain) + flow(source), rel=SAME)
    assert corner(both) == pytest.approx(corner(plain) + corner(source), abs=SAME * 30)
    # 500 W/m³ in 0.01 m² leave through the two rooms.
    assert flow(source) + flow(source, "warm") == pytest.approx(-5.0, rel=1e-6)


SOLID = """
title = "The angle drawn out"
[model]
dimensions = 3
accuracy = 0.05
max_nodes = 4000
[spaces.warm]
temperature = 20
film = 8
[spaces.cold]
temperature = -10
surface_resistance = 0.125
[materials.foam]
conductivity = 0.03
[materials.post]
conductivity = 0.15
[[body]]
name = "walls"
material = "foam"
polygon = {{ points = {points}, axis = "{axis}", from = 0, to = 150 }}
[[body]]
name = "post"
material = "post"
polygon = {{ points = [[0, 0], [100, 0], [100, 100], [0, 100]], axis = "{axis}", from = 0, to = 150 }}
[[boundary]]
name = "outside"
on = {{ plane = {{ {u} = 0 }} }}
space = "warm"
[[boundary]]
name = "outside too"
on = {{ plane = {{ {v} = 0 }} }}
space = "warm"
[[boundary]]
name = "inside"
on = {{ within = {{ from = {low}, to = {high} }} }}
space = "cold"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
"""


ANGLE = [[0, 0], [300, 0], [300, 100], [100, 100], [100, 300], [0, 300]]


@pytest.mark.parametrize("axis", ["x", "y", "z"])
def test_a_section_and_the_solid_drawn_out_agree(axis):
    """150 mm of the solid carry 0.15 of what the section carries per metre, whichever way it is drawn out."""
    u, v = {"x": "yz", "y": "zx", "z": "xy"}[axis]
    low, high = ([{u: ends, v: ends, axis: along}[name] for name in "xyz"] for ends, along in ((100, 0), (300, 150)))
    solid = as_json(run(read.loads(SOLID.format(axis=axis, points=ANGLE, u=u, v=v, low=low, high=high))))
    flat = section(accuracy=0.005, nodes=100000)
    assert meet(flat, solid, factor=0.15)
    assert flow(solid) == pytest.approx(0.15 * flow(flat), rel=0.05)


BOX = """
title = "Part of a box"
[model]
dimensions = 3
accuracy = 0.03
max_nodes = 5000
[spaces.warm]
temperature = 30
film = 8
[spaces.cold]
temperature = -20
film = 8
[materials.foam]
conductivity = 0.025
[[body]]
name = "walls"
enclosure = {{ inside = {{ from = {low}, to = [200, 150, 100] }}, layers = [["foam", 60]], faces = {{ {open} }} }}
[[boundary]]
name = "inside"
on = {{ within = {{ from = {low}, to = [200, 150, 100] }} }}
space = "cold"
{cuts}
[[boundary]]
name = "outside"
on = "rest"
space = "warm"
"""

CUT = '[[boundary]]\nname = "cut {0}"\non = {{ plane = {{ {0} = 0 }} }}\nadiabatic = true'


def box(cut: str) -> dict:
    """Return the answers of a box cut at the planes through its middle that are named, such as ``"xy"``."""
    low = [0 if axis in cut else -half for axis, half in zip("xyz", (200, 150, 100), strict=True)]
    text = BOX.format(low=low, open=", ".join(f'"-{a}" = []' for a in cut), cuts="\n".join(CUT.format(a) for a in cut))
    return as_json(run(read.loads(text)))


@pytest.mark.parametrize("cut", ["x", "xyz"])
def test_the_parts_of_a_symmetric_whole_add_up(cut):
    whole, part = box(""), box(cut)
    assert meet(part, whole, factor=2.0 ** len(cut))
    assert 2.0 ** len(cut) * flow(part) == pytest.approx(flow(whole), rel=0.03)
