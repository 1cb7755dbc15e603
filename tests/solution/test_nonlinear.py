"""Cases whose coefficients depend on the answer, against exact solutions of one dimension and against themselves."""

from functools import cache

import numpy as np
import pytest
from meshed import MOST_STEPS, on_mesh
from scipy.optimize import brentq

from coldseam.answers.build import build_answers
from coldseam.case.read import loads, replace
from coldseam.errors import CaseError, SolveError
from coldseam.geometry.mesher import open_geometry
from coldseam.physics import laws
from coldseam.physics.convection import film
from coldseam.physics.fluids import air
from coldseam.solution import nonlinear
from coldseam.solution.coefficients import frozen_conditions
from coldseam.solution.readings import boundary_intervals, coupling
from coldseam.solution.rounds import Solution, solve
from coldseam.solution.steady import solve_on
from coldseam.study import Result, run

SIGMA = 5.670374419e-8

BAR = """
title = "bar"
[model]
dimensions = 2
accuracy = "0.1 %"
{more}
[materials.m]
conductivity = {k}
[[body]]
name = "bar"
material = "m"
box = {{ from = [0, 0], to = [{length}, 20] }}
[[boundary]]
name = "left"
on = {{ plane = {{ x = 0 }} }}
{left}
[[boundary]]
name = "right"
on = {{ plane = {{ x = {length} }} }}
{right}
[[boundary]]
name = "sides"
on = "rest"
adiabatic = true
"""


def bar(k=50, left="temperature = 20", right="temperature = -20", more="", length=100):
    return loads(BAR.format(k=k, left=left, right=right, more=more, length=length))


def space(name, *lines):
    return "\n".join([f"[spaces.{name}]", *lines, ""])


FREEZER = space(
    "freezer",
    "temperature = -20",
    'convection = { kind = "free", surface = "vertical", length = "2.5 m" }',
    "radiation = { emissivity = 0.9 }",
)
OUTSIDE = space(
    "outside",
    "temperature = 30",
    'convection = { kind = "standard", surface = "outside", speed = 4 }',
    "radiation = { emissivity = 0.9, sky = { clear = true, share = 0.5 } }",
)
SUN = "sun = { absorptivity = 0.4, irradiance = 600 }"
STEEL_304 = (
    "{ log_polynomial = [-1.4087, 1.3982, 0.2543, -0.6260, 0.2334, 0.4256, -0.4658, 0.1650, -0.0199], "
    'range = ["4 K", "300 K"] }'
)

CASES = {
    "radiation": lambda: bar(
        55.6,
        'temperature = "1000 K"',
        'space = "around"',
        space("around", 'temperature = "300 K"', "radiation = { emissivity = 0.98 }"),
    ),
    "foam": lambda: bar("{ polynomial = [0.022, 8.8e-5], range = [-40, 40] }", right="temperature = -30"),
    "table": lambda: bar("{ table = [[-30, 0.018], [-10, 0.03], [20, 0.02]] }"),
    "cryogenic": lambda: bar(STEEL_304, 'temperature = "300 K"', 'temperature = "4 K"'),
    "wall": lambda: bar(0.022, f'space = "outside"\n{SUN}', 'space = "freezer"', FREEZER + OUTSIDE),
    "thin wall": lambda: bar(0.5, f'space = "outside"\n{SUN}', 'space = "freezer"', FREEZER + OUTSIDE, length=10),
    "warm box": lambda: replace(
        bar(0.2, "adiabatic = true", 'space = "freezer"', FREEZER), "body[bar].heat_density", 5000
    ),
    "hot box": lambda: replace(
        bar(20, "adiabatic = true", 'space = "freezer"', FREEZER), "body[bar].heat_density", 40000
    ),
    "level": lambda: bar(
        0.022, 'space = "room"',
        'space = "freezer"\nconvection = { kind = "free", surface = "facing down", length = 500 }',
        FREEZER + space("room", "temperature = 20",
                        'convection = { kind = "free", surface = "facing up", length = 500 }'),
    ),
    "wind and buoyancy": lambda: bar(
        0.3, 'space = "room"', 'space = "freezer"',
        FREEZER + space("room", "temperature = 20", 'convection = { kind = "mixed", surface = "vertical", '
                        'length = 800, speed = 0.5, mixing = "assisting" }'),
        length=20,
    ),
}  # fmt: skip


