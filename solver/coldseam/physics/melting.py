"""Melting, freezing and specific heats over temperature: the heat content of nodes as a function of temperature.

Per volume, with rho c below the melting range [a, b], rho c' above it and latent heat L between,

    e(T) = rho c (T - a)                                   T <= a
           (rho (c + c')/2 + rho L/(b - a)) (T - a)        a < T < b
           e(b) + rho c' (T - b)                           T >= b

(Voller, Swaminathan, Thomas 1990, Int. J. Numer. Meth. Engng 30, 875; for food and ground a wider range stands for
the freezing curve). A single melting point is a range of :data:`NARROW`. Density does not change on melting.
A specific heat over temperature adds its own content (physics/specificheat.py), and where its material melts too, rho c and
rho c' above are nothing and only the latent heat remains.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.mesh.types import Mesh
from coldseam.physics.specificheat import HeatCurve, heat_curve
from coldseam.volumes.capacity import node_capacities, node_masses, volumetric_capacity
from coldseam.volumes.section import node_shares_of_cells

if TYPE_CHECKING:
    from coldseam.case.model import Case

NARROW = 0.05  # K: the range that stands for a single melting point; it shifts a front by under 1e-3 of itself

MOST_NEWTON = 60
INVERTED = 1e-9
"""K: the last step of Newton's method, whose square is what remains."""


@dataclass(frozen=True, kw_only=True, eq=False)
class HeatContent:
    """Heat content of nodes: piecewise linear in temperature, and what specific heats over temperature add.

    A node may belong to several materials, so its content is a sum of terms.

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
    masses, curves
        Mass of every material with a specific heat over temperature, kg, (n_curves, n_nodes), and its heat content.
    """

    plain: np.ndarray
    below: np.ndarray
    above: np.ndarray
    latent: np.ndarray
    start: np.ndarray
    end: np.ndarray
    names: tuple[str, ...]
    masses: np.ndarray
    curves: tuple[HeatCurve, ...]

    def heat(self, temperature: np.ndarray) -> np.ndarray:
        """Return the heat content of every node above some fixed state, J, (n_nodes,); temperatures in °C, (n_nodes,)."""
        total = self.plain * temperature
        for layer in range(len(self.start)):  # one term for each melting material
            a, b = self.start[layer], self.end[layer]
            inside = np.clip(temperature, a, b) - a
            slope = 0.5 * (self.below[layer] + self.above[layer]) + self.latent[layer] / (b - a)
            total = total + self.below[layer] * np.minimum(temperature, a) + slope * inside
            total = total + self.above[layer] * np.maximum(temperature - b, 0.0)
        for mass, curve in zip(self.masses, self.curves, strict=True):
            total = total + mass * curve.heat(temperature)
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
        for mass, curve in zip(self.masses, self.curves, strict=True):
            total += mass * curve.specific_heat(temperature)
        return total

    def temperature(self, heat: np.ndarray, near: np.ndarray) -> np.ndarray:
        """Return the temperature (°C, (n_nodes,)) at which nodes hold a heat content (J); ``near`` is a first guess, °C.

        The content rises strictly, and between the sorted ends of all ranges it is linear but for the curves: the
        piece that holds the wanted value is found by counting the ends that lie below it. A linear one is inverted
        at once, one with curves by Newton's method kept within bounds. Where nothing melts the guess is all it needs.
        """
        if not len(self.start):
            return self._refined(near, heat, np.full_like(heat, -np.inf), np.full_like(heat, np.inf))
        corners = np.unique([*self.start, *self.end, *(end for c in self.curves for end in (c.low, c.high))])
        low, high = np.full_like(heat, -np.inf), np.full_like(heat, np.inf)
        base, at = self.heat(np.full_like(heat, corners[0])), np.full_like(heat, corners[0])
        slope = self.slope(np.full_like(heat, corners[0] - 1.0))
        for n, corner in enumerate(corners):
            reached = self.heat(np.full_like(heat, corner))
            higher = heat >= reached
            low, high = np.where(higher, corner, low), np.where(higher, high, np.minimum(high, corner))
            beyond = corner + 1.0 if n + 1 == len(corners) else 0.5 * (corner + corners[n + 1])
            base, at = np.where(higher, reached, base), np.where(higher, corner, at)
            slope = np.where(higher, self.slope(np.full_like(heat, beyond)), slope)
        found = at + (heat - base) / slope
        return self._refined(np.clip(found, low, high), heat, low, high) if self.curves else found

    def _refined(self, found: np.ndarray, heat: np.ndarray, low: np.ndarray, high: np.ndarray) -> np.ndarray:
        """Return the temperatures of contents (J) between bounds, from a first guess, all °C and (n_nodes,)."""
        for _ in range(MOST_NEWTON):
            off = self.heat(found) - heat
            low, high = np.where(off <= 0.0, found, low), np.where(off >= 0.0, found, high)
            step = found - off / self.slope(found)
            with np.errstate(invalid="ignore"):
                step = np.where((step >= low) & (step <= high), step, 0.5 * (low + high))
            moved = float(np.max(np.abs(step - found), initial=0.0))
            found = step
            if moved <= INVERTED:
                break
        return found

    def parts(self, temperature: np.ndarray) -> np.ndarray:
        """Return the melted part of every layer's latent heat at every node, 0 to 1, (n_layers, n_nodes)."""
        inside = np.clip(temperature[None], self.start[:, None], self.end[:, None]) - self.start[:, None]
        return inside / (self.end - self.start)[:, None]

    def melted(self, temperature: np.ndarray) -> np.ndarray:
        """Return the melted part of every layer's latent heat, (n_layers,)."""
        return (self.parts(temperature) * self.latent).sum(axis=1) / np.maximum(self.latent.sum(axis=1), 1e-300)


