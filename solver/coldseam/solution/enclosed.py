"""Cavities whose surfaces exchange radiation with one another, and heat with the air between them.

A cavity's faces are gathered into patches (at most ``MOST_PATCHES``; few faces are each their own), of which the view
factors are found once a mesh. At a temperature field every patch has a net flux q; for the linear problem a face
meets an outside temperature ``t_e = t_s + q / h`` through ``h = R_ii 4 sigma T³ + h_air``, so that its heat flow is q.
The iteration of solution/nonlinear.py knows how all patches act on one another (``coupling``).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from coldseam.errors import CaseError, Fault
from coldseam.mesh.measure import facet_measure
from coldseam.mesh.types import Mesh
from coldseam.physics import viewfactors
from coldseam.physics.radiation import KELVIN, STEFAN_BOLTZMANN
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.model import Case

MOST_PATCHES = {2: 150, 3: 240}
SAMPLES = 6
"""Points of a patch that its view factors are averaged over in three dimensions."""
OPEN = 0.10
"""Row sums of view factors that miss 1 by more than this are an open cavity, not an inexact one."""


@dataclass(frozen=True, kw_only=True, eq=False)
class CavityModel:
    """One cavity on a mesh.

    Parameters
    ----------
    name
        Its name in the case.
    facets, patch
        Exterior facets and the patch of each, (n,).
    area
        Of the patches, m² (m²/m), (n_patches,).
    exchange
        R of :mod:`coldseam.physics.viewfactors`, (n_patches, n_patches).
    emissivity
        Of the patches, (n_patches,).
    film
        Between the surfaces and the air of the cavity, W/(m² K).
    surroundings
        What is seen through openings, °C; None for a closed cavity.
    defect
        Of closure, before it was enforced.
    spread, spread_facets
        Mean of a patch and of a facet from node temperatures, transposed, (n_nodes, n_patches) and (n_nodes, n).
    """

    name: str
    facets: np.ndarray
    patch: np.ndarray
    area: np.ndarray
    exchange: np.ndarray
    emissivity: np.ndarray
    film: float
    surroundings: float | None
    defect: float
    spread: sparse.csr_array
    spread_facets: sparse.csr_array

    def flux(self, temperature: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return radiative and convective flux into patches, W/m², and their film, W/(m² K); nodes in °C, (n,)."""
        t = self.spread.T @ temperature
        fourth = (t + KELVIN) ** 4 - (0.0 if self.surroundings is None else (self.surroundings + KELVIN) ** 4)
        radiative = -STEFAN_BOLTZMANN * (self.exchange @ fourth)
        air = float(self.area @ t / self.area.sum())
        own = 4.0 * STEFAN_BOLTZMANN * self.exchange.diagonal() * (t + KELVIN) ** 3 + self.film
        return radiative, self.film * (air - t), own

    def coupling(self, temperature: np.ndarray) -> np.ndarray:
        """Return ``-d(heat flow)/dt`` between patches, W/K, (n_patches,) squared, at node °C, (n_nodes,)."""
        steep = 4.0 * STEFAN_BOLTZMANN * (self.spread.T @ temperature + KELVIN) ** 3
        radiative = self.area[:, None] * self.exchange * steep
        air = np.diag(self.area) - np.outer(self.area, self.area) / self.area.sum()
        return radiative + self.film * air


def cavity_models(case: Case, mesh: Mesh, facet_boundary: np.ndarray) -> tuple[CavityModel, ...]:
    """Return the cavities of a case on a mesh; ``facet_boundary`` is the boundary of each facet, (n_facets,).

    Raises
    ------
    CaseError
        A cavity that is open and has no surroundings, hides a part of itself (in three dimensions), lies in an
        axisymmetric section, or has a surface without an emissivity.
    """
    return tuple(_model(case, mesh, facet_boundary, name) for name in case.cavities)


