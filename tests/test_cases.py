"""Every shipped case runs, closes its balance, and gives a number that a hand calculation brackets.

The brackets are Rayleigh's: making any part of a body a perfect conductor (isothermal planes) can only raise the heat
flow, and cutting it with perfect insulation (adiabatic tubes) can only lower it (Maxwell, A Treatise on Electricity and
Magnetism, 1873, articles 306-307). So the true heat flow lies between two sums of resistances, whatever the program
says.
"""

from __future__ import annotations

import math

import pytest
from published import exact, runs
from scipy.special import iv, kv

FOAM_PIR, FOAM_PUR, FOAM_XPS = 0.027, 0.026, 0.035
STAINLESS, STEEL, ALUMINIUM = 17.0, 50.0, 160.0
SOFTWOOD, HARDWOOD, GRP = 0.13, 0.18, 0.4
"""W/(m K), typed again from the sources of the materials library so that a change there is noticed."""

CHECKED = {
    "freezer-panel": "adiabatic tubes and isothermal planes",
    "skinned-panel": "adiabatic tubes, isothermal planes, and the bolt between two fins",
    "skinned-panel-meshed": "as the panel with sheets",
    "hundred-bolts": "a hundred times one bolt",
    "panel-corner": "plain walls below, edge excess above",
    "box-with-door-frame": "plain walls below, exact edges and corners above",
    "pipe-penetration": "two fins, a rod and a wall",
    "finned-housing": "heat over film and area, fin efficiency",
    "step-support": "adiabatic tubes, isothermal planes",
    "foreign-mesh": "radial sectors",
    "panel-joint-through": "fins and a web in series (tests/answers/test_shipped.py, as all below)",
    "panel-joint-broken": "less than the web without break, more than none",
    "bolt-pattern-steel": "adiabatic tubes, fins and a rod in series",
    "bolt-pattern-stainless": "as steel",
    "bolt-pattern-plastic": "as steel",
    "door-gasket-heater": "the balance with the wire, the watts found by trying",
    "freezer-wall-sun-and-wind": "tubes and planes with films by hand (tests/solution/test_shipped.py, as all below)",
    "cold-box-support": "integrals of the conductivities in series",
    "potted-power-supply": "the balance of its surface at one temperature",
    "double-skin-lid": "tubes and planes with the layer formula by hand",
    "floor-wall-corner": "plain walls below, edges of a perfect slab above",
}
"""What each case's number rests on."""

QUICK = {
    "box-with-door-frame": (("model.max_nodes", 12000),),
    "step-support": (("model.max_nodes", 19000),),
    "hundred-bolts": (
        ("body[panel].box.to", [200, 200, 100]),
        ("body[bolts].repeat.count", [2, 2]),
        ("model.max_nodes", 20000),
    ),
}
"""What makes a case that takes over half a minute quick enough for every day: its heat flows are proven all the same,
if not the settling of its temperatures, or it is a part of the whole. The slow tests run the files as they are."""

SLOW = {*QUICK, "floor-wall-corner"}
"""Cases that take more than half a minute as they are shipped."""

FILES = sorted(p.stem for p in runs.SHIPPED.glob("*.toml") if "\n[time]\n" not in p.read_text(encoding="utf-8"))
"""The steady ones; tests/test_timed_cases.py has those over time."""


def everyday(stem: str) -> dict:
    """Return the answers of a shipped case, of its quick form where it has one."""
    return runs.shipped(stem, QUICK.get(stem, ()))


def test_every_case_is_checked():
    assert set(FILES) == set(CHECKED)


@pytest.mark.parametrize("stem", FILES)
def test_case_says_that_it_is_invented(stem):
    head = (runs.SHIPPED / f"{stem}.toml").read_text(encoding="utf-8").split("title =")[0]
    assert "invented" in head
    assert "Caution" in head


@pytest.mark.parametrize("stem", [stem for stem in FILES if stem in QUICK or stem not in SLOW])
def test_balance_closes_and_intervals_are_as_narrow_as_asked(stem):
    assert complaints(stem, everyday(stem)) == []


