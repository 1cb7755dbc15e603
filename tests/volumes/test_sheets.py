"""Sheets: conduction in a face, and the energy of the flux that spreads the heat a face receives."""

import numpy as np
import pytest
import skfem
from brick_models import Model, bricks, mesh_of

from coldseam.volumes.sheets import sheet_laplacian, sheet_moment, sheet_weights

KT = 0.7


def flat_model(dim: int) -> Model:
    """A square or cube; its face at x_last = 0 carries the sheet."""
    return Model(
        size=(1,) * dim,
        conductivity=(1.0,),
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
    )


def bottom(dim: int):
    """Return (mesh, facets at x_last = 0)."""
    model = flat_model(dim)
    mesh = mesh_of(model, bricks(model, 4, refined=2, seed=5))
    return mesh, mesh.facets[np.all(mesh.points[mesh.facets][:, :, -1] < 1e-12, axis=1)]


@pytest.mark.parametrize("dim", [2, 3])
def test_sheet_equals_linear_elements_one_dimension_lower(dim):
    mesh, facets = bottom(dim)
    used, cells = np.unique(facets, return_inverse=True)
    grid = (skfem.MeshLine if dim == 2 else skfem.MeshTri)(mesh.points[used, : dim - 1].T, cells.reshape(-1, dim).T)
    basis = skfem.Basis(grid, skfem.ElementLineP1() if dim == 2 else skfem.ElementTriP1())
    theirs = skfem.BilinearForm(lambda u, v, w: KT * skfem.helpers.dot(u.grad, v.grad)).assemble(basis)
    ours = sheet_laplacian(facets, sheet_weights(mesh, facets, np.full(len(facets), KT)), mesh.n_nodes)
    assert abs(ours[used][:, used] - theirs).max() < 1e-12 * abs(theirs).max()


@pytest.mark.parametrize("dim", [2, 3])
def test_moment_is_the_energy_of_the_flux_that_spreads_one_watt(dim):
    """The flux (p/d)(x - x_c) with p = 1 W/area, d = dim - 1; |flux|²/kt integrated by quadrature at edge middles."""
    mesh, facets = bottom(dim)
    p = mesh.points[facets]
    centre = p.mean(axis=1, keepdims=True)
    if dim == 2:
        size = np.linalg.norm(p[:, 1] - p[:, 0], axis=1)
        places, weights = np.concatenate([p, centre], axis=1), np.array([1.0, 1.0, 4.0]) / 6.0  # Simpson
    else:
        size = 0.5 * np.linalg.norm(np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0]), axis=1)
        places, weights = 0.5 * (p + np.roll(p, 1, axis=1)), np.full(3, 1.0 / 3.0)  # exact for squares
    flux = (places - centre) / (dim - 1) / size[:, None, None]
    energy = size * ((flux**2).sum(axis=2) @ weights) / KT
    assert np.allclose(sheet_moment(mesh, facets, np.full(len(facets), KT)), energy, rtol=1e-12)
