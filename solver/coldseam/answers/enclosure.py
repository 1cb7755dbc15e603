"""A whole enclosure: heat leak, mean area, K of the ATP treaty, and the handbook's sum beside it.

    K = L / S,   S = sqrt(S_inside S_outside)

(UN agreement ATP, annex 1, appendix 2; the formulas from memory). The handbook's sum is that of Langmuir, Adams and
Meikle (1913): plain walls over their inside area, 0.54 k D for every edge of inside length D, 0.15 k t for every
corner. It is an experiment of 1913 for one uniform wall between surfaces of given temperature, printed as a
line to compare with and not as a result; the exact excess is 0.5587 and 0.1053. Faces that are left open
count on neither side: such a model is a part of a box, cut along them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.answers.points import outside_points
from coldseam.mesh.measure import facet_measure
from coldseam.solution.frozen import conductivity_of, film_of
from coldseam.solution.readings import Interval, coupling
from coldseam.solution.steady import Steady

if TYPE_CHECKING:
    from coldseam.case.shapes import Enclosure

AXES = "xyz"
EDGE, CORNER = 0.54, 0.15
"""Handbook factors: Incropera, DeWitt, table 4.1; Holman, table 3-1."""
ATP_LIMITS = {"IR": 0.40, "IN": 0.70}
"""Largest K of heavily and normally insulated equipment, W/(m²·K): ATP, annex 1 (Norwegian regulation text)."""
PLACE_TOLERANCE = 1e-6


@dataclass(frozen=True, kw_only=True)
class Walls:
    """The faces of an enclosure: inside box (m) and thickness (m) and conductance by face; open faces have none.

    Parameters
    ----------
    low, high
        Corners of the inside, m.
    thickness
        Of each closed face by its name ("+x" ...), m.
    resistance
        Of its layers, m²·K/W.
    """

    low: tuple[float, ...]
    high: tuple[float, ...]
    thickness: dict[str, float]
    resistance: dict[str, float]

    def span(self, axis: str, *, outside: bool = False) -> float:
        """Return the length along an axis, m, inside or over the walls."""
        n = AXES.index(axis)
        length = self.high[n] - self.low[n]
        return length + (sum(self.thickness.get(sign + axis, 0.0) for sign in "+-") if outside else 0.0)

    def area(self, face: str, *, outside: bool = False) -> float:
        """Return the area of a face, m²."""
        return math.prod(self.span(axis, outside=outside) for axis in AXES if axis != face[1])

    def total(self, *, outside: bool = False) -> float:
        """Return the area of all closed faces, m²."""
        return math.fsum(self.area(face, outside=outside) for face in self.thickness)

    def conductivity(self, face: str) -> float:
        """Return the conductivity that a uniform wall in place of a face would have, W/(m·K)."""
        return self.thickness[face] / self.resistance[face]

    def edges(self) -> list[tuple[str, str]]:
        """Return the pairs of closed faces that meet."""
        faces = list(self.thickness)
        return [(a, b) for n, a in enumerate(faces) for b in faces[n + 1 :] if a[1] != b[1]]

    def corners(self) -> list[tuple[str, str, str]]:
        """Return the triples of closed faces that meet."""
        by_axis = {axis: [face for face in self.thickness if face[1] == axis] for axis in AXES}
        return [(x, y, z) for x in by_axis["x"] for y in by_axis["y"] for z in by_axis["z"]]


def walls_of(steady: Steady, enclosure: Enclosure) -> Walls | None:
    """Return the walls of an enclosure; None where a layer conducts differently by direction."""
    thickness, resistance = {}, {}
    for face in (sign + axis for axis in AXES for sign in "-+"):
        layers = enclosure.faces.get(face, enclosure.layers)
        if not layers:
            continue
        k = [conductivity_of(steady, layer.material) for layer in layers]
        if any(np.ndim(value) > 0 for value in k):
            return None
        thickness[face] = math.fsum(layer.thickness for layer in layers)
        resistance[face] = math.fsum(layer.thickness / value for layer, value in zip(layers, k, strict=True))
    inside = enclosure.inside
    return Walls(low=tuple(inside.start), high=tuple(inside.end), thickness=thickness, resistance=resistance)


def enclosures(steady: Steady) -> dict[str, dict[str, Any]]:
    """Return area, K and the handbook's sum of every enclosure of a case, by its body's name."""
    found = {}
    for body in steady.case.body:
        if body.enclosure is None:
            continue
        walls = walls_of(steady, body.enclosure)
        if walls is None:
            found[body.name] = {"remark": "a layer conducts differently by direction: no plain walls to compare with"}
            continue
        found[body.name] = _answer(steady, walls, bool(body.enclosure.openings))
    return found


def _answer(steady: Steady, walls: Walls, openings: bool) -> dict[str, Any]:
    areas = {"inside_area": walls.total(), "outside_area": walls.total(outside=True)}
    mean = math.sqrt(areas["inside_area"] * areas["outside_area"])
    answer: dict[str, Any] = {**areas, "mean_area": mean, "closed_faces": list(walls.thickness)}
    remarks = []
    if len(walls.thickness) < 6:
        remarks.append("open faces are left out of the areas: this is a part of a box, cut along them")
    if openings:
        remarks.append("openings are counted as wall in the areas and in the handbook's sum")
    pair = _two_sides(steady, walls)
    if isinstance(pair, str):
        return answer | {"remarks": [*remarks, pair]}
    inside, outside, films = pair
    leak = coupling(steady)[inside][outside]
    answer |= {"inside": inside, "outside": outside} | _k_values(leak, mean) | _handbook(walls, films, leak)
    return answer | {"remarks": remarks}


def _two_sides(steady: Steady, walls: Walls) -> tuple[str, str, float] | str:
    """Return the outside points inside and outside and the films' mean resistance, or why there are not two."""
    points = outside_points(steady)
    of_terminal = {terminal: name for name, terminals in points.items() for terminal in terminals}
    low, high = np.array(walls.low), np.array(walls.high)
    spare = PLACE_TOLERANCE * steady.mesh.size
    corner = steady.mesh.points[steady.mesh.facets]
    within = np.all((corner >= low - spare) & (corner <= high + spare), axis=(1, 2))
    facing = steady.given.terminal >= 0
    sides = [{of_terminal[t] for t in np.unique(steady.given.terminal[facing & mask])} for mask in (within, ~within)]
    if len(sides[0]) != 1 or len(sides[1]) != 1 or sides[0] == sides[1]:
        names = [", ".join(sorted(side)) or "nothing" for side in sides]
        return f"K needs one temperature inside and another outside; inside is {names[0]}, outside {names[1]}"
    area = facet_measure(steady.mesh)
    film = np.array([film_of(steady, number) for number in range(len(steady.case.boundary))])[steady.facet_boundary]
    resistance = sum(
        float(area[mask] @ (1.0 / film[mask]) / area[mask].sum()) for mask in (facing & within, facing & ~within)
    )
    return sides[0].pop(), sides[1].pop(), resistance


