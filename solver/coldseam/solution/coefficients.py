"""Conditions of a case at a given temperature field: what depends on the answer, frozen.

The networks (volumes/) are linear: conductivities, films and outside temperatures are numbers. Here they are
evaluated from a field, so that the linear network has this field's heat flows exactly (the *secant* form):

- a cell's conductivity is the mean of k over its temperatures, each edge's mean weighted by the square of its
  temperature step: along a straight bar Kirchhoff's transformation, so the flow does not depend on the mesh;
- convection: one film for a boundary, from its mean surface temperature;
- radiation: one film for each facet, ``h_r (t_r - t_s) = emissivity sigma (T_r^4 - T_s^4)``;
- all that a boundary meets (air, surroundings, sky, sun) is one outside temperature t_e, with
  ``h (t_e - t_s) = h_c (t_air - t_s) + h_r (t_r - t_s) + absorbed sun``. Where it differs from facet to facet, because
  h_r does, t_e is the mean and a heat flux makes up the rest. The mean is weighted by h, so these fluxes add up to
  nothing over a boundary, and its heat flow is read from its film alone.

``excess`` is by how much ``-dq/dt_s`` is above the secant film: with it added, the iteration of solution/nonlinear.py
is Newton's at the boundaries. The mean surface temperature is treated there as if it were each facet's own,
which couples nothing and so leaves the matrix as sparse and symmetric as it is.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.case.films import ATMOSPHERE, Exchange, exchange
from coldseam.case.laws import ConductivityLaw
from coldseam.case.schedules import constant
from coldseam.errors import CaseError, Fault
from coldseam.mesh.types import Mesh
from coldseam.physics import convection, fluids, laws, radiation
from coldseam.solution.enclosed import CavityModel, cavity_models
from coldseam.solution.gaps import Gaps, air_gaps
from coldseam.volumes.conditions import Conditions, Terminal, conditions
from coldseam.volumes.operator import cell_pairs
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.model import Boundary, Case, Material

LEAST_FILM = 1e-9
"""W/(m² K): keeps a boundary that exchanges nothing (emissivity 0) in the network."""
SAME = 1e-9
"""K: outside temperatures that differ by less are one."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Coefficients:
    """Conditions at a temperature field.

    Parameters
    ----------
    given
        The conditions, in secant form.
    excess
        ``-dq/dt_s`` less the film, of every exterior facet, W/(m² K), (n_facets,).
    films, gaps
        What was used at each boundary with laws and in each air gap, by name, for the answers.
    coupled
        The cavities, each with how its patches act on one another, W/K.
    """

    given: Conditions
    excess: np.ndarray
    films: dict[str, dict[str, Any]]
    gaps: dict[str, dict[str, Any]] = dataclasses.field(default_factory=dict)
    coupled: tuple[tuple[CavityModel, np.ndarray], ...] = ()


def depends(case: Case) -> bool:
    """Return whether anything in a case depends on the answer's temperatures."""
    return (
        any(m.laws for m in case.materials.values())
        or bool(case.cavities)
        or any(body.air_gap is not None for body in case.body)
        or any(found.depends for _, found in exchanges(case))
    )


def exchanges(case: Case) -> list[tuple[Boundary, Exchange]]:
    """Return every boundary that faces a space, with what it exchanges heat by."""
    return [(b, exchange(case.spaces[b.space], b)) for b in case.boundary if b.space is not None]


def frozen_conditions(
    case: Case,
    mesh: Mesh,
    facet_boundary: np.ndarray,
    temperature: np.ndarray,
    outside: Mapping[str, float] | None = None,
    cavities: tuple[CavityModel, ...] | None = None,
) -> Conditions:
    """Return the conditions of a case at a temperature field, as a linear problem with the same heat flows.

    Parameters
    ----------
    case
        The case.
    mesh, facet_boundary
        Its mesh, contacts opened, and the boundary of each exterior facet, (n_facets,).
    temperature
        At the nodes, °C, (n_nodes,).
    outside
        Temperatures of spaces, °C, by name, in place of those of the case.
    cavities
        From :func:`coldseam.solution.enclosed.cavity_models`, found anew (which costs time) if not given.

    Raises
    ------
    CaseError
        As :func:`coldseam.volumes.conditions.conditions`, and a surface that radiates without an emissivity.
    """
    base = conditions(case, mesh, facet_boundary)
    models = cavity_models(case, mesh, facet_boundary) if cavities is None else cavities
    return evaluate(case, mesh, facet_boundary, base, temperature, outside, models).given


