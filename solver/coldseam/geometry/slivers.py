"""Flat tetrahedra taken out of a mesh by joining their crossing edges.

Four nodes of the mapped side of a bar may lie in one plane (and on one circle: for Delaunay's rule
any way of joining them is as good); the tetrahedron that joins them has no volume and a conductance
(area² / volume) without bound. Its two opposite edges ab and cd cross. A node p at the crossing
splits both, with all tetrahedra around them; the flat one then lies between faces that already
match (apc, pbc, apd, pbd on either side) and is left out. No volume changes hands.
"""

from __future__ import annotations

import numpy as np

from coldseam.geometry.quality import shape_of

PAIRS = np.array([[0, 1, 2, 3], [0, 2, 1, 3], [0, 3, 1, 2]])
"""The three pairs of opposite edges of a tetrahedron."""

MOST = 500
"""Flat cells beyond which another mesher is the better remedy."""


def without_flat(raw: dict, flattest: float) -> tuple[dict, int]:
    """Return a bare mesh without tetrahedra of a radius ratio under ``flattest``.

    Parameters
    ----------
    raw
        ``points``, ``cells``, ``cell_body``, ``facets``, ``patch_of`` of
        :func:`coldseam.geometry.meshing.mesh_interior`.
    flattest
        Least radius ratio (1 regular, 0 flat).

    Returns
    -------
    raw
        The mesh, with ``worst``, its least radius ratio; flat cells remain where no two edges cross.
    removed
        Number of cells taken out.
    """
    removed = 0
    for _ in range(MOST):
        shape = shape_of(raw["points"], raw["cells"])
        raw = {**raw, "worst": float(shape.min())}
        flat = np.flatnonzero(shape < flattest)
        if len(flat) == 0 or len(flat) > MOST:
            break
        taken = 0
        used = np.zeros(0, dtype=np.int64)
        gone: list[np.ndarray] = []
        for k in flat:
            nodes = raw["cells"][k]
            if len(np.intersect1d(nodes, used)):
                continue  # a neighbour of one just done: in the next sweep
            used = np.append(used, nodes)
            gone.append(nodes)
        for nodes in gone:
            repaired = _joined(raw, nodes)
            if repaired is not None:
                raw, taken = repaired, taken + 1
        removed += taken
        if taken == 0:
            break
    return raw, removed


def _joined(raw: dict, nodes: np.ndarray) -> dict | None:
    """Return the mesh with the crossing edges of one flat cell joined; None where none cross."""
    crossing = _crossing(raw["points"], nodes)
    if crossing is None:
        return None
    a, b, c, d, place = crossing
    p = len(raw["points"])
    cells, body = raw["cells"], raw["cell_body"]
    flat = np.all(np.sort(cells, axis=1) == np.sort(nodes), axis=1)
    cells, body = cells[~flat], body[~flat]
    facets, patch = raw["facets"], raw["patch_of"]
    for one, other in ((a, b), (c, d)):
        cells, body = _split(cells, body, one, other, p)
        facets, patch = _split(facets, patch, one, other, p)
    return {
        **raw,
        "points": np.vstack([raw["points"], place]),
        "cells": cells,
        "cell_body": body,
        "facets": facets,
        "patch_of": patch,
    }


def _crossing(points: np.ndarray, nodes: np.ndarray):
    """Return (a, b, c, d, place) of the opposite edges that cross inside both, or None."""
    for pair in PAIRS:
        a, b, c, d = (int(n) for n in nodes[pair])
        u, v, w = points[b] - points[a], points[d] - points[c], points[c] - points[a]
        matrix = np.array([[u @ u, -(u @ v)], [u @ v, -(v @ v)]])
        if abs(np.linalg.det(matrix)) < 1e-6 * (u @ u) * (v @ v):
            continue
        s, t = np.linalg.solve(matrix, [u @ w, v @ w])
        if 0.02 < s < 0.98 and 0.02 < t < 0.98:
            return a, b, c, d, 0.5 * (points[a] + s * u + points[c] + t * v)
    return None


def _split(simplices: np.ndarray, tag: np.ndarray, a: int, b: int, p: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the simplices with those that hold the edge ab split at p, tags kept."""
    both = np.any(simplices == a, axis=1) & np.any(simplices == b, axis=1)
    first, second = simplices[both].copy(), simplices[both].copy()
    first[first == b] = p
    second[second == a] = p
    return np.vstack([simplices[~both], first, second]), np.concatenate([tag[~both], tag[both], tag[both]])
