"""Open a mesh along contacts: nodes doubled on the interface, pairs of facets kept as links."""

from __future__ import annotations

import dataclasses

import numpy as np
from scipy import sparse
from scipy.sparse.csgraph import connected_components

from coldseam.mesh.build import local_facets, number_facets
from coldseam.mesh.types import Mesh


def interface_facets(mesh: Mesh, first: np.ndarray, second: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the facets between two sets of bodies.

    Parameters
    ----------
    mesh
        The mesh.
    first, second
        Masks over ``mesh.bodies``, shape (n_bodies,).

    Returns
    -------
    facets
        Sorted nodes, shape (n, dim).
    first_cell, second_cell
        The cells on either side, shape (n,).
    """
    cell_facets, facets = number_facets(mesh.cells)
    owner = np.repeat(np.arange(mesh.n_cells), mesh.dim + 1)
    order = np.argsort(cell_facets.ravel(), kind="stable")
    number, owner = cell_facets.ravel()[order], owner[order]
    twice = np.flatnonzero(number[1:] == number[:-1])
    a, b = owner[twice], owner[twice + 1]
    body = mesh.cell_body
    forward = first[body[a]] & second[body[b]]
    backward = first[body[b]] & second[body[a]]
    keep = forward | backward
    swap = backward[keep]
    a, b = a[keep], b[keep]
    return facets[number[twice[keep]]], np.where(swap, b, a), np.where(swap, a, b)


def open_contacts(mesh: Mesh, pairs: list[tuple[np.ndarray, np.ndarray]]) -> Mesh:
    """Return the mesh with nodes doubled on the interfaces of every contact.

    Around each touched node the cells that are still joined through facets that are no contact
    form groups; each group beyond the first gets a node of its own. So the end of a contact inside
    the material stays joined, and three bodies that meet are told apart correctly.

    Parameters
    ----------
    mesh
        A mesh without links.
    pairs
        For every contact the masks over bodies of its two sides, each of shape (n_bodies,).

    Raises
    ------
    ValueError
        With the position of the first contact whose two sides share no facet.
    """
    found = [interface_facets(mesh, first, second) for first, second in pairs]
    for number, (facets, _, _) in enumerate(found):
        if len(facets) == 0:
            raise ValueError(number)
    cut = np.vstack([facets for facets, _, _ in found])
    side_a = np.concatenate([a for _, a, _ in found])
    side_b = np.concatenate([b for _, _, b in found])
    contact = np.repeat(np.arange(len(found)), [len(f) for f, _, _ in found])

    cells, corner_node = _split_nodes(mesh, cut)
    points = np.vstack([mesh.points, mesh.points[corner_node]])
    a_facets = _renumbered(mesh.cells, cells, side_a, cut)
    b_facets = _renumbered(mesh.cells, cells, side_b, cut)
    facets = _renumbered(mesh.cells, cells, mesh.facet_cell, np.asarray(mesh.facets))
    return dataclasses.replace(
        mesh,
        points=points,
        cells=cells,
        facets=facets,
        links=np.stack([a_facets, b_facets], axis=1),
        link_contact=contact,
    )


def _split_nodes(mesh: Mesh, cut: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return renumbered cells and, for every added node, the node it doubles."""
    touched = np.zeros(mesh.n_nodes, dtype=bool)
    touched[cut] = True
    near = np.flatnonzero(touched[mesh.cells].any(axis=1))
    near_cells = mesh.cells[near]
    width = mesh.dim + 1

    # A "corner" is one node of one cell; corners of the same node are joined through uncut facets.
    corner = np.arange(near_cells.size).reshape(near_cells.shape)
    cell_facets, facets = number_facets(near_cells)
    is_cut = np.isin(_row_keys(facets, mesh.n_nodes), _row_keys(np.sort(cut, axis=1), mesh.n_nodes))
    local = local_facets(mesh.dim)
    flat = cell_facets.ravel()
    order = np.argsort(flat, kind="stable")
    twice = np.flatnonzero((flat[order][1:] == flat[order][:-1]) & ~is_cut[flat[order][1:]])
    one, two = order[twice], order[twice + 1]
    corners_one = np.take_along_axis(corner[one // width], local[one % width], axis=1)
    corners_two = np.take_along_axis(corner[two // width], local[two % width], axis=1)
    nodes = near_cells.ravel()
    corners_one = np.take_along_axis(corners_one, np.argsort(nodes[corners_one], axis=1), axis=1)
    corners_two = np.take_along_axis(corners_two, np.argsort(nodes[corners_two], axis=1), axis=1)
    joined = sparse.coo_array(
        (np.ones(corners_one.size, dtype=np.int8), (corners_one.ravel(), corners_two.ravel())),
        shape=(nodes.size, nodes.size),
    )
    _, group = connected_components(joined, directed=False)

    # Every (node, group) is one node; the first group of a node keeps its number. Untouched nodes of
    # cells in the rim may fall into several groups only because cells beyond the rim were left out.
    group_node = np.zeros(group.max() + 1, dtype=np.int64)
    group_node[group] = nodes
    group_ids = np.arange(len(group_node))
    by_node = np.lexsort([group_ids, group_node])
    ordered = group_node[by_node]
    again = np.zeros(len(ordered), dtype=bool)
    again[1:] = ordered[1:] == ordered[:-1]
    again &= touched[ordered]
    added = by_node[again]
    number = group_node.copy()
    number[added] = mesh.n_nodes + np.arange(len(added))
    cells = mesh.cells.copy()
    cells[near] = number[group].reshape(near_cells.shape)
    return cells, group_node[added]


def _row_keys(rows: np.ndarray, n: int) -> np.ndarray:
    """Return one sortable key per row of sorted node numbers."""
    if rows.shape[1] == 2:
        return rows[:, 0] * n + rows[:, 1]
    return np.ascontiguousarray(rows).view([("", rows.dtype)] * rows.shape[1]).ravel()


def _renumbered(old: np.ndarray, new: np.ndarray, cell: np.ndarray, facets: np.ndarray) -> np.ndarray:
    """Return facets with each node replaced by what it became in the given cell."""
    position = np.argmax(old[cell][:, None, :] == facets[:, :, None], axis=2)
    return np.take_along_axis(new[cell], position, axis=1)