def evaluate(
    case: Case,
    mesh: Mesh,
    facet_boundary: np.ndarray,
    base: Conditions,
    temperature: np.ndarray,
    outside: Mapping[str, float] | None = None,
    cavities: tuple[CavityModel, ...] = (),
) -> Coefficients:
    """Return conditions and slopes at a temperature field.

    Parameters
    ----------
    case, mesh, facet_boundary, temperature, outside, cavities
        As for :func:`frozen_conditions`: shapes (n_facets,) and (n_nodes,), °C.
    base
        What does not depend on the field, from :func:`coldseam.volumes.conditions.conditions`.

    Raises
    ------
    CaseError
        A surface that radiates without an emissivity.
    """
    air = {name: space.temperature for name, space in case.spaces.items()} | dict(outside or {})
    film, flux, excess = base.film.copy(), base.flux.copy(), np.zeros(len(base.film))
    temperatures = [_outside(case, terminal, air) for terminal in base.terminals]
    films: dict[str, dict[str, Any]] = {}
    for number, boundary in enumerate(case.boundary):
        found = None if boundary.space is None else exchange(case.spaces[boundary.space], boundary)
        facets = np.flatnonzero(facet_boundary == number)
        if found is None or boundary.space is None or not found.depends or not len(facets):
            continue
        part = _surface(case, mesh, boundary, found, facets, temperature, air[boundary.space])
        film[facets], excess[facets] = part.film, part.excess
        flux[facets] = base.flux[facets] + part.film * (part.outside - part.mean_outside)
        temperatures[base.terminal[facets[0]]] = part.mean_outside
        films[boundary.name] = part.used
    for model in cavities:
        _enclosed(case, mesh, facet_boundary, model, temperature, (film, flux, temperatures, films), base)
    terminals = tuple(
        dataclasses.replace(terminal, temperature=t) for terminal, t in zip(base.terminals, temperatures, strict=True)
    )
    gaps = air_gaps(case, mesh, temperature)
    conductivity, tensors = _conductivity(case, mesh, base, temperature, gaps)
    given = dataclasses.replace(
        base,
        conductivity=conductivity,
        tensors=base.tensors if tensors is None else tensors,
        turned=tensors is not None,
        film=film,
        flux=flux,
        terminals=terminals,
        sheet_conductance=_sheet_conductance(case, base, temperature),
    )
    told = {mesh.bodies[number].name: told for number, (_, told) in gaps.items()}
    coupled = tuple((model, model.coupling(temperature)) for model in cavities)
    return Coefficients(given=given, excess=excess, films=films, gaps=told, coupled=coupled)


def facing_air(
    case: Case, given: Conditions, air: Mapping[str, float], cavities: tuple[Terminal, ...] | None = None
) -> Conditions:
    """Return the same conditions with the air's temperatures outside, and what comes from elsewhere as heat fluxes.

    Parameters
    ----------
    case, given
        The case, and conditions of it from :func:`evaluate`.
    air
        Temperature of every space, °C, by name.
    cavities
        Terminals whose temperatures the walls of cavities are to meet, as the air's; None leaves them.
    """
    flux, terminals = given.flux.copy(), list(given.terminals)
    for number, terminal in enumerate(given.terminals):
        boundary = case.boundary[terminal.boundaries[0]]
        if boundary.space is not None:
            known = air[boundary.space]
        elif boundary.cavity is not None and cavities is not None:
            known = cavities[number].temperature
        else:
            continue
        facets = (given.terminal == number) & (given.film > 0)
        flux[facets] += given.film[facets] * (terminal.temperature - known)
        terminals[number] = dataclasses.replace(terminal, temperature=known)
    return dataclasses.replace(given, flux=flux, terminals=tuple(terminals))


def _enclosed(case: Case, mesh: Mesh, facet_boundary: np.ndarray, model: CavityModel, temperature, into, base) -> None:
    """Write films, fluxes, outside temperatures and what is told of a cavity's boundaries into their places."""
    film, flux, temperatures, films = into
    radiative, convective, own = model.flux(temperature)
    shares = facet_shares(mesh, mesh.facets)
    for number in np.unique(facet_boundary[model.facets]):
        here = facet_boundary[model.facets] == number
        facets, patch = model.facets[here], model.patch[here]
        area = shares[facets].sum(axis=1)
        surface = (shares[facets] * temperature[mesh.facets[facets]]).sum(axis=1) / area
        h = np.maximum(own[patch], LEAST_FILM)
        outside = surface + (radiative + convective)[patch] / h
        mean_outside = float(area * h @ outside / (area @ h))
        film[facets], flux[facets] = h, h * (outside - mean_outside)
        temperatures[base.terminal[facets[0]]] = mean_outside
        films[case.boundary[number].name] = {
            "cavity": model.name,
            "convection": {"film": model.film, "given": True, "heat_flow": float(area @ convective[patch])},
            "radiation": {
                "emissivity": float(area @ model.emissivity[patch] / area.sum()),
                "heat_flow": float(area @ radiative[patch]),
                "patches": len(model.area),
                "closure_defect": model.defect,
            },
            "film": float(area @ h / area.sum()),
            "outside_temperature": mean_outside,
            "surface_temperature": float(area @ surface / area.sum()),
        }


