"""Finding probes in meshes."""

import numpy as np
import pytest
from brick_models import Model, bricks, mesh_of

from coldseam.mesh.locate import NEAREST, locate


def make(dim, per_metre=3):
    """Return a crooked mesh of a unit square or cube."""
    model = Model(
        size=(1,) * dim,
        conductivity=(1.0,),
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
    )
    return mesh_of(model, bricks(model, per_metre, refined=1, seed=8))


@pytest.mark.parametrize("dim", [2, 3])
def test_weights_give_the_point_back(dim):
    mesh = make(dim)
    points = np.random.default_rng(9).uniform(0, 1, (40, dim))
    cells, weights = locate(mesh, points)
    assert np.all(cells >= 0) and np.all(weights >= 0)
    assert np.allclose(weights.sum(axis=1), 1.0, rtol=0, atol=1e-14)
    assert np.allclose(np.einsum("ni,nia->na", weights, mesh.points[mesh.cells[cells]]), points, rtol=0, atol=1e-12)


@pytest.mark.parametrize("dim", [2, 3])
def test_nodes_and_facet_centres_belong_to_a_cell_that_has_them(dim):
    mesh = make(dim)
    cells, weights = locate(mesh, mesh.points)
    nearest = np.take_along_axis(mesh.cells[cells], weights.argmax(axis=1)[:, None], axis=1)[:, 0]
    assert np.array_equal(nearest, np.arange(mesh.n_nodes))
    assert np.allclose(weights.max(axis=1), 1.0, rtol=0, atol=1e-12)
    centres = mesh.points[mesh.facets].mean(axis=1)
    assert np.all(locate(mesh, centres)[0] >= 0)


@pytest.mark.parametrize("dim", [2, 3])
def test_points_outside_belong_to_none(dim):
    mesh = make(dim)
    out = np.full((1, dim), 0.5)
    out[0, 0] = 1.001
    assert locate(mesh, out)[0].tolist() == [-1]
    assert locate(mesh, out - [[0.001 - 1e-9, *[0.0] * (dim - 1)]])[0][0] >= 0


def test_a_point_in_a_large_cell_among_many_small_ones_is_found():
    """The cell's centre is far away, more than NEAREST others are nearer: the second search must find it."""
    angle = np.linspace(0.0, 1.0, 4 * NEAREST)
    small = np.column_stack([angle, np.where(np.arange(len(angle)) % 2, -1e-3, -2e-3)])
    points = np.vstack([[[0.0, 0.0], [1.0, 0.0], [0.5, 30.0]], small])
    strip = np.arange(len(angle) - 2)[:, None] + np.arange(3) + 3
    from coldseam.mesh.build import build_mesh
    from coldseam.mesh.types import MeshBody

    cells = np.vstack([[[0, 1, 2]], strip])
    mesh = build_mesh(points, cells, np.zeros(len(cells), int), (MeshBody(name="a", material="a", source=0),))
    assert locate(mesh, np.array([[0.5, 1e-4]]))[0].tolist() == [0]
