"""Iterating to the temperatures at which the coefficients agree with the answer.

Each step freezes the coefficients at the present field T (solution/coefficients.py) and solves for the correction

    (A + diag(excess)) d = r(T),      r(T) = what the balances of the frozen network lack at T

With the excess of the films this is Newton's method at the boundaries. Conductivities and the mean temperatures of
convective films lag by one step (their exact derivatives would make the matrix unsymmetric, the latter also
full); Anderson's acceleration (1965, J. ACM 12, 547) of depth ``DEPTH`` makes up for that once steps are small against the
temperatures' range (``NEAR``); before, it would only spoil Newton's. The first step solves with
the usual films of :func:`coldseam.volumes.conditions.boundary_film`, so the start is the field of a linear case.

In three dimensions the multigrid hierarchy of the first step stays the preconditioner of all.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import LinearOperator, gmres

from coldseam.errors import SolveError
from coldseam.mesh.types import Mesh
from coldseam.solution.coefficients import (
    Coefficients,
    evaluate,
    other_average,
)
from coldseam.solution.enclosed import cavity_models
from coldseam.solution.linear import DIRECT_LIMIT, DirectSolver, MultigridSolver, node_hierarchy
from coldseam.solution.ranges import film_remark, law_remarks, require_fluids
from coldseam.volumes.conditions import Conditions
from coldseam.volumes.network import Network
from coldseam.volumes.nodes import node_network
from coldseam.volumes.operator import EdgeOperator
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.model import Case

TOLERANCE = 1e-6
"""Largest last correction, as a part of the temperatures' range."""
LEAST_RANGE = 1.0
"""K: the range that the tolerance is a part of where all temperatures are alike."""
MOST_STEPS = 40
DEPTH = 4
NEAR = 0.1
INNER_TOLERANCE = 1e-8
INNER_RESTARTS = 6
COLDEST = 1.0
"""K: no step goes below this."""
REASON = (
    "the case depends on temperatures: holds for the converged, frozen coefficients; the effect of one conductivity a "
    "cell is estimated and added"
)


@dataclass(frozen=True, kw_only=True, eq=False)
class Settled:
    """The coefficients at the solution, and how it was found.

    Parameters
    ----------
    coefficients
        Frozen at the solution.
    temperature
        The field they belong to, °C, (n_nodes,).
    history
        Largest correction of every step, K.
    remarks
        Laws used beyond their ranges.
    averaging
        Conductivity at each cell's mean temperature less that used, W/(m K), (n_cells,).
    """

    coefficients: Coefficients
    temperature: np.ndarray
    history: tuple[float, ...]
    remarks: tuple[str, ...]
    averaging: np.ndarray

    @property
    def given(self) -> Conditions:
        """The frozen conditions."""
        return self.coefficients.given

    @property
    def films(self) -> dict[str, dict[str, Any]]:
        """What was used at each boundary, by its name."""
        return self.coefficients.films

    @property
    def iterations(self) -> int:
        """Number of linear solves."""
        return len(self.history)


def settle(
    case: Case,
    mesh: Mesh,
    facet_boundary: np.ndarray,
    base: Conditions,
    operator: EdgeOperator,
    start: np.ndarray | None = None,
    outside: Mapping[str, float] | None = None,
) -> Settled:
    """Iterate to the temperatures at which coefficients and field agree.

    Parameters
    ----------
    case, mesh, facet_boundary
        The case, its mesh with contacts opened, the boundary of each facet, (n_facets,).
    base
        From :func:`coldseam.volumes.conditions.conditions`.
    operator
        From :func:`coldseam.volumes.nodes.node_operator`.
    start
        A field to start from, °C, (n_nodes,).
    outside
        Temperatures of spaces in place of the case's, °C.

    Raises
    ------
    SolveError
        No convergence, naming what still moves; air or another fluid beyond the range of its properties.
    """
    stepper = _Stepper(mesh, operator)
    models = cavity_models(case, mesh, facet_boundary)
    field, history = start, []
    if field is None:
        known = np.array([terminal.temperature for terminal in base.terminals])
        field = np.full(mesh.n_nodes, 0.5 * (known.min() + known.max()))
        first = Coefficients(given=base, excess=np.zeros(len(base.film)), films={})
        field = field + stepper.correction(first, field)
        history.append(float(np.ptp(field)))
    mixer = _Anderson(DEPTH)
    while True:
        now = evaluate(case, mesh, facet_boundary, base, field, outside, models)
        step = stepper.correction(now, field)
        history.append(float(np.abs(step).max()))
        if history[-1] <= TOLERANCE * max(_span(now, field + step), LEAST_RANGE):
            field = field + step
            break
        if len(history) >= MOST_STEPS or not np.isfinite(history[-1]):
            raise SolveError(_stalled(case, mesh, facet_boundary, field, step, history))
        field = np.maximum(mixer.next(field, step), COLDEST - 273.15)
    found = evaluate(case, mesh, facet_boundary, base, field, outside, models)
    require_fluids(case, found)
    of_films = (film_remark(name, used) for name, used in found.films.items())
    remarks = (*law_remarks(case, mesh, field, field), *filter(None, of_films))
    other = other_average(case, mesh, found.given, field)
    return Settled(
        coefficients=found,
        temperature=field,
        history=tuple(history),
        remarks=remarks,
        averaging=other - found.given.conductivity,
    )


def _span(now: Coefficients, field: np.ndarray) -> float:
    known = [terminal.temperature for terminal in now.given.terminals]
    return float(max(field.max(), *known) - min(field.min(), *known))


