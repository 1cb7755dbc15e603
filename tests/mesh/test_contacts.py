"""Opening meshes along contacts: doubled nodes, matching links, joined ends."""

import numpy as np
import pytest
from brick_models import Model, bricks, mesh_of

from coldseam.mesh.build import signed_measure
from coldseam.mesh.contacts import interface_facets, open_contacts


def layered(dim, body, bodies, size=None, refined=1):
    """Return a mesh of unit bricks with the given bodies, no contact opened."""
    model = Model(
        size=size or (3,) + (1,) * (dim - 1),
        conductivity=(1.0,) * bodies,
        terminal=lambda x: np.full(x.shape[1], -1),
        films=(1.0,),
        temperatures=(0.0,),
        body=body,
    )
    return mesh_of(model, bricks(model, 2 if dim == 3 else 4, refined=refined, seed=3))


def mask(n, *numbers):
    """Return a mask over n bodies."""
    return np.isin(np.arange(n), numbers)


def by_x(x):
    """Three bodies along the first axis."""
    return np.floor(x[0]).astype(int)


@pytest.mark.parametrize("dim", [2, 3])
def test_interface_is_the_plane_between_with_its_cells_told_apart(dim):
    mesh = layered(dim, by_x, 3)
    facets, first, second = interface_facets(mesh, mask(3, 1), mask(3, 0))
    assert len(facets) and np.allclose(mesh.points[facets][:, :, 0], 1.0)
    assert np.all(mesh.cell_body[first] == 1) and np.all(mesh.cell_body[second] == 0)
    assert all(set(f) <= set(mesh.cells[a]) & set(mesh.cells[b]) for f, a, b in zip(facets, first, second, strict=True))


@pytest.mark.parametrize("dim", [2, 3])
def test_a_contact_through_the_whole_section_doubles_its_nodes(dim):
    mesh = layered(dim, by_x, 3)
    opened = open_contacts(mesh, [(mask(3, 0), mask(3, 1))])
    on_plane = np.flatnonzero(np.abs(mesh.points[:, 0] - 1.0) < 1e-12)
    assert opened.n_nodes == mesh.n_nodes + len(on_plane)
    assert np.array_equal(opened.points[: mesh.n_nodes], mesh.points)
    assert np.array_equal(opened.points[opened.cells], mesh.points[mesh.cells]), "no cell moves"
    assert np.all(signed_measure(opened.points, opened.cells) > 0)
    left = set(opened.cells[opened.cell_body == 0].ravel())
    right = set(opened.cells[opened.cell_body == 1].ravel())
    assert not left & right
    assert set(opened.links[:, 0].ravel()) <= left and set(opened.links[:, 1].ravel()) <= right
    assert np.array_equal(opened.points[opened.links[:, 0]], opened.points[opened.links[:, 1]]), "nodes match in pairs"
    assert set(opened.cells[opened.cell_body == 1].ravel()) & set(opened.cells[opened.cell_body == 2].ravel())


@pytest.mark.parametrize("dim", [2, 3])
def test_exterior_facets_follow_their_cells(dim):
    opened = open_contacts(layered(dim, by_x, 3), [(mask(3, 0), mask(3, 1)), (mask(3, 1), mask(3, 2))])
    assert all(set(f) <= set(opened.cells[c]) for f, c in zip(opened.facets, opened.facet_cell, strict=True))
    assert sorted(set(opened.link_contact)) == [0, 1]
    where = opened.points[opened.links[:, 0]][:, :, 0].mean(axis=1)
    assert np.allclose(where, opened.link_contact + 1.0)


def test_a_contact_that_ends_inside_stays_joined_at_its_end():
    """Bodies 0 and 1 lie side by side on a base of body 2; only 0 | 1 is a contact, so its foot stays one node."""

    def body(x):
        return np.where(x[1] < 1.0, 2, np.where(x[0] < 1.0, 0, 1))

    mesh = layered(2, body, 3, size=(2, 2))
    opened = open_contacts(mesh, [(mask(3, 0), mask(3, 1))])
    on_line = (np.abs(mesh.points[:, 0] - 1.0) < 1e-12) & (mesh.points[:, 1] >= 1.0 - 1e-12)
    assert opened.n_nodes == mesh.n_nodes + on_line.sum() - 1
    assert np.isin(np.flatnonzero(on_line & (mesh.points[:, 1] < 1.0 + 1e-12)), opened.links[:, 0]).all()


def test_three_contacts_that_meet_make_three_nodes():
    def body(x):
        return np.where(x[1] < 1.0, 2, np.where(x[0] < 1.0, 0, 1))

    mesh = layered(2, body, 3, size=(2, 2))
    pairs = [(mask(3, 0), mask(3, 1)), (mask(3, 0), mask(3, 2)), (mask(3, 1), mask(3, 2))]
    opened = open_contacts(mesh, pairs)
    at_the_meeting = np.all(np.abs(opened.points - 1.0) < 1e-12, axis=1)
    assert at_the_meeting.sum() == 3
    owners = [set(opened.cell_body[np.any(opened.cells == node, axis=1)]) for node in np.flatnonzero(at_the_meeting)]
    assert sorted(map(sorted, owners)) == [[0], [1], [2]]


def test_bodies_that_do_not_touch_are_named_by_position():
    mesh = layered(2, by_x, 3)
    with pytest.raises(ValueError, match="^1$"):
        open_contacts(mesh, [(mask(3, 0), mask(3, 1)), (mask(3, 0), mask(3, 2))])