@cache
def steady(name):
    """Solve a case on a mesh of a few cells along the bar."""
    return on_mesh(CASES[name]())


def flux(found, name):
    """Return the heat flux into the solid at a boundary, W/m² (the bar is 20 mm wide)."""
    number = next(n for n, b in enumerate(found.case.boundary) if b.name == name)
    return found.boundary_flow[number] / 0.02


@pytest.mark.parametrize("name", CASES)
def test_converges_closes_and_agrees_with_itself(name):
    found = steady(name)
    assert found.settled.iterations <= MOST_STEPS, found.settled.history
    assert abs(found.relative_closure) < 1e-9
    # the linear problem with the frozen coefficients has the field they were taken at
    span = max(np.ptp(found.temperature), 1.0)
    assert np.abs(found.temperature - found.settled.temperature).max() < 3e-6 * span
    again = frozen_conditions(found.case, found.mesh, found.facet_boundary, found.temperature)
    assert again.film == pytest.approx(found.given.film, rel=1e-4)
    assert again.conductivity == pytest.approx(found.given.conductivity, rel=1e-4)


@pytest.mark.parametrize("name", ["wall", "thin wall", "hot box", "level", "radiation"])
def test_parts_of_the_exchange_add_up(name):
    found = steady(name)
    for number, boundary in enumerate(found.case.boundary):
        used = found.settled.films.get(boundary.name)
        if used is None:
            continue
        parts = sum(used[part]["heat_flow"] for part in ("convection", "radiation", "sun") if part in used)
        assert parts == pytest.approx(found.boundary_flow[number], rel=1e-4, abs=1e-6 * found.throughput)


def test_nafems_radiation_exact():
    found = steady("radiation")
    surface = brentq(lambda t: 55.6 / 0.1 * (1000 - t) - 0.98 * SIGMA * (t**4 - 300**4), 300, 1000, xtol=1e-10)
    assert found.temperature.min() + 273.15 == pytest.approx(surface, abs=1e-4)
    assert flux(found, "left") == pytest.approx(556.0 * (1000 - surface), rel=1e-6)


def test_kirchhoff_slab_on_any_mesh():
    """k = .022 (1 + .004 T), 20 to -30 °C, .1 m: q 10.78 W/m² (published-checks 4.6).

    Exact but for cells with corners at three temperatures, whose mean k is not that of one step.
    """
    for cells in (2, 30, 200):
        assert flux(on_mesh(CASES["foam"](), cells), "left") == pytest.approx(10.78, rel=1e-4)


@pytest.mark.parametrize("name", ["table", "cryogenic"])
def test_bars_have_the_integral_of_their_conductivity(name):
    found = steady(name)
    law = found.case.materials["m"].law
    warm, cold = found.temperature.max(), found.temperature.min()
    t = np.linspace(cold, warm, 20001)
    k = laws.conductivity(law, t)
    integral = float(((k[1:] + k[:-1]) / 2 * np.diff(t)).sum())
    assert flux(found, "left") == pytest.approx(
        integral / 0.1, rel=3e-3
    )  # a mesh of few cells is not quite one-dimensional


