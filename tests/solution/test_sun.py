"""Sun, sky and surroundings by schedule: sol-air temperature, energy absorbed, and a plate integrated by scipy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from solution.grids import grid, slab_text

from coldseam.case.read import loads
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import starting_state
from coldseam.solution.transient import Transient

MESH = grid(np.linspace(0, 0.1, 11), np.array([0.0, 0.1]))
SIGMA = 5.670374419e-8
SLAB = slab_text(
    k=0.5, rho=800, c=900, start=10, air=10, film=20, length=100, width=100, duration=86400, record=3600,
    tolerance=0.01,
)  # fmt: skip
IN_SUN = 'space = "air"\nsun = { absorptivity = 0.6, irradiance = IRRADIANCE }'
DAY = "{ table = [[0, 0], [21600, 0], [43200, 800], [64800, 0], [86400, 0]] }"
SINE = "{ sine = { mean = 400, amplitude = 300, period = 43200 } }"


def run(text: str, mesh=MESH):
    system = heat_system(loads(text), mesh)
    made = Transient(system, starting_state(system), refresh=refresher(system))
    while made.status == "running":
        made.step()
    return made


def lit(irradiance: str, text: str = SLAB) -> str:
    return text.replace('space = "air"', IN_SUN.replace("IRRADIANCE", irradiance))


def test_sun_over_time_is_a_sol_air_temperature():
    """With one film h the sun raises the air's temperature by absorptivity I / h: the same equations, so the same run."""
    sunny = run(lit(SINE)).result()
    sol_air = "{ sine = { mean = 22, amplitude = 9, period = 43200 } }"  # 10 + 0.6 (400 + 300 sin) / 20
    warm = run(SLAB.replace("temperature = 10", f"temperature = {sol_air}")).result()
    for probe in ("surface", "centre"):
        assert sunny.column("probe", probe) == pytest.approx(warm.column("probe", probe), abs=1e-9)
    assert sunny.column("boundary", "face") == pytest.approx(warm.column("boundary", "face"), abs=1e-7)
    assert np.ptp(sunny.column("probe", "surface")[12:]) > 5  # a steady sun would not swing


def test_all_sun_is_absorbed():
    """A day of 800 W/m² at noon, linear to 0 at 6 and 18 h: 0.6 x 17.28 MJ/m² on 0.1 m, when no heat can leave."""
    made = run(lit(DAY, SLAB.replace("film = 20", "film = 1e-9")))
    history = made.result()
    absorbed = 0.6 * 0.5 * 800 * 43200 * 0.1
    assert history.heat_stored == pytest.approx(absorbed, rel=1e-6)
    assert history.totals.heat[0] == pytest.approx(absorbed, rel=1e-6)
    assert history.relative_closure < 1e-9
    # Linear as it is, nothing is made anew on the way.
    assert made.refresh is None


@pytest.mark.parametrize("extra", ["", "\nradiation = { emissivity = 0.9, sky = { temperature = -5, share = 0.5 } }"])
def test_a_steady_start_knows_the_sun(extra):
    """It is where a long run under the same sun comes to, and where the balance by hand is (film 20, 10 °C air)."""
    text = lit("{ table = [[0, 500], [86400, 500]] }").replace("film = 20", f"film = 20{extra}")
    text = text.replace("start = 10", 'start = "steady"').replace("tolerance = 0.01", "tolerance = 0.001")
    history = run(text).result()
    surface = history.column("probe", "surface")
    seen = 0.0 if not extra else 0.9 * SIGMA
    around = 0.5 * 268.15**4 + 0.5 * 283.15**4
    t = float(surface[0])
    assert 0.6 * 500 + 20 * (10 - t) + seen * (around - (t + 273.15) ** 4) == pytest.approx(0.0, abs=1.0)
    assert surface == pytest.approx([t] * len(surface), abs=0.05)
    assert t > 15


def test_a_plate_under_a_sky_that_changes():
    """A thin conducting plate: rho c L dT/dt = a I(t) + h (Ta - T) + e sigma (Tr(t)^4 - T^4), integrated to 1e-9."""
    sky = "{ table = [[0, -30], [21600, 0], [21600, 10], [43200, -20]] }"
    around = "{ sine = { mean = 5, amplitude = 15, period = 21600 } }"
    text = slab_text(
        k=400, rho=2000, c=1000, start=10, air=10, film=3, length=10, width=100, duration=43200, record=1800,
        tolerance=0.01,
    )  # fmt: skip
    radiation = (
        f"radiation = {{ emissivity = 0.9, surroundings = {around}, sky = {{ temperature = {sky}, share = 0.7 }} }}"
    )
    text = lit(SINE, text.replace("film = 3", f"film = 3\n{radiation}"))
    history = run(text, grid(np.linspace(0, 0.01, 3), np.array([0.0, 0.1]))).result()

    def slope(t, y):
        cold = -30 + 30 * t / 21600 if t < 21600 else 10 - 30 * (t - 21600) / 21600
        wall = 5 + 15 * np.sin(2 * np.pi * t / 21600)
        fourth = 0.7 * (cold + 273.15) ** 4 + 0.3 * (wall + 273.15) ** 4
        sun = 0.6 * (400 + 300 * np.sin(2 * np.pi * t / 43200))
        return (sun + 3 * (10 - y) + 0.9 * SIGMA * (fourth - (y + 273.15) ** 4)) / (2000 * 1000 * 0.01)

    time = history.column("time")
    exact = solve_ivp(slope, (0, 43200), [10.0], rtol=1e-9, atol=1e-9, max_step=300, t_eval=time).y[0]
    assert np.ptp(exact) > 20
    # Films are kept while they have moved by less than 2e-3, so 0.2 % of what drives the plate, some 60 K.
    assert history.column("probe", "surface") == pytest.approx(exact, abs=0.12)
    assert history.relative_closure < 1e-9


def test_what_is_seen_through_an_opening_may_change():
    """A plate whose open face sees surroundings that warm up linearly, by scipy as above."""
    text = slab_text(
        k=400, rho=2000, c=1000, start=0, air=0, film=1, length=10, width=100, duration=36000, record=3600,
        tolerance=0.01,
    )  # fmt: skip
    text = text.replace('space = "air"', 'cavity = "hollow"\nemissivity = 0.8')
    text = text.replace(
        'name = "rest"\non = "rest"\nadiabatic = true', 'name = "rest"\non = "rest"\nspace = "air"\nfilm = 1e-9'
    )
    text += '[cavities.hollow]\nsurroundings = { table = [["0 h", 0], ["10 h", 100]] }\n'
    history = run(text, grid(np.linspace(0, 0.01, 3), np.array([0.0, 0.1]))).result()
    exact = solve_ivp(
        lambda t, y: 0.8 * SIGMA * ((t / 360 + 273.15) ** 4 - (y + 273.15) ** 4) / (2000 * 1000 * 0.01),
        (0, 36000), [0.0], rtol=1e-9, atol=1e-9, t_eval=history.column("time"),
    ).y[0]  # fmt: skip
    assert history.column("probe", "surface") == pytest.approx(exact, abs=0.1)
