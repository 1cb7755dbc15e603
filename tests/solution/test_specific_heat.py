"""Specific heats over temperature in runs over time: exact solutions, and not a joule lost."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq
from solution.grids import first_state, grid, slab_text

from coldseam.case.read import loads
from coldseam.physics.melting import heat_content
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.transient import Transient

LUMP = grid(np.linspace(0, 0.01, 3), np.array([0.0, 0.1]))


def run(text: str, mesh):
    system = heat_system(loads(text), mesh)
    phase = heat_content(system.case, system.mesh)
    made = Transient(system, first_state(system), phase=phase, refresh=refresher(system))
    while made.status == "running":
        made.step()
    return made


def heated(specific_heat: str, more: str = "", **change) -> str:
    """A plate of 0.1 m² and 10 mm that 2 kW/m² warm, and that a film of next to nothing holds."""
    text = slab_text(
        **{"k": 1000, "rho": 2700, "length": 10, "width": 100, "start": -190, "duration": 3600, "record": 360,
           "air": 20, "film": 1e-9, "tolerance": 0.05} | change
    )  # fmt: skip
    text = text.replace("specific_heat = 1\n", f"specific_heat = {specific_heat}\n{more}")
    warm = '[[boundary]]\nname = "warm"\non = { plane = { x = 0 } }\nheat_flux = 2000\n'
    return text.replace('[[boundary]]\nname = "rest"', warm + '[[boundary]]\nname = "rest"')


def test_a_cold_lump_warms_up_by_its_heat_content():
    """2 kW/m² for an hour into 27 kg/m² of 6061: the end is where the integral of the NIST fit is 267 kJ/kg."""
    text = (
        heated("1")
        .replace("specific_heat = 1\n", "")
        .replace("density = 2700\n", "")
        .replace("conductivity = 1000\n", "")
    )
    text = text.replace("[materials.stuff]\n", '[materials.stuff]\nlibrary = "Aluminium 6061-T6, 4 to 300 K"\n')
    history = run(text.replace("duration = 3600", "duration = 2000"), LUMP).result()
    fit = [46.6467, -314.292, 866.662, -1298.3, 1162.27, -637.795, 210.351, -38.3094, 2.96344]

    def c(kelvin):
        return 10 ** sum(a * np.log10(kelvin) ** n for n, a in enumerate(fit))

    for row in (2, -1):
        given = 2000 * float(history.column("time")[row]) / (2700 * 0.01)
        end = brentq(lambda kelvin, given=given: quad(c, 83.15, kelvin)[0] - given, 83.15, 400) - 273.15
        assert end > -120
        # 0.04 K is what 2 kW/m² need across 10 mm of aluminium, k down to 85 W/(m K), halved.
        assert 0.5 * (
            history.column("probe", "surface")[row] + history.column("probe", "centre")[row]
        ) == pytest.approx(end, abs=0.06)
    assert history.heat_stored == pytest.approx(2000 * 2000 * 0.1, rel=1e-7)
    assert history.relative_closure < 1e-9


def test_constant_diffusivity_is_a_linear_problem():
    """k and c both proportional to 1 + T/100: theta = T + T²/200 obeys the heat equation, solved by Fourier's series.

    100 mm at 0 °C, one face raised to 80 °C at once, the other kept; after 1000 s alpha t/L² = 0.1.
    """
    text = slab_text(k=1, rho=1000, c=1, start=0, air=0, film=1e6, length=100, width=20, duration=1000, record=200,
                     tolerance=0.03)  # fmt: skip
    text = text.replace("conductivity = 1\n", "conductivity = { table = [[-50, 0.5], [150, 2.5]] }\n")
    text = text.replace("specific_heat = 1\n", "specific_heat = { table = [[-50, 500], [150, 2500]] }\n")
    warm = '[[boundary]]\nname = "warm"\non = { plane = { x = 0 } }\ntemperature = 80\n'
    text = text.replace('[[boundary]]\nname = "rest"', warm + '[[boundary]]\nname = "rest"')
    text = text.replace("at = [0, 10.0]", "at = [50, 10.0]")
    history = run(text, grid(np.linspace(0, 0.1, 31), np.array([0.0, 0.02]))).result()
    n = np.arange(1, 200)

    def theta(fourier: float) -> float:
        top = 80 + 80**2 / 200
        return float(
            top * (0.5 - (2 / (n * np.pi) * np.sin(n * np.pi / 2) * np.exp(-((n * np.pi) ** 2) * fourier)).sum())
        )

    for row in (3, -1):
        exact = 100 * (np.sqrt(1 + 2 * theta(1e-4 * float(history.column("time")[row])) / 100) - 1)
        assert history.column("probe", "centre")[row] == pytest.approx(exact, abs=0.12)  # 0.15 % of 80 K, the mesh
    assert history.column("probe", "centre")[-1] > 20
    assert history.relative_closure < 1e-9


def test_a_law_and_melting_in_one_material_add_up():
    """c = 2000 + 10 (T + 40) J/(kg K) and 1e5 J/kg about 0 °C: an insulated lump takes up 2 kW/m² for an hour."""
    made = run(
        heated(
            "{ table = [[-40, 2000], [60, 3000]] }", "melting = { at = 0, latent_heat = 1e5 }\n", start=-30, rho=1000
        ),
        LUMP,
    )
    history = made.result()
    given = 2000 * 3600 / (1000 * 0.01)

    def content(t):
        return 2000 * t + 5 * (t + 40) ** 2 + (1e5 if t > 0 else 0.0)

    end = brentq(lambda t: content(t) - content(-30) - given, 0.1, 400)
    if end > 60:  # beyond its range the law stays at 3000
        end = 60 + (given - content(60) + content(-30)) / 3000
    assert history.column("probe", "surface")[-1] == pytest.approx(end, abs=0.05)
    assert history.column("melted", "slab")[-1] == pytest.approx(1.0)
    assert history.relative_closure < 1e-9


def test_a_sheet_stores_by_its_law_too():
    """1 mm of a sheet that holds as much as the plate itself: half the warming of the plate alone."""
    sheet = '[[sheet]]\nname = "skin"\nmaterial = "metal"\nthickness = 1\non = { plane = { x = 10 } }\n'
    metal = (
        "[materials.metal]\nconductivity = 50\ndensity = 10000\nspecific_heat = { table = [[-200, 500], [0, 1000]] }\n"
    )
    text = heated("1000", rho=1000, start=-100, duration=600, record=60, k=1e4) + metal + sheet
    history = run(text, LUMP).result()
    given = 2000 * 600  # J/m²; sheet: 10 kg/m² of 750 J/(kg K) at -100 °C, rising by 2.5 a kelvin
    end = brentq(lambda d: 10 * 1000 * d + 10 * (750 * d + 1.25 * d * d) - given, 0, 400) - 100
    assert history.column("probe", "surface")[-1] == pytest.approx(end, abs=0.05)


@pytest.mark.parametrize("melting", ["", "melting = { between = [-4, 3], latent_heat = 2e5 }\n"])
def test_content_inverts_itself_at_any_temperature(melting):
    text = heated("{ table = [[-40, 2000], [0, 9000], [1, 2000], [60, 3000]] }", melting)
    phase = heat_content(loads(text), LUMP)
    for value in (-300.0, -40.0, -4.0, -0.2, 0.0, 0.5, 2.9, 3.0, 59.0, 60.0, 400.0):
        temperature = np.full(LUMP.n_nodes, value)
        assert phase.temperature(phase.heat(temperature), np.zeros_like(temperature)) == pytest.approx(
            temperature, abs=1e-9
        )


def test_factors_are_used_again():
    """While capacities change by less than 5 % from step to step, iterations go by an old factor."""
    made = run(heated("{ table = [[-200, 300], [20, 900]] }"), LUMP)
    assert made.solver.factorisations < 2 * made.work.steps
