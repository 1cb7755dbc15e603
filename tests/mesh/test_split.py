"""Splitting of quads, hexahedra, wedges and pyramids: exact volumes, faces cut by the one rule."""

import numpy as np
import pytest

from coldseam.mesh.build import number_facets, signed_measure
from coldseam.mesh.split import CORNERS, FACES, plane_quads_to_triangles, quads_to_triangles, split_cells

SHAPES = {
    "hexahedron": [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]],
    "wedge": [[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [0, 1, 1]],
    "pyramid": [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0.5, 0.5, 1]],
}
VOLUME = {"hexahedron": 1.0, "wedge": 0.5, "pyramid": 1 / 3}
PIECES = {"hexahedron": {5, 6}, "wedge": {3}, "pyramid": {2}}


def ruled_faces(kind, cell):
    """The triangles that the rule alone gives for a cell's faces, as sorted tuples."""
    triangles = []
    for face in FACES[kind]:
        nodes = cell[list(face)][None]
        triangles.append(nodes if len(face) == 3 else quads_to_triangles(nodes))
    return sorted(map(tuple, np.sort(np.concatenate(triangles), axis=1)))


@pytest.mark.parametrize("kind", SHAPES)
def test_every_numbering_fills_the_cell_and_cuts_faces_by_the_rule(kind):
    rng = np.random.default_rng(7)
    counts = set()
    for _ in range(150):
        cell = rng.permutation(CORNERS[kind])
        points = np.empty((CORNERS[kind], 3))
        points[cell] = SHAPES[kind]
        pieces, origin = split_cells(kind, cell[None])
        volume = signed_measure(points, pieces)
        assert volume.min() > 1e-3 and volume.sum() == pytest.approx(VOLUME[kind], rel=1e-14)
        assert np.all(origin == 0)
        cell_facets, facets = number_facets(pieces)
        count = np.bincount(cell_facets.ravel())
        assert count.max() <= 2
        assert sorted(map(tuple, facets[count == 1])) == ruled_faces(kind, cell)
        counts.add(len(pieces))
    assert counts == PIECES[kind]


def test_hexahedra_of_a_shuffled_grid_match(blocks):
    axes = [np.linspace(0, 1, n) for n in (4, 5, 6)]
    points, cells = blocks.points(*axes), blocks.cells(3, 4, 5)
    shuffle = np.random.default_rng(3).permutation(len(points))
    cells = shuffle[cells]
    moved = np.empty_like(points)
    moved[shuffle] = points
    pieces, origin = split_cells("hexahedron", cells)
    cell_facets, facets = number_facets(pieces)
    count = np.bincount(cell_facets.ravel())
    assert count.max() == 2
    assert np.count_nonzero(count == 1) == 2 * 2 * (3 * 4 + 4 * 5 + 3 * 5)
    volume = np.bincount(origin, weights=signed_measure(moved, pieces))
    assert np.allclose(volume, 1 / 60, rtol=1e-13)


def test_a_collapsed_hexahedron_is_a_wedge():
    points = np.array(SHAPES["wedge"], dtype=float)
    pieces, _ = split_cells("hexahedron", np.array([[0, 1, 2, 2, 3, 4, 5, 5]]))
    assert len(pieces) == 3
    assert signed_measure(points, pieces) == pytest.approx(1 / 6)


def test_plane_quads_take_the_better_diagonal():
    dart = np.array([[0, 0], [1, 0], [0.2, 0.2], [0, 1.0]])  # re-entrant at its third corner
    for first in range(4):  # which corner has the smallest number
        number = (np.arange(4) - first) % 4
        points = np.empty_like(dart)
        points[number] = dart
        pieces = plane_quads_to_triangles(points, number[None])
        assert signed_measure(points, pieces).min() > 0
        assert np.all(np.any(pieces == number[2], axis=1))
        assert signed_measure(points, plane_quads_to_triangles(points, number[None, ::-1])).max() < 0