@pytest.mark.slow
@pytest.mark.parametrize("stem", sorted(SLOW))
def test_slow_case_as_it_is_shipped(stem):
    assert complaints(stem, runs.shipped(stem)) == []


def complaints(stem: str, answers: dict) -> list[str]:
    """Return what is wrong whatever the case is about: balance, intervals, and their width against what was asked."""
    wrong = runs.faults(answers)
    accuracy = runs.case_of(runs.SHIPPED / f"{stem}.toml").model.accuracy
    for name, space in answers["spaces"].items():
        width = space["heat_flow_high"] - space["heat_flow_low"]
        if not width <= 2 * accuracy * abs(space["heat_flow"]):
            wrong.append(f"{name}: {width:g} W wide")
    return wrong


def between(*resistances: float) -> float:
    """Return the conductance of resistances in series, W/K, from K/W."""
    return 1.0 / math.fsum(resistances)


def bolted(*, area, k, thickness, bolts, diameter, h_one, h_other, outer=None) -> tuple[float, float]:
    """Return (adiabatic tubes, isothermal planes) for a wall with bolts, W/K.

    ``outer`` is what else touches the air: (area of foam covered by a head, area of a head in the air), m².
    """
    section = math.pi * diameter**2 / 4
    covered, head = outer or (section, section)
    foam = area - bolts * covered
    through = between(1 / (h_one * section), thickness / (STAINLESS * section), 1 / (h_other * section))
    low = foam * exact.series(1 / h_one, thickness / k, 1 / h_other) + bolts * through
    air = foam + bolts * head
    middle = (k * (area - bolts * section) + STAINLESS * bolts * section) / thickness
    return low, between(1 / (h_one * air), 1 / middle, 1 / (h_other * air))


def test_freezer_panel_lies_between_tubes_and_planes():
    covered = math.pi * 0.030**2 / 4
    head = covered + math.pi * 0.030 * 0.004
    low, high = bolted(
        area=0.36, k=FOAM_PIR, thickness=0.1, bolts=4, diameter=0.008, h_one=8, h_other=1 / 0.13, outer=(covered, head)
    )
    assert high < 1.35 * low, "a bracket that says something"
    answers = runs.shipped("freezer-panel")
    assert 45 * low < answers["spaces"]["bay"]["heat_flow"] < 45 * high
    # Far from the bolts the wall is plain: its warm surface is 25 - 45 U Rsi, nearly (bolts take heat from there too).
    plain = 25 - 45 * 0.13 * exact.series(1 / 8, 0.1 / FOAM_PIR, 0.13)
    assert answers["probes"]["warm face between bolts"]["temperature"] == pytest.approx(plain, abs=0.05)
    assert answers["probes"]["middle of a warm head"]["temperature"] < plain - 1


def test_freezer_panel_has_the_surface_that_it_is_drawn_with():
    answers = runs.shipped("freezer-panel")
    sides = math.pi * 0.030 * 0.004
    # Heads are meshed as polygons of at least 24 sides: their rims are short by 0.3 % at most, of 0.4 % of the area.
    for name in ("warm side", "cold side"):
        assert answers["boundaries"][name]["area"] == pytest.approx(0.36 + 4 * sides, rel=2e-5)


def skinned_bolt(k: float, h: float) -> float:
    """Return an estimate of the conductance that a bolt adds between two skins, W/K, for a quarter of the panel.

    Each skin is an annular fin about the bolt (Incropera, DeWitt, section 3.6, modified Bessel functions) that
    exchanges heat with the air and with the foam's middle plane; fins and bolt are in series. What the foam conducts
    into the bolt's flank is neglected, which costs some percent of the small difference.
    """
    t, radius, reach = 0.0005, 0.005, 0.3 / math.sqrt(math.pi)
    m = math.sqrt((h + 2 * k / 0.1) / (STEEL * t))
    a, b = m * radius, m * reach
    shape = (iv(1, b) * kv(1, a) - kv(1, b) * iv(1, a)) / (kv(0, a) * iv(1, b) + iv(0, a) * kv(1, b))
    skin = 2 * math.pi * STEEL * t * a * shape
    bolt = STAINLESS * math.pi * radius**2 / 0.1
    share = (0.1 / k) * exact.series(1 / h, 0.1 / k, 1 / h)
    # The undisturbed skins differ by `share` of the rooms' difference, and a watt taken from a skin is missed by the
    # room in the same share (reciprocity): hence the square.
    return share**2 * between(1 / skin, 1 / bolt, 1 / skin) / 4


