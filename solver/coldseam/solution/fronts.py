"""Where the front of melting stands in a body: the surface on which half of the latent heat is melted.

Nodes carry the melted part f of their latent heat; f is linear in every cell, so that the surface f = 1/2 is one flat
piece in each cell that it crosses: a segment of a triangle, a triangle or a quadrangle of a tetrahedron. As a node melts, f
goes from 0 to 1 and the surface moves on steadily from the middle before the node to the middle after it.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np

from coldseam.mesh.types import Mesh
from coldseam.physics.melting import HeatContent
from coldseam.volumes.section import TURN


@dataclass(frozen=True, kw_only=True)
class Front:
    """The front in one body.

    Parameters
    ----------
    area
        m²; in a cross-section m²/m, in an axisymmetric one of the whole turn.
    low, high
        Least and largest coordinates on it, m, (dim,).
    mean
        Its centre of area, m, (dim,).
    """

    area: float
    low: np.ndarray
    high: np.ndarray
    mean: np.ndarray


class Fronts:
    """Reads fronts from node temperatures.

    Parameters
    ----------
    mesh
        The mesh that the heat content was made for.
    phase
        Heat content of its nodes.
    """

    def __init__(self, mesh: Mesh, phase: HeatContent):
        self.mesh, self.phase = mesh, phase
        numbers = {body.name: n for n, body in enumerate(mesh.bodies)}
        self.cells = [mesh.cells[mesh.cell_body == numbers[name]] for name in phase.names]

    def extents(self, temperature: np.ndarray) -> np.ndarray:
        """Return the least, then the largest coordinates of every body's front, m, (n_bodies, 2, dim); NaN without one."""
        found = np.full((len(self.cells), 2, self.mesh.dim), np.nan)
        for n, part in enumerate(self.phase.parts(temperature)):
            points, crossed = self._crossings(self.cells[n], part)
            if crossed.any():
                found[n] = points[crossed].min(axis=0), points[crossed].max(axis=0)
        return found

    def at(self, temperature: np.ndarray) -> list[Front | None]:
        """Return the front of every melting body at node temperatures (°C, (n_nodes,)); None where it has none."""
        found: list[Front | None] = []
        for n, part in enumerate(self.phase.parts(temperature)):
            points, crossed = self._crossings(self.cells[n], part)
            found.append(self._front(points, crossed) if crossed.any() else None)
        return found

    def _crossings(self, cells: np.ndarray, part: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return where f = 1/2 crosses the edges of the cells it passes through, (m, n_edges, dim), and which it crosses."""
        molten = part[cells] >= 0.5
        cells = cells[molten.any(axis=1) & ~molten.all(axis=1)]
        first, second = np.array(list(combinations(range(self.mesh.dim + 1), 2))).T
        begin, end = part[cells[:, first]], part[cells[:, second]]
        crossed = (begin >= 0.5) != (end >= 0.5)
        share = (0.5 - begin) / np.where(crossed, end - begin, 1.0)
        points = self.mesh.points
        return points[cells[:, first]] + share[..., None] * (
            points[cells[:, second]] - points[cells[:, first]]
        ), crossed

    def _front(self, points: np.ndarray, crossed: np.ndarray) -> Front:
        """Return the front made of the pieces between crossing points."""
        order = np.argsort(~crossed, axis=1, kind="stable")[:, : 2 if self.mesh.dim == 2 else 4]
        corners = np.take_along_axis(points, order[..., None], axis=1)
        if self.mesh.dim == 2:
            area = np.linalg.norm(corners[:, 1] - corners[:, 0], axis=1)
            middle = corners.mean(axis=1)
            if self.mesh.axisymmetric:
                area = area * TURN * middle[:, 0]
        else:  # of four crossings in the order of the edges, the last two lie crosswise
            pieces = np.concatenate([corners[:, [0, 1, 2]], corners[crossed.sum(axis=1) == 4][:, [3, 1, 2]]])
            sides = pieces[:, 1:] - pieces[:, :1]
            area = 0.5 * np.linalg.norm(np.cross(sides[:, 0], sides[:, 1]), axis=1)
            middle = pieces.mean(axis=1)
        whole = float(area.sum())
        mean = middle.mean(axis=0) if whole == 0.0 else area @ middle / whole
        on = points[crossed]
        return Front(area=whole, low=on.min(axis=0), high=on.max(axis=0), mean=mean)
