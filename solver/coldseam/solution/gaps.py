"""Air gaps at a temperature field: the equivalent conductivity of every body marked ``air_gap``.

The heat flow's direction is that of the body's mean temperature gradient. The cavities of ISO 10077-2 have one
conductivity along each axis; between the axes they are weighted by the squares of the direction's cosines, so
that the answer does not jump where the flow turns. Size along and across the flow are those of the rectangle of the
same area and shape as the bounding one.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.mesh.build import signed_measure
from coldseam.mesh.types import Mesh
from coldseam.physics import cavities, iso6946

if TYPE_CHECKING:
    from coldseam.case.gaps import AirGap
    from coldseam.case.model import Case

Gaps = dict[int, tuple[float, dict[str, Any]]]
"""By number of the mesh body: conductivity, W/(m K), and what is told of it."""
LEAST_DIFFERENCE = 1e-3
"""K."""
METHODS = {"cavity": "ISO 10077-2, rectangular cavity", "layer": "ISO 6946, air layer"}


def air_gaps(case: Case, mesh: Mesh, temperature: np.ndarray) -> Gaps:
    """Return the equivalent conductivity of every air gap at a field, °C, (n_nodes,)."""
    found: Gaps = {}
    for number, body in enumerate(mesh.bodies):
        gap = case.body[body.source].air_gap
        cells = np.flatnonzero(mesh.cell_body == number)
        if gap is None or not len(cells):
            continue
        nodes = np.unique(mesh.cells[cells])
        size = np.ptp(mesh.points[nodes], axis=0)
        mean, gradient, measure = _means(mesh, cells, temperature)
        make = _cavity if gap.method_in(mesh.dim) == "cavity" else _layer
        k, told = make(gap, size, measure, mean, gradient)
        told |= {"conductivity": k, "method": METHODS[gap.method_in(mesh.dim)], "mean_temperature": mean}
        found[number] = k, told | {"emissivities": gap.emissivities}
    return found


def _means(mesh: Mesh, cells: np.ndarray, temperature: np.ndarray) -> tuple[float, np.ndarray, float]:
    """Return mean temperature (°C), mean gradient (K/m, (dim,)) and measure (m² or m³) of some cells."""
    corners = mesh.points[mesh.cells[cells]]
    t = temperature[mesh.cells[cells]]
    gradient = np.linalg.solve(corners[:, 1:] - corners[:, :1], (t[:, 1:] - t[:, :1])[:, :, None])[:, :, 0]
    measure = signed_measure(mesh.points, mesh.cells[cells])
    total = float(measure.sum())
    return float(measure @ t.mean(axis=1)) / total, measure @ gradient / total, total


def _cavity(gap: AirGap, size, area: float, mean: float, gradient: np.ndarray) -> tuple[float, dict[str, Any]]:
    cosines = gradient**2 / max(float(gradient @ gradient), 1e-300)
    if cosines.sum() < 0.5:
        cosines = np.array([0.5, 0.5])  # nothing flows yet
    k, main = 0.0, int(np.argmax(cosines))
    told: dict[str, Any] = {}
    for axis in (0, 1):
        d, b = cavities.rectangle_of(area, float(size[axis]), float(size[1 - axis]))
        fall = max(abs(float(gradient[axis])) * d, LEAST_DIFFERENCE)
        k += float(cosines[axis]) * cavities.cavity_conductivity(
            d, b, emissivities=gap.emissivities, mean=mean, difference=fall
        )
        if axis == main:
            told = {"along": d, "across": b, "difference": fall}
    return k, told


def _layer(gap: AirGap, size, measure: float, mean: float, gradient: np.ndarray) -> tuple[float, dict[str, Any]]:
    d = float(size.min())
    fall = max(float(np.linalg.norm(gradient)) * d, LEAST_DIFFERENCE)
    assert gap.heat_flow is not None
    resistance = iso6946.air_layer_resistance(
        d, gap.heat_flow, emissivities=gap.emissivities, temperature=mean, difference=fall
    )
    if gap.ventilation == "slight":
        resistance *= iso6946.SLIGHTLY_VENTILATED
    return d / resistance, {"along": d, "difference": fall, "resistance": resistance, "heat_flow": gap.heat_flow}
