"""Linear solves: against the bare library, direct against multigrid, facets against nodes, several unit solutions."""

from __future__ import annotations

from functools import partial

import numpy as np
from benchmarks.common import Table, brick_grid, in_turn, mesh_of, verdict, walls

from coldseam.solution.bounds import FACET_TOLERANCE, facet_solver
from coldseam.solution.linear import DIRECT_LIMIT, DirectSolver, MultigridSolver, node_hierarchy
from coldseam.solution.respond import respond
from coldseam.solution.steady import NODE_TOLERANCE
from coldseam.volumes.facets import facet_system
from coldseam.volumes.nodes import node_network, node_operator

CROSSING = {2: (40, 90, 130, 180, 250, 350), 3: (9, 12, 15, 18, 22)}  # bricks a side
LARGE, HUGE = 58, 79  # bricks a side: 205 379 and 512 000 nodes


def network_of(dim: int, per_side: int, terminals: int = 2):
    """Return (mesh, conditions, cell weights, node network) of a foam wall with a metal bolt between films."""
    mesh = mesh_of(brick_grid(dim, per_side))
    given = walls(mesh, terminals=terminals)
    operator, weights = node_operator(mesh, given)
    return mesh, given, weights, node_network(mesh, given, operator)


def right_of(network):
    """Return the first unit field's right-hand side (n, 1) and energy offset (1,)."""
    return network.right_hand_side()[:, :1], network.energy(network.start()).diagonal()[:1]


def bare_library() -> Table:
    """Our solve against pyamg's own with the same hierarchy, as many iterations as reach our error."""
    _, _, _, network = network_of(3, LARGE)
    matrix, (right, offset) = network.matrix, right_of(network)
    b = right[:, 0]

    def ours():
        return MultigridSolver(matrix, node_hierarchy(matrix, True)).solve(right, offset, NODE_TOLERANCE)

    def library(iterations: int):
        import warnings

        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # it stops where it is told to, not at its own tolerance
            return node_hierarchy(matrix, True).solve(b, tol=1e-99, maxiter=iterations, accel="cg")

    exact = MultigridSolver(matrix, node_hierarchy(matrix, True)).solve(right, offset, 1e-20).values[:, 0]

    def off(x):
        return float((x - exact) @ (matrix @ (x - exact)))

    solved = ours()
    reached = off(solved.values[:, 0])
    count = next(n for n in range(solved.iterations[0] - 6, 60) if off(library(n)) <= reached)
    times = in_turn({"ours": ours, "library": lambda: library(count)}, 3)
    ratio = times["ours"] / times["library"]
    return Table(
        name="solve",
        title=f"One 3D solve, {matrix.shape[0]:,} nodes, set-up included",
        head=("", "s", "iterations", "energy error, of the whole"),
        rows=[
            ("coldseam", f"{times['ours']:.2f}", str(solved.iterations[0]), f"{reached / offset[0]:.0e}"),
            (
                "pyamg and its conjugate gradients",
                f"{times['library']:.2f}",
                str(count),
                f"{off(library(count)) / offset[0]:.0e}",
            ),
            ("ratio", f"{ratio:.2f}", "", f"goal {verdict(ratio, 1.2, at_least=False)}"),
        ],
        remarks=("The library gets the fewest iterations that reach our error, which it could not know by itself.",),
    )


def crossing(dim: int) -> Table:
    """Direct and multigrid solves over the number of unknowns."""
    rows, sizes, ratios = [], [], []
    for per_side in CROSSING[dim]:
        _, _, _, network = network_of(dim, per_side)
        matrix, (right, offset) = network.matrix, right_of(network)
        given = right, offset, NODE_TOLERANCE
        runs = {
            "direct": partial(lambda a, g: DirectSolver(a).solve(*g), matrix, given),
            "multigrid": partial(lambda a, g: MultigridSolver(a, node_hierarchy(a, True)).solve(*g), matrix, given),
        }
        times = in_turn(runs, 3)
        sizes.append(matrix.shape[0])
        ratios.append(times["direct"] / times["multigrid"])
        rows.append((f"{sizes[-1]:,}", f"{times['direct']:.3f}", f"{times['multigrid']:.3f}", f"{ratios[-1]:.2f}"))
    equal = float(np.exp(np.interp(0.0, np.log(ratios), np.log(sizes))))
    return Table(
        name=f"crossing-{dim}d",
        title=f"Direct and multigrid, {dim}D, set-up and one solution",
        head=("unknowns", "direct, s", "multigrid, s", "ratio"),
        rows=rows,
        remarks=(f"Equal at some {equal:,.0f} unknowns; `DIRECT_LIMIT[{dim}]` is {DIRECT_LIMIT[dim]:,}.",),
    )


def facet_times(per_side: int) -> tuple[int, int, dict[str, float]]:
    """Return numbers of nodes and facets and the times of their systems and solves."""
    mesh, given, weights, network = network_of(3, per_side)

    def solve_nodes():
        return respond(
            network, 3, NODE_TOLERANCE, MultigridSolver(network.matrix, node_hierarchy(network.matrix, True))
        )

    nodes, system = solve_nodes(), facet_system(mesh, given, weights)
    guess = system.from_nodes @ nodes.fields
    runs = {
        "nodes": solve_nodes,
        "facets": lambda: respond(
            system.network, 3, FACET_TOLERANCE, facet_solver(system, nodes, 3, True), lambda: guess
        ),
        "facet system": lambda: facet_system(mesh, given, weights),
        "node system": lambda: node_network(mesh, given, node_operator(mesh, given)[0]),
    }
    return mesh.n_nodes, len(system.facets), in_turn(runs, 3)


def facets() -> Table:
    """The facet network's solve against the node network's."""
    rows = []
    for per_side in (22, 40):
        n_nodes, n_facets, times = facet_times(per_side)
        ratio = times["facets"] / times["nodes"]
        seconds = (f"{times[name]:.2f}" for name in ("node system", "nodes", "facet system", "facets"))
        rows.append((f"{n_nodes:,}", f"{n_facets:,}", *seconds, f"{ratio:.1f}", verdict(ratio, 4.0, at_least=False)))
    return Table(
        name="facets",
        title="What the proof costs: the facet network against the nodes', 3D",
        head=(
            "nodes",
            "facets",
            "assemble nodes, s",
            "solve nodes, s",
            "assemble facets, s",
            "solve facets, s",
            "ratio of solves",
            "goal",
        ),
        rows=rows,
        remarks=("The nodes' solve includes building the hierarchy, the facets' uses it again.",),
    )


def unit_solutions() -> Table:
    """n unit solutions against one."""
    networks = {n: network_of(3, HUGE, terminals=n + 1)[3] for n in (1, 2, 3, 5)}
    runs = {str(n): partial(respond, network, 3, NODE_TOLERANCE, uneven=True) for n, network in networks.items()}
    times = in_turn(runs, 2)
    rows = []
    for n in networks:
        ratio = times[str(n)] / times["1"]
        goal = 1.5 + 0.5 * (n - 1)
        rows.append((str(n), f"{times[str(n)]:.1f}", f"{ratio:.2f}", verdict(ratio, goal, at_least=False)))
    return Table(
        name="units",
        title=f"n unit solutions, {len(networks[1].fixed):,} nodes",
        head=("n", "s", "single solves", "goal"),
        rows=rows,
        remarks=("Set-up included; n spaces need n - 1 unit solutions.",),
    )


def measure() -> list[Table]:
    """Return all tables of this section."""
    return [bare_library(), crossing(2), crossing(3), facets(), unit_solutions()]