@pytest.mark.parametrize("stem", ["skinned-panel", "skinned-panel-meshed"])
def test_skinned_panel_lies_between_tubes_and_planes(stem):
    h = 1 / 0.13
    low, high = bolted(area=0.0225, k=FOAM_PUR, thickness=0.1, bolts=0.25, diameter=0.010, h_one=h, h_other=h)
    flow = runs.shipped(stem)["spaces"]["bay"]["heat_flow"]
    assert 45 * low < flow < 45 * high
    plain = 0.0225 * exact.series(0.13, 0.1 / FOAM_PUR, 0.13)
    # The estimate of the bolt's share is good to some 15 % (foam near the bolt neglected), the flow itself to 1 %.
    bolt = skinned_bolt(FOAM_PUR, h)
    assert flow / 45 == pytest.approx(plain + bolt, abs=0.15 * bolt + 0.01 * plain)


def test_skins_as_sheets_and_as_bodies_agree():
    """The same panel modelled in two ways: the difference is within the two intervals' half widths."""
    sheets, meshed = (runs.shipped(stem)["spaces"]["bay"] for stem in ("skinned-panel", "skinned-panel-meshed"))
    # Meshed skins lengthen the bolt by 1 %, which is some 0.3 % of the heat flow; their own 1e-5 m² K/W are nothing.
    slack = 0.003 * sheets["heat_flow"]
    assert sheets["heat_flow_low"] - slack <= meshed["heat_flow_high"]
    assert meshed["heat_flow_low"] - slack <= sheets["heat_flow_high"]


@pytest.mark.parametrize("side", [2, pytest.param(10, marks=pytest.mark.slow)])
def test_bolts_leak_as_many_times_as_one(side):
    one = runs.shipped(
        "hundred-bolts", (("body[panel].box.to", [100, 100, 100]), ("body[bolts].repeat.count", [1, 1]))
    )["spaces"]["below"]
    whole = (everyday if side == 2 else runs.shipped)("hundred-bolts")["spaces"]["below"]
    assert whole["heat_flow_low"] <= side**2 * one["heat_flow_high"]
    assert side**2 * one["heat_flow_low"] <= whole["heat_flow_high"]
    low, high = bolted(
        area=side**2 * 0.01, k=FOAM_XPS, thickness=0.1, bolts=side**2, diameter=0.008, h_one=8, h_other=1 / 0.17
    )
    assert 35 * low < whole["heat_flow"] < 35 * high


def test_panel_corner_lies_between_plain_walls_and_the_edge_s_energy():
    """Below: the inside length as plain wall. Above: the homogeneous edge's field as a trial field.

    Dirichlet's principle: any field with the right surface temperatures has at least the true energy. The homogeneous
    edge's field spends at least l/t in each wall, so at most 0.558729 in the corner square, where timber replaces foam.
    """
    low = 2 * 0.88 * exact.series(0.13, 0.12 / FOAM_PIR, 0.13)
    high = FOAM_PIR * 2 * 0.88 / 0.12 + SOFTWOOD * exact.EDGE_EXCESS
    answers = runs.shipped("panel-corner")
    flow = answers["spaces"]["hall"]["heat_flow"]
    assert 42 * low < flow < 42 * high
    # Symmetry about the diagonal: both outer sides take the same heat.
    sides = [answers["boundaries"][f"outside, {name}"]["heat_flow"] for name in ("south", "west")]
    assert sides[0] == pytest.approx(sides[1], rel=0.005)
    # At an outer corner more surface takes in what passes the wall behind: it is warmer than the plain wall.
    plain = 20 - 42 * 0.13 * exact.series(0.13, 0.12 / FOAM_PIR, 0.13)
    assert plain < answers["probes"]["outer corner"]["temperature"] < 20


