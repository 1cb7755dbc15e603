"""The stepper and its bookkeeping, on tensor grids: exact series, order, balance, switches, events, ranges."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.linalg import expm
from solution.grids import first_state, grid, run_on, slab_text, stepping

from coldseam.errors import SolveError
from coldseam.solution import stage
from coldseam.solution.heatsystem import with_conditions

LINE = (np.linspace(0.0, 1.0, 81), np.linspace(0.0, 0.1, 3))

# Carslaw, Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, 3.11, 7.7, 9.4; full series summed independently,
# four digits of the first terms as in Incropera, DeWitt, table 5.1: (Bi, Fo) -> centre, surface, Q/Q0.
SERIES = {
    "slab": {
        (0.1, 0.2): (0.993999, 0.951420, 0.019347), (0.1, 1.0): (0.922389, 0.878126, 0.092413),
        (1.0, 0.05): (0.999751, 0.790377, 0.042690), (1.0, 0.2): (0.950642, 0.643391, 0.148405),
        (1.0, 1.0): (0.533859, 0.348177, 0.529603), (10.0, 0.2): (0.829255, 0.122482, 0.416738),
        (10.0, 1.0): (0.163818, 0.023172, 0.886504),
    },
    "cylinder": {
        (0.1, 0.2): (0.983674, 0.938584, 0.038451), (0.1, 1.0): (0.842990, 0.802375, 0.177401),
        (1.0, 0.05): (0.998898, 0.769641, 0.084307), (1.0, 0.2): (0.870174, 0.570228, 0.281484),
        (1.0, 1.0): (0.249380, 0.160338, 0.796653), (10.0, 0.2): (0.600232, 0.074844, 0.688324),
        (10.0, 1.0): (0.013560, 0.001652, 0.993046),
    },
}  # fmt: skip


@pytest.mark.parametrize("shape", ["slab", "cylinder"])
@pytest.mark.parametrize("biot", [0.1, 1.0, 10.0])
def test_slab_and_cylinder_series(shape, biot):
    """Centre, surface and heat given off within 5e-4 of the initial difference: the grid's error, falling as h²."""
    turned = shape == "cylinder"
    text = slab_text(film=biot)
    if turned:
        text = text.replace("dimensions = 2", "dimensions = 2\naxisymmetric = true")
    history = run_on(grid(*LINE, axisymmetric=turned), text)
    time = history.column("time")
    volume = np.pi * 0.1 if turned else 0.1
    for (bi, fo), (centre, surface, _) in SERIES[shape].items():
        if bi == biot:
            row = int(np.argmin(np.abs(time - fo)))
            assert time[row] == pytest.approx(fo)
            assert history.column("probe", "centre")[row] == pytest.approx(centre, abs=5e-4)
            assert history.column("probe", "surface")[row] == pytest.approx(surface, abs=5e-4)
    assert -history.totals.heat[0] / volume == pytest.approx(SERIES[shape][biot, 1.0][2], abs=5e-4)
    assert history.relative_closure < 1e-10


def test_the_stepper_is_of_second_order():
    """Against the matrix exponential of the same semidiscrete system; the fitted order is 2.0 ± 0.15."""
    mesh = grid(np.linspace(0, 1, 11), np.array([0.0, 0.1]))
    text = slab_text(film=1, start=1)
    transient = stepping(mesh, text)
    system = transient.system
    matrix = system.network.matrix.toarray()
    start = np.cos(0.8603 * mesh.points[:, 0])  # smooth: the first mode nearly
    exact = expm(-0.5 * matrix / system.capacity[:, None]) @ start
    errors = []
    for count in (4, 8, 16):
        run = stepping(mesh, text, start)
        state = run.state
        for _ in range(count):
            state = run.stepper.at(run.stepper.attempt(state, 0.5 / count), 1.0)
        errors.append(np.abs(state.temperature - exact).max())
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert orders == pytest.approx(2.0, abs=0.15)


