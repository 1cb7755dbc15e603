"""Air gaps and cavities in solved cases: against layer formulas, and the two ways against one another."""

import numpy as np
import pytest
from meshed import MOST_STEPS, on_mesh
from scipy.optimize import brentq
from solution.grids import grid, slab_text

from coldseam.case.read import loads, replace
from coldseam.errors import CaseError
from coldseam.geometry.mesher import open_geometry
from coldseam.physics import cavities, iso6946
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import starting_state
from coldseam.solution.steady import solve_on
from coldseam.solution.transient import Transient

SIGMA = 5.670374419e-8

# A gap of 20 mm between two sheets of plastic, 600 mm high, closed at its ends by thin strips.
GAP = """
title = "gap"
[model]
dimensions = 2
accuracy = "0.5 %"
[spaces.a]
temperature = 20
surface_resistance = 0.13
[spaces.b]
temperature = -10
surface_resistance = 0.04
[materials.plastic]
conductivity = 0.2
emissivity = 0.9
[materials.air]
library = "Air, still"
[[body]]
name = "sheets"
material = "plastic"
box = { from = [0, 0], to = [26, 602] }
[[body]]
name = "gap"
material = "air"
air_gap = true
box = { from = [3, 1], to = [23, 601] }
[[boundary]]
name = "warm"
on = { plane = { x = 0 } }
space = "a"
[[boundary]]
name = "cold"
on = { plane = { x = 26 } }
space = "b"
[[boundary]]
name = "ends"
on = "rest"
adiabatic = true
"""
HOLLOW = GAP.replace('material = "air"\nair_gap = true', "void = true").replace(
    '[materials.air]\nlibrary = "Air, still"\n', "[cavities.hollow]\n"
).replace('[[boundary]]\nname = "ends"', '[[boundary]]\nname = "walls"\non = { shell = "cavity" }\ncavity = "hollow"\n'
          '[[boundary]]\nname = "ends"')  # fmt: skip


def flux(found):
    return found.boundary_flow[0] / 0.602


def series(gap_resistance):
    """Solve for the flux through films, sheets and a gap whose resistance depends on mean and difference."""

    def lacking(q):
        t1, t2 = 20 - q * (0.13 + 0.003 / 0.2), -10 + q * (0.04 + 0.003 / 0.2)
        return (t1 - t2) / gap_resistance(0.5 * (t1 + t2), t1 - t2) - q

    return brentq(lacking, 1.0, 170.0, xtol=1e-10)


def test_cavity_of_iso_10077_2_by_its_formula():
    found = on_mesh(loads(GAP), 4000)
    expected = series(lambda mean, fall: 0.02 / cavities.cavity_conductivity(0.02, 0.6, mean=mean, difference=fall))
    # the strips at the ends, 2 mm in 602, add 0.2 / (0.1 x 602 / 2) of the heat flow in parallel
    assert flux(found) == pytest.approx(expected, rel=5e-3)
    told = found.settled.coefficients.gaps["gap"]
    assert (told["along"], told["across"]) == pytest.approx((0.02, 0.6), rel=1e-9)
    assert told["method"].startswith("ISO 10077-2") and found.settled.iterations <= MOST_STEPS


def test_layer_of_iso_6946_by_its_formula():
    case = replace(loads(GAP), "body[gap].air_gap", {"method": "layer", "heat_flow": "horizontal"})
    expected = series(
        lambda mean, fall: iso6946.air_layer_resistance(0.02, "horizontal", temperature=mean, difference=fall)
    )
    found = on_mesh(case, 4000)
    assert flux(found) == pytest.approx(expected, rel=5e-3)
    slight = on_mesh(replace(case, "body[gap].air_gap.ventilation", "slight"), 4000)
    assert slight.boundary_flow[0] > 1.2 * found.boundary_flow[0]


def test_low_emissivity_lessens_the_heat_flow():
    plain = on_mesh(loads(GAP))
    coated = on_mesh(replace(loads(GAP), "body[gap].air_gap", {"emissivities": [0.9, 0.05]}))
    assert coated.boundary_flow[0] < 0.75 * plain.boundary_flow[0]


