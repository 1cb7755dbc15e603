"""Conductivities by direction that follow the temperature: against constants, one law in all directions, and Kirchhoff."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq
from solution.grids import grid, slab_text
from solution.meshed import MOST_STEPS

from coldseam.case.read import loads
from coldseam.solution.bounds import prove
from coldseam.solution.flux import cell_flux
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import starting_state
from coldseam.solution.steady import solve_on
from coldseam.solution.transient import Transient

FLAT = grid(np.linspace(0, 0.1, 13), np.linspace(0, 0.05, 7))
SOLID = grid(*(np.linspace(0, end, 5) for end in (0.1, 0.05, 0.05)))
TURNED = [[0.8, 0.6, 0.0], [-0.6, 0.8, 0.0], [0.0, 0.0, 1.0]]
STEEP = "{ table = [[-100, 0.2], [100, 1.8]] }"  # 1 + 0.008 T


def plate(conductivity: str, axes=None, dim: int = 2, films: str = "film = 50"):
    turn = "" if axes is None else f"axes = {axes}"
    return loads(f"""
title = "plate"
[model]
dimensions = {dim}
[spaces.warm]
temperature = 60
{films}
[spaces.cold]
temperature = -60
{films}
[materials.stuff]
conductivity = {conductivity}
{turn}
[[body]]
name = "slab"
material = "stuff"
box = {{ from = {[0] * dim}, to = {[100, 50, 50][:dim]} }}
[[boundary]]
name = "warm"
on = {{ plane = {{ x = 0 }} }}
space = "warm"
[[boundary]]
name = "cold"
on = {{ plane = {{ y = 50 }} }}
space = "cold"
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
""")


@pytest.mark.parametrize(("mesh", "dim"), [(FLAT, 2), (SOLID, 3)], ids=["2D", "3D"])
@pytest.mark.parametrize("axes", [None, TURNED], ids=["straight", "turned"])
def test_laws_that_are_constant_are_numbers(mesh, dim, axes):
    """[2, 0.5, 1] typed as numbers and as tables of equal values: one field, one flow, one bracket around it."""
    numbers = solve_on(plate("[2, 0.5, 1]", axes, dim), mesh)
    same = ", ".join(f"{{ table = [[-100, {k}], [100, {k}]] }}" for k in (2, 0.5))
    laws = solve_on(plate(f"[{same}, 1]", axes, dim), mesh)
    assert numbers.settled is None and laws.settled.iterations <= MOST_STEPS
    assert laws.temperature == pytest.approx(numbers.temperature, abs=1e-6)
    assert laws.boundary_flow == pytest.approx(numbers.boundary_flow, rel=1e-8)
    assert cell_flux(laws) == pytest.approx(cell_flux(numbers), abs=1e-4)
    one, other = (prove(s.mesh, s.given, s.weights, s.response) for s in (numbers, laws))
    assert other.low == pytest.approx(one.low, rel=1e-6)


@pytest.mark.parametrize(("mesh", "dim"), [(FLAT, 2), (SOLID, 3)], ids=["2D", "3D"])
def test_one_law_in_all_directions_is_that_law(mesh, dim):
    """Whichever way the axes are turned."""
    plain = solve_on(plate(STEEP, None, dim), mesh)
    for axes in (None, TURNED):
        found = solve_on(plate(f"[{STEEP}, {STEEP}, {STEEP}]", axes, dim), mesh)
        assert found.settled.iterations <= MOST_STEPS
        assert found.temperature == pytest.approx(plain.temperature, abs=2e-4)
        assert found.boundary_flow == pytest.approx(plain.boundary_flow, rel=1e-6)


@pytest.mark.parametrize("axes", [None, [[0, 1, 0], [-1, 0, 0], [0, 0, 1]]], ids=["along x", "turned to it"])
def test_heat_along_a_bar_follows_kirchhoff(axes):
    """From 80 to -40 °C along x with 1 + 0.008 T and across with a steeper law, which has no part in it.

    The middle is where T + 0.004 T² is half way: 24.54 °C; the flux is the mean conductivity, 1.16, times 120/0.1.
    """
    other = "{ table = [[-100, 5], [100, 1]] }"
    order = [STEEP, other] if axes is None else [other, STEEP]
    text = slab_text(length=100, width=50).replace(
        "conductivity = 1\n", f"conductivity = [{order[0]}, {order[1]}, 1]\n"
    )
    text = text.replace("[materials.stuff]\n", f"[materials.stuff]\naxes = {axes}\n" if axes else "[materials.stuff]\n")
    text = text[: text.index("[time]")] + text[text.index("[spaces.air]") :]
    text = text.replace('space = "air"', "temperature = -40").replace("[spaces.air]\ntemperature = 0\nfilm = 1\n", "")
    warm = '[[boundary]]\nname = "warm"\non = { plane = { x = 0 } }\ntemperature = 80\n'
    found = solve_on(loads(text.replace('[[boundary]]\nname = "rest"', warm + '[[boundary]]\nname = "rest"')), FLAT)
    middle = brentq(lambda t: t + 0.004 * t * t - 0.5 * (80 + 0.004 * 80**2 - 40 + 0.004 * 40**2), -40, 80)
    at = found.temperature[np.isclose(found.mesh.points[:, 0], 0.05)]
    assert at == pytest.approx(middle, abs=0.02)
    assert found.boundary_flow[1] == pytest.approx(1.16 * 1200 * 0.05, rel=1e-4)


def test_turned_grain_differs_from_straight():
    """So that the tests above can fail: the same laws along and across the grain, turned by 37°."""
    pair = f"[{STEEP}, 0.1, 1]"
    straight, turned = (solve_on(plate(pair, axes), FLAT).boundary_flow[0] for axes in (None, TURNED))
    assert abs(turned / straight - 1) > 0.1


def test_over_time_it_ends_in_the_steady_state():
    text = slab_text(k=1, rho=100, c=100, start=0, air=-60, film=50, length=100, width=50, duration=900, record=90,
                     tolerance=0.02)  # fmt: skip
    text = text.replace("conductivity = 1\n", f"conductivity = [{STEEP}, 0.3, 1]\naxes = {TURNED}\n")
    warm = '[[boundary]]\nname = "warm"\non = { plane = { y = 0 } }\ntemperature = 60\n'
    text = text.replace('[[boundary]]\nname = "rest"', warm + '[[boundary]]\nname = "rest"')
    system = heat_system(loads(text), FLAT)
    made = Transient(system, starting_state(system), refresh=refresher(system))
    while made.status == "running":
        made.step()
    still = solve_on(loads(text[: text.index("[time]")] + text[text.index("[spaces.air]") :]), FLAT)
    assert made.result().relative_closure < 1e-9
    assert made.state.temperature == pytest.approx(still.temperature, abs=0.15)  # coefficients follow in steps of 0.2 %
