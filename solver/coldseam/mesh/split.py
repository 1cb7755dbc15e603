"""Split quads, hexahedra, wedges and pyramids into simplices that match across faces.

One rule makes neighbours agree without asking each other: a quad face is cut by the diagonal that
starts at its node of smallest number. A cell is then the cone from its own node of smallest number
over the faces that don't touch that node; the faces that do touch it are cut by diagonals from
that very node, as the rule wants, so nothing is left to choose and nothing can clash. A hexahedron
gives 6 tetrahedra (5 where all three far faces are cut round the far corner), a wedge 3, a pyramid 2.

Dompierre, Labbe, Vallet, Camarero, "How to subdivide pyramids, prisms and hexahedra into
tetrahedra", 8th International Meshing Roundtable (1999): the same rule (from memory).
In the plane the diagonal is free, since only sides are shared, and the better one is taken.
"""

from __future__ import annotations

import numpy as np

from coldseam.mesh.build import signed_measure

FACES = {
    "pyramid": ((0, 3, 2, 1), (0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4)),
    "wedge": ((0, 2, 1), (3, 4, 5), (0, 1, 4, 3), (1, 2, 5, 4), (2, 0, 3, 5)),
    "hexahedron": ((0, 3, 2, 1), (4, 5, 6, 7), (0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 0, 4, 7)),
}
"""Outward faces by local node, in the order of nodes that VTK (and meshio) use."""

CORNERS = {"line": 2, "triangle": 3, "quad": 4, "tetra": 4, "pyramid": 5, "wedge": 6, "hexahedron": 8}
DIMENSION = {"line": 1, "triangle": 2, "quad": 2, "tetra": 3, "pyramid": 3, "wedge": 3, "hexahedron": 3}


def quads_to_triangles(quads: np.ndarray) -> np.ndarray:
    """Cut quads by the diagonal from the node of smallest number, shape (2 n, 3), two rows a quad."""
    turned = np.take_along_axis(quads, (np.argmin(quads, axis=1)[:, None] + np.arange(4)) % 4, axis=1)
    return turned[:, [[0, 1, 2], [0, 2, 3]]].reshape(-1, 3)


def plane_quads_to_triangles(points: np.ndarray, quads: np.ndarray) -> np.ndarray:
    """Cut quads of a plane mesh by the diagonal whose smaller triangle is the larger, shape (2 n, 3).

    A quad with one re-entrant corner is thereby cut through that corner. Ties go to the diagonal
    from the node of smallest number.
    """
    ruled = quads_to_triangles(quads).reshape(-1, 2, 3)
    a, b, c, d = ruled[:, 0, 0], ruled[:, 0, 1], ruled[:, 0, 2], ruled[:, 1, 2]
    other = np.stack([np.stack([b, c, d], axis=1), np.stack([b, d, a], axis=1)], axis=1)
    way = np.sign(_areas(points, ruled).sum(axis=1, keepdims=True))
    first = (way * _areas(points, ruled)).min(axis=1)
    second = (way * _areas(points, other)).min(axis=1)
    better = second > first + 1e-9 * np.abs(first)
    return np.where(better[:, None, None], other, ruled).reshape(-1, 3)


def _areas(points: np.ndarray, triangles: np.ndarray) -> np.ndarray:
    return signed_measure(points, triangles.reshape(-1, 3)).reshape(-1, 2)


def split_cells(kind: str, cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Split cells of one kind into tetrahedra.

    Parameters
    ----------
    kind
        "tetra", "pyramid", "wedge" or "hexahedron".
    cells
        Corner nodes in VTK order, shape (n, corners). Repeated nodes (a hexahedron collapsed to a
        wedge, say) are allowed: the tetrahedra they flatten are left out.

    Returns
    -------
    tetrahedra
        Shape (m, 4), oriented as the cells are.
    origin
        The row of ``cells`` that each came from, shape (m,).
    """
    if kind == "tetra":
        return cells, np.arange(len(cells))
    smallest = np.argmin(cells, axis=1)
    pieces: list[np.ndarray] = []
    rows_of: list[np.ndarray] = []
    for apex in range(CORNERS[kind]):
        rows = np.flatnonzero(smallest == apex)
        for face in FACES[kind]:
            if apex in face or not len(rows):
                continue
            base = cells[rows][:, face]
            triangles = base if len(face) == 3 else quads_to_triangles(base)
            per = 1 if len(face) == 3 else 2
            top = np.repeat(cells[rows, apex], per)
            # The face is seen counter-clockwise from outside, so turned round as seen from the apex.
            pieces.append(np.column_stack([triangles[:, [0, 2, 1]], top]))
            rows_of.append(np.repeat(rows, per))
    tetrahedra, origin = np.concatenate(pieces), np.concatenate(rows_of)
    ordered = np.sort(tetrahedra, axis=1)
    whole = np.all(ordered[:, 1:] != ordered[:, :-1], axis=1)
    order = np.argsort(origin[whole], kind="stable")
    tetrahedra, origin = tetrahedra[whole][order], origin[whole][order]
    return _five(cells, tetrahedra, origin) if kind == "hexahedron" else (tetrahedra, origin)


def _five(cells: np.ndarray, tetrahedra: np.ndarray, origin: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Replace three tetrahedra about the long diagonal by two where no far face is cut through the far corner.

    The three share the edge from the smallest node to the opposite corner; the outer surface of the
    three is that of the two, so neighbours see no change.
    """
    apex = np.argmin(cells, axis=1)
    far = np.array([6, 7, 4, 5, 2, 3, 0, 1])[apex]
    far_node = cells[np.arange(len(cells)), far]
    has_far = np.any(tetrahedra == far_node[origin][:, None], axis=1)
    round_far = np.bincount(origin[has_far], minlength=len(cells))
    ordered = np.sort(cells, axis=1)
    plain = np.all(ordered[:, 1:] != ordered[:, :-1], axis=1)
    fives = plain & (round_far == 3)
    drop = has_far & fives[origin]
    # Neighbours of each corner in the hexahedron, ordered so that (corner, n0, n1, n2) is a positive tetrahedron.
    around = np.array([[1, 3, 4], [2, 0, 5], [3, 1, 6], [0, 2, 7], [7, 5, 0], [4, 6, 1], [5, 7, 2], [6, 4, 3]])
    rows = np.flatnonzero(fives)
    ring = np.take_along_axis(cells[rows], around[far[rows]], axis=1)
    corner_piece = np.column_stack([far_node[rows], ring])
    middle = np.column_stack([cells[rows, apex[rows]], ring[:, [0, 2, 1]]])
    tetrahedra = np.vstack([tetrahedra[~drop], corner_piece, middle])
    origin = np.concatenate([origin[~drop], rows, rows])
    order = np.argsort(origin, kind="stable")
    return tetrahedra[order], origin[order]
