"""The finite-volume matrix against scikit-fem's linear elements, on the same meshes."""

import numpy as np
import pytest
import skfem
from brick_models import Model, bricks, mesh_of
from skfem.helpers import dot, grad, mul

from coldseam.volumes.operator import cell_pairs, cell_weights, edge_operator
from coldseam.volumes.section import cell_radius

SAME = 1e-12  # relative: two orders of summation


def any_model(dim: int, axisymmetric: bool = False) -> Model:
    """A model that only lends its bricks."""
    size = (2, 1) if dim == 2 else (1, 1, 1)
    return Model(
        size=size,
        conductivity=(1.0, 1.0),
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
        body=lambda x: (x[0] > 0.5).astype(int),
        axisymmetric=axisymmetric,
    )


def crooked(dim: int, axisymmetric: bool = False):
    """Return (our mesh, scikit-fem's) with moved nodes and random bisections."""
    model = any_model(dim, axisymmetric)
    grid = bricks(model, 7 if dim == 2 else 4, refined=2, seed=1)
    return mesh_of(model, grid), grid


def linear_elements(grid, k, tensors=None, weight=lambda x: 1.0):
    """Return scikit-fem's stiffness matrix with conductivity k (n_cells,) times unit tensors (n_cells, dim, dim)."""
    basis = skfem.Basis(grid, skfem.ElementTriP1() if grid.dim() == 2 else skfem.ElementTetP1(), intorder=3)
    tensors = np.eye(grid.dim())[None] * np.ones((len(k), 1, 1)) if tensors is None else tensors
    table = np.moveaxis(tensors, 0, -1)[..., None] * np.ones(basis.dx.shape[1])

    def form(u, v, w):
        return weight(w.x) * k[:, None] * dot(mul(table, grad(u)), grad(v))

    return skfem.BilinearForm(form).assemble(basis)


def difference(a, b) -> float:
    """Return the largest difference of two sparse matrices over the largest entry."""
    return abs(a - b).max() / abs(b).max()


def conductivities(n: int) -> np.ndarray:
    """Four decades, as foam and steel side by side."""
    return 10.0 ** np.random.default_rng(2).uniform(-2, 2, n)


@pytest.mark.parametrize("dim", [2, 3])
def test_matrix_equals_linear_elements(dim):
    mesh, grid = crooked(dim)
    k = conductivities(mesh.n_cells)
    ours = edge_operator(mesh, cell_weights(mesh)).matrix(k)
    assert difference(ours, linear_elements(grid, k)) < SAME


@pytest.mark.parametrize("dim", [2, 3])
def test_matrix_equals_linear_elements_with_tensors(dim):
    mesh, grid = crooked(dim)
    rng = np.random.default_rng(3)
    root = rng.uniform(-1, 1, (2, dim, dim))
    tensors = root @ np.swapaxes(root, 1, 2) + 0.2 * np.eye(dim)
    k = conductivities(mesh.n_cells)
    ours = edge_operator(mesh, cell_weights(mesh, tensors)).matrix(k)
    assert difference(ours, linear_elements(grid, k, tensors[mesh.cell_body])) < SAME


def test_matrix_equals_linear_elements_weighted_by_the_radius():
    mesh, grid = crooked(2, axisymmetric=True)
    k = conductivities(mesh.n_cells)
    ours = edge_operator(mesh, cell_weights(mesh) * cell_radius(mesh)).matrix(k)
    assert difference(ours, linear_elements(grid, k, weight=lambda x: 2 * np.pi * x[0])) < SAME


def test_new_conductivities_need_no_new_operator():
    mesh, _ = crooked(3)
    operator = edge_operator(mesh, cell_weights(mesh))
    first, again = (10.0**s * conductivities(mesh.n_cells) for s in (0, 1))
    a, b = operator.matrix(first), operator.matrix(again)
    assert abs(b - 10.0 * a).max() <= 1e-13 * abs(b).max()
    assert np.shares_memory(a.indices, b.indices)


def test_rows_sum_to_zero_and_the_matrix_is_symmetric():
    mesh, _ = crooked(3)
    matrix = edge_operator(mesh, cell_weights(mesh)).matrix(conductivities(mesh.n_cells))
    assert np.abs(matrix.sum(axis=1)).max() <= 1e-13 * abs(matrix).max()
    assert abs(matrix - matrix.T).max() == 0.0


@pytest.mark.parametrize("dim", [2, 3])
def test_arrays_hold_no_more_than_edges_and_cells(dim):
    """A work budget: one weight per edge of each cell, one matrix entry per edge and direction."""
    mesh, _ = crooked(dim)
    operator = edge_operator(mesh, cell_weights(mesh))
    cell_edges = mesh.cells[:, cell_pairs(dim)].reshape(-1, 2)
    n_edges = len(np.unique(np.sort(cell_edges, axis=1), axis=0))
    assert operator.edges.shape == (n_edges, 2)
    assert operator.weights.nnz == len(cell_edges)
    assert operator.indices.dtype == np.int32 and len(operator.indices) == mesh.n_nodes + 2 * n_edges