def test_the_error_estimate_keeps_the_tolerance():
    mesh = grid(np.linspace(0, 1, 21), np.array([0.0, 0.1]))
    finest = run_on(mesh, slab_text(film=5, tolerance=1e-6)).column("probe", "surface")
    for tolerance in (1e-2, 1e-3):
        rough = run_on(mesh, slab_text(film=5, tolerance=tolerance)).column("probe", "surface")
        assert (
            np.abs(rough - finest).max() < 0.5 * tolerance
        )  # 0.07 and 0.25 of it as found; the estimate is of one step


@pytest.mark.parametrize("count", [5, 81])
def test_a_step_change_leaves_no_temperature_out_of_range(count):
    """All temperatures stay between the start (1) and the air (0), or a held surface, but for the tolerance."""
    mesh = grid(np.linspace(0, 1, count), np.linspace(0, 0.1, 3))
    for text in (slab_text(film=1e4, tolerance=1e-3), held_face(slab_text(tolerance=1e-3))):
        run = stepping(mesh, text)
        low, high = 0.0, 1.0
        while run.status == "running":
            run.step()
            low, high = min(low, run.state.temperature.min()), max(high, run.state.temperature.max())
        assert low >= -1e-3 and high <= 1.0 + 1e-3
        assert run.result().relative_closure < 1e-9


def held_face(text: str) -> str:
    """Return the slab's text with a face of fixed temperature."""
    return text.replace('space = "air"', "temperature = 0").replace("[spaces.air]\ntemperature = 0\nfilm = 1\n", "")


def test_semi_infinite_solid_with_film():
    """Carslaw, Jaeger 1959, 2.7: concrete at 20 °C meets air at -20 °C; 0.01 K of grid and time errors allowed."""
    x = 2.0 * (1.0 - np.linspace(1.0, 0.0, 161) ** 2)  # the face at x = 2 m is resolved best
    text = slab_text(
        k=1.65, rho=2200, c=1000, start=20, air=-20, film=25, length=2000, duration='"6 h"', record='"1 h"', tolerance=2e-3,
    ).replace("at = [0, 50.0]", "at = [1900, 50.0]")  # fmt: skip
    history = run_on(grid(x, np.array([0.0, 0.05, 0.1])), text)
    assert history.column("probe", "surface")[[1, 6]] == pytest.approx([-0.259, -9.470], abs=0.01)
    assert history.column("probe", "centre")[[1, 6]] == pytest.approx([17.574, 4.570], abs=0.01)


def test_periodic_surface_temperature():
    """Carslaw, Jaeger 1959, 2.6: at 0.1 m amplitude 0.49843 and lag 2.6596 h (daily wave on concrete)."""
    text = held_face(
        slab_text(k=1.65, rho=2200, c=1000, start=0, length=1500, duration='"96 h"', record='"10 min"', tolerance=1e-3)
    )
    text = text.replace("temperature = 0", 'temperature = { sine = { mean = 0, amplitude = 1, period = "24 h" } }')
    text = text.replace("at = [0, 50.0]", "at = [1400, 50.0]")
    history = run_on(grid(np.linspace(0, 1.5, 151), np.array([0.0, 0.05, 0.1])), text)
    last = history.rows[:, 0] >= 72 * 3600
    time, value = history.column("time")[last] / 3600, history.column("probe", "centre")[last]
    wave = np.linalg.lstsq(np.column_stack([np.sin(w := 2 * np.pi * time / 24), np.cos(w)]), value, rcond=None)[0]
    assert np.hypot(*wave) == pytest.approx(0.49843, abs=1e-3)
    assert np.arctan2(-wave[1], wave[0]) * 24 / (2 * np.pi) == pytest.approx(2.6596, abs=0.01)
    assert history.relative_closure < 1e-9


def test_nafems_one_dimensional_transient():
    """NAFEMS TNSB rev. 3, 1990, test T3: 36.60 °C at x = 0.08 m after 32 s (exact series 36.6031)."""
    text = held_face(
        slab_text(k=35, rho=7200, c=440.5, start=0, length=100, width=10, duration=32, record=8, tolerance=1e-3)
    )
    text = text.replace("temperature = 0", "temperature = { sine = { mean = 0, amplitude = 100, period = 80 } }")
    text = text.replace("at = [0, 5.0]", "at = [80, 5.0]")
    text = text.replace(
        '[[boundary]]\nname = "rest"',
        '[[boundary]]\nname = "cold"\non = { plane = { x = 0 } }\ntemperature = 0\n[[boundary]]\nname = "rest"',
    )
    history = run_on(grid(np.linspace(0, 0.1, 101), np.array([0.0, 0.005, 0.01])), text)
    assert history.column("probe", "centre")[1:] == pytest.approx([2.7871, 14.8646, 28.7749, 36.6031], abs=0.02)