def test_true_radiation_agrees_with_the_layer_formula():
    """Two plates: with the layer's convection on both walls (film 2 h_a) the two ways agree but for the gap's ends."""
    equivalent = on_mesh(loads(GAP), 3000)
    told = equivalent.settled.coefficients.gaps["gap"]
    h_a = cavities.convective(0.02, 0.6, told["difference"])
    hollow = on_mesh(replace(loads(HOLLOW), "cavities.hollow.film", 2 * h_a), 3000)
    assert hollow.boundary_flow[0] == pytest.approx(equivalent.boundary_flow[0], rel=0.01)
    assert hollow.settled.iterations <= MOST_STEPS
    used = hollow.settled.films["walls"]
    assert used["radiation"]["heat_flow"] == pytest.approx(0.0, abs=1e-6)
    assert used["radiation"]["closure_defect"] < 1e-6
    assert hollow.boundary_flow[2] == pytest.approx(0.0, abs=1e-6 * hollow.throughput)


def test_radiation_between_plates_exact():
    """Nothing but radiation between the plates: q = sigma (T1^4 - T2^4) / (2/e - 1), and the ends let little past."""
    found = on_mesh(loads(HOLLOW), 3000)
    radiating = series(
        lambda mean, fall: (
            fall / (SIGMA * ((mean + fall / 2 + 273.15) ** 4 - (mean - fall / 2 + 273.15) ** 4) / (2 / 0.9 - 1))
        )
    )
    assert flux(found) == pytest.approx(radiating, rel=0.015)


def test_a_shield_halves_the_radiation():
    """A sheet in the middle of the gap, held at its ends, makes two cavities: 1 / (N + 1) of the radiation passes."""
    text = HOLLOW.replace('[[boundary]]\nname = "warm"', '[[body]]\nname = "shield"\nmaterial = "plastic"\n'
                          'box = { from = [12.5, 1], to = [13.5, 601] }\n[[boundary]]\nname = "warm"', 1)  # fmt: skip
    text = text.replace("[cavities.hollow]\n", "[cavities.hollow]\n[cavities.second]\n")
    left, right = (
        f"on = {{ shell = 'cavity', within = {{ from = [{a}, 1], to = [{b}, 601] }} }}"
        for a, b in ((3, 12.5), (13.5, 23))
    )
    both = f'{left}\ncavity = "hollow"\n[[boundary]]\nname = "others"\n{right}\ncavity = "second"'
    text = text.replace('on = { shell = "cavity" }\ncavity = "hollow"', both)
    found = on_mesh(loads(text), 2500)
    e = 1 / (2 / 0.9 - 1)

    def resistance(mean, fall):
        warm, cold = (mean + fall / 2 + 273.15) ** 4, (mean - fall / 2 + 273.15) ** 4
        return fall / (0.5 * e * SIGMA * (warm - cold))

    assert flux(found) == pytest.approx(series(resistance), rel=0.02)  # the gap's ends let some past
    assert found.settled.iterations <= MOST_STEPS


def test_box_of_air_in_three_dimensions():
    """A hollow cube in foam with a hot lid: flows of the cavity's walls add to nothing, and view factors close well."""
    text = """
title = "hollow cube"
[model]
dimensions = 3
[spaces.warm]
temperature = 50
surface_resistance = 0.1
[spaces.cold]
temperature = -50
surface_resistance = 0.1
[materials.foam]
conductivity = 0.03
emissivity = 0.8
[cavities.inside]
[[body]]
name = "foam"
material = "foam"
box = { from = [0, 0, 0], to = [200, 200, 200] }
[[body]]
name = "hollow"
void = true
box = { from = [50, 50, 50], to = [150, 150, 150] }
[[boundary]]
name = "top"
on = { plane = { z = 200 } }
space = "warm"
[[boundary]]
name = "bottom"
on = { plane = { z = 0 } }
space = "cold"
[[boundary]]
name = "walls"
on = { shell = "cavity" }
cavity = "inside"
[[boundary]]
name = "sides"
on = "rest"
adiabatic = true
"""
    found = on_mesh(loads(text), 4000)
    used = found.settled.films["walls"]["radiation"]
    assert used["closure_defect"] < 0.1 and abs(used["heat_flow"]) < 1e-6 * found.throughput
    assert found.settled.iterations <= MOST_STEPS
    solid = (
        text.replace("void = true", 'material = "foam"')
        .replace('[[boundary]]\nname = "walls"\non = { shell = "cavity" }\ncavity = "inside"\n', "")
        .replace("[cavities.inside]\n", "")
    )
    # radiation across 100 mm (about 4 W/(m² K)) carries more than 100 mm of foam (0.3)
    assert found.boundary_flow[0] > on_mesh(loads(solid)).boundary_flow[0] * 1.05
    beam = text.replace(
        "[[boundary]]",
        '[[body]]\nname = "beam"\nmaterial = "foam"\nbox = { from = [50, 50, 50], to = [90, 150, 90] }\n[[boundary]]',
        1,
    )
    with pytest.raises(CaseError, match="parts of its surface hide others"):
        on_mesh(loads(beam))


