"""Solving the networks' symmetric positive definite systems: directly when small, else multigrid CG.

The conjugate gradients minimise the network's energy J; the drop of J in step k is alpha_k (r, z)_k,
and the sum of the last few drops estimates what is still missing (Strakoš, Tichý 2002, ETNA 13, 56).
They stop when that is a small part of J itself: a residual norm says little about watts.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import splu

from coldseam.errors import SolveError

DIRECT_LIMIT = {2: 20_000, 3: 1_500}
"""Unknowns up to which a network is factorised. ``scripts/benchmark solving`` finds both ways equal at some 11 000
in 2D and 1 000 in 3D where multigrid has it easy; factorising does not depend on that (thin skins) and costs at
20 000 in 2D not half as much again."""
TAIL = 3  # energy drops summed as the estimate of the remaining error
MOST_ITERATIONS = 400
SAFETY = 10.0  # times the estimate, where a bound has to hold


@dataclass(frozen=True, kw_only=True, eq=False)
class Solved:
    """Solutions and what they cost.

    Parameters
    ----------
    values
        Shape (n, m).
    error_energy
        An upper estimate of the squared energy norm of each column's error, W K, (m,).
    iterations
        Of each column; 0 for a direct solution.
    method
        In words.
    """

    values: np.ndarray
    error_energy: np.ndarray
    iterations: tuple[int, ...]
    method: str


class DirectSolver:
    """One sparse factorisation, with one step of iterative refinement."""

    iterative = False

    def __init__(self, matrix: sparse.csr_array):
        self.matrix = matrix
        self.method = "sparse factorisation"
        try:
            self.factor = splu(
                matrix.tocsc(), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True}
            )
        except RuntimeError as error:
            raise SolveError(f"the conduction matrix can't be factorised ({error})") from error

    def solve(self, right: np.ndarray, offset: np.ndarray, tolerance: float) -> Solved:
        """Solve for every column of ``right``, (n, m); ``offset`` and ``tolerance`` need not act here."""
        values = self.factor.solve(right)
        correction = self.factor.solve(right - self.matrix @ values)
        values = values + correction
        error = np.einsum("ij,ij->j", correction, self.matrix @ correction)
        return Solved(values=values, error_energy=np.abs(error), iterations=(0,) * right.shape[1], method=self.method)


class VCycle:
    """One symmetric multigrid cycle from a zero guess; the levels and their smoothers are pyamg's.

    (The library's own preconditioner also measures residuals before and after each cycle, which
    costs as much as the cycle.)
    """

    def __init__(self, levels):
        self.levels = levels[:-1]
        self.coarsest = splu(sparse.csc_array(levels[-1].A))

    def __call__(self, residual: np.ndarray) -> np.ndarray:
        """Return the correction for a residual, both (n,)."""
        rights, corrections = [residual], []
        for level in self.levels:
            x = np.zeros_like(rights[-1])
            level.presmoother(level.A, x, rights[-1])
            corrections.append(x)
            rights.append(level.R @ (rights[-1] - level.A @ x))
        x = self.coarsest.solve(rights[-1])
        for level, right, start in zip(self.levels[::-1], rights[-2::-1], corrections[::-1], strict=True):
            start += level.P @ x
            level.postsmoother(level.A, start, right)
            x = start
        return x


class MultigridSolver:
    """Conjugate gradients preconditioned by one multigrid cycle.

    Parameters
    ----------
    matrix
        Symmetric positive definite, (n, n).
    hierarchy
        A pyamg solver object whose cycle is symmetric.
    """

    iterative = True

    def __init__(self, matrix: sparse.csr_array, hierarchy):
        self.matrix = matrix
        self.hierarchy = hierarchy
        self.cycle = VCycle(hierarchy.levels)
        self.method = f"conjugate gradients with multigrid, {len(hierarchy.levels)} levels"

    def solve(self, right: np.ndarray, offset: np.ndarray, tolerance: float) -> Solved:
        """Solve for every column of ``right``, (n, m).

        Parameters
        ----------
        right
            Right-hand sides, W.
        offset
            Each column's energy at x = 0, so that J = offset - x.(right + residual), (m,).
        tolerance
            Stop when the estimated missing energy is below this part of J.

        Raises
        ------
        SolveError
            No convergence; says what was reached.
        """
        values, errors, counts = np.empty_like(right), [], []
        for column in range(right.shape[1]):
            values[:, column], error, count = self._solve_one(right[:, column], offset[column], tolerance)
            errors.append(error)
            counts.append(count)
        return Solved(values=values, error_energy=np.array(errors), iterations=tuple(counts), method=self.method)

    def _solve_one(self, right: np.ndarray, offset: float, tolerance: float) -> tuple[np.ndarray, float, int]:
        x = np.zeros_like(right)
        r = right.copy()
        z = self.cycle(r)
        p = z.copy()
        rz = r @ z
        drops: list[float] = []
        for count in range(1, MOST_ITERATIONS + 1):
            if rz <= 0.0:  # a zero right-hand side, or converged to rounding
                return x, SAFETY * sum(drops[-TAIL:]), count - 1
            q = self.matrix @ p
            alpha = rz / (p @ q)
            x += alpha * p
            r -= alpha * q
            drops.append(alpha * rz)
            tail = sum(drops[-TAIL:])
            energy = abs(offset - x @ (right + r))
            if len(drops) >= TAIL and tail <= tolerance * energy:
                return x, SAFETY * tail, count
            z = self.cycle(r)
            old, rz = rz, r @ z
            p *= rz / old
            p += z
        raise SolveError(
            f"the linear solver did not converge: after {MOST_ITERATIONS} iterations the missing energy is still "
            f"{tail / energy:.1e} of the whole ({tolerance:.0e} is asked). Very thin layers of metal meshed through their "
            "thickness cause this; model them with [[sheet]]."
        )


def node_hierarchy(matrix: sparse.csr_array, uneven: bool = False):
    """Return a smoothed-aggregation hierarchy for a node matrix (Vaněk, Mandel, Brezina 1996).

    Parameters
    ----------
    matrix
        Free nodes, (n, n).
    uneven
        Metal beside insulation, or skins: what belongs together is then found by how errors smooth out
        (Olson, Schroder, Tuminaro 2010, SIAM J. Sci. Comput. 32, 3041), which costs some sweeps of set-up and saves
        a third to a half of the iterations. Even matrices only drop their weakest couplings.
    """
    import pyamg

    strength = ("evolution", {"k": 2, "epsilon": 4.0, "proj_type": "l2"}) if uneven else ("symmetric", {"theta": 0.02})
    hierarchy = pyamg.smoothed_aggregation_solver(
        _narrow(matrix),
        strength=strength,
        smooth=("jacobi", {"omega": 4.0 / 3.0, "weighting": "local", "filter_entries": True}),
        presmoother=("gauss_seidel", {"sweep": "forward"}),
        postsmoother=("gauss_seidel", {"sweep": "backward"}),
        improve_candidates=None,
        max_coarse=200,
        coarse_solver="splu",
    )
    return by_rows(hierarchy)


def by_rows(hierarchy):
    """Return a pyamg solver with the coarse matrices stored by rows: as blocks of 1 x 1 they cost half as much again."""
    for level in hierarchy.levels:
        level.A = _narrow(level.A)
    for level in hierarchy.levels[:-1]:
        level.P, level.R = _narrow(level.P), _narrow(level.R)
    return hierarchy


def facet_hierarchy(matrix: sparse.csr_array, from_nodes: sparse.csr_array, nodes):
    """Return the facet matrix's hierarchy: a Gauss-Seidel level on top of the nodes' own hierarchy.

    Linear elements are contained in the Crouzeix-Raviart space, so the node matrix is the facet
    matrix's Galerkin coarse matrix already (auxiliary space: Xu 1996, Computing 56, 215).

    Parameters
    ----------
    matrix
        Free facet sites, (n, n).
    from_nodes
        Free site values from free nodes, (n, n_nodes).
    nodes
        The hierarchy from :func:`node_hierarchy`.
    """
    import pyamg
    from pyamg.relaxation.smoothing import change_smoothers

    top = pyamg.MultilevelSolver.Level()
    top.A, top.P = _narrow(matrix), _narrow(from_nodes)
    top.R = top.P.T.tocsr()
    levels = [top, *nodes.levels]
    hierarchy = pyamg.MultilevelSolver(levels, coarse_solver="splu")
    change_smoothers(hierarchy, ("gauss_seidel", {"sweep": "forward"}), ("gauss_seidel", {"sweep": "backward"}))
    return hierarchy


def _narrow(matrix):
    """Return the matrix with 32-bit indices, in the type that pyamg takes."""
    matrix = sparse.csr_matrix(matrix)
    matrix.indices, matrix.indptr = matrix.indices.astype(np.int32), matrix.indptr.astype(np.int32)
    return matrix
