"""One implicit stage: nodes eliminated on a kept factorisation, spaces solved exactly as the few unknowns they are.

A stage asks for increments d (nodes) and e (spaces, goods) with

    C d = k + a r(T + d, y + e),      D e = l + a s(T + d, y + e),

r and s the heat flows, a the step times the method's diagonal. For the nodes this is linear, S d = k + a r(T, y) +
a G e with S = C + a A, so d = X + a W e with X from one solve and W = S^-1 G from one solve per space and step size.
What is left is a system of a few unknowns for e, solved by Newton's method to rounding; the sparse matrix
never sees the spaces, and a machine's bent curve never touches the factorisation.
"""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass

import numpy as np
from scipy import sparse

from coldseam.errors import SolveError
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.linear import DirectSolver, MultigridSolver, by_rows

DIRECT_LIMIT = {2: 60_000, 3: 6_000}
"""Unknowns up to which a stage is factorised: more than for a steady solve, for a factor serves many stages."""
KEPT = {2: 8, 3: 3}
"""Factorisations or multigrid hierarchies kept for step sizes that come back."""
RELATIVE_ENERGY, FLOOR = 1e-11, 1e-4
"""Missing energy of an iterative solution over that of the increment, and its error over the step's tolerance, by the
estimate of ``linear.py``, which is that of some iterations before: what is really missing is a thousandth and less."""
MOST_NEWTON = 60


def stage_hierarchy(matrix: sparse.csr_array):
    """Return a smoothed-aggregation hierarchy for the matrix of a stage, (n, n), J/K.

    Unlike a steady one it may be all but diagonal (short steps): every coupling counts as strong, so that no node is
    left out of the coarse levels.
    """
    import pyamg

    narrow = sparse.csr_matrix(matrix)
    narrow.indices, narrow.indptr = narrow.indices.astype(np.int32), narrow.indptr.astype(np.int32)
    hierarchy = pyamg.smoothed_aggregation_solver(
        narrow,
        strength=("symmetric", {"theta": 0.0}),
        smooth=("jacobi", {"omega": 4.0 / 3.0, "weighting": "local"}),
        presmoother=("gauss_seidel", {"sweep": "forward"}),
        postsmoother=("gauss_seidel", {"sweep": "backward"}),
        improve_candidates=None,
        max_coarse=200,
        coarse_solver="splu",
    )
    return by_rows(hierarchy)


def balanced(matrix: sparse.csr_array, right: np.ndarray, x: np.ndarray) -> np.ndarray:
    """Return an approximate solution shifted by the constant (K) that makes its residuals add up to nothing.

    The constant is the best one in the matrix's energy, so the error only gets smaller; and what is stored is then
    what came in, to rounding, however early the iteration stopped.

    Parameters
    ----------
    matrix, right
        Of a stage, J/K (n, n) and J (n,).
    x
        Its approximate solution, K, (n,).
    """
    return x + float((right - matrix @ x).sum()) / float((matrix @ np.ones(len(x))).sum())


@dataclass(frozen=True, kw_only=True, eq=False)
class Factor:
    """What is kept for one step size.

    Parameters
    ----------
    a
        Step times diagonal, s.
    solver
        For S over the free nodes.
    response
        W over the free nodes, K per K of a space and per second, (n_free, n).
    schur
        G'W, W/(K s), (n, n).
    """

    a: float
    solver: DirectSolver | MultigridSolver
    response: np.ndarray
    schur: np.ndarray