class _Stepper:
    """Solves for corrections; keeps the multigrid hierarchy of the first of them."""

    def __init__(self, mesh: Mesh, operator: EdgeOperator):
        self.mesh, self.operator = mesh, operator
        self.shares = facet_shares(mesh, mesh.facets)
        self.hierarchy: object | None = None
        self.uneven = False

    def correction(self, now: Coefficients, field: np.ndarray) -> np.ndarray:
        """Return the correction of a field, K, both (n_nodes,)."""
        network = node_network(self.mesh, now.given, self.operator)
        lacking, held = residual(network, now.given, field)
        excess = np.bincount(self.mesh.facets.ravel(), (self.shares * now.excess[:, None]).ravel(), self.mesh.n_nodes)
        matrix = (network.matrix + sparse.diags_array(excess)).tocsr()
        free = network.free
        step = np.where(free, 0.0, held - field)
        right = (lacking - matrix @ step)[free]
        self.uneven = now.given.uneven
        solve = self._solver(matrix[free][:, free])
        step[free] = self._coupled(now, matrix, free, right, solve) if now.coupled else solve(right)
        return step

    def _coupled(self, now: Coefficients, matrix, free, right, solve) -> np.ndarray:
        """Solve with all patches of the cavities acting on one another: GMRES on Newton's matrix after ``solve``.

        The mean of each facet does not meet its film, which the matrix has, but the other patches; that is put right
        here. The product with the dense part costs the square of the number of patches.
        """
        parts = [
            (m.spread[free], among, m.spread_facets[free], now.given.film[m.facets] * self.shares[m.facets].sum(axis=1))
            for m, among in now.coupled
        ]
        plain = matrix[free][:, free]

        def product(x: np.ndarray) -> np.ndarray:
            total = plain @ x
            for spread, among, means, film in parts:
                total += spread @ (among @ (spread.T @ x)) - means @ (film * (means.T @ x))
            return total

        shape = plain.shape
        found, left = gmres(
            LinearOperator(shape, matvec=product, dtype=float), right, rtol=1e-8, restart=50, maxiter=INNER_RESTARTS,
            M=LinearOperator(shape, matvec=solve, dtype=float),
        )  # fmt: skip
        if left:
            raise SolveError(
                "the radiation between the surfaces of a cavity can't be solved for: some part of the model is joined "
                "to nothing but a cavity without a known temperature"
            )
        return found

    def _solver(self, matrix: sparse.csr_array):
        """Return the function that solves with a matrix of the free nodes."""
        solver: DirectSolver | MultigridSolver
        if matrix.shape[0] <= DIRECT_LIMIT[self.mesh.dim]:
            solver = DirectSolver(matrix)
        else:
            if self.hierarchy is None:
                self.hierarchy = node_hierarchy(matrix, self.uneven)
            solver = MultigridSolver(matrix, self.hierarchy)
        return lambda right: solver.solve(right[:, None], np.zeros(1), INNER_TOLERANCE).values[:, 0]


def residual(network: Network, given: Conditions, field: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return what every node's balance lacks at a field, and the temperatures that fixed nodes are held at.

    ``field`` in °C, (n_nodes,); returned are W (in a cross-section W/m) and °C, both of shape (n_nodes,).
    """
    known = np.array([terminal.temperature for terminal in given.terminals])
    shift = float(known.mean())  # differences keep the digits
    lacking = network.exchange @ (known - shift) + network.load - network.matrix @ (field - shift)
    return lacking, np.where(network.free, field, known[network.fixed])


class _Anderson:
    """Anderson's acceleration of ``x <- x + step(x)``."""

    def __init__(self, depth: int):
        self.depth = depth
        self.moves: list[np.ndarray] = []
        self.changes: list[np.ndarray] = []
        self.before: tuple[np.ndarray, np.ndarray] | None = None

    def next(self, x: np.ndarray, step: np.ndarray) -> np.ndarray:
        """Return the next field from the present one and its plain step, all (n,)."""
        if np.abs(step).max() > NEAR * max(float(np.ptp(x)), LEAST_RANGE):  # far off: Newton's steps as they are
            self.moves.clear()
            self.changes.clear()
            self.before = None
            return x + step
        if self.before is not None:
            if np.abs(step).max() > 2.0 * np.abs(self.before[1]).max():  # astray: begin again from here
                self.moves.clear()
                self.changes.clear()
            else:
                self.moves.append(x - self.before[0])
                self.changes.append(step - self.before[1])
        self.before = (x, step)
        del self.moves[: -self.depth], self.changes[: -self.depth]
        if not self.changes:
            return x + step
        changes = np.column_stack(self.changes)
        weights, *_ = np.linalg.lstsq(changes, step, rcond=1e-10)
        return x + step - (np.column_stack(self.moves) + changes) @ weights


def _stalled(case: Case, mesh: Mesh, facet_boundary, field, step, history) -> str:
    """Return what is said of an iteration that does not converge: where it still moves most."""
    node = int(np.argmax(np.abs(np.nan_to_num(step, nan=np.inf))))
    touched = np.flatnonzero((mesh.facets == node).any(axis=1))
    names = {case.boundary[facet_boundary[f]].name for f in touched}
    body = mesh.bodies[mesh.cell_body[np.flatnonzero((mesh.cells == node).any(axis=1))[0]]].name
    where = f"boundary {' and '.join(sorted(repr(n) for n in names))}" if names else f"body {body!r}"
    return (
        f"the temperatures do not settle: after {len(history)} steps those of {where} still move by {history[-1]:.3g} "
        f"K (at {field[node]:.1f} °C). Look there at the films, the emissivity and the conductivity over temperature"
    ).replace("'", '"')
