"""The mesh that travels: frozen arrays of simplices with the names of bodies and faces.

Lengths are metres. ``dim`` is 2 (triangles) or 3 (tetrahedra). In an axisymmetric section the
first coordinate is the radius and the second the axis.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np


@dataclass(frozen=True, kw_only=True)
class MeshBody:
    """One named body of a mesh.

    Parameters
    ----------
    name
        The name in answers: that of the case's body, or ``"body/part"`` for the layers of an
        enclosure and the solids of an imported file.
    material
        Key in the case's ``materials``.
    source
        Position of the ``[[body]]`` entry in the case that it came from.
    """

    name: str
    material: str
    source: int


@dataclass(frozen=True, kw_only=True, eq=False)
class Mesh:
    """A conforming simplex mesh; arrays are read-only.

    Parameters
    ----------
    points
        Node positions, m, shape (n_nodes, dim).
    cells
        Nodes of every simplex, positively oriented, shape (n_cells, dim + 1).
    cell_body
        Index into ``bodies``, shape (n_cells,).
    bodies
        The named bodies.
    facets
        Exterior facets (dim nodes each), outward oriented, shape (n_facets, dim). The axis of an
        axisymmetric section is not among them.
    facet_cell
        The cell behind each exterior facet, shape (n_facets,).
    facet_patch
        Number of the geometric face (an indivisible patch for selectors), shape (n_facets,).
    patch_groups
        For every patch the names (of imported groups) it carries; selectors use them.
    axisymmetric
        True when the points are (r, z).
    links
        Pairs of facets on the two sides of contacts, shape (n_links, 2, dim), nodes matching.
    link_contact
        Position of the ``[[contact]]`` of each link, shape (n_links,).
    """

    points: np.ndarray
    cells: np.ndarray
    cell_body: np.ndarray
    bodies: tuple[MeshBody, ...]
    facets: np.ndarray
    facet_cell: np.ndarray
    facet_patch: np.ndarray
    patch_groups: tuple[frozenset[str], ...] = ()
    axisymmetric: bool = False
    links: np.ndarray | None = None
    link_contact: np.ndarray | None = None
    quality: dict = field(default_factory=dict)

    def __post_init__(self):
        for name in ("points", "cells", "cell_body", "facets", "facet_cell", "facet_patch", "links", "link_contact"):
            array = getattr(self, name)
            if array is not None:
                array.flags.writeable = False

    @property
    def dim(self) -> int:
        """Number of space dimensions, 2 or 3."""
        return self.points.shape[1]

    @property
    def n_nodes(self) -> int:
        """Number of nodes."""
        return len(self.points)

    @property
    def n_cells(self) -> int:
        """Number of simplices."""
        return len(self.cells)

    @property
    def size(self) -> float:
        """Diagonal of the bounding box, m."""
        return float(np.linalg.norm(np.ptp(self.points, axis=0)))


@dataclass(frozen=True, kw_only=True, eq=False)
class SizeField:
    """Wanted element size (m) at the nodes of an earlier mesh, shape (n_nodes,)."""

    mesh: Mesh
    size: np.ndarray
