"""Small hand-made meshes and stand-ins for cases."""

from types import SimpleNamespace

import numpy as np
import pytest

from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import MeshBody

PARTS = ("plane", "within", "body", "facing", "shell", "group")


def grid_points(*axes):
    """Nodes of a brick grid, the last axis fastest, shape (n, dim)."""
    return np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(axes))


def grid_blocks(*counts):
    """Corner nodes of the grid's quads or hexahedra in the usual (VTK) order, shape (n_blocks, 2**dim)."""
    shape = [n + 1 for n in counts]
    number = np.arange(np.prod(shape)).reshape(shape)
    if len(counts) == 2:
        order = [(0, 0), (1, 0), (1, 1), (0, 1)]
        pieces = [number[i : i + counts[0], j : j + counts[1]] for i, j in order]
    else:
        order = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)]
        pieces = [number[i : i + counts[0], j : j + counts[1], k : k + counts[2]] for i, j, k in order]
    return np.stack([piece.ravel() for piece in pieces], axis=1)


def grid_simplices(*counts):
    """Triangles (2 a quad) or tetrahedra (6 a block, round the diagonal 0-6), shape (n, dim + 1)."""
    block = grid_blocks(*counts)
    if len(counts) == 2:
        split = np.array([[0, 1, 2], [0, 2, 3]])
    else:
        ring = [1, 2, 3, 7, 4, 5]
        split = np.array([[0, ring[i], ring[(i + 1) % 6], 6] for i in range(6)])
    return block[:, split].reshape(-1, len(counts) + 1)


def make_grid(*axes, body=None, drop=None, bodies=("foam",), patches="sides", **options):
    """Simplex mesh of a brick grid.

    ``body(centres) -> index``, ``drop(centres) -> bool`` take cells out, ``patches``: "sides" (faces by
    normal and plane) or None (each facet its own).
    """
    axes = [np.asarray(axis, dtype=float) for axis in axes]
    points, cells = grid_points(*axes), grid_simplices(*[len(axis) - 1 for axis in axes])
    centre = points[cells].mean(axis=1)
    if drop is not None:
        cells = cells[~drop(centre)]
        used, cells = np.unique(cells, return_inverse=True)
        points, cells = points[used], cells.reshape(-1, len(axes) + 1)
        centre = points[cells].mean(axis=1)
    cell_body = np.zeros(len(cells), dtype=int) if body is None else body(centre).astype(int)
    named = tuple(MeshBody(name=name, material=name, source=i) for i, name in enumerate(bodies))
    mesh = build_mesh(points, cells, cell_body, named, **options)
    if patches is None:
        return mesh
    from coldseam.mesh.measure import facet_normals

    normal = facet_normals(mesh)
    place = np.einsum("ij,ij->i", normal, mesh.points[mesh.facets[:, 0]])
    of_body = mesh.cell_body[mesh.facet_cell][:, None]
    key = np.round(np.hstack([normal, place[:, None], of_body]), 9)
    _, patch = np.unique(key, axis=0, return_inverse=True)
    return build_mesh(points, cells, cell_body, named, patch_facets=mesh.facets, patch_of=patch.ravel(), **options)


def selector(**parts):
    if "within" in parts:
        parts["within"] = SimpleNamespace(start=parts["within"][0], end=parts["within"][1])
    return SimpleNamespace(**{**dict.fromkeys(PARTS), **parts})


def case_of(**boundaries):
    """A case with boundaries ``name=dict of selector parts`` or ``name="rest"``."""
    made = [
        SimpleNamespace(name=name, on=on if isinstance(on, str) else selector(**on)) for name, on in boundaries.items()
    ]
    return SimpleNamespace(boundary=tuple(made))


@pytest.fixture
def grid():
    return make_grid


@pytest.fixture
def blocks():
    return SimpleNamespace(points=grid_points, cells=grid_blocks, simplices=grid_simplices)


@pytest.fixture
def picker():
    return selector


@pytest.fixture
def bounded():
    return case_of
