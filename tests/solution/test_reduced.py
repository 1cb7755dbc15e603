"""The reduced model: it gives what full stepping gives, knows its error, and is left alone where it can't be trusted."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from solution.grids import first_state, grid, run_on, slab_text, stepping
from solution.test_melting import WATER
from solution.test_transient import LINE, SERIES, held_face

from coldseam import timed
from coldseam.case.read import loads
from coldseam.physics.melting import heat_content
from coldseam.solution import checkpoint, reducing
from coldseam.solution.defect import EACH, SAFETY, intervals_of, ladder_of
from coldseam.solution.heatsystem import heat_system
from coldseam.solution.reduced import reduced_system, turned
from coldseam.solution.reducing import Reduction, extended, not_tried, reduced_run, reduction
from coldseam.solution.transient import History, Transient

ROOM = """
title = "room"
[model]
dimensions = {dim}
[time]
duration = "4 h"
start = 20
record_every = "4 min"
tolerance = 0.05
[materials.foam]
conductivity = 0.025
density = 35
specific_heat = 1400
[materials.board]
conductivity = 0.2
density = 600
specific_heat = 1500
[spaces.bay]
temperature = {{ table = [["0 h", 25], ["2 h", 25], ["2 h", 40], ["4 h", 30]] }}
film = 8
[spaces.room]
film = 8
[spaces.room.floating]
heat_capacity = 2500
gain = 1
cooling = {{ setpoint = 0, band = 3, capacity = 12 }}
goods = [{{ name = "milk", mass = 0.5, specific_heat = 3900, area = 0.1, film = 8 }}]
[[body]]
name = "inner"
material = "foam"
box = {{ from = {low}, to = {middle} }}
[[body]]
name = "outer"
material = "board"
box = {{ from = {start}, to = {high} }}
[[contact]]
name = "seam"
between = ["inner", "outer"]
resistance = 0.05
[[boundary]]
name = "inside"
on = {{ plane = {{ x = 0 }} }}
space = "room"
[[boundary]]
name = "outside"
on = {{ plane = {{ x = 100 }} }}
space = "bay"
[[boundary]]
name = "edge"
on = {{ plane = {{ y = 0 }} }}
temperature = {{ table = [["0 h", 10], ["1 h", 10], ["1 h", 4], ["4 h", 8]] }}
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
[[probe]]
name = "seam"
at = {seam}
[[event]]
name = "cold"
when = {{ space = "room", falls_below = 2 }}
[[event]]
name = "warm face"
when = {{ boundary = "outside", temperature = "max", rises_above = 35 }}
"""


def room(dim: int) -> tuple:
    """Return a mesh and the case text: schedules that jump and bend, a thermostat, a fixed boundary, a contact."""
    across = np.linspace(0.0, 0.1, 11)
    axes = [np.linspace(0.0, 0.1, 21 if dim == 2 else 11), across, across[::2]][:dim]
    mesh = grid(
        *axes, bodies=("inner", "outer"), material=("foam", "board"), body_of=lambda at: (at[:, 0] > 0.06).astype(int)
    )
    places = {"low": [0, 0, 0], "middle": [60, 100, 100], "start": [60, 0, 0], "high": [100, 100, 100]}
    text = ROOM.format(dim=dim, seam=[60, 55, 50][:dim], **{name: at[:dim] for name, at in places.items()})
    return mesh, text


@cache
def room_reduction(dim: int) -> Reduction:
    """Return the reduced model of :func:`room`, made once."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(reducing, "LEAST_NODES", {2: 10, 3: 10})
        return reduction(stepping(*room(dim)))


def finished(run: Transient) -> History:
    while run.status == "running":
        run.step()
    return run.result()


@pytest.fixture(autouse=True)
def small_meshes(monkeypatch):
    """Reduced models are tried on meshes of tests too."""
    monkeypatch.setattr(reducing, "LEAST_NODES", {2: 10, 3: 10})


def off(one: History, other: History, unit: str) -> float:
    """Return the largest difference between the columns of a unit."""
    columns = [n for n, column in enumerate(one.columns) if column.unit.startswith(unit)]
    return float(np.abs(one.rows[:, columns] - other.rows[:, columns]).max())


def stepped_along(run: Transient, whole: Transient) -> float:
    """Take a reduced run's own steps over all nodes too; return the largest difference at their ends, K."""
    state, worst = whole.state, 0.0
    while run.status == "running":
        running, step = run.state.running, run.step()
        full = whole.stepper.attempt(replace(state, running=running), step.h)
        state = whole.stepper.at(full, min((run.time - step.start.time) / step.h, 1.0))
        terminals = whole.system.terminals(run.time)
        temperature = whole.system.with_fixed(state.temperature, terminals)
        state = replace(state, time=run.time, temperature=temperature)
        worst = max(worst, np.abs(run.system.expand(run.state.temperature) - temperature).max())
        worst = max(worst, np.abs(run.state.y - state.y).max(initial=0.0))
    return worst


