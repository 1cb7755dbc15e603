"""The plain walls beside a thermal bridge: their U-value, and whether they fit the model."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.answers.points import outside_points
from coldseam.case.films import exchange
from coldseam.errors import CaseError, Fault
from coldseam.mesh.measure import facet_measure
from coldseam.solution.frozen import conductivity_of, film_of_space
from coldseam.solution.steady import Steady

if TYPE_CHECKING:
    from coldseam.case.model import Bridge, Case, Flanking

CUT_DISTANCE = 1.0
"""Least distance of a cut plane from the detail, m: ISO 10211 asks for this or three thicknesses (from memory)."""
CUT_THICKNESSES = 3.0
FITS = 0.005
"""Relative difference in length below which drawn and stated lengths agree."""


@dataclass(frozen=True, kw_only=True)
class Wall:
    """A flanking wall with its U-value.

    Parameters
    ----------
    transmittance
        U, W/(m²·K), with the films of the two spaces.
    thickness, length, length_external
        m; a length is None where the case does not give it.
    """

    transmittance: float
    thickness: float
    length: float | None
    length_external: float | None


def flanking_walls(steady: Steady, bridge: Bridge) -> list[Wall]:
    """Return the flanking walls of a linear bridge; what depends on the temperatures as it is at the solution."""
    walls = []
    for wall in bridge.flanking or ():
        only_external = bridge.basis == "external"
        walls.append(
            Wall(
                transmittance=transmittance(steady, wall),
                thickness=math.fsum(layer.thickness for layer in wall.layers),
                length=None if only_external else wall.length,
                length_external=(wall.length_external or wall.length) if only_external else wall.length_external,
            )
        )
    return walls


def transmittance(steady: Steady, wall: Flanking) -> float:
    """Return U of a flanking wall, W/(m²·K): its layers between the films of its two spaces."""
    films = math.fsum(1.0 / film_of_space(steady, name) for name in wall.between)
    return 1.0 / (
        films + math.fsum(layer.thickness / float(conductivity_of(steady, layer.material)) for layer in wall.layers)
    )


def layer_conductivity(case: Case, material: str) -> float:
    """Return the conductivity of a wall's layer, W/(m·K).

    Raises
    ------
    ValueError
        The material conducts differently by direction, and which one crosses the wall is not known.
    """
    k = case.materials[material].tensor(case.model.dimensions)
    if np.ndim(k) > 0:
        raise ValueError(
            f'"{material}" conducts differently by direction; give the wall a material with one conductivity'
        )
    return float(k)


def wall_faults(case: Case, number: int) -> list[Fault]:
    """Return what is wrong with a linear bridge before anything is solved."""
    bridge = case.bridge[number]
    at = ("bridge", number)
    faults = []
    if case.model.dimensions == 3 or case.model.axisymmetric:
        what = "a linear bridge is computed in a plane cross-section: dimensions = 2 and not axisymmetric"
        faults.append(Fault(path=(*at, "kind"), what=what))
    pairs = {frozenset(wall.between) for wall in bridge.flanking or ()}
    if len(pairs) > 1:
        what = "the flanking walls of one bridge must lie between the same two spaces; make a bridge of each pair"
        faults.append(Fault(path=(*at, "flanking"), what=what))
    for position, wall in enumerate(bridge.flanking or ()):
        for layer in wall.layers:
            try:
                layer_conductivity(case, layer.material)
            except ValueError as error:
                faults.append(Fault(path=(*at, "flanking", position, "layers"), what=str(error)))
    return faults


def require_fitting(steady: Steady, number: int, walls: list[Wall]) -> None:
    """Raise a CaseError where the flanking walls are longer than the surfaces they are to cover.

    Raises
    ------
    CaseError
        The internal (external) lengths add up to more than the longer surface that faces one of the two spaces.
    """
    bridge = steady.case.bridge[number]
    area = np.bincount(steady.facet_boundary, facet_measure(steady.mesh), len(steady.case.boundary))
    faces = {
        name: float(area[[b.space == name for b in steady.case.boundary]].sum()) for name in bridge.flanking[0].between
    }
    for key in ("length", "length_external"):
        lengths = [getattr(wall, key) for wall in walls]
        if None in lengths or math.fsum(lengths) <= (1.0 + FITS) * max(faces.values()):
            continue
        shown = " and ".join(f"{1e3 * length:.4g} mm facing {name}" for name, length in faces.items())
        total = f"{1e3 * math.fsum(lengths):.4g} mm ({key})"
        what = f"don't fit the model: the walls add up to {total}, and it has surfaces of {shown}"
        raise CaseError([Fault(path=("bridge", number, "flanking"), what=what)])


def wall_warnings(steady: Steady, bridge: Bridge, walls: list[Wall]) -> list[str]:
    """Return what is doubtful about the flanking walls of a solved bridge."""
    case, found = steady.case, []
    pair = bridge.flanking[0].between
    for name in pair:
        for boundary in case.boundary:
            if boundary.space == name and exchange(case.spaces[name], boundary) != exchange(case.spaces[name]):
                found.append(
                    f'bridge "{bridge.name}": boundary "{boundary.name}" has a film of its own; the flanking walls are '
                    f'reckoned with that of the space "{name}", and the difference is in psi'
                )
    cuts = cut_widths(steady)
    for position, wall in enumerate(walls, 1):
        length = wall.length if wall.length is not None else wall.length_external
        least = max(CUT_DISTANCE, CUT_THICKNESSES * wall.thickness)
        if length is not None and length < (1.0 - FITS) * least:
            found.append(
                f'bridge "{bridge.name}": the cut plane of flanking wall {position} is {1e3 * length:.4g} mm from the '
                f"detail; ISO 10211 asks for {1e3 * least:.4g} mm (1 m or three thicknesses) unless it is a "
                "symmetry plane"
            )
        if not any(math.isclose(width, wall.thickness, rel_tol=FITS) for width in cuts):
            found.append(
                f'bridge "{bridge.name}": no adiabatic cut plane is as wide as flanking wall {position} is thick '
                f"({1e3 * wall.thickness:.4g} mm): its layers may not be those of the model"
            )
    return found


def cut_widths(steady: Steady) -> list[float]:
    """Return the widths of the straight adiabatic edges of a cross-section, m."""
    mesh = steady.mesh
    adiabatic = np.array([boundary.adiabatic is not None for boundary in steady.case.boundary])
    facets = mesh.facets[adiabatic[steady.facet_boundary]]
    if mesh.dim != 2 or not len(facets):
        return []
    p = mesh.points[facets]
    step = p[:, 1] - p[:, 0]
    length = np.linalg.norm(step, axis=1)
    direction = step / length[:, None]
    offset = p[:, 0, 0] * direction[:, 1] - p[:, 0, 1] * direction[:, 0]
    line = np.column_stack([direction, offset / mesh.size])
    _, which = np.unique(np.round(line, 5) + 0.0, axis=0, return_inverse=True)
    return np.bincount(which.ravel(), length).tolist()


def pair_of(steady: Steady, names: tuple[str, str]) -> tuple[list[int], list[int]] | None:
    """Return the terminals of two spaces, None where their surfaces are one fixed group."""
    points = outside_points(steady)
    return (points[names[0]], points[names[1]]) if all(name in points for name in names) else None