def _outside(case: Case, terminal, air: Mapping[str, float]) -> float:
    spaces = {case.boundary[b].space for b in terminal.boundaries} - {None}
    return air[spaces.pop()] if spaces else terminal.temperature


def _conductivity(
    case: Case, mesh: Mesh, base: Conditions, temperature: np.ndarray, gaps: Gaps
) -> tuple[np.ndarray, np.ndarray | None]:
    """Return every cell's conductivity, W/(m K), (n_cells,), and unit tensor, (n_cells, dim, dim), where laws turn it."""
    k, pairs = base.conductivity.copy(), cell_pairs(mesh.dim)
    for number, (value, _) in gaps.items():
        k[mesh.cell_body == number] = value
    tensors: np.ndarray | None = None
    for number, body in enumerate(mesh.bodies):
        material = case.materials[body.material]
        if not material.laws or number in gaps:
            continue
        cells = np.flatnonzero(mesh.cell_body == number)
        t = temperature[mesh.cells[cells]]
        first, second = t[:, pairs[:, 0]], t[:, pairs[:, 1]]
        weight = (first - second) ** 2
        weight += 1e-12 * weight.max(initial=0.0) + 1e-30  # cells of one temperature: the plain mean

        def mean(law: float | ConductivityLaw, first=first, second=second, weight=weight) -> np.ndarray | float:
            if isinstance(law, float):
                return law
            return (weight * laws.mean_conductivity(law, first, second)).sum(axis=1) / weight.sum(axis=1)

        if material.law is not None:
            k[cells] = mean(material.law)
            continue
        if tensors is None:
            assert base.tensors is not None
            tensors = base.tensors[mesh.cell_body]
        k[cells], tensors[cells] = _along(material, mesh.dim, mean)
    return k, tensors


def _along(material: Material, dim: int, value: Callable[[Any], Any]) -> tuple[np.ndarray, np.ndarray]:
    """Return conductivity, (n,), and unit tensor, (n, dim, dim), of cells whose axes have conductivities of their own."""
    whole: Any = sum(np.multiply.outer(value(k), np.outer(axis, axis)) for k, axis in material.directions(dim))
    k = np.trace(whole, axis1=-2, axis2=-1) / dim
    return k, whole / k[..., None, None]