@pytest.mark.parametrize("dim", [2, 3])
def test_along_the_same_steps_no_node_is_off_by_more_than_was_checked(dim):
    """Every node and space after every step, jumps included: under the checked error, which is under a millikelvin."""
    whole, found = stepping(*room(dim)), room_reduction(dim)
    assert found.why == "" and found.error <= found.allowed == 1e-3
    assert stepped_along(reduced_run(found.system, whole), whole) < found.error


@pytest.mark.parametrize("dim", [2, 3])
def test_it_gives_what_full_stepping_gives(dim):
    """The histories may differ by parts of the step's tolerance besides, where a step's error lies at a threshold."""
    whole, found = stepping(*room(dim)), room_reduction(dim)
    reduced, full = finished(reduced_run(found.system, whole)), finished(whole)
    assert off(reduced, full, "degC") < found.error + 0.05 * full.tolerance
    assert off(reduced, full, "W") < 1e-3 * np.abs(full.column("boundary", "inside")).max()
    assert reduced.totals.heat == pytest.approx(full.totals.heat, rel=1e-4)
    assert [e.time for e in reduced.events] == pytest.approx([e.time for e in full.events], abs=1.0)
    assert reduced.work.switched == full.work.switched >= 3
    assert reduced.relative_closure < 1e-9 and reduced.system is found.system.full
    assert found.solves < 0.5 * full.solver["solves"]  # of the full system: the work that it saves
    assert found.factorisations < 0.5 * full.solver["factorisations"]


@pytest.mark.parametrize("biot", [0.1, 10.0])
def test_slab_series(biot):
    """The exact series of test_transient.py, to the grid's 5e-4, from a few vectors."""
    whole = stepping(grid(*LINE), slab_text(film=biot))
    found = reduction(whole)
    history = finished(reduced_run(found.system, whole))
    assert found.vectors < 40
    for (bi, fo), (centre, surface, given_off) in SERIES["slab"].items():
        if bi == biot:
            row = int(np.argmin(np.abs(history.column("time") - fo)))
            assert history.column("probe", "centre")[row] == pytest.approx(centre, abs=5e-4)
            assert history.column("probe", "surface")[row] == pytest.approx(surface, abs=5e-4)
            if fo == 1.0:
                assert -history.totals.heat[0] / 0.1 == pytest.approx(given_off, abs=5e-4)


def test_the_uniform_field_and_an_uneven_start_are_in_the_basis():
    """The one closes the heat balance, the other is where the run begins; a start outside it is told as an error."""
    mesh = grid(*LINE)
    whole = stepping(mesh, slab_text(film=1.0), np.sign(mesh.points[:, 0] - 0.5))
    solver = reducing.StageSolver(whole.system, whole.tolerance, keep=1)
    vectors = reducing.first_vectors(solver, whole.initial, [0.1])
    for field in (np.ones(mesh.n_nodes), whole.initial.temperature):
        assert vectors @ (vectors.T @ (whole.system.capacity * field)) == pytest.approx(field, abs=1e-9)
    system = reduced_system(whole.system, turned(whole.system, vectors[:, :1]))
    stepper = reducing.Stepper(whole.system, solver)
    found, run = reducing.run_checked(system, whole, stepper, [0.001])
    assert run.result().relative_closure < 1e-10 and found.largest > 0.9 * SAFETY


def test_with_a_whole_basis_it_is_the_full_system():
    """All nodes' vectors: flows, capacities and what fixed boundaries store are the full ones, shared nodes included."""
    text = held_face(slab_text(start=3)).replace(
        '[[boundary]]\nname = "rest"',
        '[[boundary]]\nname = "top"\non = { plane = { y = 100 } }\ntemperature = 0\n[[boundary]]\nname = "rest"',
    )
    mesh = grid(np.linspace(0, 1, 6), np.linspace(0, 0.1, 4))
    whole = stepping(mesh, text)
    full = whole.system
    capacity = full.capacity[full.free]
    basis = turned(full, extended(np.empty((len(capacity), 0)), capacity, np.eye(len(capacity))))
    assert len(basis.rates) == len(capacity) and len(full.readers.film) == 3
    system = reduced_system(full, basis)
    run = reduced_run(system, whole)
    assert system.expand(run.initial.temperature) == pytest.approx(whole.initial.temperature, abs=1e-9)
    assert run.totals.heat == pytest.approx(whole.totals.heat)  # what the jump of the held nodes took
    reduced, expected = finished(run), finished(whole)
    assert reduced.totals.heat == pytest.approx(expected.totals.heat, rel=1e-6, abs=1e-9)
    assert np.abs(reduced.rows - expected.rows).max() < 1e-5


def test_the_check_catches_a_basis_that_is_too_small(monkeypatch):
    """Without the responses at the ladder's times: what it says is no less than the real error, and all nodes are stepped."""
    whole = stepping(*room(2))
    monkeypatch.setattr(reducing, "MOST_ROUNDS", 1)
    tried = []
    monkeypatch.setattr(
        reducing, "first_vectors", lambda solver, initial, lengths: few(solver.system, whole.initial, lengths)
    )
    checked = reducing.run_checked
    monkeypatch.setattr(reducing, "run_checked", lambda *given: tried.append(checked(*given)) or tried[-1])
    run, found = timed._begun(whole.system, lambda stage, text: None, None, None)
    assert run.system is whole.system and found.system is None
    assert found.facts()["used"] is False and "its error stayed at" in found.why
    full, poor = finished(whole), tried[0][1]
    real = np.abs(poor.result().column("probe", "seam") - full.column("probe", "seam")).max()
    assert real > 10 * found.allowed and found.error > real


