"""Unit responses of a heat network: the field of each terminal at 1 K and of the loads."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import sparse

from coldseam.solution.linear import DIRECT_LIMIT, DirectSolver, MultigridSolver, node_hierarchy
from coldseam.volumes.network import Network


@dataclass(frozen=True, kw_only=True, eq=False)
class Response:
    """The unit fields of a network.

    Parameters
    ----------
    network
        The network.
    fields
        Site temperatures for each terminal at 1 (others 0), then for the loads, (n, n_terminals [+ 1]).
    error_energy
        Upper estimate of each field's squared energy error, W K, (n_terminals [+ 1],).
    iterations, method
        What the solver did.
    hierarchy
        The multigrid hierarchy for re-use, None after a direct solution.
    """

    network: Network
    fields: np.ndarray
    error_energy: np.ndarray
    iterations: tuple[int, ...]
    method: str
    hierarchy: object | None


def respond(
    network: Network,
    dim: int,
    tolerance: float,
    solver=None,
    guess: Callable[[], np.ndarray | None] | None = None,
    uneven: bool = False,
) -> Response:
    """Solve a network for its unit fields.

    The fields of all terminals sum to 1 (all outside at 1 K, no load), so the last terminal costs
    no solve of its own.

    Parameters
    ----------
    network
        The network; every part of it must reach a terminal.
    dim
        2 or 3: decides when a direct solver pays.
    tolerance
        Missing energy as a part of each field's own.
    solver
        An object with ``solve`` for the free sites; None chooses one.
    uneven
        Whether conductivities differ widely; see :func:`coldseam.solution.linear.node_hierarchy`.
    guess
        Called for unit fields to start from, (n, n_terminals [+ 1]), when the solver iterates; None for no guess.
    """
    free = network.free
    drive = network.right_hand_side()
    p = network.n_terminals
    asked = [*range(p - 1), *range(p, drive.shape[1])]
    fields = network.start()
    if solver is None:
        solver = choose_solver(network.free_matrix, dim, uneven)
    if asked:
        start = guess() if guess and solver.iterative else None
        if start is not None and start.shape == fields.shape:
            fields[np.ix_(free, asked)] = start[np.ix_(free, asked)]
            drive[:, asked] = network.drive_beyond(fields)[:, asked]
        offset = network.energy(fields).diagonal()[asked]
        solved = solver.solve(np.ascontiguousarray(drive[free][:, asked]), offset, tolerance)
        fields[np.ix_(free, asked)] += solved.values
        errors = np.zeros(drive.shape[1])
        errors[asked] = solved.error_energy
        errors[p - 1] = p * errors[: p - 1].sum()  # |sum of p - 1 errors|² <= (p - 1) times the sum of squares
        iterations = solved.iterations
    else:
        errors, iterations = np.zeros(drive.shape[1]), ()
    fields[free, p - 1] = 1.0 - fields[free][:, : p - 1].sum(axis=1)
    return Response(
        network=network,
        fields=fields,
        error_energy=errors,
        iterations=iterations,
        method=solver.method,
        hierarchy=getattr(solver, "hierarchy", None),
    )


def choose_solver(matrix: sparse.csr_array, dim: int, uneven: bool = False):
    """Return a direct solver for small systems, else multigrid conjugate gradients."""
    if matrix.shape[0] <= DIRECT_LIMIT[dim]:
        return DirectSolver(matrix)
    return MultigridSolver(matrix, node_hierarchy(matrix, uneven))
