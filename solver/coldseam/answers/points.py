"""The outside points of a case by name, and the weight of each at a place inside."""

from __future__ import annotations

import numpy as np

from coldseam.answers.types import place
from coldseam.mesh.locate import locate
from coldseam.solution.readings import nodes_of_a_space
from coldseam.solution.steady import Steady


def outside_points(steady: Steady) -> dict[str, list[int]]:
    """Return the terminals of every named outside point, each terminal in one point only.

    Spaces, then boundaries of fixed temperature; spaces whose fixed surfaces touch and so share a
    terminal are one point, ``"a + b"``.
    """
    merged: dict[str, list[int]] = {}
    for name, terminals in nodes_of_a_space(steady).items():
        together = [other for other, taken in merged.items() if set(taken) & set(terminals)]
        union = set(terminals).union(*(merged.pop(other) for other in together))
        merged[" + ".join([*together, name])] = sorted(union)
    return merged


def weighting(steady: Steady) -> dict[str, dict[str, dict]]:
    """Return the temperature weighting factors of every probe and of each surface's coldest and warmest place.

    The temperature there is the sum over the outside points of factor times temperature, plus
    ``from_heat_sources`` (K), what heat released inside and given on faces adds. The factors add up to 1. They
    hold for any temperatures of the spaces; the *place* is the coldest at the present ones.
    """
    points = outside_points(steady)
    found: dict[str, dict[str, dict]] = {"probes": {}, "surfaces": {}}
    if steady.case.probe:
        at = np.array([probe.at for probe in steady.case.probe], dtype=float)
        cells, weights = locate(steady.mesh, at)
        unit = (steady.read_fields[steady.mesh.cells[cells]] * weights[:, :, None]).sum(axis=1)
        for probe, row, point in zip(steady.case.probe, unit, at, strict=True):
            found["probes"][probe.name] = _entry(steady, points, row, point)
    for number, boundary in enumerate(steady.case.boundary):
        if boundary.space is None:
            continue
        nodes = np.unique(steady.mesh.facets[steady.facet_boundary == number])
        values = steady.read_temperature[nodes]
        found["surfaces"][boundary.name] = {
            which: _entry(steady, points, steady.read_fields[node], steady.mesh.points[node])
            for which, node in (("coldest", nodes[np.argmin(values)]), ("warmest", nodes[np.argmax(values)]))
        }
    return found


def _entry(steady: Steady, points: dict[str, list[int]], unit: np.ndarray, at: np.ndarray) -> dict:
    return {
        "at": place(at),
        "factors": {name: float(unit[terminals].sum()) for name, terminals in points.items()},
        "from_heat_sources": float(unit[-1]) if steady.response.network.has_load else 0.0,
    }
