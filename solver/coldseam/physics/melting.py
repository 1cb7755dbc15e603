"""Melting and freezing: the heat content of a material as a function of temperature.

Per volume, with rho c below the melting range [a, b], rho c' above it and latent heat L between,

    e(T) = rho c (T - a)                                   T <= a
           (rho (c + c')/2 + rho L/(b - a)) (T - a)        a < T < b
           e(b) + rho c' (T - b)                           T >= b

(Voller, Swaminathan, Thomas 1990, Int. J. Numer. Meth. Engng 30, 875; for food and ground a wider range stands for
the freezing curve). A single melting point is a range of :data:`NARROW`. Density does not change on melting.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.mesh.types import Mesh
from coldseam.volumes.capacity import node_capacities, volumetric_capacity
from coldseam.volumes.section import node_shares_of_cells

if TYPE_CHECKING:
    from coldseam.case.model import Case

NARROW = 0.05  # K: the range that stands for a single melting point; it shifts a front by under 1e-3 of itself


@dataclass(frozen=True, kw_only=True, eq=False)
class HeatContent:
    """Heat content of nodes, piecewise linear in temperature.

    A node may belong to several materials, so its content is a sum of :attr:`layers` terms.

    Parameters
    ----------
    plain
        Heat capacity of what does not melt, J/K, (n_nodes,).
    below, above
        Heat capacity below and above the range of every melting material, J/K, (n_layers, n_nodes).
    latent
        Heat of melting, J, (n_layers, n_nodes).
    start, end
        The ranges, °C, (n_layers,).
    names
        The bodies that melt, one a layer.
    """

    plain: np.ndarray
    below: np.ndarray
    above: np.ndarray
    latent: np.ndarray
    start: np.ndarray
    end: np.ndarray
    names: tuple[str, ...]

    def heat(self, temperature: np.ndarray) -> np.ndarray:
        """Return the heat content of every node above that at 0 °C solid, J, (n_nodes,)."""
        total = self.plain * temperature
        for layer in range(len(self.start)):  # one term for each melting material
            a, b = self.start[layer], self.end[layer]
            inside = np.clip(temperature, a, b) - a
            slope = 0.5 * (self.below[layer] + self.above[layer]) + self.latent[layer] / (b - a)
            total = total + self.below[layer] * np.minimum(temperature, a) + slope * inside
            total = total + self.above[layer] * np.maximum(temperature - b, 0.0)
        return total

    def slope(self, temperature: np.ndarray) -> np.ndarray:
        """Return d(heat)/dT at every node, J/K, (n_nodes,)."""
        total = self.plain.copy()
        for layer in range(len(self.start)):
            a, b = self.start[layer], self.end[layer]
            between = 0.5 * (self.below[layer] + self.above[layer]) + self.latent[layer] / (b - a)
            total += np.where(
                temperature <= a, self.below[layer], np.where(temperature < b, between, self.above[layer])
            )
        return total

    def temperature(self, heat: np.ndarray) -> np.ndarray:
        """Return the temperature (°C, (n_nodes,)) at which nodes hold a heat content (J).

        The content rises strictly and is linear between the sorted ends of all ranges, so the piece that holds the
        wanted value is found by counting the ends that lie below it, and inverted exactly.
        """
        corners = np.unique(np.concatenate([self.start, self.end]))
        base, at = self.heat(np.full_like(heat, corners[0])), np.full_like(heat, corners[0])
        slope = self.slope(np.full_like(heat, corners[0] - 1.0))
        for n, corner in enumerate(corners):
            reached = self.heat(np.full_like(heat, corner))
            higher = heat >= reached
            beyond = corner + 1.0 if n + 1 == len(corners) else 0.5 * (corner + corners[n + 1])
            base, at = np.where(higher, reached, base), np.where(higher, corner, at)
            slope = np.where(higher, self.slope(np.full_like(heat, beyond)), slope)
        return at + (heat - base) / slope

    def parts(self, temperature: np.ndarray) -> np.ndarray:
        """Return the melted part of every layer's latent heat at every node, 0 to 1, (n_layers, n_nodes)."""
        inside = np.clip(temperature[None], self.start[:, None], self.end[:, None]) - self.start[:, None]
        return inside / (self.end - self.start)[:, None]

    def melted(self, temperature: np.ndarray) -> np.ndarray:
        """Return the melted part of every layer's latent heat, (n_layers,)."""
        return (self.parts(temperature) * self.latent).sum(axis=1) / np.maximum(self.latent.sum(axis=1), 1e-300)


def heat_content(case: Case, mesh: Mesh) -> HeatContent | None:
    """Return the heat content of a mesh's nodes, a layer for every body that melts; None where none does.

    Parameters
    ----------
    case
        Materials with a ``melting`` table melt.
    mesh
        The mesh, contacts opened.
    """
    melting = [n for n, body in enumerate(mesh.bodies) if case.materials[body.material].melting is not None]
    if not melting:
        return None
    plain = node_capacities(case, mesh)
    volumetric = volumetric_capacity(case, mesh)
    layers: dict[str, list] = {"below": [], "above": [], "latent": [], "start": [], "end": []}
    for number in melting:
        material = case.materials[mesh.bodies[number].material]
        melts, cells = material.melting, mesh.cell_body == number
        own = node_shares_of_cells(mesh, np.where(cells, volumetric, 0.0))
        volume = node_shares_of_cells(mesh, cells.astype(float))
        liquid = material.specific_heat if melts.specific_heat_liquid is None else melts.specific_heat_liquid
        plain = plain - own
        low, high = melts.range
        if high - low < NARROW:
            low, high = 0.5 * (low + high - NARROW), 0.5 * (low + high + NARROW)
        layers["below"].append(own)
        layers["above"].append(own * liquid / material.specific_heat)
        layers["latent"].append(volume * material.density * melts.latent_heat)
        layers["start"].append(low)
        layers["end"].append(high)
    plain = np.where(np.abs(plain) < 1e-12 * np.abs(plain).max(initial=1e-300), 0.0, plain)
    arrays = {key: np.array(value) for key, value in layers.items()}
    return HeatContent(plain=np.maximum(plain, 0.0), names=tuple(mesh.bodies[n].name for n in melting), **arrays)
