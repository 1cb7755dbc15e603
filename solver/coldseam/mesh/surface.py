"""The exterior surface as a whole: which facets hang together, which shells they close."""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from coldseam.mesh.types import Mesh


def facet_neighbours(facets: np.ndarray, n_nodes: int, reach: int = 1) -> np.ndarray:
    """Return pairs of facets that share a node (2D) or an edge (3D), shape (n_pairs, 2).

    Where more than two facets meet at one place they are chained, which keeps them connected;
    ``reach`` = 3 gives every pair of up to four facets.
    """
    n_facets, dim = facets.shape
    if dim == 2:
        key = facets.ravel().astype(np.int64)
        owner = np.repeat(np.arange(n_facets), 2)
    else:
        edge = np.sort(facets[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1).astype(np.int64)
        key = edge[:, 0] * n_nodes + edge[:, 1]
        owner = np.repeat(np.arange(n_facets), 3)
    order = np.argsort(key, kind="stable")
    pairs = []
    for step in range(1, reach + 1):
        same = np.flatnonzero(key[order[step:]] == key[order[:-step]])
        pairs.append(np.column_stack([owner[order[same]], owner[order[same + step]]]))
    return np.vstack(pairs)


def components(pairs: np.ndarray, count: int) -> tuple[int, np.ndarray]:
    """Return the number of connected components of a graph and that of every vertex, shape (count,)."""
    graph = coo_array((np.ones(len(pairs), dtype=np.int8), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    return connected_components(graph, directed=False)


def undoubled(mesh: Mesh) -> np.ndarray:
    """Return the exterior facets with the two sides of contacts numbered alike, shape (n_facets, dim)."""
    if mesh.links is None or not len(mesh.links):
        return mesh.facets
    pairs = np.column_stack([mesh.links[:, 0].ravel(), mesh.links[:, 1].ravel()])
    return components(pairs, mesh.n_nodes)[1][mesh.facets]


def shell_volumes(mesh: Mesh) -> tuple[np.ndarray, np.ndarray]:
    """Return the closed shells that the exterior surface falls into.

    The volume enclosed by an outward oriented surface is ``sum x . n dA / dim``; it is positive where
    the surface holds material inside and negative where it bounds a void within the material. In an
    axisymmetric section curves end on the axis; the piece of axis that closes them adds nothing to
    the sum, because x . n = r = 0 there.

    Returns
    -------
    shell
        Number of the shell of each facet, shape (n_facets,).
    volume
        Enclosed volume (area in 2D) with its sign, m³ (m²), shape (n_shells,).
    """
    count, shell = components(facet_neighbours(undoubled(mesh), mesh.n_nodes), len(mesh.facets))
    # Measured from near the surface: far-off coordinates would cancel badly. The axis keeps r = 0.
    origin = mesh.points.mean(axis=0)
    if mesh.axisymmetric:
        origin[0] = 0.0
    corner = mesh.points[mesh.facets] - origin
    if mesh.dim == 2:
        part = 0.5 * (corner[:, 0, 0] * corner[:, 1, 1] - corner[:, 0, 1] * corner[:, 1, 0])
    else:
        part = np.einsum("ij,ij->i", corner[:, 0], np.cross(corner[:, 1], corner[:, 2])) / 6.0
    return shell, np.bincount(shell, weights=part, minlength=count)


def surface_faces(mesh: Mesh, which: np.ndarray, normals: np.ndarray, kind: np.ndarray) -> np.ndarray:
    """Gather facets into the faces a person sees, for messages.

    Facets of one patch belong together, and so do neighbours whose directions differ by less than
    some 30 degrees (so a meshed cylinder is one face and a box has six).

    Parameters
    ----------
    which
        Numbers of the facets to gather, shape (n,).
    normals
        Outward unit normals of all facets, shape (n_facets, dim).
    kind
        Facets of different kind are never gathered, shape (n,).

    Returns
    -------
    ndarray
        Face number of each, shape (n,).
    """
    near = facet_neighbours(undoubled(mesh)[which], mesh.n_nodes)
    smooth = np.einsum("ij,ij->i", normals[which[near[:, 0]]], normals[which[near[:, 1]]]) > 0.85
    near = near[smooth & (kind[near[:, 0]] == kind[near[:, 1]])]
    patch = mesh.facet_patch[which]
    order = np.lexsort([kind, patch])
    same = np.flatnonzero((patch[order[1:]] == patch[order[:-1]]) & (kind[order[1:]] == kind[order[:-1]]))
    chain = np.column_stack([order[same], order[same + 1]])
    return components(np.vstack([near, chain]), len(which))[1]