def test_two_cryogenic_materials_in_series():
    laminate = '[materials.g]\nlibrary = "G-10, along warp, 12 to 300 K"\n'
    laminate += '[[body]]\nname = "g"\nmaterial = "g"\nbox = { from = [50, 0], to = [100, 20] }\n'
    text = BAR.format(k=STEEL_304, left='temperature = "300 K"', right='temperature = "77 K"', more="", length=100)
    text = text.replace("[[boundary]]", f"{laminate}[[boundary]]", 1)
    case = loads(text)
    found = on_mesh(case)

    def through(name, a, b):
        return float(laws.mean_conductivity(case.materials[name].law, np.array([a]), np.array([b]))[0] * (a - b) / 0.05)

    warm, cold = 300 - 273.15, 77 - 273.15
    joint = brentq(lambda t: through("m", warm, t) - through("g", t, cold), cold, warm, xtol=1e-10)
    assert flux(found, "left") == pytest.approx(through("g", joint, cold), rel=1e-3)
    assert found.settled.iterations <= MOST_STEPS


def test_free_convection_and_radiation_exact():
    """Two surface balances solved as equations of one unknown each."""
    case = bar(0.022, 'space = "room"', 'space = "freezer"', FREEZER + space("room", "temperature = 25", "film = 8"))
    found = on_mesh(case)
    law = case.spaces["freezer"].convection

    def leaving(t):
        convective = film(law, t, -20.0, air).h * (t + 20.0)
        return convective + 0.9 * SIGMA * ((t + 273.15) ** 4 - 253.15**4)

    surface = brentq(lambda t: (25 - t) / (1 / 8 + 0.1 / 0.022) - leaving(t), -20, 25, xtol=1e-10)
    assert found.temperature.min() == pytest.approx(surface, abs=1e-4)
    assert flux(found, "left") == pytest.approx(leaving(surface), rel=1e-5)


def test_sun_is_a_sol_air_temperature():
    """With one constant film the sun raises the outside temperature by absorbed / h (exact)."""
    spaces = space("out", "temperature = 30", "film = 20") + space("in", "temperature = -20", "film = 8")
    found = on_mesh(bar(0.022, f'space = "out"\n{SUN}', 'space = "in"', spaces))
    u = 1 / (1 / 20 + 0.1 / 0.022 + 1 / 8)
    assert flux(found, "left") == pytest.approx(u * (30 + 0.4 * 600 / 20 + 20), rel=1e-6)
    assert found.settled.films["left"]["outside_temperature"] == pytest.approx(42.0)


def test_radiant_surroundings_of_their_own_temperature():
    """A surface between air and surroundings of other temperatures, nothing behind it: its balance alone."""
    spaces = space(
        "hall", "temperature = 20", "film = 3", "radiation = { emissivity = 0.5, surroundings = -40 }"
    ) + space("in", "temperature = 10", "film = 1e-6")
    found = on_mesh(bar(0.2, 'space = "hall"', 'space = "in"', spaces))
    surface = brentq(lambda t: 3 * (20 - t) + 0.5 * SIGMA * (233.15**4 - (t + 273.15) ** 4), -40, 20)
    assert found.temperature[0] == pytest.approx(surface, abs=1e-3)


def test_flux_beside_a_film_where_the_radiant_films_differ():
    """A surface with a hot stripe: facets differ in h_r, so the mean outside temperature needs a flux beside it."""
    spaces = space(
        "hall", "temperature = 20", "film = 4", "radiation = { emissivity = 0.9, surroundings = 60 }"
    ) + space("in", "temperature = -20", "film = 8")
    text = BAR.format(k=0.03, left='space = "hall"', right='space = "in"', more=spaces, length=100)
    text = text.replace("[[boundary]]", '[materials.steel]\nconductivity = 50\n[[body]]\nname = "bolt"\n'
                        'material = "steel"\nbox = { from = [0, 8], to = [100, 12] }\n[[boundary]]', 1)  # fmt: skip
    case = loads(text)
    with open_geometry(case) as mesher:
        solution = solve(case, mesher, lambda *a: None)
    found = solution.steady
    assert np.any(found.given.flux != 0.0)
    used = found.settled.films["left"]
    parts = sum(used[part]["heat_flow"] for part in ("convection", "radiation"))
    for interval, boundary in zip(boundary_intervals(found), case.boundary, strict=True):
        if boundary.name == "left":
            assert interval.low <= parts <= interval.high
            assert interval.kind == "estimate" and nonlinear.REASON in interval.reason
    assert solution.flows_met and found.settled.iterations <= MOST_STEPS