def test_box_with_door_frame_lies_between_plain_walls_and_edges():
    """Below: inside areas as plain walls. Above: the plain box's field as a trial field for the box with a frame."""
    inside = 2 * 1.2 * 0.6 + 2 * 0.6 * 1.0 + 1.2 * 1.0
    frame = 0.44 * 0.68 - 0.38 * 0.56
    film = 0.13
    low = (inside - frame) * exact.series(film, 0.08 / FOAM_PUR, film)
    low += frame * exact.series(film, 0.08 / SOFTWOOD, film)
    edges = 2 * 1.2 + 4 * 0.6 + 2 * 1.0
    plain_box = inside / 0.08 + edges * exact.EDGE_EXCESS + 4 * 0.08 * exact.CORNER_EXCESS
    # Two thicknesses from the edges the plain box's field differs from a plain wall's by less than exp(-2 pi) = 0.2 %.
    high = FOAM_PUR * plain_box + (SOFTWOOD - FOAM_PUR) * frame / 0.08 * 1.002
    assert high < 1.3 * low, "a bracket that says something"
    answers = everyday("box-with-door-frame")
    assert 48 * low < answers["spaces"]["ambient"]["heat_flow"] < 48 * high
    assert answers["boundaries"]["inside"]["area"] == pytest.approx(inside, rel=1e-9)
    outside = 2 * 1.36 * 0.68 + 2 * 0.68 * 1.16 + 1.36 * 1.16
    assert answers["boundaries"]["outside"]["area"] == pytest.approx(outside, rel=1e-9)


def test_pipe_penetration_lies_between_tubes_and_planes():
    """Fins on both sides, a rod between: below with the pipe insulated from the foam, above with isothermal faces.

    A fin with a film at its end is sqrt(h P k A) tanh(m L + atanh(h A/sqrt(h P k A))) (Incropera, DeWitt, table 3.4
    case A); across the 2.6 mm of pipe wall the Biot number is 1e-3, so one dimension is good to 0.1 %.
    """
    h, outer, inner, length = 8.0, 0.01685, 0.01425, 0.25
    section = math.pi * (outer**2 - inner**2)
    strength = math.sqrt(h * 2 * math.pi * outer * STAINLESS * section)
    slope = math.sqrt(h * 2 * math.pi * outer / (STAINLESS * section))
    fin = strength * math.tanh(slope * length + math.atanh(h * section / strength))
    rod = STAINLESS * section / 0.12
    foam = math.pi * (0.4**2 - outer**2)
    low = foam * exact.series(1 / h, 0.12 / FOAM_PUR, 1 / h) + between(1 / fin, 1 / rod, 1 / fin)
    faces = h * foam + fin
    high = between(1 / faces, 1 / (rod + FOAM_PUR * foam / 0.12), 1 / faces)
    assert high < 1.3 * low, "a bracket that says something"
    answers = runs.shipped("pipe-penetration")
    flow = answers["spaces"]["bay"]["heat_flow"]
    assert 45 * low * 0.999 < flow < 45 * high * 1.001
    # Films, wall and pipe are the same on both sides: the collars lie as far from one room as from the other.
    warm, cold = (answers["probes"][name]["temperature"] for name in ("warm collar", "cold collar"))
    assert (warm + cold) / 2 == pytest.approx(-2.5, abs=0.1)


