"""Films and conductivities of a solved case as single numbers: those of the case, or their means at the solution."""

from __future__ import annotations

import numpy as np

from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.solution.steady import Steady
from coldseam.volumes.conditions import boundary_film


def film_of(steady: Steady, number: int) -> float:
    """Return a boundary's film coefficient, W/(m² K), where it varies its mean over the area; as `boundary_film`."""
    if steady.settled is None or steady.case.boundary[number].name not in steady.settled.films:
        return boundary_film(steady.case, steady.case.boundary[number])
    own = steady.facet_boundary == number
    area = facet_measure(steady.mesh)[own]
    return float(area @ steady.given.film[own] / area.sum())


def film_of_space(steady: Steady, name: str) -> float:
    """Return the film of a space, W/(m² K): the case's, or the mean over all faces that meet the space."""
    if steady.settled is None:
        return steady.case.spaces[name].h
    area = np.bincount(steady.facet_boundary, facet_measure(steady.mesh), len(steady.case.boundary))
    facing = [n for n, b in enumerate(steady.case.boundary) if b.space == name and area[n] > 0]
    return float(sum(area[n] * film_of(steady, n) for n in facing) / sum(area[n] for n in facing))


def conductivity_of(steady: Steady, material: str) -> float | np.ndarray:
    """Return a material's conductivity, W/(m K): the case's, or of a law the harmonic mean over its bodies.

    The harmonic mean is that of slices through which heat flows in series, as it does through the layers of a wall.
    """
    given = steady.case.materials[material]
    if not given.laws:
        return given.tensor(steady.mesh.dim)
    made = np.array([body.material == material for body in steady.mesh.bodies])[steady.mesh.cell_body]
    if not made.any():
        return given.tensor(steady.mesh.dim)
    volume = cell_measure(steady.mesh)[made]
    k = steady.given.conductivity[made]
    if given.directional and steady.given.tensors is not None:
        whole = k[:, None, None] * steady.given.tensors[steady.given.tensor_of(steady.mesh)[made]]
        mean: np.ndarray = np.linalg.inv(np.einsum("c,cij->ij", volume / volume.sum(), np.linalg.inv(whole)))
        return mean
    return float(volume.sum() / (volume @ (1.0 / k)))
