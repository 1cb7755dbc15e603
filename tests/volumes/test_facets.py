"""The facet network against scikit-fem's Crouzeix-Raviart elements, on the same meshes."""

import numpy as np
import pytest
import skfem
from brick_models import Model, bricks, conditions_of, mesh_of, prove_on
from skfem.helpers import dot, grad, mul

from coldseam.volumes.facets import facet_system, find_facets
from coldseam.volumes.operator import cell_weights

SAME = 1e-12
FILMS = (3.0, 7.0)


def model_of(dim: int, **change) -> Model:
    """Two bodies between two films."""
    return Model(
        **{
            "size": (2, 1) if dim == 2 else (1, 1, 1),
            "conductivity": (0.03, 17.0),
            "body": lambda x: (x[0] > 0.5).astype(int),
            "terminal": lambda x: np.where(x[0] < 1e-9, 0, np.where(x[1] > 1 - 1e-9, 1, -1)),
            "films": FILMS,
            "temperatures": (0.0, 1.0),
            **change,
        }
    )


def crouzeix_raviart(model: Model, grid, mesh):
    """Return scikit-fem's matrix in the numbering of its own facets: conduction, and films at facet centres.

    Axisymmetric: each cell's and facet's weight is the harmonic mean of 2 pi r, by quadrature of 1/r.
    """
    triangles = grid.dim() == 2
    element = skfem.ElementTriCR() if triangles else skfem.ElementTetCR()
    basis = skfem.Basis(grid, element, intorder=12 if model.axisymmetric else 2)
    tensors = np.array([k * np.eye(model.dim) if np.ndim(k) == 0 else k for k in model.conductivity])[mesh.cell_body]
    table = np.moveaxis(tensors, 0, -1)[..., None] * np.ones(basis.dx.shape[1])
    weight = np.ones(basis.dx.shape)
    if model.axisymmetric:
        inverse = (basis.dx / basis.global_coordinates()[0]).sum(axis=1) / basis.dx.sum(axis=1)
        weight = weight * (2 * np.pi / inverse)[:, None]
    matrix = skfem.BilinearForm(lambda u, v, w: weight * dot(mul(table, grad(u)), grad(v))).assemble(basis).tolil()
    facets = grid.boundary_facets()
    ends = grid.p[:, grid.facets[:, facets]]
    terminal = model.terminal(ends.mean(axis=1) - np.array([model.origin, *[0.0] * (model.dim - 1)])[:, None])
    side = skfem.FacetBasis(grid, element, intorder=20 if model.axisymmetric else 2)
    area = side.dx.sum(axis=1)
    if model.axisymmetric:
        inverse = (side.dx / side.global_coordinates()[0]).sum(axis=1) / area
        area = area * 2 * np.pi / inverse
    for facet, k, a in zip(facets, terminal, area, strict=True):
        if k >= 0:
            matrix[facet, facet] += model.films[k] * a
    return matrix.tocsr()


def compare(model: Model, grid) -> float:
    """Return the largest difference of the two matrices over the largest entry."""
    mesh = mesh_of(model, grid)
    given = conditions_of(model, mesh)
    system = facet_system(mesh, given, cell_weights(mesh, given.tensors))
    place = find_facets(system.facets, grid.facets.T)
    ours = system.network.matrix[place][:, place]
    theirs = crouzeix_raviart(model, grid, mesh)
    return abs(ours - theirs).max() / abs(theirs).max()


@pytest.mark.parametrize("dim", [2, 3])
def test_matrix_equals_crouzeix_raviart(dim):
    model = model_of(dim)
    assert compare(model, bricks(model, 6 if dim == 2 else 3, refined=2, seed=4)) < SAME


@pytest.mark.parametrize("dim", [2, 3])
def test_matrix_equals_crouzeix_raviart_with_tensors(dim):
    root = np.random.default_rng(5).uniform(-1, 1, (2, dim, dim))
    model = model_of(dim, conductivity=tuple(root @ np.swapaxes(root, 1, 2) + 0.1 * np.eye(dim)))
    assert compare(model, bricks(model, 6 if dim == 2 else 3, refined=2, seed=4)) < SAME


def test_axisymmetric_matrix_equals_crouzeix_raviart_with_the_harmonic_radius():
    """The quadrature of 1/r is good to 1e-10 where the ring lies at 3 to 5 m."""
    model = model_of(2, axisymmetric=True, origin=3.0)
    assert compare(model, bricks(model, 6, refined=2, seed=4)) < 1e-10


def test_flux_is_continuous_and_balances_every_cell():
    """What the lower bound rests on: cells lose through their facets what is released in them (Marini 1985)."""
    model = model_of(3, source=(2.0, 5.0))
    proof = prove_on(model, bricks(model, 3, refined=1, seed=6))
    mesh, system = proof.mesh, proof.bounds.facets
    values = system.spread @ (proof.bounds.response.fields @ model.state)
    flow, cell_heat = facet_flows(mesh, proof.given, values[system.cell_facets])
    assert np.abs(flow.sum(axis=1) - cell_heat).max() < 1e-10 * np.abs(flow).max()
    count = np.bincount(system.cell_facets.ravel(), minlength=len(system.facets))
    net = np.bincount(system.cell_facets.ravel(), flow.ravel(), len(system.facets))
    assert np.abs(net[count == 2]).max() < 1e-10 * np.abs(flow).max()


def facet_flows(mesh, given, values):
    """Return the heat that leaves each cell through each of its facets, W, (n_cells, dim + 1), and its source, W.

    Straight from the formula: q = -k grad u + f/dim (x - x_c), the gradient through the facet centres.
    """
    p = mesh.points[mesh.cells]
    edges = p[:, 1:] - p[:, :1]
    volume = np.abs(np.linalg.det(edges)) / np.prod(range(1, mesh.dim + 1))
    slopes = np.linalg.inv(edges)  # columns: gradients of barycentric coordinates 1 ... dim
    slopes = np.concatenate([-slopes.sum(axis=2, keepdims=True), slopes], axis=2)
    gradient = -mesh.dim * np.einsum("cai,ci->ca", slopes, values)
    area_vectors = -mesh.dim * volume[:, None, None] * np.swapaxes(slopes, 1, 2)
    to_facet = p.sum(axis=1, keepdims=True) / mesh.dim - p / mesh.dim - p.mean(axis=1, keepdims=True)
    q = -given.conductivity[:, None] * gradient
    flux = q[:, None, :] + (given.source / mesh.dim)[:, None, None] * to_facet
    return np.einsum("cia,cia->ci", area_vectors, flux), given.source * volume


def test_find_facets_whatever_their_node_order():
    model = model_of(3)
    mesh = mesh_of(model, bricks(model, 3))
    from coldseam.mesh.build import number_facets

    facets = number_facets(mesh.cells)[1]
    turned = facets[:, [2, 0, 1]]
    assert np.array_equal(find_facets(facets, turned), np.arange(len(facets)))