def test_an_open_cavity_is_refused_and_can_be_given_its_surroundings():
    text = HOLLOW.replace('on = { shell = "cavity" }', 'on = { plane = { x = 3 } }').replace(
        'on = "rest"\nadiabatic = true', 'on = "rest"\nadiabatic = true')  # fmt: skip
    with pytest.raises(CaseError, match="do not close it: some see"):
        on_mesh(loads(text))
    found = on_mesh(replace(loads(text), "cavities.hollow.surroundings", -30), 500)
    # one flat wall sees the surroundings alone: grey surface to a large room
    wall = found.settled.films["walls"]
    surface = wall["surface_temperature"] + 273.15
    assert wall["radiation"]["heat_flow"] == pytest.approx(0.6 * 0.9 * SIGMA * (243.15**4 - surface**4), rel=1e-3)


def test_a_cavity_over_time_ends_at_its_steady_state():
    """Walls of a hollow at 5 °C at first: after many times its time constant the flows are those of the steady case."""
    text = HOLLOW.replace("emissivity = 0.9\n", "emissivity = 0.9\ndensity = 1000\nspecific_heat = 1000\n")
    timed = loads(text.replace("[spaces.a]", '[time]\nduration = "6 h"\nstart = 5\n[spaces.a]'))
    steady = on_mesh(loads(text), 1500)
    with open_geometry(timed) as mesher:
        system = heat_system(timed, mesher.mesh(None, 1500))
    run = Transient(system, starting_state(system), refresh=refresher(system))
    while run.status == "running":
        run.step()
    final = run.result().final.temperature
    assert final == pytest.approx(steady.temperature, abs=0.05)


@pytest.mark.parametrize(
    ("key", "value", "words"),
    [
        ("body[gap].air_gap", {"method": "layer"}, "heat_flow: is required for a layer"),
        ("body[gap].air_gap", {"heat_flow": "up"}, "goes with layer"),
        ("body[gap].air_gap", {"emissivities": [0.9, 1.2]}, "must be 1 or less"),
        ("body[gap].air_gap", False, "expected true, or a table"),
        ("body[gap].repeat", {"step": [[30, 0]], "count": [2]}, "can't go with repeat"),
        ("materials.air.air_gap", True, "stands in the [[body]]"),
        ("boundary[ends].emissivity", 0.5, "goes with cavity"),
    ],
)
def test_bad_gaps(key, value, words):
    with pytest.raises(CaseError) as error:
        replace(loads(GAP), key, value)
    assert words in str(error.value)


def test_bad_cavities():
    text = GAP.replace("[materials.air]", "[cavities.hollow]\n[materials.air]")
    with pytest.raises(CaseError, match='no boundary has cavity = "hollow"'):
        loads(text)
    with pytest.raises(CaseError, match='no cavity is called "hole"'):
        loads(HOLLOW.replace('cavity = "hollow"', 'cavity = "hole"'))
    with pytest.raises(CaseError, match="says with what emissivity"):
        on_mesh(loads(HOLLOW.replace("emissivity = 0.9\n", "")))


def test_a_cavity_of_an_axisymmetric_section_is_refused_and_told_what_to_do():
    """View factors over a turn are not computed: the cavity's table is named, and what is accepted instead."""
    text = slab_text().replace("dimensions = 2", "dimensions = 2\naxisymmetric = true")
    text = text[: text.index("[time]")] + text[text.index("[spaces.air]") :]
    text = text.replace('space = "air"', 'cavity = "hollow"\nemissivity = 0.8').replace(
        "adiabatic = true", 'space = "air"'
    )
    case = loads(text + "[cavities.hollow]\nsurroundings = 5\n")
    mesh = grid(np.linspace(0, 1, 4), np.linspace(0, 0.1, 2), axisymmetric=True)
    with pytest.raises(
        CaseError, match="axisymmetric section is not computed; use a section in a plane or 3D"
    ) as error:
        solve_on(case, mesh)
    assert "cavities.hollow" in str(error.value)