def test_finned_housing_sheds_its_heat_over_its_area():
    """What the films take is the module's heat: the mean surface temperature over all of the film is exact."""
    answers = runs.shipped("finned-housing")
    fins, base = answers["boundaries"]["fins"], answers["boundaries"]["base between the fins"]
    assert fins["area"] == pytest.approx(8 * 0.062, rel=1e-9)
    assert base["area"] == pytest.approx(0.1 - 8 * 0.002, rel=1e-9)
    assert answers["spaces"]["air"]["heat_flow"] == pytest.approx(-60, rel=1e-6)
    area = 8 * 0.062 + 0.084
    mean = (fins["temperature"]["mean"] * fins["area"] + base["temperature"]["mean"] * base["area"]) / area
    assert mean == pytest.approx(35 + 60 / (10 * area), abs=1e-3)
    # Fin efficiency tanh(mL)/(mL) with m = sqrt(2 h/(k t)), half a thickness added for the tip; the base's 5 mm of
    # alloy level the heat of the module to some tenths of a kelvin.
    slope = math.sqrt(2 * 10 / (ALUMINIUM * 0.002)) * 0.031
    rise = 60 / (10 * (0.084 + 8 * 0.062 * math.tanh(slope) / slope))
    assert base["temperature"]["mean"] == pytest.approx(35 + rise, abs=0.3)
    # Under the middle of the module it is hotter than the base by the module's own drop q t/(2 k) at least.
    drop = 60 / 0.06 * 0.003 / (2 * 2)
    assert answers["probes"]["under the module"]["temperature"] > base["temperature"]["mean"] + drop


def test_step_support_lies_between_tubes_and_planes():
    """Below: wall and bracket insulated from one another. Above: both faces of the wall isothermal.

    A plate is a fin of m = sqrt(h/(k t)) = 8.7/m and 40 mm from the studs to its rim: its efficiency is 0.96
    (Incropera, DeWitt, section 3.6). Taking 0.9 keeps the lower value below.
    """
    film = 0.13
    plate = 0.120**2 - (4 - math.pi) * 0.012**2
    rim = (4 * 0.120 - (8 - 2 * math.pi) * 0.012) * 0.006
    studs, tube = 4 * math.pi * 0.005**2, 0.060**2 - 0.048**2
    steel_and_glass = STAINLESS * studs + GRP * tube
    under = (steel_and_glass + FOAM_PIR * (plate - studs - tube)) / 0.1
    wall, air = 0.09 - plate, (plate + rim) / film
    low = wall * exact.series(film, 0.1 / FOAM_PIR, film) + between(1 / (0.9 * air), 1 / under, 1 / (0.9 * air))
    through = (steel_and_glass + FOAM_PIR * (0.09 - studs - tube)) / 0.1
    high = between(1 / (air + wall / film), 1 / through, 1 / (air + wall / film))
    assert high < 1.4 * low, "a bracket that says something"
    answers = everyday("step-support")
    assert 45 * low < answers["spaces"]["bay"]["heat_flow"] < 45 * high
    volumes = {name: body["volume"] for name, body in answers["bodies"].items()}
    assert volumes["support/tube"] == pytest.approx(tube * 0.1, rel=1e-9)
    # Studs are meshed as polygons of at least 24 sides: at most 1.2 % short.
    assert volumes["support/stud ++"] == pytest.approx(studs / 4 * 0.112, rel=0.012)


def test_foreign_mesh_lies_between_radial_sectors():
    """Below: sectors of the lagging insulated from one another, with their films. Above: no film at all.

    Without films all of it has the one field ln r, so the upper value is exact for that. The mesh's arcs are polygons
    with sides of up to 13.3 degrees: 0.9 % less section than the circle, hence 1 % of slack on both sides.
    """
    inside, pipe, outer, shell = 0.05355, 0.05715, 0.10715, 0.11115
    thickness = math.log(outer / pipe)
    foam, block = math.pi * 0.45 - math.pi / 3 * 0.15, math.pi / 3 * 0.15
    steel = math.log(pipe / inside) / STEEL + 1 / (800 * inside)
    low = foam * between(steel, thickness / FOAM_PUR, 1 / (8 * outer))
    low += block * between(steel, thickness / HARDWOOD, math.log(shell / outer) / STEEL, 1 / (8 * shell))
    high = (foam * FOAM_PUR + block * HARDWOOD) / thickness
    assert high < 1.35 * low, "a bracket that says something"
    answers = runs.shipped("foreign-mesh")
    assert -50 * high * 1.01 < answers["spaces"]["brine"]["heat_flow"] < -50 * low * 0.99