def test_coupling_and_outside_temperatures_give_the_heat_flow():
    found = steady("wall")
    table = coupling(found)
    films = found.settled.films
    step = films["left"]["outside_temperature"] - films["right"]["outside_temperature"]
    assert table["outside"]["freezer"].value * step == pytest.approx(found.boundary_flow[0], rel=1e-5)


def test_same_answer_in_other_units_and_places():
    plain = steady("thin wall")
    text = plain.case.source.text
    kelvin = text.replace("temperature = -20", 'temperature = "253.15 K"').replace("2.5 m", "98.42519685 in")
    other = on_mesh(loads(kelvin.replace("temperature = 30", 'temperature = "86 degF"')))
    assert other.boundary_flow == pytest.approx(plain.boundary_flow, rel=1e-7)
    moved = on_mesh(loads(text.replace("[0, 0]", "[500, 70]").replace("[10, 20]", "[510, 90]")
                          .replace("x = 0 ", "x = 500 ").replace("x = 10 ", "x = 510 ")))  # fmt: skip
    assert moved.boundary_flow == pytest.approx(plain.boundary_flow, rel=1e-5)
    finer = on_mesh(plain.case, 400)
    assert finer.boundary_flow == pytest.approx(plain.boundary_flow, rel=1e-5)


def test_outside_temperatures_from_elsewhere():
    """What time stepping asks: the conditions at a field, with spaces at other temperatures than the case's."""
    found = steady("wall")
    given = frozen_conditions(found.case, found.mesh, found.facet_boundary, found.temperature, {"freezer": -30.0})
    inside = [t for t in given.terminals if found.case.boundary[t.boundaries[0]].space == "freezer"]
    assert [t.temperature for t in inside] == [-30.0]
    assert given.film[found.given.terminal == given.terminals.index(inside[0])].max() > found.given.film.max() * 0.1


def test_a_good_start_saves_steps():
    found = steady("wall")
    case, mesh = found.case, found.mesh
    again = solve_on(case, mesh, found)
    assert again.settled.iterations < found.settled.iterations
    assert again.boundary_flow == pytest.approx(found.boundary_flow, rel=1e-6)


def test_a_stalled_iteration_names_what_moves(monkeypatch):
    monkeypatch.setattr(nonlinear, "MOST_STEPS", 2)
    with pytest.raises(SolveError, match=r"do not settle: after 2 steps those of boundary .*still move by"):
        on_mesh(CASES["thin wall"]())
    # Between surfaces that are held, only the inside can move.
    with pytest.raises(SolveError, match='those of body "bar" still move by .* conductivity over temperature'):
        on_mesh(CASES["cryogenic"](), 400)


def test_beyond_the_range_of_a_material():
    found = on_mesh(bar("{ table = [[-10, 0.02], [20, 0.024]] }", right="temperature = -30"))
    (remark,) = found.settled.remarks
    assert remark.startswith('body "bar": its temperatures of -30.0 to 20.0 °C leave the range')
    assert '"m", -10.0 to 20.0 °C' in remark


def test_beyond_the_range_of_a_correlation():
    level = 'convection = { kind = "free", surface = "facing up", length = 5 }'
    case = bar(0.022, 'space = "room"', "temperature = -20", space("room", "temperature = 20", level))
    (remark,) = on_mesh(case).settled.remarks
    assert 'boundary "left": Ra = ' in remark and "McAdams" in remark and "extrapolation" in remark


