"""Direct and multigrid solutions agree, errors are owned up to, and work stays within budgets."""

import numpy as np
import pytest
from brick_models import Model, bricks, conditions_of, mesh_of

from coldseam.errors import SolveError
from coldseam.solution import linear
from coldseam.solution.linear import DirectSolver, MultigridSolver, VCycle, node_hierarchy
from coldseam.volumes.nodes import node_network, node_operator


def system(dim: int, per_metre: int, contrast: float = 1.0):
    """Return (matrix, right-hand side (n, 1), energy offset (1,)) of a warm-to-cold wall with a conducting pin.

    A contrast of 0 instead makes the conduction along the wall a thousand times that across: a hard case for multigrid.
    """
    grained = np.diag([1.0] * (dim - 1) + [1e-3])
    model = Model(
        size=(1,) * dim,
        conductivity=(1.0, contrast) if contrast else (grained, grained),
        body=lambda x: (x[0] < 0.5).astype(int),
        terminal=lambda x: np.where(x[-1] < 1e-9, 0, np.where(x[-1] > 1 - 1e-9, 1, -1)),
        films=(8.0, 7.0),
        temperatures=(0.0, 1.0),
    )
    mesh = mesh_of(model, bricks(model, per_metre, seed=3))
    given = conditions_of(model, mesh)
    network = node_network(mesh, given, node_operator(mesh, given)[0])
    offset = network.energy(network.start()).diagonal()[:1]
    return network.matrix, network.right_hand_side()[:, :1], offset


@pytest.mark.parametrize(("dim", "per_metre"), [(2, 40), (3, 12)])
@pytest.mark.parametrize("contrast", [1.0, 1000.0])
def test_direct_and_multigrid_agree(dim, per_metre, contrast):
    matrix, right, offset = system(dim, per_metre, contrast)
    direct = DirectSolver(matrix).solve(right, offset, 1e-13)
    iterated = MultigridSolver(matrix, node_hierarchy(matrix)).solve(right, offset, 1e-13)
    assert np.abs(direct.values - iterated.values).max() < 1e-6
    assert direct.iterations == (0,) and 3 <= iterated.iterations[0] <= 30


@pytest.mark.parametrize("tolerance", [1e-2, 1e-4, 1e-8])
@pytest.mark.parametrize("contrast", [0.0, 1.0, 1000.0])
def test_the_error_owned_up_to_is_above_the_true_one(tolerance, contrast):
    matrix, right, offset = system(3, 12, contrast)
    exact = DirectSolver(matrix).solve(right, offset, 0.0).values
    solved = MultigridSolver(matrix, node_hierarchy(matrix)).solve(right, offset, tolerance)
    off = (solved.values - exact)[:, 0]
    true = off @ (matrix @ off)
    assert 0 < true <= solved.error_energy[0]
    assert solved.error_energy[0] <= 2 * linear.SAFETY * tolerance * offset[0]


def test_a_plain_solid_needs_at_most_thirty_iterations():
    matrix, right, offset = system(3, 30)
    solved = MultigridSolver(matrix, node_hierarchy(matrix)).solve(right, offset, 1e-13)
    assert solved.iterations[0] <= 30


def test_hierarchy_takes_little_more_than_the_matrix():
    """A work budget: all levels together hold at most 1.5 times the entries of the finest."""
    matrix, _, _ = system(3, 20)
    levels = node_hierarchy(matrix).levels
    assert sum(level.A.nnz for level in levels) <= 1.5 * matrix.nnz


def test_no_convergence_says_what_was_reached(monkeypatch):
    matrix, right, offset = system(3, 12)
    monkeypatch.setattr(linear, "MOST_ITERATIONS", 4)
    with pytest.raises(SolveError, match=r"after 4 iterations .* \d\.\de-\d\d of the whole \(1e-13 is asked\)"):
        MultigridSolver(matrix, node_hierarchy(matrix)).solve(right, offset, 1e-13)


def test_a_matrix_that_holds_nothing_is_refused():
    from scipy import sparse

    with pytest.raises(SolveError, match="can't be factorised"):
        DirectSolver(sparse.csr_array((3, 3)))


def test_nothing_to_do_gives_zero():
    matrix, right, offset = system(3, 8)
    solved = MultigridSolver(matrix, node_hierarchy(matrix)).solve(0.0 * right, offset, 1e-13)
    assert not solved.values.any() and solved.iterations == (0,)


def test_the_multigrid_cycle_is_symmetric():
    """Conjugate gradients need it: u.M v = v.M u."""
    matrix, _, _ = system(3, 12, 1000.0)
    cycle = VCycle(node_hierarchy(matrix).levels)
    u, v = np.random.default_rng(1).standard_normal((2, matrix.shape[0]))
    assert u @ cycle(v) == pytest.approx(v @ cycle(u), rel=1e-10)