def heat_content(case: Case, mesh: Mesh) -> HeatContent | None:
    """Return the heat content of a mesh's nodes; None where it is their capacity times the temperature.

    Parameters
    ----------
    case
        Materials with a ``melting`` table melt, a layer for every body of them; specific heats may be laws.
    mesh
        The mesh, contacts opened.
    """
    melting = [n for n, body in enumerate(mesh.bodies) if case.materials[body.material].melting is not None]
    used = {body.material for body in mesh.bodies} | {sheet.material for sheet in case.sheet}
    following = {name: law for name in sorted(used) if (law := case.materials[name].heat_law) is not None}
    if not melting and not following:
        return None
    plain = node_capacities(case, mesh)
    masses = np.array([node_masses(case, mesh, name) for name in following]).reshape(len(following), mesh.n_nodes)
    for name, mass in zip(following, masses, strict=True):
        plain = plain - mass * case.materials[name].heat_at(20.0)
    plain, layers = _layers(case, mesh, melting, plain)
    plain = np.where(np.abs(plain) < 1e-12 * np.abs(node_capacities(case, mesh)).max(initial=1e-300), 0.0, plain)
    return HeatContent(
        plain=np.maximum(plain, 0.0),
        names=tuple(mesh.bodies[n].name for n in melting),
        masses=masses,
        curves=tuple(heat_curve(law) for law in following.values()),
        **layers,
    )


def _layers(case: Case, mesh: Mesh, melting: list[int], plain: np.ndarray) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Return what is left of the plain capacities, J/K, (n_nodes,), and the arrays of the bodies that melt."""
    volumetric = volumetric_capacity(case, mesh)
    layers: dict[str, list] = {"below": [], "above": [], "latent": [], "start": [], "end": []}
    for number in melting:
        material = case.materials[mesh.bodies[number].material]
        melts, cells = material.melting, mesh.cell_body == number
        own = node_shares_of_cells(mesh, np.where(cells & (material.heat_law is None), volumetric, 0.0))
        volume = node_shares_of_cells(mesh, cells.astype(float))
        solid = material.heat_at(20.0)
        liquid = solid if melts.specific_heat_liquid is None else melts.specific_heat_liquid
        plain = plain - own
        low, high = melts.range
        if high - low < NARROW:
            low, high = 0.5 * (low + high - NARROW), 0.5 * (low + high + NARROW)
        layers["below"].append(own)
        layers["above"].append(own * liquid / solid)
        layers["latent"].append(volume * material.density * melts.latent_heat)
        layers["start"].append(low)
        layers["end"].append(high)
    wide = ("below", "above", "latent")
    return plain, {
        key: np.array(value, dtype=float).reshape((len(melting), mesh.n_nodes) if key in wide else -1)
        for key, value in layers.items()
    }
