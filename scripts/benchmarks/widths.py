"""Nodes that a proven 0.5 % needs: one size for the whole mesh against the refinement rounds."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
from benchmarks.common import Table

from coldseam.case import read
from coldseam.geometry.mesher import open_geometry
from coldseam.mesh.types import SizeField
from coldseam.solution.bounds import prove
from coldseam.solution.rounds import solve
from coldseam.solution.steady import solve_on

ROOT = Path(__file__).resolve().parents[2]
ASKED = 0.005
CASES = {
    # case file, sizes in mm of the uniform meshes, coarsest first, goal
    "2D corner (edge of two walls)": (ROOT / "tests/published/edge.toml", (40.0, 20.0, 10.0, 5.0), 1 / 20),
    "3D corner of three walls": (ROOT / "tests/published/corner.toml", (250.0, 150.0, 100.0), 1 / 8),
    "3D bolt in a panel": (ROOT / "scripts/benchmarks/bolt.toml", (20.0, 12.0, 8.0), 1 / 40),
}


def half_width(steady) -> float:
    """Return half the width of the interval of the first terminal's heat flow over the flow."""
    reading = np.zeros(len(steady.state))
    reading[0] = 1.0
    low, high = steady.bounds.interval(reading, steady.state)
    return 0.5 * (high - low) / abs(0.5 * (high + low))


def uniform(case, mesher, size: float) -> tuple[int, float]:
    """Return nodes and half width of a mesh of one size."""
    first = mesher.mesh()
    mesh = mesher.mesh(SizeField(mesh=first, size=np.full(first.n_nodes, 1e-3 * size)))
    steady = solve_on(case, mesh)
    bounds = prove(steady.mesh, steady.given, steady.weights, steady.response)
    return steady.mesh.n_nodes, half_width(dataclasses.replace(steady, bounds=bounds))


def nodes_for(points: list[tuple[int, float]], asked: float) -> tuple[float, float]:
    """Return the nodes for an asked half width by the power law of the two finest points, and its exponent."""
    (a, wide), (b, narrow) = sorted(points)[-2:]
    power = np.log(wide / narrow) / np.log(b / a)
    return b * (narrow / asked) ** (1.0 / power), power


def measure() -> list[Table]:
    """Return the table."""
    rows = []
    for name, (path, sizes, goal) in CASES.items():
        case = read.replace(read.load(path), "model.accuracy", ASKED)
        with open_geometry(case) as mesher:
            plain = [uniform(case, mesher, size) for size in sizes]
        with open_geometry(case) as mesher:
            solution = solve(case, mesher, lambda stage, message: None)
        adaptive = (solution.steady.mesh.n_nodes, half_width(solution.steady))
        needed, power = nodes_for(plain, ASKED)
        reached = adaptive[0] * min(1.0, adaptive[1] / ASKED) ** (case.model.dimensions / 2)
        measured = f"{min(plain)[0]:,} to {max(plain)[0]:,} ({min(p[1] for p in plain):.2%})"
        rows.append(
            (
                name,
                measured,
                f"{power:.2f}",
                f"{needed:,.0f}",
                f"{adaptive[0]:,} ({adaptive[1]:.2%})",
                f"{reached:,.0f}",
                f"1/{needed / reached:.0f}",
                f"≤ 1/{1 / goal:.0f}: {'met' if reached / needed <= goal else '**missed**'}",
            )
        )
    return [
        Table(
            name="widths",
            title="Nodes for an interval of ± 0.5 %, one size everywhere against refinement",
            head=(
                "case",
                "uniform: nodes (narrowest ±)",
                "± falls as nodes to the -",
                "uniform: nodes for ± 0.5 %",
                "adaptive: last round (±)",
                "adaptive: nodes for ± 0.5 %",
                "adaptive over uniform",
                "goal",
            ),
            rows=rows,
            remarks=(
                "± is half the width of the first boundary's interval over its flow. Uniform counts are drawn on from the two "
                "finest meshes, adaptive ones back from the last round by the best possible rate, N^(-2/d).",
            ),
        )
    ]
