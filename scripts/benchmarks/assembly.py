"""Assembly of the conduction matrix against scikit-fem's linear elements on the same tetrahedra."""

from __future__ import annotations

import numpy as np
import skfem
from benchmarks.common import Table, brick_grid, in_turn, mesh_of, verdict
from skfem.helpers import dot, grad

from coldseam.volumes.operator import cell_weights, edge_operator

PER_SIDE = 55  # 6 tetrahedra a brick: 998 250


def measure(repeats: int = 3) -> list[Table]:
    """Return the table."""
    grid = brick_grid(3, PER_SIDE)
    mesh = mesh_of(grid)
    k = np.random.default_rng(1).uniform(0.02, 20.0, mesh.n_cells)
    form = skfem.BilinearForm(lambda u, v, w: k[:, None] * dot(grad(u), grad(v)))
    kept: dict[str, object] = {}

    def ours_first():
        kept["ours"] = edge_operator(mesh, cell_weights(mesh))
        return kept["ours"].matrix(k)

    def peer_first():  # one quadrature point: gradients of linear elements are constant
        fresh = skfem.MeshTet(grid.p, grid.t)
        kept["peer"] = skfem.Basis(fresh, skfem.ElementTetP1(), intorder=1)
        return form.assemble(kept["peer"])

    times = in_turn({"ours": ours_first, "peer": peer_first}, repeats)
    again = in_turn({"ours": lambda: kept["ours"].matrix(k), "peer": lambda: form.assemble(kept["peer"])}, 2 * repeats)
    misfit = abs(kept["ours"].matrix(k) - form.assemble(kept["peer"])).max()
    rows = []
    for what, found, goal in (("first", times, 5.0), ("again, new conductivities", again, 25.0)):
        ratio = found["peer"] / found["ours"]
        numbers = f"{found['ours']:.2f}", f"{found['peer']:.2f}", f"{ratio:.1f}"
        rows.append((what, *numbers, verdict(ratio, goal, at_least=True)))
    return [
        Table(
            name="assembly",
            title=f"Assembly, {mesh.n_cells:,} tetrahedra with a conductivity each",
            head=("assembly", "coldseam, s", "scikit-fem, s", "faster by", "goal"),
            rows=rows,
            remarks=(f"Least processor time of {repeats} runs in turn; the matrices differ by at most {misfit:.0e}.",),
        )
    ]