def _model(case: Case, mesh: Mesh, facet_boundary: np.ndarray, name: str) -> CavityModel:
    law = case.cavities[name]
    if mesh.axisymmetric:
        _refuse(
            name, "exchange between surfaces in an axisymmetric section is not computed; use a section in a plane or 3D"
        )
    members = [n for n, boundary in enumerate(case.boundary) if boundary.cavity == name]
    facets = np.flatnonzero(np.isin(facet_boundary, members))
    patch = _patches(mesh, facets, MOST_PATCHES[mesh.dim])
    measure = facet_measure(mesh)[facets]
    count = int(patch.max()) + 1
    area = np.bincount(patch, measure, count)
    emissivity = np.bincount(patch, measure * _emissivities(case, mesh, facet_boundary, facets), count) / area
    seen = (_sections if mesh.dim == 2 else _solids)(mesh, facets, patch, count, area, name)
    defect = float(np.abs(0.5 * (seen + seen.T).sum(axis=1) / area - 1.0).max())
    if law.surroundings is None:
        if defect > OPEN:
            _refuse(
                name,
                f"the surfaces of its boundaries do not close it: some see {1 - defect:.0%} of what is around "
                "them; take in all faces of the cavity, or say what is seen through the opening (surroundings = a "
                "temperature)",
            )
        factors = viewfactors.closed(seen, area).factors
    else:
        factors = 0.5 * (seen + seen.T) / area[:, None]
        factors /= np.maximum(factors.sum(axis=1), 1.0)[:, None]
    shares = facet_shares(mesh, mesh.facets[facets])
    nodes, own = mesh.facets[facets].ravel(), np.repeat(np.arange(len(facets)), mesh.dim)
    of_facet = sparse.coo_array(
        ((shares / measure[:, None]).ravel(), (nodes, own)), shape=(mesh.n_nodes, len(facets))
    ).tocsr()
    parts = sparse.coo_array((measure / area[patch], (np.arange(len(facets)), patch)), shape=(len(facets), count))
    return CavityModel(
        name=name,
        facets=facets,
        patch=patch,
        area=area,
        exchange=viewfactors.exchange_matrix(factors, emissivity),
        emissivity=emissivity,
        film=law.film or 0.0,
        surroundings=law.surroundings,
        defect=defect,
        spread=(of_facet @ parts).tocsr(),
        spread_facets=of_facet,
    )


def _refuse(name: str, what: str) -> None:
    raise CaseError([Fault(path=("cavities", name), what=what)])


def _emissivities(case: Case, mesh: Mesh, facet_boundary: np.ndarray, facets: np.ndarray) -> np.ndarray:
    """Return each facet's emissivity, (n,): its boundary's, else that of the material behind."""
    own = np.array([np.nan if b.emissivity is None else b.emissivity for b in case.boundary])[facet_boundary[facets]]
    of_body = np.array([np.nan if (e := case.materials[b.material].emissivity) is None else e for b in mesh.bodies])
    found = np.where(np.isnan(own), of_body[mesh.cell_body[mesh.facet_cell[facets]]], own)
    if np.isnan(found).any():
        number = int(facet_boundary[facets[np.isnan(found)][0]])
        what = "radiates in a cavity, but neither it nor the material behind it says with what emissivity"
        raise CaseError([Fault(path=("boundary", number, "emissivity"), what=what)])
    return found


def _patches(mesh: Mesh, facets: np.ndarray, most: int) -> np.ndarray:
    """Return the patch of every facet, (n,): each its own if few, else runs of neighbours on one face."""
    if len(facets) <= most:
        return np.arange(len(facets))
    faces, face = np.unique(mesh.facet_patch[facets], return_inverse=True)
    measure = facet_measure(mesh)[facets]
    whole = measure.sum()
    patch, used = np.empty(len(facets), dtype=np.int64), 0
    for number in range(len(faces)):  # over the geometric faces of a cavity
        own = np.flatnonzero(face == number)
        wanted = max(1, int(0.8 * most * measure[own].sum() / whole))
        patch[own] = used + _binned(mesh.points[mesh.facets[facets[own]]].mean(axis=1), wanted, mesh.dim)
        used = int(patch[own].max()) + 1
    return np.unique(patch, return_inverse=True)[1]