def test_beyond_the_air():
    cold = FREEZER.replace("temperature = -20", 'temperature = "77 K"')
    with pytest.raises(
        SolveError, match=r'boundary "right": its film is at .* the properties of air hold for -60 to 200 °C'
    ):
        on_mesh(bar(0.022, right='space = "freezer"', more=cold))


def test_a_fluid_of_the_user():
    """Water rows of Incropera table A.6; the film against the correlation with constant properties, by hand."""
    tank = space(
        "tank", "temperature = 17", 'convection = { kind = "free", surface = "vertical", length = 500, fluid = "w" }'
    )
    rows = "[7, 1000, 0.582, 1422e-6, 4198], [17, 999, 0.598, 1080e-6, 4184], [27, 997, 0.613, 855e-6, 4179]"
    water = f"[fluids.w]\ntable = [{rows}]\n"
    found = on_mesh(bar(20, right='space = "tank"', more=tank + water))
    used = found.settled.films["right"]["convection"]
    assert used["fluid"] == "w" and 100 < used["film"] < 1500 and used["in_range"]


def test_radiation_without_emissivity():
    case = bar(1, right='space = "a"', more=space("a", "temperature = 0", "film = 5", "radiation = {}"))
    with pytest.raises(CaseError, match='nor the material "m" of "bar" says with what emissivity'):
        on_mesh(case)
    found = on_mesh(replace(case, "materials.m.emissivity", 0.5))
    assert found.settled.films["right"]["radiation"]["emissivity"] == 0.5


def test_superposition_is_refused():
    found = steady("wall")
    solution = Solution(steady=found, rounds=(), flows_met=True, points_met=True)
    with pytest.raises(CaseError, match="can't be superposed"):
        Result(case=found.case, answers=None, solution=solution).at({"freezer": -30})


def test_answers_tell_what_was_used():
    case = CASES["wall"]()
    with open_geometry(case) as mesher:
        answers = build_answers(solve(case, mesher, lambda *a: None)).as_dict()
    used = answers["boundaries"]["right"]["film_used"]
    assert used["convection"]["correlation"].startswith("Churchill, Chu 1975")
    assert {"Ra", "Nu", "film", "valid", "in_range"} <= set(used["convection"])
    assert used["radiation"]["emissivity"] == pytest.approx(0.9)
    assert answers["boundaries"]["right"]["film"] == pytest.approx(used["film"])
    assert answers["boundaries"]["sides"]["film_used"] is None
    assert answers["solver"]["coefficient_steps"] <= MOST_STEPS and "linear problem" in answers["solver"]["linearised"]
    assert answers["boundaries"]["right"]["interval"] == "estimate"


def test_a_wall_without_a_bridge_has_no_psi():
    """The plain wall beside a bridge is reckoned with the answer's films and conductivities: what is left is 0."""
    flanking = "[[bridge]]\nname = 'none'\nkind = 'linear'\nbasis = 'internal'\nflanking = [ { layers = [['m', 100]], "
    flanking += "length = 20, between = ['outside', 'freezer'] } ]\n"
    case = bar("{ polynomial = [0.022, 8.8e-5], range = [-60, 60] }", f'space = "outside"\n{SUN}', 'space = "freezer"',
               FREEZER + OUTSIDE + flanking)  # fmt: skip
    bridge = run(case).answers.bridges["none"]
    assert bridge["psi"] == pytest.approx(0.0, abs=2e-3 * bridge["coupling"])
    assert bridge["interval"] == "estimate"


def test_cautions():
    hot = build_answers(_solved(CASES["hot box"]()))
    assert any("caution" in w and "burns skin" in w for w in hot.warnings)
    mild = build_answers(_solved(CASES["level"]()))
    assert not any("caution" in w for w in mild.warnings)


def _solved(case):
    with open_geometry(case) as mesher:
        return solve(case, mesher, lambda *a: None)


def test_linear_cases_stay_linear():
    found = on_mesh(bar())
    assert found.settled is None
