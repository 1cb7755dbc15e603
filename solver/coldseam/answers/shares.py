"""A heat flow as the sum of what every body, film, sheet and contact contributes.

With u the unit field of the points that a flow Q is read at (a outside, u inside) and T the field of the
state (x outside), the flow is a bilinear form of the two (volumes/network.py),

    Q = sum over cells  k grad u . grad T |c|  +  sum over films  h A_i (a - u_i) (x - T_i)
        + like terms of sheets and contacts  -  sum_i b_i u_i,

the last term being the heat released in bodies and on faces, b, that finds its way to the point. For two
spaces without sources grad u is grad T / (T_a - T_b): the terms are Q times each part's share of the energy
``k |grad T|²``. Each term is also d Q / d ln k of its part, exactly, since u and T make the form
stationary (the envelope theorem): what belongs to a part and what the flow would react to are one number.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.mesh.boundaries import select
from coldseam.mesh.contacts import interface_facets
from coldseam.mesh.types import Mesh
from coldseam.solution.steady import Steady
from coldseam.volumes.conditions import body_mask
from coldseam.volumes.operator import cell_pairs
from coldseam.volumes.section import cell_radius, facet_shares, node_shares_of_cells
from coldseam.volumes.sheets import sheet_pairs, sheet_weights

if TYPE_CHECKING:
    from coldseam.case.model import Case


@dataclass(frozen=True, kw_only=True, eq=False)
class Shares:
    """The terms of one heat flow, W (2D: W/m).

    Parameters
    ----------
    body
        Of every body of the mesh, (n_bodies,).
    film
        Of the film of every boundary, (n_boundaries,).
    sheet, contact
        Of every sheet and contact of the case, (n_sheets,), (n_contacts,).
    released, given
        Heat released in every body, (n_bodies,), and given on every boundary, (n_boundaries,), that ends here, as a
        heat flow into the solid: negative for a source.
    """

    body: np.ndarray
    film: np.ndarray
    sheet: np.ndarray
    contact: np.ndarray
    released: np.ndarray
    given: np.ndarray

    @property
    def total(self) -> float:
        """Their sum: the heat flow, W (2D: W/m)."""
        parts = (self.body, self.film, self.sheet, self.contact, self.released, self.given)
        return float(sum(part.sum() for part in parts))


def shares_of(steady: Steady, terminals: list[int]) -> Shares:
    """Return the terms of the heat flow from some terminals into the solid.

    Parameters
    ----------
    steady
        The solved case.
    terminals
        Positions of the terminals whose flows are summed.
    """
    reading = np.zeros(len(steady.state))
    reading[terminals] = 1.0
    unit, field = steady.response.fields @ reading, steady.temperature - steady.reference
    mesh = steady.mesh
    return Shares(
        body=np.bincount(mesh.cell_body, _cells(steady, unit, field), len(mesh.bodies)),
        film=_films(steady, unit, field, reading),
        sheet=_sheets(steady, unit, field),
        contact=_contacts(steady, unit, field),
        released=np.array([-float(node_shares_of_cells(mesh, heat) @ unit) for heat in _sources(steady)]),
        given=_given(steady, unit),
    )


def _sources(steady: Steady) -> list[np.ndarray]:
    """Return the heat per volume of every body's cells, W/m³, (n_cells,) each."""
    of_body = steady.mesh.cell_body[None] == np.arange(len(steady.mesh.bodies))[:, None]
    return list(np.where(of_body, steady.given.source, 0.0))


def _given(steady: Steady, unit: np.ndarray) -> np.ndarray:
    mesh = steady.mesh
    part = (facet_shares(mesh, mesh.facets) * unit[mesh.facets]).sum(axis=1) * steady.given.flux
    return -np.bincount(steady.facet_boundary, part, len(steady.case.boundary))


def _cells(steady: Steady, unit: np.ndarray, field: np.ndarray) -> np.ndarray:
    mesh, pairs = steady.mesh, cell_pairs(steady.mesh.dim)
    radius = cell_radius(mesh)
    k = steady.given.conductivity * (1.0 if radius is None else radius)
    return (k * steady.weights * _falls(unit, mesh.cells, pairs) * _falls(field, mesh.cells, pairs)).sum(axis=0)


def _falls(values: np.ndarray, sets: np.ndarray, pairs: np.ndarray) -> np.ndarray:
    at = values[sets]
    return (at[:, pairs[:, 0]] - at[:, pairs[:, 1]]).T


def _films(steady: Steady, unit, field, reading) -> np.ndarray:
    given, mesh = steady.given, steady.mesh
    films = np.flatnonzero(given.film > 0)
    nodes, outside = mesh.facets[films], given.terminal[films]
    strength = facet_shares(mesh, nodes) * given.film[films, None]
    part = strength * (reading[outside, None] - unit[nodes]) * (steady.state[outside, None] - field[nodes])
    return np.bincount(steady.facet_boundary[films], part.sum(axis=1), len(steady.case.boundary))


def _sheets(steady: Steady, unit, field) -> np.ndarray:
    given, mesh = steady.given, steady.mesh
    if not len(given.sheet_facets):
        return np.zeros(len(steady.case.sheet))
    weights, pairs = sheet_weights(mesh, given.sheet_facets, given.sheet_conductance), sheet_pairs(mesh.dim)
    part = weights * _falls(unit, given.sheet_facets, pairs) * _falls(field, given.sheet_facets, pairs)
    owner = np.repeat(np.arange(len(steady.case.sheet)), sheet_sizes(steady.case, mesh))
    return np.bincount(owner, part.sum(axis=0), len(steady.case.sheet))


def sheet_sizes(case: Case, mesh: Mesh) -> list[int]:
    """Return how many facets of the mesh each sheet of the case covers."""
    sizes = []
    for sheet in case.sheet:
        if sheet.between is None:
            sizes.append(int(select(sheet.on, mesh).sum()))
        else:
            first, second = (body_mask(case, mesh, name) for name in sheet.between)
            sizes.append(len(interface_facets(mesh, first, second)[0]))
    return sizes


def _contacts(steady: Steady, unit, field) -> np.ndarray:
    mesh, count = steady.mesh, len(steady.case.contact)
    if mesh.links is None or not len(mesh.links):
        return np.zeros(count)
    strength = facet_shares(mesh, mesh.links[:, 0]) * steady.given.link_conductance[:, None]
    jumps = [values[mesh.links[:, 0]] - values[mesh.links[:, 1]] for values in (unit, field)]
    return np.bincount(mesh.link_contact, (strength * jumps[0] * jumps[1]).sum(axis=1), count)