def _binned(centres: np.ndarray, wanted: int, dim: int) -> np.ndarray:
    """Return the bin of every centre, (n,), about ``wanted`` bins along the face's principal axes."""
    off = centres - centres.mean(axis=0)
    _, _, axes = np.linalg.svd(off, full_matrices=False)
    along = off @ axes[: dim - 1].T
    span = np.maximum(np.ptp(along, axis=0), 1e-12)
    side = (np.prod(span) / wanted) ** (1.0 / (dim - 1))
    count = np.maximum(np.round(span / side), 1).astype(int)
    cell = np.minimum((along - along.min(axis=0)) / span * count, count - 1e-9).astype(int)
    number = cell[:, 0] if dim == 2 else cell[:, 0] * count[1] + cell[:, 1]
    return np.unique(number, return_inverse=True)[1]


def _sections(mesh: Mesh, facets, patch, count, area, name) -> np.ndarray:
    """Return A F of the patches of a cross-section, (count, count); a patch is the line between its ends."""
    a, b = mesh.points[mesh.facets[facets, 0]], mesh.points[mesh.facets[facets, 1]]
    away = mesh.points[mesh.cells[mesh.facet_cell[facets]]].mean(axis=1) - a
    step = b - a
    turned = step[:, 0] * away[:, 1] - step[:, 1] * away[:, 0] < 0  # the solid must lie on the left
    a, b = np.where(turned[:, None], b, a), np.where(turned[:, None], a, b)
    direction = np.column_stack([np.bincount(patch, (b - a)[:, k], count) for k in (0, 1)])
    first = np.full(count, np.inf)
    last = np.full(count, -np.inf)
    low = np.einsum("nk,nk->n", a, direction[patch])
    high = np.einsum("nk,nk->n", b, direction[patch])
    np.minimum.at(first, patch, low)
    np.maximum.at(last, patch, high)
    starts, ends = np.empty((count, 2)), np.empty((count, 2))
    at_start, at_end = low <= first[patch] + 1e-15, high >= last[patch] - 1e-15
    starts[patch[at_start]], ends[patch[at_end]] = a[at_start], b[at_end]
    return viewfactors.crossed_strings(starts, ends)


def _solids(mesh: Mesh, facets, patch, count, area, name) -> np.ndarray:
    """Return A F of the patches of a convex cavity in three dimensions, (count, count)."""
    corners = mesh.points[mesh.facets[facets]]
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    centres = corners.mean(axis=1)
    inward = mesh.points[mesh.cells[mesh.facet_cell[facets]]].mean(axis=1) - centres
    normal *= -np.sign(np.einsum("nk,nk->n", normal, inward))[:, None]
    if not viewfactors.is_convex(centres, normal, mesh.points[np.unique(mesh.facets[facets])]):
        _refuse(
            name,
            "parts of its surface hide others, which is not computed in three dimensions; use a body with "
            "air_gap = true, or a cross-section",
        )
    measure = facet_measure(mesh)[facets]
    turned = np.einsum("nk,nk->n", np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]), normal) < 0
    corners[turned] = corners[turned][:, ::-1]
    chosen, weight = _samples(patch, measure, count)
    seen = np.zeros((count, count))
    gather = sparse.coo_array(
        (np.ones(len(facets)), (np.arange(len(facets)), patch)), shape=(len(facets), count)
    ).tocsr()
    rows = max(1, 200_000 // len(facets))
    for i in range(0, len(chosen), rows):  # chunks of points
        part = chosen[i : i + rows]
        factors = viewfactors.point_to_triangles(centres[part], normal[part], corners)
        np.add.at(seen, patch[part], weight[i : i + rows, None] * (factors @ gather))
    return seen * area[:, None]


def _samples(patch: np.ndarray, measure: np.ndarray, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Return facets whose centres stand for their patches, and their weights (that add up to 1 a patch)."""
    order = np.argsort(patch, kind="stable")
    size = np.bincount(patch, minlength=count)
    rank = np.arange(len(patch)) - np.repeat(np.cumsum(size) - size, size)
    stride = np.maximum(size // SAMPLES, 1)[patch[order]]
    chosen = order[rank % stride == 0]
    return chosen, measure[chosen] / np.bincount(patch[chosen], measure[chosen], count)[patch[chosen]]