def other_average(case: Case, mesh: Mesh, given: Conditions, temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity at each cell's mean temperature, W/(m K), (n_cells,); the field in °C, (n_nodes,)."""
    k = given.conductivity.copy()
    for number, body in enumerate(mesh.bodies):
        material = case.materials[body.material]
        if not material.laws or case.body[body.source].air_gap is not None:
            continue
        cells = np.flatnonzero(mesh.cell_body == number)
        middle = temperature[mesh.cells[cells]].mean(axis=1)

        def there(law: float | ConductivityLaw, at: np.ndarray = middle) -> np.ndarray | float:
            return law if isinstance(law, float) else laws.conductivity(law, at)

        k[cells] = there(material.law) if material.law is not None else _along(material, mesh.dim, there)[0]
    return k


def _sheet_conductance(case: Case, base: Conditions, temperature: np.ndarray) -> np.ndarray:
    """Return conductivity times thickness of every sheet facet, W/K, (n,)."""
    kt = base.sheet_conductance.copy()
    for number, sheet in enumerate(case.sheet):
        law = case.materials[sheet.material].law
        if law is not None and base.sheet_number is not None:
            own = base.sheet_number == number
            t = temperature[base.sheet_facets[own]]
            kt[own] = sheet.thickness * laws.mean_conductivity(law, t.min(axis=1), t.max(axis=1))
    return kt


@dataclass(frozen=True, kw_only=True, eq=False)
class _Surface:
    """A boundary's facets: films, excess, outside temperatures (n,), their mean, and what was used."""

    film: np.ndarray
    excess: np.ndarray
    outside: np.ndarray
    mean_outside: float
    used: dict[str, Any]


def _surface(
    case: Case, mesh: Mesh, boundary: Boundary, found: Exchange, facets: np.ndarray, temperature: np.ndarray, air: float
) -> _Surface:
    shares = facet_shares(mesh, mesh.facets[facets])
    area = shares.sum(axis=1)
    surface = (shares * temperature[mesh.facets[facets]]).sum(axis=1) / area
    mean = float(area @ surface / area.sum())
    h, excess, used = _convective(case, found, mean, air)
    driven, total = np.full(len(facets), h * air), np.full(len(facets), h)
    excess_all = np.full(len(facets), excess)
    radiant = air
    if found.radiation is not None:
        emissivity = _emissivity(case, mesh, boundary, found, facets)
        radiant = _radiant(found, air)
        h_r = radiation.secant(emissivity, surface, radiant)
        total, driven = total + h_r, driven + h_r * radiant
        excess_all = excess_all + radiation.tangent(emissivity, surface) - h_r
        used["radiation"] = {
            "film": float(area @ h_r / area.sum()),
            "emissivity": float(area @ emissivity / area.sum()),
            "temperature": radiant,
            "heat_flow": float(area @ (h_r * (radiant - surface))),
        }
    sun = 0.0 if found.sun is None else found.sun.absorptivity * constant(found.sun.irradiance)
    if found.sun is not None:
        used["sun"] = {"absorbed": sun, "heat_flow": sun * float(area.sum())}
    used["convection"]["heat_flow"] = float(area @ (h * (air - surface)))
    total = np.maximum(total, LEAST_FILM)
    outside = (driven + sun) / total
    mean_outside = float(area * total @ outside / (area @ total))
    if abs(radiant - air) < SAME and sun == 0.0:
        outside, mean_outside = np.full(len(facets), air), air
    used |= {"film": float(area @ total / area.sum()), "outside_temperature": mean_outside, "surface_temperature": mean}
    return _Surface(film=total, excess=excess_all, outside=outside, mean_outside=mean_outside, used=used)


def _convective(case: Case, found: Exchange, mean: float, air: float) -> tuple[float, float, dict[str, Any]]:
    """Return a boundary's convective film, its excess (W/(m² K)) and what is told of it."""
    law = found.convection
    if law is None:
        return found.film or 0.0, 0.0, {"convection": {"film": found.film or 0.0, "given": True}}
    properties = properties_of(case, law)
    made = convection.film(law, mean, air, properties)
    steep = convection.slope(law, mean, air, properties)
    told = {
        "kind": law.kind,
        "surface": law.surface,
        "film": made.h,
        "correlation": made.correlation,
        made.number or "number": made.value,
        "Nu": made.nusselt,
        "length": made.length,
        "valid": made.valid,
        "in_range": made.in_range,
        "property_temperature": made.temperature,
        "fluid": law.fluid or "air",
    }
    # Beyond h itself the slope only speeds the iteration up; a negative tangent could not be solved with.
    return made.h, max(-steep * (air - mean), -0.5 * made.h), {"convection": told}


def properties_of(case: Case, law):
    """Return the function from °C to the properties of the fluid that a convection is in."""
    if law.fluid is None:
        return lambda t: fluids.air(t, law.pressure or ATMOSPHERE)
    rows = case.fluids[law.fluid].table
    return lambda t: fluids.tabulated(rows, t)


def fluid_range(case: Case, law) -> tuple[float, float]:
    """Return the temperatures that the properties of a convection's fluid hold for, °C."""
    if law.fluid is None:
        return fluids.AIR_RANGE
    table = case.fluids[law.fluid].table
    return table[0][0], table[-1][0]


def _radiant(found: Exchange, air: float) -> float:
    law = found.radiation
    assert law is not None
    around = air if law.surroundings is None else constant(law.surroundings)
    if law.sky is None:
        return around
    sky = radiation.clear_sky(air) if law.sky.temperature is None else constant(law.sky.temperature)
    return radiation.radiant_temperature(around, sky, law.sky.share)


def _emissivity(case: Case, mesh: Mesh, boundary: Boundary, found: Exchange, facets: np.ndarray) -> np.ndarray:
    """Return the facets' emissivity, (n,): the boundary's, else that of the material behind."""
    assert found.radiation is not None
    if found.radiation.emissivity is not None:
        return np.full(len(facets), found.radiation.emissivity)
    of_body = np.array([np.nan if (e := case.materials[b.material].emissivity) is None else e for b in mesh.bodies])
    found_here = of_body[mesh.cell_body[mesh.facet_cell[facets]]]
    if np.isnan(found_here).any():
        lacking = mesh.bodies[mesh.cell_body[mesh.facet_cell[facets[np.isnan(found_here)][0]]]]
        what = (
            f'radiates, but neither its radiation nor the material "{lacking.material}" of "{lacking.name}" says with '
            "what emissivity"
        )
        number = next(n for n, b in enumerate(case.boundary) if b.name == boundary.name)
        raise CaseError([Fault(path=("boundary", number), what=what)])
    return found_here
