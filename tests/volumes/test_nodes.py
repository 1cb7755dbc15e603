"""Second order of the temperature on manufactured solutions, and shares that add up."""

import numpy as np
import pytest
import skfem
from brick_models import Model, bricks, conditions_of, mesh_of

from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.solution.linear import DirectSolver
from coldseam.volumes.nodes import node_network, node_operator
from coldseam.volumes.section import facet_shares, node_shares_of_cells

ORDER, WITHIN = 2.0, 0.15

# Temperature and heat source -div(k grad T) in K and W/m³, k = 1 W/(m K) unless the tensor says else; by hand.
TENSOR = np.array([[2.0, 0.5], [0.5, 1.0]])


def wave(x):
    return np.sin(2.0 * x[0]) * np.exp(x[1])


def turned_source(x):
    """T_xx = -4 T, T_yy = T, T_xy = 2 cos(2x) exp(y)."""
    return 8.0 * wave(x) - wave(x) - 2.0 * TENSOR[0, 1] * 2.0 * np.cos(2.0 * x[0]) * np.exp(x[1])


MANUFACTURED = {
    "section": (2, False, 1.0, wave, lambda x: 3.0 * wave(x), (6, 10, 16, 26)),
    "section, tensor": (2, False, TENSOR, wave, turned_source, (6, 10, 16, 26)),
    "solid": (
        3,
        False,
        1.0,
        lambda x: wave(x) * np.cos(x[2]),
        lambda x: 4.0 * wave(x) * np.cos(x[2]),
        (4, 6, 9, 13),
    ),
    # T = exp(-r²) cos z: (r T_r)_r / r = (4 r² - 4) exp(-r²) cos z
    "axisymmetric": (
        2,
        True,
        1.0,
        lambda x: np.exp(-(x[0] ** 2)) * np.cos(x[1]),
        lambda x: (5.0 - 4.0 * x[0] ** 2) * np.exp(-(x[0] ** 2)) * np.cos(x[1]),
        (6, 10, 16, 26),
    ),
}


def error_of(dim, axisymmetric, k, temperature, source, per_metre):
    """Return (mean element size, L2 error) of the nodal temperatures with the boundary held at the exact ones."""
    model = Model(
        size=(1,) * dim,
        conductivity=(k,),
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
        axisymmetric=axisymmetric,
    )
    grid = bricks(model, per_metre, seed=per_metre)
    mesh = mesh_of(model, grid)
    given = conditions_of(model, mesh)
    given.source[:] = source(mesh.points[mesh.cells].mean(axis=1).T)
    network = node_network(mesh, given, node_operator(mesh, given)[0])
    held = np.zeros(mesh.n_nodes, dtype=bool)
    held[mesh.facets] = True
    values = np.where(held, temperature(mesh.points.T), 0.0)
    right = (network.load - network.matrix @ values)[~held, None]
    values[~held] = DirectSolver(network.matrix[~held][:, ~held]).solve(right, np.zeros(1), 0.0).values[:, 0]
    basis = skfem.Basis(grid, skfem.ElementTriP1() if dim == 2 else skfem.ElementTetP1(), intorder=5)
    off = skfem.Functional(lambda w: (w.x[0] if axisymmetric else 1.0) * (w.t - temperature(w.x)) ** 2)
    return mesh.n_cells ** (-1.0 / dim), np.sqrt(off.assemble(basis, t=basis.interpolate(values)))


@pytest.mark.parametrize("name", MANUFACTURED)
def test_temperature_is_of_second_order(name):
    *problem, meshes = MANUFACTURED[name]
    sizes, errors = np.array([error_of(*problem, n) for n in meshes]).T
    order = np.polyfit(np.log(sizes), np.log(errors), 1)[0]
    assert abs(order - ORDER) <= WITHIN, f"order {order:.2f} from errors {errors}"


@pytest.mark.parametrize("axisymmetric", [False, True])
def test_shares_of_nodes_add_up_to_cells_and_facets(axisymmetric):
    model = Model(
        size=(1, 1),
        origin=0.3,
        conductivity=(1.0,),
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
        axisymmetric=axisymmetric,
    )
    mesh = mesh_of(model, bricks(model, 5, seed=2))
    whole = np.pi * (1.3**2 - 0.3**2) if axisymmetric else 1.0
    assert node_shares_of_cells(mesh, np.ones(mesh.n_cells)).sum() == pytest.approx(whole, rel=1e-12)
    assert cell_measure(mesh).sum() == pytest.approx(whole, rel=1e-12)
    assert np.allclose(facet_shares(mesh, mesh.facets).sum(axis=1), facet_measure(mesh), rtol=1e-13)