def test_brick_is_the_product_of_three_slabs():
    """Incropera, DeWitt 5.8 (product solution): 0.2 x 0.3 x 0.4 m, an eighth of it by symmetry, after 5 and 20 h."""
    text = """
    title = "brick"
    [model]
    dimensions = 3
    [time]
    duration = "20 h"
    start = 1
    record_every = "5 h"
    tolerance = 5e-4
    [spaces.air]
    temperature = 0
    film = 10
    [materials.stuff]
    conductivity = 0.5
    density = 1000
    specific_heat = 3700
    [[body]]
    name = "slab"
    material = "stuff"
    box = { from = [0, 0, 0], to = [100, 150, 200] }
    """.replace("\n    ", "\n")
    for axis, at in zip("xyz", (100, 150, 200), strict=True):
        text += f'[[boundary]]\nname = "{axis}"\non = {{ plane = {{ {axis} = {at} }} }}\nspace = "air"\n'
    text += '[[boundary]]\nname = "middle"\non = "rest"\nadiabatic = true\n'
    for name, at in (("centre", [0, 0, 0]), ("corner", [100, 150, 200]), ("face", [100, 0, 0])):
        text += f'[[probe]]\nname = "{name}"\nat = {at}\n'
    axes = [np.linspace(0.0, half, 15) for half in (0.1, 0.15, 0.2)]
    history = run_on(grid(*axes), text)
    expected = {"centre": (0.858545, 0.205763), "corner": (0.079921, 0.011216), "face": (0.419380, 0.097549)}
    for name, values in expected.items():
        assert history.column("probe", name)[[1, 4]] == pytest.approx(
            values, abs=3e-3
        )  # 14 cells an edge: 5.3e-3 with 7
    capacity = history.system.capacity
    assert capacity @ history.final.temperature / capacity.sum() == pytest.approx(0.100057, abs=2e-3)


def test_lumped_body_cools_as_an_exponential():
    """Bi = 1e-4: exp(-t/tau), tau = rho c L/h; the internal resistance changes it by Bi/3."""
    history = run_on(
        grid(np.linspace(0, 1, 5), np.array([0.0, 0.1])), slab_text(film=1e-4, duration=2e4, record=5e3, tolerance=1e-5)
    )
    assert history.column("probe", "centre") == pytest.approx(np.exp(-history.column("time") / 1e4), abs=1e-4)


def test_a_stage_that_was_left_early_balances(monkeypatch):
    """Stages solved to a hundredth of their energy only: what is stored is still what came in (without: 2e-7 off)."""
    monkeypatch.setattr(stage, "DIRECT_LIMIT", {2: 10, 3: 10})
    monkeypatch.setattr(stage, "RELATIVE_ENERGY", 1e-2)
    mesh, text = grid(np.linspace(0, 1, 41), np.linspace(0, 0.1, 5)), slab_text(film=2, duration=0.2, tolerance=1e-3)
    assert run_on(mesh, text).relative_closure < 1e-12
    monkeypatch.setattr(stage, "balanced", lambda matrix, right, x: x)
    assert run_on(mesh, text).relative_closure > 1e-8


def test_a_balance_that_does_not_close_to_a_millionth_is_refused():
    run = stepping(grid(*LINE), slab_text(duration=0.05))
    while run.status == "running":
        run.step()
    honest = run.totals.heat.copy()
    run.totals.heat = honest * (1 + 1e-7)
    assert run.result().relative_closure == pytest.approx(1e-7, rel=0.01)
    run.totals.heat = honest * (1 + 2e-6)
    with pytest.raises(SolveError, match="does not close"):
        run.result()


