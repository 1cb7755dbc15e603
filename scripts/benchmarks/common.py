"""What the benchmarks share: tables, fair timing, meshes of bricks."""

from __future__ import annotations

import platform
import resource
import time
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date

import numpy as np
import skfem

from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import Mesh, MeshBody, SizeField
from coldseam.volumes.conditions import Conditions, Terminal


@dataclass(frozen=True, kw_only=True)
class Table:
    """A measured table: its name in the markers of DEVELOPERS.md, a heading, rows of cells, and remarks."""

    name: str
    title: str
    head: tuple[str, ...]
    rows: list[tuple[str, ...]]
    remarks: tuple[str, ...] = ()

    def markdown(self, section: str) -> str:
        """Return the table with the command (by its section), the machine and the date."""
        lines = [f"### {self.title}", "", *_table(self.head, self.rows), ""]
        lines += list(self.remarks)
        lines.append(f"`scripts/benchmark {section}`, {machine()}, {date.today()}.")
        return "\n".join(lines)


def _table(head, rows):
    return ["| " + " | ".join(head) + " |", "|" + "---|" * len(head), *("| " + " | ".join(row) + " |" for row in rows)]


def machine() -> str:
    """Return processor, cores, memory and Python in words."""
    model, memory = platform.machine(), 0.0
    try:
        with open("/proc/cpuinfo", encoding="ascii", errors="replace") as lines:
            names = [line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")]
        model = f"{len(names)} cores of {names[0]}" if names else model
        with open("/proc/meminfo", encoding="ascii") as lines:
            memory = float(next(line for line in lines if line.startswith("MemTotal")).split()[1]) / 2**20
    except (OSError, StopIteration):
        pass
    return f"{model}, {memory:.0f} GiB, Python {platform.python_version()}"


def in_turn(runs: dict[str, Callable[[], object]], repeats: int) -> dict[str, float]:
    """Return the least processor seconds of every run, the runs taken in turn so that all see the same machine.

    Processor time of this process, all threads: other programs on the machine disturb it less than wall time.
    """
    best = dict.fromkeys(runs, np.inf)
    for _ in range(repeats):
        for name, run in runs.items():
            start = time.process_time()
            run()
            best[name] = min(best[name], time.process_time() - start)
    return best


def verdict(ratio: float, goal: float, *, at_least: bool) -> str:
    """Return the goal, and whether a ratio meets it, as a table cell."""
    met = ratio >= goal if at_least else ratio <= goal
    return f"{'≥' if at_least else '≤'} {goal:g}: {'met' if met else '**missed**'}"


def peak() -> tuple[float, float]:
    """Return the peak memory of this process and of its largest child that has ended, GiB (Linux counts KiB)."""
    whose = (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)
    own, child = (resource.getrusage(who).ru_maxrss / 2**20 for who in whose)
    return own, child


def brick_grid(dim: int, per_side: int):
    """Return a scikit-fem mesh of the unit square or cube with moved inner nodes."""
    kind = skfem.MeshTri if dim == 2 else skfem.MeshTet
    grid = kind.init_tensor(*[np.linspace(0.0, 1.0, per_side + 1)] * dim)
    points = grid.p.copy()
    inside = np.all(np.abs(2 * points - np.round(2 * points)) > 1e-9, axis=0)
    points[:, inside] += np.random.default_rng(0).uniform(-0.15, 0.15, (dim, inside.sum())) / per_side
    return kind(points, grid.t)


def mesh_of(grid) -> Mesh:
    """Return our mesh of a scikit-fem mesh, one body."""
    body = (MeshBody(name="body", material="material", source=0),)
    return build_mesh(grid.p.T, grid.t.T, np.zeros(grid.t.shape[1], dtype=int), body)


FEWEST_SEGMENTS = 6  # of a circle, however large the elements


def one_size(mesher, size: float) -> Mesh:
    """Return a mesh with elements of one size, mm, everywhere: round parts are no exception."""
    first = mesher.mesh()
    return mesher.mesh(SizeField(mesh=first, size=np.full(first.n_nodes, 1e-3 * size)), curve_segments=FEWEST_SEGMENTS)


def walls(mesh: Mesh, films: float = 8.0, terminals: int = 2) -> Conditions:
    """Return foam between films on the low faces of the first axes and the high face of the last one.

    Terminal 0 is the high face at 1 °C, the others the low faces at 0 °C.
    """
    centres = mesh.points[mesh.facets].mean(axis=1)
    terminal = np.where(centres[:, -1] > 1 - 1e-9, 0, -1)
    faces = [(axis, side) for side in (0.0, 1.0) for axis in range(mesh.dim - 1, -1, -1)]
    faces.remove((mesh.dim - 1, 1.0))
    for number, (axis, side) in enumerate(faces[: terminals - 1], start=1):
        terminal[(terminal < 0) & (np.abs(centres[:, axis] - side) < 1e-9)] = number
    return Conditions(
        conductivity=np.full(mesh.n_cells, 0.03) * (1.0 + 600.0 * (np.hypot(*centred(mesh)[:2]) < 0.05)),
        tensors=None,
        source=np.zeros(mesh.n_cells),
        film=np.where(terminal >= 0, films, 0.0),
        flux=np.zeros(len(mesh.facets)),
        terminal=terminal,
        terminals=tuple(Terminal(boundaries=(n,), temperature=float(n == 0), fixed=False) for n in range(terminals)),
        sheet_facets=np.empty((0, mesh.dim), dtype=np.int64),
        sheet_conductance=np.empty(0),
        link_conductance=np.empty(0),
        clashes=(),
    )


def centred(mesh: Mesh) -> np.ndarray:
    """Return the cells' centres from the middle of the unit square or cube, (dim, n_cells)."""
    return mesh.points[mesh.cells].mean(axis=1).T - 0.5
