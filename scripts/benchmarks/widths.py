"""Nodes that a proven interval needs: one size for the whole mesh against the refinement rounds."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
from benchmarks.common import Table, one_size

from coldseam.case import read
from coldseam.geometry.mesher import open_geometry
from coldseam.solution.bounds import prove
from coldseam.solution.rounds import solve
from coldseam.solution.steady import solve_on

ROOT = Path(__file__).resolve().parents[2]
ASKED = (0.005, 0.0025)
"""Half widths over the flow: ± 0.5 %, and an interval that is 0.5 % wide."""
CASES = {
    # case file, sizes in mm of the uniform meshes, coarsest first, goal
    "2D corner (edge of two walls)": (ROOT / "tests/published/edge.toml", (40.0, 20.0, 10.0, 5.0), 1 / 20),
    "2D corner with a timber post (shipped)": (
        ROOT / "cases/panel-corner.toml",
        (20.0, 10.0, 5.0),
        1 / 20,
    ),
    "3D corner of three walls": (ROOT / "tests/published/corner.toml", (150.0, 100.0, 70.0, 50.0), 1 / 8),
    "3D bolt in a panel": (ROOT / "scripts/benchmarks/bolt.toml", (10.0, 7.0, 5.0, 3.5), 1 / 40),
}


def half_width(steady) -> float:
    """Return half the width of the interval of the first terminal's heat flow over the flow."""
    reading = np.zeros(len(steady.state))
    reading[0] = 1.0
    low, high = steady.bounds.interval(reading, steady.state)
    return 0.5 * (high - low) / abs(0.5 * (high + low))


def uniform(case, mesher, size: float) -> tuple[int, float]:
    """Return nodes and half width of a mesh of one size, round parts included."""
    mesh = one_size(mesher, size)
    steady = solve_on(case, mesh)
    bounds = prove(steady.mesh, steady.given, steady.weights, steady.response)
    return steady.mesh.n_nodes, half_width(dataclasses.replace(steady, bounds=bounds))


def nodes_for(points: list[tuple[int, float]], asked: float) -> tuple[float, float]:
    """Return the nodes for an asked half width by the power law of the two finest points, and its exponent."""
    (a, wide), (b, narrow) = sorted(points)[-2:]
    power = np.log(wide / narrow) / np.log(b / a)
    return b * (narrow / asked) ** (1.0 / power), power


def adaptive_nodes(rounds) -> float:
    """Return the fewest nodes that meet what is allowed: of a round, or between two rounds by the power law."""
    nodes, errors = (np.array([getattr(entry, name) for entry in rounds]) for name in ("nodes", "error"))
    between = float(np.exp(np.interp(0.0, -np.log(errors), np.log(nodes))))
    return min(between, float(nodes[errors <= 1.0].min(initial=np.inf)))


def compared(name: str, plain: list[tuple[int, float]], mesher, case, goal: float, asked: float) -> tuple[str, ...]:
    """Return a row of the table: the meshes of one size against a run that asks for a half width."""
    solution = solve(read.replace(case, "model.accuracy", asked), mesher, lambda stage, message: None)
    needed, power = nodes_for(plain, asked)
    reached = adaptive_nodes(solution.rounds)
    return (
        name,
        f"± {100 * asked:g} %",
        ", ".join(f"{nodes:,} ({width:.2%})" for nodes, width in plain),
        f"{power:.2f}",
        f"{needed:,.0f}",
        ", ".join(f"{entry.nodes:,} ({entry.error * asked:.2%})" for entry in solution.rounds),
        f"{reached:,.0f}",
        f"1/{needed / reached:.0f}",
        f"≤ 1/{1 / goal:.0f}: {'met' if reached / needed <= goal else '**missed**'}",
    )


def measure() -> list[Table]:
    """Return the table."""
    rows = []
    for name, (path, sizes, goal) in CASES.items():
        case = read.load(path)
        with open_geometry(case) as mesher:
            plain = [uniform(case, mesher, size) for size in sizes]
            rows += [compared(name, plain, mesher, case, goal, asked) for asked in ASKED]
    head = (
        "case",
        "asked",
        "uniform: nodes (±)",
        "± falls as nodes to the -",
        "uniform: nodes as asked",
        "adaptive rounds: nodes (±)",
        "adaptive: nodes as asked",
        "adaptive over uniform",
        "goal",
    )
    remark = (
        "± is half the width of an interval over its flow: the first boundary's on uniform meshes, the worst one's in "
        "the rounds; ± 0.25 % is an interval 0.5 % wide. Nodes as asked are read between or beyond the two nearest "
        "meshes by the power law. The edge of two walls is so smooth that the coarsest mesh is all but good enough. No mesh is "
        "wholly of one size where a part is smaller than it: elements beside the bolt are as small as the bolt."
    )
    title = "Nodes for an interval, one size everywhere against refinement"
    return [Table(name="widths", title=title, head=head, rows=rows, remarks=(remark,))]