class StageSolver:
    """Solves stages of one system and counts what it cost.

    Parameters
    ----------
    system
        The equations.
    scale
        Temperature difference below which errors don't matter, K: sets the iterative solver's floor.
    missing
        Energy that an iterative solution may miss, over that of the increment; None for :data:`RELATIVE_ENERGY`.
    keep
        Factors kept; None for as many as :data:`KEPT` says.
    """

    def __init__(self, system: HeatSystem, scale: float, *, missing: float | None = None, keep: int | None = None):
        self.system, self.missing = system, RELATIVE_ENERGY if missing is None else missing
        self.keep = KEPT[system.mesh.dim] if keep is None else keep
        self.free = np.flatnonzero(system.free)
        matrix = system.network.matrix
        self.matrix = sparse.csr_array(matrix[self.free][:, self.free])
        self.capacity = system.capacity[self.free]
        self.coupling = sparse.csr_array(system.coupling[self.free])
        self.gather = sparse.csr_array(self.coupling.T)
        self.floor = (FLOOR * scale) ** 2 * float(self.capacity.sum())
        self.kept: OrderedDict[float, Factor] = OrderedDict()
        self.factorisations = 0
        self.solves = 0
        self.iterations = 0
        self.method = ""

    def factor(self, a: float) -> Factor:
        """Return the factor for a step, from what is kept where possible."""
        if a in self.kept:
            self.kept.move_to_end(a)
            return self.kept[a]
        made = self.made(a, self.capacity)
        self.kept[a] = made
        while len(self.kept) > self.keep:
            self.kept.popitem(last=False)
        return made

    def made(self, a: float, capacity: np.ndarray) -> Factor:
        """Return a new factor for a step and given heat capacities of the free nodes, J/K, (n_free,)."""
        matrix = sparse.csr_array(a * self.matrix + sparse.diags_array(capacity))
        dim = self.system.mesh.dim
        solver = (
            DirectSolver(matrix)
            if len(self.free) <= DIRECT_LIMIT[dim]
            else MultigridSolver(matrix, stage_hierarchy(matrix))
        )
        self.method = solver.method
        self.factorisations += 1
        right = self.coupling.toarray()
        columns = [self._solve(solver, right[:, k], None) for k in range(right.shape[1])]
        response = np.column_stack(columns) if columns else np.empty((len(self.free), 0))
        return Factor(a=a, solver=solver, response=response, schur=self.gather @ response)

    def forget(self) -> None:
        """Drop all factors: the coefficients have changed."""
        self.kept.clear()

    def solve(
        self, factor: Factor, right: np.ndarray, guess: np.ndarray | None, missing: float | None = None
    ) -> np.ndarray:
        """Return S^-1 right over the free nodes, (n_free,); ``missing`` energy if it may be more than usual."""
        return self._solve(factor.solver, right, guess, missing)

    def _solve(self, solver, right: np.ndarray, guess: np.ndarray | None, missing: float | None = None) -> np.ndarray:
        missing = self.missing if missing is None else max(missing, self.missing)
        self.solves += 1
        if isinstance(solver, DirectSolver):
            return solver.factor.solve(right)
        rest = right if guess is None else right - solver.matrix @ guess
        scale = abs(float(right @ guess)) if guess is not None else 0.0
        offset = -max(scale, self.floor / missing, 1e-300)
        solved = solver.solve(rest[:, None], np.array([offset]), missing)
        self.iterations += solved.iterations[0]
        return balanced(solver.matrix, right, solved.values[:, 0] if guess is None else guess + solved.values[:, 0])

    def newton(self, factor: Factor, known: np.ndarray, heat, start: np.ndarray) -> np.ndarray:
        """Return the increments e of the unknowns outside the mesh, K, (n,).

        Parameters
        ----------
        factor
            Of the step.
        known
            l + a (G'(T + X) - sum G y) - D 0: what of the stage does not depend on e, J, (n,).
        heat
            Called with e; returns the spaces' own heat (W, (n,)) and its Jacobian (W/K).
        start
            First guess, K.
        """
        spaces, a = self.system.spaces, factor.a
        linear = np.diag(spaces.capacity + a * self.system.films) - a * a * factor.schur
        e = start.copy()
        for _ in range(MOST_NEWTON):
            own, slope = heat(e)
            rest = known + a * own - linear @ e
            step = np.linalg.solve(linear - a * slope, rest)
            e = e + step
            if np.max(np.abs(step)) <= 1e-10 * (1.0 + np.max(np.abs(e))):
                return e
        raise SolveError(
            "the heat balance of the floating spaces did not converge; look for a capacity that jumps over temperature"
        )