def _k_values(leak: Interval, mean: float) -> dict[str, Any]:
    k = {
        "leak": leak.value,
        "leak_low": leak.low,
        "leak_high": leak.high,
        "interval": leak.kind,
        "K": leak.value / mean,
        "K_low": None if leak.low is None else leak.low / mean,
        "K_high": None if leak.high is None else leak.high / mean,
    }
    sure = k["K_high"] if k["K_high"] is not None else k["K"]
    k["within_ATP_limit"] = {name: bool(sure <= limit) for name, limit in ATP_LIMITS.items()}
    return k


def _handbook(walls: Walls, films: float, leak: Interval) -> dict[str, Any]:
    """Return the handbook's sum, W/K, and the computed share of edges and corners."""
    plain = math.fsum(walls.area(face) / (walls.resistance[face] + films) for face in walls.thickness)
    edges = corners = 0.0
    for pair in walls.edges():
        (axis,) = set(AXES) - {face[1] for face in pair}
        edges += EDGE * walls.span(axis) * sum(walls.conductivity(face) for face in pair) / 2.0
    for triple in walls.corners():
        corners += CORNER * sum(walls.conductivity(face) * walls.thickness[face] for face in triple) / 3.0
    total = plain + edges + corners
    return {
        "plain_walls": plain,
        "edges_and_corners": leak.value - plain,
        "edges_and_corners_share": (leak.value - plain) / leak.value,
        "handbook": {
            "plain": plain,
            "edges": edges,
            "corners": corners,
            "total": total,
            "over_computed": total / leak.value,
            "source": "0.54 k D an edge, 0.15 k t a corner: Langmuir, Adams, Meikle 1913 (Incropera, table 4.1)",
        },
    }