def test_the_stepper_keeps_its_factors():
    """Work budget: a smooth cooldown needs few step sizes, each factorised once while it is in use."""
    history = run_on(grid(*LINE), slab_text(film=1, tolerance=1e-3))
    assert history.work.steps < 90
    assert history.solver["factorisations"] <= 20
    assert history.solver["solves"] == 3 * (history.work.steps + history.work.rejected)


def test_a_field_is_handed_out_at_asked_times():
    text = slab_text().replace("tolerance", "fields = [0.25, 0.5]\ntolerance")
    seen = []
    history = run_on(grid(*LINE), text, on_field=lambda time, temperature: seen.append((time, temperature.mean())))
    assert [time for time, _ in seen] == pytest.approx([0.25, 0.5])
    assert 1.0 > seen[0][1] > seen[1][1] > history.final.temperature.mean()


def test_a_finished_run_can_not_be_stepped():
    run = stepping(grid(*LINE), slab_text(duration=0.05))
    while run.status == "running":
        run.step()
    assert run.status == "finished" and run.time == pytest.approx(0.05)
    with pytest.raises(ValueError, match="finished"):
        run.step()


def test_first_state_is_the_asked_one():
    run = stepping(grid(*LINE), slab_text(start=7))
    assert first_state(run.system).temperature == pytest.approx(7.0)


class Doubled:
    """Stands for laws: other equations at every step, and nothing to tell of coefficients."""

    def __init__(self, system):
        self.system, self.strayed = system, {}

    def __call__(self, state, h):
        """Return the equations."""
        return self.system

    def told(self, *state):
        """Tell of no coefficients."""
        return None


def test_coefficients_may_follow_the_temperature():
    """The hook for laws: with k doubled at every step by ``refresh`` the run equals one with twice the conductivity."""
    mesh = grid(np.linspace(0, 1, 21), np.array([0.0, 0.1]))
    plain = stepping(mesh, slab_text(film=1, tolerance=1e-3))
    double = with_conditions(
        plain.system, replace(plain.system.given, conductivity=2.0 * plain.system.given.conductivity)
    )
    changed = run_on(mesh, slab_text(film=1, tolerance=1e-3), refresh=Doubled(double))
    expected = run_on(mesh, slab_text(film=1, k=2, tolerance=1e-3))
    assert changed.column("probe", "centre") == pytest.approx(expected.column("probe", "centre"), abs=2e-3)
    assert changed.relative_closure < 1e-10


def test_multigrid_stages_give_what_factors_give(monkeypatch):
    """In three dimensions, with a floating space: the same history from either solver, and a closed balance."""
    text = slab_text(film=2, duration=0.5, record=0.1, tolerance=1e-3).replace("dimensions = 2", "dimensions = 3")
    for flat, solid in (
        ("[0, 0], to = [1000, 100]", "[0, 0, 0], to = [1000, 1000, 1000]"),
        ("at = [0, 50.0]", "at = [0, 500, 500]"),
        ("at = [1000, 50.0]", "at = [1000, 500, 500]"),
    ):
        text = text.replace(flat, solid)
    text = text.replace("temperature = 0\n", "floating = { start = 0, heat_capacity = 0.4, gain = 0.1 }\n")
    text = text.replace("[materials", "[spaces.far]\ntemperature = 0\nfilm = 1\n[materials")
    text = text.replace('[[boundary]]\nname = "rest"', FAR + '[[boundary]]\nname = "rest"')
    mesh = grid(*(np.linspace(0, 1, 8),) * 3)
    direct = run_on(mesh, text)
    monkeypatch.setattr(stage, "DIRECT_LIMIT", {2: 10, 3: 10})
    iterative = run_on(mesh, text)
    assert "multigrid" in iterative.solver["method"] and "multigrid" not in direct.solver["method"]
    assert iterative.rows[:, :4] == pytest.approx(direct.rows[:, :4], abs=1e-6)
    assert iterative.relative_closure < 1e-13  # to rounding: stage.balanced; 2e-13 without it
    assert iterative.solver["iterations"] < 12 * iterative.solver["solves"]


FAR = '[[boundary]]\nname = "far"\non = { plane = { x = 0 } }\nspace = "far"\n'
