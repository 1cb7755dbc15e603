"""What acts on a mesh, as arrays: conductivities, sources, films, fixed temperatures, sheets, contacts.

A *terminal* is a point of the heat network outside the solid: the far side of one film boundary, or
one group of fixed-temperature faces that touch at equal temperature. Boundaries, not spaces, are
the terminals, so that each boundary's heat flow has an interval of its own; spaces are sums of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.films import TYPICAL_RADIATION, exchange
from coldseam.errors import CaseError, Fault
from coldseam.mesh.contacts import interface_facets
from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.mesh.types import Mesh

if TYPE_CHECKING:
    from coldseam.case.model import Case


UNEVEN = 30.0
"""Ratio of conductivities from which they are called uneven."""


@dataclass(frozen=True, kw_only=True)
class Terminal:
    """One outside point of the heat network.

    Parameters
    ----------
    boundaries
        Positions of the case's boundaries that end here.
    temperature
        °C.
    fixed
        True where the surface itself has this temperature.
    """

    boundaries: tuple[int, ...]
    temperature: float
    fixed: bool


@dataclass(frozen=True, kw_only=True, eq=False)
class Conditions:
    """Everything the networks are built from.

    Parameters
    ----------
    conductivity
        Scalar conductivity of every cell, W/(m K), shape (n_cells,).
    tensors
        Unit conductivity tensor of every body, (n_bodies, dim, dim), or None when all are isotropic; of every cell,
        (n_cells, dim, dim), where laws over temperature change it.
    source
        Heat per volume of every cell, W/m³, shape (n_cells,).
    film
        Film coefficient of every exterior facet, W/(m² K), 0 where none, shape (n_facets,).
    flux
        Prescribed heat flux into the solid, W/m², shape (n_facets,).
    terminal
        Terminal of every exterior facet, -1 where none, shape (n_facets,).
    terminals
        The terminals.
    sheet_facets, sheet_conductance, sheet_number
        Facets that carry a sheet, (n, dim), conductivity times thickness, W/K, (n,), and which ``[[sheet]]``, (n,).
    link_conductance
        Conductance of the contact at every link, W/(m² K), shape (n_links,).
    clashes
        Pairs of terminals that touch at different fixed temperatures: the flow there is unbounded.
    turned
        Whether tensors are of cells.
    """

    conductivity: np.ndarray
    tensors: np.ndarray | None
    source: np.ndarray
    film: np.ndarray
    flux: np.ndarray
    terminal: np.ndarray
    terminals: tuple[Terminal, ...]
    sheet_facets: np.ndarray
    sheet_conductance: np.ndarray
    link_conductance: np.ndarray
    clashes: tuple[tuple[int, int], ...]
    sheet_number: np.ndarray | None = None
    turned: bool = False

    def tensor_of(self, mesh: Mesh) -> np.ndarray:
        """Return which of the tensors every cell has, (n_cells,)."""
        return np.arange(mesh.n_cells) if self.turned else mesh.cell_body

    @property
    def uneven(self) -> bool:
        """Whether conductivities differ so widely that it matters to an iteration."""
        return len(self.sheet_facets) > 0 or bool(self.conductivity.max() > UNEVEN * self.conductivity.min())

    @property
    def has_sources(self) -> bool:
        """Whether heat enters other than through terminals."""
        return bool(np.any(self.source) or np.any(self.flux))


def conditions(case: Case, mesh: Mesh, facet_boundary: np.ndarray) -> Conditions:
    """Return the conditions of a case on a mesh.

    Parameters
    ----------
    case
        The case.
    mesh
        Its mesh, contacts opened.
    facet_boundary
        Position of the boundary that claims each exterior facet, shape (n_facets,).

    Raises
    ------
    CaseError
        A sheet that lies nowhere, or no boundary that sets a temperature.
    """
    conductivity, tensors = _conductivities(case, mesh)
    terminals, of_boundary, clashes = _terminals(case, mesh, facet_boundary)
    if not terminals:
        raise CaseError(
            [
                Fault(
                    path=("boundary",),
                    what="no boundary sets a temperature; at least one must face a space or have a temperature",
                )
            ]
        )
    film = np.array([boundary_film(case, b) for b in case.boundary])
    sheet_facets, sheet_conductance, sheet_number = _sheets(case, mesh)
    resistance = np.array([c.resistance for c in case.contact])
    return Conditions(
        conductivity=conductivity,
        tensors=tensors,
        source=_sources(case, mesh),
        film=np.where(np.isfinite(film), film, 0.0)[facet_boundary],
        flux=_fluxes(case, mesh, facet_boundary),
        terminal=of_boundary[facet_boundary],
        terminals=terminals,
        sheet_facets=sheet_facets,
        sheet_conductance=sheet_conductance,
        link_conductance=np.empty(0) if mesh.links is None else 1.0 / resistance[mesh.link_contact],
        clashes=clashes,
        sheet_number=sheet_number,
    )


def boundary_film(case: Case, boundary) -> float:
    """Return a boundary's film coefficient, W/(m² K): inf for a fixed surface, 0 where heat is given.

    Where laws make it (convection by name, radiation), the one to start from; the answer's is in the conditions.
    """
    if boundary.temperature is not None:
        return np.inf
    if boundary.cavity is not None:
        return TYPICAL_RADIATION
    if boundary.space is None:
        return 0.0
    return exchange(case.spaces[boundary.space], boundary).start


def boundary_temperature(case: Case, boundary) -> float | None:
    """Return the temperature (°C) a boundary exchanges with, None where heat is given instead."""
    if boundary.temperature is not None:
        return boundary.temperature
    if boundary.cavity is not None:  # to start from: the mean of what is known
        known = [b.temperature for b in case.boundary if b.temperature is not None]
        known += [case.spaces[b.space].temperature for b in case.boundary if b.space is not None]
        return sum(known) / len(known)
    return None if boundary.space is None else case.spaces[boundary.space].temperature


def _conductivities(case: Case, mesh: Mesh) -> tuple[np.ndarray, np.ndarray | None]:
    tensors, scalars = np.empty((len(mesh.bodies), mesh.dim, mesh.dim)), np.empty(len(mesh.bodies))
    isotropic = True
    for number, body in enumerate(mesh.bodies):
        value = case.materials[body.material].tensor(mesh.dim)
        if np.ndim(value) == 0:
            scalars[number], tensors[number] = value, np.eye(mesh.dim)
        else:
            scalars[number] = np.trace(value) / mesh.dim
            tensors[number] = value / scalars[number]
            isotropic = False
    return scalars[mesh.cell_body], None if isotropic else tensors


def _sources(case: Case, mesh: Mesh) -> np.ndarray:
    """Spread W in the whole ``[[body]]`` (all its parts and repeats) evenly over its meshed volume."""
    source_of = np.array([body.source for body in mesh.bodies])[mesh.cell_body]
    volume = np.bincount(source_of, cell_measure(mesh), len(case.body))
    density = np.zeros(len(case.body))
    for number, body in enumerate(case.body):
        if body.heat_density is not None:
            density[number] = body.heat_density
        elif body.heat_source is not None and volume[number] > 0:
            density[number] = body.heat_source / volume[number]
    return density[source_of]


def _fluxes(case: Case, mesh: Mesh, facet_boundary: np.ndarray) -> np.ndarray:
    area = np.bincount(facet_boundary, facet_measure(mesh), len(case.boundary))
    flux = np.zeros(len(case.boundary))
    for number, boundary in enumerate(case.boundary):
        if boundary.heat_flux is not None:
            flux[number] = boundary.heat_flux
        elif boundary.heat_flow is not None:
            flux[number] = boundary.heat_flow / area[number]
    return flux[facet_boundary]


def _terminals(case: Case, mesh: Mesh, facet_boundary: np.ndarray):
    """Return the terminals, the terminal of each boundary (-1: none) and the clashing pairs."""
    fixed = [n for n, b in enumerate(case.boundary) if np.isinf(boundary_film(case, b))]
    nodes = {n: np.unique(mesh.facets[facet_boundary == n]) for n in fixed}
    group = {n: n for n in fixed}
    touching = []
    for position, a in enumerate(fixed):
        for b in fixed[position + 1 :]:
            if np.intersect1d(nodes[a], nodes[b], assume_unique=True).size:
                touching.append((a, b))
                if boundary_temperature(case, case.boundary[a]) == boundary_temperature(case, case.boundary[b]):
                    old, new = group[b], group[a]
                    group = {n: new if g == old else g for n, g in group.items()}

    terminals, of_boundary, number_of = [], np.full(len(case.boundary), -1), {}
    for n, boundary in enumerate(case.boundary):
        temperature = boundary_temperature(case, boundary)
        if temperature is None:
            continue
        key = ("fixed", group[n]) if n in group else ("film", n)
        if key not in number_of:
            number_of[key] = len(terminals)
            terminals.append(Terminal(boundaries=(), temperature=temperature, fixed=n in group))
        number = of_boundary[n] = number_of[key]
        old = terminals[number]
        terminals[number] = Terminal(boundaries=(*old.boundaries, n), temperature=temperature, fixed=old.fixed)
    clashes = {
        tuple(sorted((int(of_boundary[a]), int(of_boundary[b]))))
        for a, b in touching
        if of_boundary[a] != of_boundary[b]
    }
    return tuple(terminals), of_boundary, tuple(sorted(clashes))


def body_mask(case: Case, mesh: Mesh, name: str) -> np.ndarray:
    """Return which mesh bodies a name of the case means: itself or all of its parts, shape (n_bodies,)."""
    return np.array([body.name == name or body.name.startswith(f"{name}/") for body in mesh.bodies])


def _sheets(case: Case, mesh: Mesh) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    from coldseam.mesh.boundaries import select

    facets, conductance = [np.empty((0, mesh.dim), dtype=np.int64)], [np.empty(0)]
    for number, sheet in enumerate(case.sheet):
        if sheet.between is not None:
            first, second = (body_mask(case, mesh, name) for name in sheet.between)
            found = interface_facets(mesh, first, second)[0]
        else:
            found = mesh.facets[select(sheet.on, mesh)]
        if len(found) == 0:
            raise CaseError(
                [
                    Fault(
                        path=("sheet", number),
                        what=f'the sheet "{sheet.name}" lies on no face; choose faces that exist',
                    )
                ]
            )
        k = case.materials[sheet.material].tensor(mesh.dim)
        if np.ndim(k) > 0:
            raise CaseError(
                [Fault(path=("sheet", number, "material"), what="a sheet needs a material with one conductivity")]
            )
        facets.append(found)
        conductance.append(np.full(len(found), k * sheet.thickness))
    number = np.repeat(np.arange(len(case.sheet)), [len(found) for found in facets[1:]])
    return np.vstack(facets), np.concatenate(conductance), number