def few(system, initial, lengths) -> np.ndarray:
    """Return a crippled basis: the uniform field and what each input does at once."""
    capacity = system.capacity[system.free]
    begun = np.column_stack([np.ones(len(capacity)), reducing._inputs(system, initial) / capacity[:, None]])
    return extended(np.empty((len(capacity), 0)), capacity, begun)


def test_a_poor_basis_is_told_how_poor_it_is():
    """On one step after a jump: the estimate, before its safety, is within a factor of 3 of the real error."""
    whole = stepping(grid(*LINE), slab_text(film=10.0, tolerance=1e-3))
    lengths = reducing._lengths(whole.system, whole)
    solver = reducing.StageSolver(whole.system, whole.tolerance, keep=len(lengths))
    vectors = reducing.first_vectors(solver, whole.initial, lengths)[:, :6]
    system = reduced_system(whole.system, turned(whole.system, vectors))
    found, run = reducing.run_checked(system, whole, reducing.Stepper(whole.system, solver), lengths)
    real = off(run.result(), finished(whole), "degC")
    assert real / 3.0 < found.largest / SAFETY < 3.0 * real and real > 1e-3


def test_only_linear_equations_are_reduced():
    mesh = grid(*LINE)
    followed = stepping(mesh, slab_text(), refresh=lambda state: None)
    assert reduction(followed).facts() == {"used": False, "why": "the equations are not linear"}
    system = heat_system(loads(WATER.format(dim=2, zero=[0, 0], size=[1000, 100])), mesh)
    melting = Transient(system, first_state(system), phase=heat_content(system.case, system.mesh))
    assert melting.phase is not None and reduction(melting).facts()["why"] == "the equations are not linear"


def test_where_it_does_not_pay_it_is_not_tried(monkeypatch):
    few_steps = stepping(grid(*LINE), slab_text(tolerance=0.5))
    monkeypatch.setattr(reducing, "LONGEST", 2.0)
    few_steps.longest = few_steps.duration / 2.0
    assert "steps cost less" in not_tried(few_steps.system, few_steps)
    monkeypatch.setattr(reducing, "LEAST_NODES", {2: 10_000, 3: 4_000})
    assert "so few nodes" in not_tried(few_steps.system, few_steps)


def test_a_run_in_it_resumes_to_the_same_history(tmp_path):
    """The basis comes back from its file, the state from the checkpoint: not a bit of the history changes."""
    mesh, text = room(2)
    whole, found = stepping(mesh, text), room_reduction(2)
    checkpoint.save_reduction(tmp_path, found)
    run = reduced_run(found.system, whole)
    for _ in range(40):
        run.step()
    checkpoint.save(tmp_path, run, {"fields": [], "decided": True})
    assert (tmp_path / checkpoint.CHECKPOINT).stat().st_size < 100_000  # nothing of it grows with the nodes
    again = stepping(mesh, text)
    known = checkpoint.load_reduction(tmp_path, again.system)
    assert known.facts() == found.facts()
    other = reduced_run(known.system, again)
    checkpoint.restore(tmp_path, other)
    one, two = finished(run), finished(other)
    assert np.abs(one.rows - two.rows).max() < 1e-9 and two.work == one.work
    assert two.totals.heat == pytest.approx(one.totals.heat, rel=1e-12)
    checkpoint.remove(tmp_path)
    assert not list(tmp_path.iterdir())


def test_fields_are_handed_out_on_the_mesh():
    text = slab_text(film=2.0).replace("tolerance", "fields = [0.3]\ntolerance")
    seen = []
    whole = stepping(grid(*LINE), text)
    found = reduction(whole)
    finished(reduced_run(found.system, whole, lambda t, f: seen.append(f)))
    expected = []
    run_on(grid(*LINE), text, on_field=lambda t, f: expected.append(f))
    assert np.abs(seen[0] - expected[0]).max() < found.error and seen[0].shape == expected[0].shape


def test_intervals_start_short_at_the_start_and_at_jumps():
    system = stepping(*room(2)).system
    lengths = ladder_of(10.0, 14400.0, 6.0)
    assert lengths[0] <= 10.0 < lengths[1] and EACH * sum(lengths) == pytest.approx(14400.0, rel=1e-3)
    found = intervals_of(system, system.corners(0.0, 14400.0), 14400.0, lengths)
    ends = [0.0, *(interval.end for interval in found)]
    assert ends[-1] == 14400.0 and np.all(np.diff(ends) > 0.0)
    for start in (
        0.0,
        3600.0,
        7200.0,
        10800.0,
    ):  # the jumps of the fixed boundary and of the bay; late, for the machine
        assert ends[ends.index(start) + 1] - start == pytest.approx(lengths[0])
