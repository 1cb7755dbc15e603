"""Fields on the surface of a space, for pictures: excess heat flux over the plain wall, surface humidity."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from coldseam.answers.parts import surface_flux
from coldseam.answers.surfacemap import SurfaceMap
from coldseam.answers.surfaces import humidity_map
from coldseam.mesh.measure import facet_measure
from coldseam.solution.steady import Steady


def surface_maps(steady: Steady, bridges: Mapping[str, Any], enclosures: Mapping[str, Any]) -> tuple[SurfaceMap, ...]:
    """Return the maps that a solved case has.

    Parameters
    ----------
    steady
        The solved case.
    bridges, enclosures
        The answers' entries, for U of the plain wall.
    """
    spaces = dict.fromkeys(boundary.space for boundary in steady.case.boundary if boundary.space is not None)
    flux, humidity = surface_flux(steady), humidity_map(steady)
    found = []
    for space in spaces:
        names = np.array([boundary.space == space for boundary in steady.case.boundary])
        rows = np.flatnonzero(names[steady.facet_boundary])
        found += _excess(steady, space, rows[np.isfinite(flux[rows])], flux, _plain(bridges, enclosures))
        if np.isfinite(humidity[rows]).any():
            values = np.full(steady.mesh.n_nodes, np.nan)
            values[steady.mesh.facets[rows]] = 100.0 * humidity[rows]
            note = (
                "Of the air at the surface; from 100 % it drips or frosts, from 80 % (mean of a month) mould can grow."
            )
            found.append(
                SurfaceMap(
                    key="surface_humidity", space=space, values=values, title="Surface humidity", unit="%", note=note
                )
            )
    return tuple(found)


def _plain(bridges: Mapping[str, Any], enclosures: Mapping[str, Any]) -> float | None:
    """Return U of the plain wall that the case speaks of, W/(m²·K); None where it speaks of none or of several."""
    known = [(entry.get("psi_whole") or entry.get("whole") or {}).get("U_plain") for entry in bridges.values()]
    known += [entry["plain_walls"] / entry["inside_area"] for entry in enclosures.values() if "plain_walls" in entry]
    values = [value for value in known if value]
    return values[0] if values and np.ptp(values) <= 0.01 * values[0] else None


def _excess(steady: Steady, space: str, rows: np.ndarray, flux: np.ndarray, plain: float | None) -> list[SurfaceMap]:
    """Return the map of the flux beyond that of the plain wall, or of the surface's middle value; heat passing positive."""
    area = facet_measure(steady.mesh)[rows]
    total = float(flux[rows] @ area)
    if len(rows) == 0 or abs(total) <= 1e-9 * steady.throughput:
        return []
    passing = np.sign(total) * flux[rows]
    outside = np.array([terminal.temperature for terminal in steady.given.terminals])
    if plain is not None and len(np.unique(outside)) == 2:
        usual = plain * float(np.ptp(outside))
        note = f"Above the plain wall's {usual:.3g} W/m² (U = {plain:.3g} W/(m²·K))."
    else:
        order = np.argsort(passing)
        usual = float(passing[order][np.searchsorted(np.cumsum(area[order]), 0.5 * area.sum())])
        note = f"Above this side's median of {usual:.3g} W/m²; the case names no plain wall."
    facets = steady.mesh.facets[rows]
    weight = np.bincount(facets.ravel(), np.repeat(area, facets.shape[1]), steady.mesh.n_nodes)
    sums = np.bincount(facets.ravel(), np.repeat(area * (passing - usual), facets.shape[1]), steady.mesh.n_nodes)
    values = np.where(weight > 0, sums / np.where(weight > 0, weight, 1.0), np.nan)
    return [SurfaceMap(key="excess_flux", space=space, values=values, title="Excess heat flux", unit="W/m²", note=note)]
