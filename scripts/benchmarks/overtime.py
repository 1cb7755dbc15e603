"""Runs over time: an implicit stage against a fresh steady solve, and the reduced model against stepping all nodes."""

from __future__ import annotations

import time

import numpy as np
from benchmarks.common import Table, brick_grid, verdict

from coldseam.case.read import loads
from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import MeshBody
from coldseam.solution.heatsystem import HeatSystem, heat_system
from coldseam.solution.reducing import Reduction, reduced_run, reduction
from coldseam.solution.respond import respond
from coldseam.solution.starting import starting_state
from coldseam.solution.steady import NODE_TOLERANCE
from coldseam.solution.transient import History, Transient

CELLS, NODES_2D = 1_000_000, 50_000
SIDE = 0.1  # m
CASE = """
title = "A block of foam with a bolt"
[model]
dimensions = {dim}
[time]
duration = {duration}
start = 20
tolerance = 0.01
longest_step = {longest}
[materials.foam]
conductivity = 0.025
density = 35
specific_heat = 1400
[materials.steel]
conductivity = 17
density = 7900
specific_heat = 460
[spaces.cold]
temperature = -20
film = 8
[spaces.warm]
temperature = {warm}
film = 8
[[body]]
name = "block"
material = "foam"
box = {{ from = {low}, to = {high} }}
[[body]]
name = "bolt"
material = "steel"
box = {{ from = {low}, to = {high} }}
[[boundary]]
name = "inside"
on = {{ plane = {{ {axis} = 0 }} }}
space = "cold"
[[boundary]]
name = "outside"
on = {{ plane = {{ {axis} = 100 }} }}
space = "warm"
[[boundary]]
name = "cut planes"
on = "rest"
adiabatic = true
[[probe]]
name = "middle"
at = {middle}
"""
COOLDOWN = {"duration": '"24 h"', "longest": '"8 min"', "warm": "25"}
MONTH = {
    "duration": '"20 d"',
    "longest": '"29 min"',
    "warm": '{ sine = { mean = 15, amplitude = 10, period = "24 h" } }',
}


def block(dim: int, per_side: int, times: dict[str, str]) -> HeatSystem:
    """Return the equations of a foam block with a steel bolt through it between films, bricks a side and times given."""
    drawn = brick_grid(dim, per_side)
    centres = drawn.p[:, drawn.t].mean(axis=1)
    bolt = np.abs(centres[: dim - 1] - 0.5).max(axis=0) < 0.06
    bodies = tuple(
        MeshBody(name=n, material=m, source=s) for s, (n, m) in enumerate((("block", "foam"), ("bolt", "steel")))
    )
    mesh = build_mesh(SIDE * drawn.p.T, drawn.t.T, bolt.astype(int), bodies)
    text = CASE.format(dim=dim, low=[0] * dim, high=[100] * dim, middle=[50] * dim, axis="xyz"[dim - 1], **times)
    return heat_system(loads(text), mesh)


def run(transient: Transient) -> History:
    """Return the history of a run."""
    while transient.status == "running":
        transient.step()
    return transient.result()


def timed(work):
    """Return what a call returns, and its processor seconds."""
    begun = time.process_time()
    found = work()
    return found, time.process_time() - begun


def in_reduced_model(system: HeatSystem) -> tuple[History, Reduction]:
    """Return the history by the reduced model, from nothing."""
    whole = Transient(system, starting_state(system))
    found = reduction(whole)
    if found.system is None:
        raise SystemExit(f"no reduced model: {found.why}")
    return run(reduced_run(found.system, whole)), found


def difference(one: History, other: History) -> float:
    """Return the largest difference of temperatures, K: all recorded ones, and the last field."""
    columns = [n for n, column in enumerate(one.columns) if column.unit == "degC"]
    return max(
        float(np.abs(one.rows[:, columns] - other.rows[:, columns]).max()),
        float(np.abs(one.final.temperature - other.final.temperature).max()),
    )


def compared(dim: int, per_side: int, times: dict[str, str]):
    """Return system, full history and seconds, reduced history, its model and seconds."""
    system = block(dim, per_side, times)
    (reduced, found), quick = timed(lambda: in_reduced_model(system))
    full, slow = timed(lambda: run(Transient(system, starting_state(system))))
    return system, full, slow, reduced, found, quick


def row_of(name: str, system, full, slow, reduced, found, quick) -> tuple[str, ...]:
    """Return the row of a comparison."""
    off = difference(reduced, full)
    return (
        name,
        f"{len(system.capacity):,}",
        f"{full.work.steps:,}",
        f"{slow:.0f}",
        f"{quick:.1f}",
        f"{found.vectors}",
        f"{found.solves} of {full.solver['solves']:,}",
        f"{slow / quick:.1f}",
        verdict(slow / quick, 5.0, at_least=True),
        f"{1e3 * off:.3f}",
        f"{1e3 * found.error:.3f}",
        verdict(1e3 * off, 1.0, at_least=False),
    )


def measure(cells: int = CELLS) -> list[Table]:
    """Return the tables, with about so many tetrahedra, and in 2D nodes in proportion."""
    solid = compared(3, max(round((cells / 6) ** (1 / 3)), 4), COOLDOWN)
    system, full, slow = solid[:3]
    fresh = min(timed(lambda: respond(system.network, 3, NODE_TOLERANCE, uneven=True))[1] for _ in range(3))
    stage = slow / (2 * (full.work.steps + full.work.rejected))
    stages = Table(
        name="stage",
        title=f"An implicit stage against a fresh steady solve, 3D, {system.mesh.n_cells:,} tetrahedra",
        head=("nodes", "steps", "all steps, s", "a stage, s", "fresh solve with set-up, s", "ratio", "goal"),
        rows=[
            (
                f"{len(system.capacity):,}",
                f"{full.work.steps:,}",
                f"{slow:.0f}",
                f"{stage:.3f}",
                f"{fresh:.2f}",
                f"{stage / fresh:.2f}",
                verdict(stage / fresh, 0.2, at_least=False),
            )  # fmt: skip
        ],
        remarks=(
            "A step has two stages; the solve of its error estimate, the recording and "
            f"{full.solver['factorisations']} hierarchies are counted with them. "
            f"{full.solver['iterations'] / full.solver['solves']:.1f} iterations a solve.",
        ),
    )
    flat = compared(2, max(round((NODES_2D * cells / CELLS) ** 0.5), 110), MONTH)
    reduced = Table(
        name="reduced",
        title="The reduced model, its search and checks included, against stepping all nodes",
        head=(
            "case",
            "nodes",
            "steps",
            "all nodes, s",
            "reduced, s",
            "vectors",
            "full solves",
            "faster by",
            "goal",
            "largest difference, mK",
            "as checked, mK",
            "goal",
        ),  # fmt: skip
        rows=[row_of("3D, cooldown over a day", *solid), row_of("2D, 20 days of weather", *flat)],
        remarks=("Processor seconds. The difference is that of all recorded temperatures and of the last field.",),
    )
    return [stages, reduced]
