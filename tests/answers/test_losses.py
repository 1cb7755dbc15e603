"""Where the watts go: terms that add up, and are what finite differences say the flow reacts with."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from coldseam.answers.losses import input_interval, losses, ranked
from coldseam.answers.parts import excess_flux, surface_flux
from coldseam.answers.shares import shares_of
from coldseam.case import read
from coldseam.mesh.measure import facet_measure
from coldseam.solution.readings import space_terminals
from coldseam.solution.steady import solve_on
from coldseam.study import run

STEP = 1e-3  # central differences: error STEP²/6 of the third derivative, some 1e-7


@pytest.fixture(scope="module", params=["tee", "heated"])
def case_and_mesh(request, texts):
    """The case and a mesh of it before its contacts are opened."""
    from coldseam.geometry.mesher import open_geometry

    case = read.loads(texts[request.param])
    with open_geometry(case) as mesher:
        return case, mesher.mesh()


def flows(case, mesh) -> dict[str, float]:
    steady = solve_on(case, mesh)
    return {name: float(steady.boundary_flow[which].sum()) for name, (_, which) in space_terminals(steady).items()}


def solved(case):
    from coldseam.geometry.mesher import open_geometry

    with open_geometry(case) as mesher:
        return solve_on(case, mesher.mesh())


SLAB = """
title = "slab"
[model]
dimensions = 2
[spaces.cold]
temperature = 0
film = 8
[spaces.warm]
temperature = 20
film = 8
[materials.foam]
conductivity = 0.03
[[body]]
name = "foam"
material = "foam"
box = { from = [0, 0], to = [200, 100] }
[[boundary]]
name = "cold"
on = { plane = { x = 0 } }
space = "cold"
[[boundary]]
name = "warm"
on = { plane = { x = 200 } }
space = "warm"
[[boundary]]
name = "sides"
on = "rest"
adiabatic = true
"""
INPUTS = {
    ("material", "brick"): (("materials", "brick", "conductivity"), 0.8, 1),
    ("material", "foam"): (("materials", "foam", "conductivity"), 0.04, 1),
    ("material", "skin"): (("materials", "skin", "conductivity"), 50.0, 1),
    ("material", "board"): (("materials", "board", "conductivity"), np.array([0.3, 0.1]), 1),
    ("film", "facade"): (("spaces", "outside", "film"), 25.0, 1),
    ("film", "left partition"): (("boundary", "left partition", "film"), 4.0, 1),
    ("film", "right"): (("spaces", "right", "surface_resistance"), 0.13, -1),
    ("contact", "joint"): (("contact", "joint", "resistance"), 0.05, 1),
}
"""Of each input: key, value, and the power of the input that the key is."""


@pytest.mark.parametrize("which", INPUTS, ids=lambda which: " ".join(which))
def test_sensitivities_are_finite_differences(case_and_mesh, which):
    """Relative to 1e-4, on the same mesh (and what is nearly nothing to 2e-6 of the flow)."""
    case, mesh = case_and_mesh
    steady = solve_on(case, mesh)
    _, reacts = losses(steady)
    key, value, power = INPUTS[which]
    up, down = (flows(read.replace(case, key, value * (1 + step)), mesh) for step in (STEP, -STEP))
    for space, entry in reacts.items():
        base = flows(case, mesh)[space]
        difference = power * (up[space] - down[space]) / (2 * STEP) / base
        found = entry[f"{which[0]}s"][which[1]].relative
        assert found == pytest.approx(difference, abs=2e-6, rel=1e-4), space


def test_every_input_was_tried(case_and_mesh):
    case, mesh = case_and_mesh
    _, reacts = losses(solve_on(case, mesh))
    names = {(kind, name) for kind in ("material", "film", "contact") for name in reacts["left"][f"{kind}s"]}
    assert names - set(INPUTS) == {("film", "left wall")}  # shares its space's film with nothing: as "right"


def test_heat_sources_are_finite_differences(texts):
    from coldseam.geometry.mesher import open_geometry

    case = read.loads(texts["heated"])
    with open_geometry(case) as mesher:
        mesh = mesher.mesh()
    _, reacts = losses(solve_on(case, mesh))
    up, down = (flows(read.replace(case, "body[heater].heat_source", 6 * (1 + s)), mesh) for s in (0.1, -0.1))
    for space, entry in reacts.items():
        base = flows(case, mesh)[space]
        assert entry["heat_sources"]["heater"].relative == pytest.approx(
            (up[space] - down[space]) / 0.2 / base, rel=1e-4
        )


@pytest.mark.parametrize("name", ["tee", "heated", "corner", "pin"])
def test_shares_add_to_the_whole(name, request):
    """To 1e-6 (the project's rule), the raw terms against the nodal balances and the shown ones against the flow."""
    result = request.getfixturevalue(name)
    steady = result.solution.steady
    for space, (terminals, boundaries) in space_terminals(steady).items():
        nodal = float(steady.boundary_flow[boundaries].sum())
        assert shares_of(steady, terminals).total == pytest.approx(nodal, rel=1e-6, abs=1e-6 * steady.throughput)
        shown = result.answers.losses[space]
        terms = [
            e["heat_flow"] for key in ("by_body", "by_film", "by_sheet", "by_contact") for e in shown[key].values()
        ]
        whole = sum(terms) + shown["from_heat_sources"]["heat_flow"]
        assert whole == pytest.approx(result.answers.spaces[space].heat_flow, rel=1e-6)
        assert sum(e["heat_flow"] for e in shown["by_boundary"].values()) == pytest.approx(whole, rel=1e-6)


def test_sensitivities_of_all_conductances_add_up_to_one(tee):
    """Q is of the first degree in all conductances together, and contacts' resistances count against."""
    for entry in tee.answers.sensitivities.values():
        conductances = sum(s.relative for kind in ("materials", "films") for s in entry[kind].values())
        assert conductances - sum(s.relative for s in entry["contacts"].values()) == pytest.approx(1.0, abs=1e-6)


def test_each_sheet_has_its_own_share():
    """Two skins as fins from a warm edge to a cold one, of 1 and 3 mm: they share as their thickness."""
    text = """
title = "two skins"
[model]
dimensions = 2
[spaces.warm]
temperature = 20
surface_resistance = 0
[spaces.cold]
temperature = 0
surface_resistance = 0
[materials.board]
conductivity = 0.5
[materials.steel]
conductivity = 50
[[body]]
name = "board"
material = "board"
box = { from = [0, 0], to = [200, 20] }
[[sheet]]
name = "thin"
material = "steel"
thickness = 1
on = { plane = { y = 0 } }
[[sheet]]
name = "thick"
material = "steel"
thickness = 3
on = { plane = { y = 20 } }
[[boundary]]
name = "warm"
on = { plane = { x = 0 } }
space = "warm"
[[boundary]]
name = "cold"
on = { plane = { x = 200 } }
space = "cold"
[[boundary]]
name = "faces"
on = "rest"
adiabatic = true
"""
    answers = run(read.loads(text)).answers
    parts = {"thin": 50 * 0.001, "thick": 50 * 0.003, "board": 0.5 * 0.02}  # conductivity times thickness
    loss = answers.losses["warm"]
    for name, strength in parts.items():
        share = (loss["by_body"] if name == "board" else loss["by_sheet"])[name]["share"]
        assert share == pytest.approx(strength / sum(parts.values()), rel=1e-6)


def test_two_layers_share_by_their_resistance():
    """In a plane wall each layer's and film's share is its part of the resistance."""
    text = """
title = "two layers"
[model]
dimensions = 2
[spaces.warm]
temperature = 20
film = 10
[spaces.cold]
temperature = 0
surface_resistance = 0
[materials.a]
conductivity = 0.1
[materials.b]
conductivity = 1
[[body]]
name = "a"
material = "a"
box = { from = [0, 0], to = [50, 100] }
[[body]]
name = "b"
material = "b"
box = { from = [50, 0], to = [250, 100] }
[[boundary]]
name = "cold"
on = { plane = { x = 0 } }
space = "cold"
[[boundary]]
name = "warm"
on = { plane = { x = 250 } }
space = "warm"
[[boundary]]
name = "sides"
on = "rest"
adiabatic = true
"""
    answers = run(read.loads(text)).answers
    parts = {"a": 0.5, "b": 0.2, "warm": 0.1}
    total = sum(parts.values())
    for space in ("warm", "cold"):
        loss = answers.losses[space]
        for name, resistance in parts.items():
            share = (loss["by_film"] if name == "warm" else loss["by_body"])[name]["share"]
            assert share == pytest.approx(resistance / total, rel=1e-9)


def test_interval_from_uncertain_inputs(tee):
    """First order: sensitivity times uncertainty, added up or as root of squares; unknown ones are listed."""
    for space, entry in tee.answers.sensitivities.items():
        flow = tee.answers.spaces[space].heat_flow
        effects = [abs(flow * entry["materials"][name].relative) * u for name, u in (("brick", 0.1), ("foam", 0.2))]
        interval = entry["interval"]
        assert interval["half_width_worst"] == pytest.approx(sum(effects), rel=1e-9)
        assert interval["half_width_independent"] == pytest.approx(np.hypot(*effects), rel=1e-9)
        assert (interval["heat_flow_low"] + interval["heat_flow_high"]) / 2 == pytest.approx(flow, rel=1e-9)
        assert "film facade" in interval["not_stated"]
        top = entry["ranked"][0]
        assert top["input"] == ("material foam" if effects[1] > effects[0] else "material brick")
        assert top["heat_flow_change"] == pytest.approx(max(effects), rel=1e-9)


def test_first_order_is_near_the_true_change(texts):
    """A 10 % better foam: the flow falls as the sensitivity says, to the square of the change."""
    base, better = (
        run(read.replace(read.loads(texts["tee"]), "materials.foam.conductivity", k)) for k in (0.04, 0.038)
    )
    expected = 0.05 * base.answers.sensitivities["outside"]["materials"]["foam"].relative
    change = 1 - better.answers.spaces["outside"].heat_flow / base.answers.spaces["outside"].heat_flow
    assert change == pytest.approx(expected, rel=0.1)


def test_uncertainty_of_any_input_is_stated_where_it_stands(texts):
    """Of a space's film, a boundary's own film, a contact, a body's heat source: each found with its input."""
    text = texts["heated"].replace("[[contact]]", '[[contact]]\nuncertainty = "30 %"')
    text = text.replace("[spaces.outside]", '[spaces.outside]\nuncertainty = "5 %"')
    text = text.replace("film = 4\n", 'film = 4\nuncertainty = "15 %"\n')
    text = text.replace("heat_source = 6", 'heat_source = 6\nuncertainty = "8 %"')
    _, reacts = losses(solved(read.loads(text)))
    stated = {(s.kind, s.name): s.uncertainty for kind in reacts["left"].values() if isinstance(kind, dict)
              for s in kind.values() if hasattr(s, "uncertainty")}  # fmt: skip
    assert stated["film", "facade"] == 0.05
    assert stated["film", "left partition"] == 0.15
    assert stated["film", "left wall"] is None
    assert stated["contact", "joint"] == 0.3
    assert stated["heat source", "heater"] == 0.08
    assert len(reacts["left"]["interval"]["stated"]) == 6  # with the two materials


def test_given_flow_is_a_finite_difference():
    """All of the heat given on one side of a bar leaves on the other: 10 W/m² over 100 mm, one for one."""
    text = SLAB.replace("[spaces.warm]\ntemperature = 20\nfilm = 8\n", "").replace(
        'space = "warm"', 'heat_flux = 10\nuncertainty = "10 %"'
    )
    _, reacts = losses(solved(read.loads(text)))
    found = reacts["cold"]["given_flows"]["warm"]
    assert found.heat_flow == pytest.approx(-10 * 0.1, rel=1e-9)  # W/m over 100 mm
    assert found.relative == pytest.approx(1.0, rel=1e-9)
    assert reacts["cold"]["interval"]["half_width_worst"] == pytest.approx(0.1, rel=1e-9)


def test_no_uncertainty_no_interval(tee):
    found = [dataclasses.replace(s, uncertainty=None) for s in tee.answers.sensitivities["left"]["materials"].values()]
    assert input_interval(found, 1.0) is None
    sizes = [entry["heat_flow_change"] for entry in ranked(found)]
    assert sizes == sorted(sizes, reverse=True)


def test_flux_over_a_surface_is_its_flow(tee):
    steady = tee.solution.steady
    flux, area = surface_flux(steady), facet_measure(steady.mesh)
    for number, boundary in enumerate(steady.case.boundary):
        mask = steady.facet_boundary == number
        if boundary.space is None:
            assert np.isnan(flux[mask]).all()
        else:
            assert flux[mask] @ area[mask] == pytest.approx(steady.boundary_flow[number], rel=1e-9)


def test_excess_over_the_plain_wall_is_the_bridge(pin):
    """What the warm side takes beyond U of the foam adds up to the loss beyond U A."""
    steady = pin.solution.steady
    u = 1 / (0.26 + 0.1 / 0.03)
    excess, area = excess_flux(steady, u), facet_measure(steady.mesh)
    warm = np.array([b.space == "warm" for b in steady.case.boundary])[steady.facet_boundary]
    flow = sum(steady.boundary_flow[n] for n, b in enumerate(steady.case.boundary) if b.space == "warm")
    assert excess[warm] @ area[warm] == pytest.approx(flow - u * 40 * area[warm].sum(), rel=1e-9)
    assert np.nanmax(excess) > 10 * u  # at the pin
