"""A space's loss by plain wall, edges and corners, and bridges - where the case says what the plain wall is.

The plain part is what one-dimensional walls would lose: the flanking walls of a linear bridge, the inside faces of
an enclosure. Where neither is given only the point bridges are split off and the rest stays whole.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from coldseam.answers.points import outside_points
from coldseam.mesh.measure import facet_measure
from coldseam.solution.readings import space_intervals
from coldseam.solution.steady import Steady
from coldseam.volumes.section import facet_shares

PLAIN, EDGES, REST = "plain walls", "edges and corners", "the rest"


def parts(
    steady: Steady, space: str, bridges: Mapping[str, Any], enclosures: Mapping[str, Any]
) -> dict[str, Any] | None:
    """Return the parts of a space's heat flow, W (2D: W/m), and their shares; None where nothing is told apart.

    Parameters
    ----------
    steady
        The solved case.
    space
        Its name.
    bridges, enclosures
        The answers' entries.
    """
    points = outside_points(steady)
    if len(points) != 2 or space not in points or steady.response.network.has_load:
        return None
    (other,) = set(points) - {space}
    fall = float(steady.state[points[space][0]] - steady.state[points[other][0]])
    flow = float(space_intervals(steady)[space].value)
    linear = [entry for entry in bridges.values() if entry["kind"] == "linear"]
    found: dict[str, float] = {}
    rest = REST
    if len(linear) == 1:
        found[PLAIN] = linear[0]["psi_plain"] * fall
    boxes = [entry for entry in enclosures.values() if "plain_walls" in entry]
    if len(boxes) == 1 and not linear:
        found[PLAIN], rest = boxes[0]["plain_walls"] * fall, EDGES
    for name, entry in bridges.items():
        if entry["kind"] == "point":
            found[name] = entry["chi"] * entry["count"] * fall
        elif len(linear) == 1:
            rest = name
    if not found:
        return None
    found[rest] = flow - sum(found.values())
    shown = abs(flow) > 0.0
    return {name: {"heat_flow": value, "share": value / flow if shown else None} for name, value in found.items()}


def surface_flux(steady: Steady) -> np.ndarray:
    """Return the mean heat flux into the solid on every exterior facet from its film, W/m², (n_facets,).

    nan where the facet has no film: the flux at a fixed temperature is no balance of one facet.
    """
    mesh, given = steady.mesh, steady.given
    films = np.flatnonzero(given.film > 0)
    fall = steady.state[given.terminal[films], None] - (steady.temperature - steady.reference)[mesh.facets[films]]
    flux = np.full(len(mesh.facets), np.nan)
    shares = facet_shares(mesh, mesh.facets[films])
    flux[films] = given.film[films] * (shares * fall).sum(axis=1) / facet_measure(mesh)[films]
    return flux


def excess_flux(steady: Steady, plain: float) -> np.ndarray:
    """Return the heat flux into the solid beyond that of a plain wall, W/m², (n_facets,); nan without a film.

    Parameters
    ----------
    plain
        U of the plain wall, W/(m²·K).
    """
    points = outside_points(steady)
    outside = np.array([terminal.temperature for terminal in steady.given.terminals])
    mean = {name: outside[terminals].mean() for name, terminals in points.items()}
    if len(mean) != 2:
        raise ValueError("the plain wall lies between two outside points")
    total = sum(mean.values())
    fall = np.where(steady.given.terminal >= 0, 2.0 * outside[steady.given.terminal] - total, np.nan)
    return surface_flux(steady) - plain * fall
