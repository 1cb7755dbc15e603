"""Code formulas of ISO 6946 for flat building parts: air layers, combined method, fastener and void corrections.

These are rules that a calculation for a building code must follow, not physics: the fastener correction overstates
a bolt that runs through a steel-faced panel by about half and one through bare foam many times over,
because it has the bolt collect heat through its own section only and the faces without resistance. A computed
point transmittance is the better number; the correction is here for those who must state it.

Formulas from a public code transcription of the 2017 text and a national guide (surface resistances, combined
method); tables from memory. Resistances in m²·K/W, U in W/(m²·K).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

STEFAN_BOLTZMANN = 5.670374419e-8
"""W/(m² K⁴)."""
KELVIN = 273.15
INSIDE_RESISTANCE = {"up": 0.10, "horizontal": 0.13, "down": 0.17}
"""Inside surface resistance by direction of the heat flow, m²·K/W (horizontal: within 30 degrees)."""
OUTSIDE_RESISTANCE = 0.04
"""Outside surface resistance, m²·K/W."""
VOID_LEVELS = (0.0, 0.01, 0.04)
"""Correction by level of workmanship 0, 1, 2, W/(m²·K) (from memory)."""
SLIGHTLY_VENTILATED = 0.5
"""Part of the resistance that a slightly ventilated layer keeps (the text before 2017, from memory)."""

Direction = Literal["up", "horizontal", "down"]


def series_transmittance(resistances: Sequence[float]) -> float:
    """Return the U-value of resistances in series, W/(m²·K), surface resistances among them.

    Examples
    --------
    >>> round(series_transmittance([0.13, 0.1 / 0.022, 0.13]), 5)
    0.2081
    """
    return 1.0 / math.fsum(resistances)


def radiative_coefficient(temperature: float) -> float:
    """Return h_r0, the film coefficient of a black body's radiation at a temperature in °C, W/(m²·K).

    Examples
    --------
    >>> round(radiative_coefficient(10.0), 2)
    5.15
    """
    return 4.0 * STEFAN_BOLTZMANN * (temperature + KELVIN) ** 3


def air_layer_resistance(
    thickness: float,
    direction: Direction,
    *,
    emissivities: tuple[float, float] = (0.9, 0.9),
    temperature: float = 10.0,
    difference: float = 5.0,
) -> float:
    """Return the resistance of an unventilated air layer, m²·K/W.

    Parameters
    ----------
    thickness
        m, up to 0.3 of length and width.
    direction
        Of the heat flow.
    emissivities
        Of the two faces.
    temperature, difference
        Mean temperature (°C) and difference (K) of the faces.
    """
    d = thickness
    if difference <= 5.0:
        convection = {"horizontal": 1.25, "up": 1.95, "down": 0.12 * d**-0.44}[direction]
    else:
        third = difference ** (1.0 / 3.0)
        convection = {"horizontal": 0.73 * third, "up": 1.14 * third, "down": 0.09 * difference**0.187 * d**-0.44}[
            direction
        ]
    exchange = 1.0 / (1.0 / emissivities[0] + 1.0 / emissivities[1] - 1.0)
    return 1.0 / (max(0.025 / d, convection) + exchange * radiative_coefficient(temperature))


@dataclass(frozen=True, kw_only=True)
class Combined:
    """Result of the combined method, m²·K/W.

    Parameters
    ----------
    upper, lower
        R' (heat flows straight through) and R'' (every layer evens out), surface resistances included.
    """

    upper: float
    lower: float

    @property
    def total(self) -> float:
        """R_tot, m²·K/W."""
        return 0.5 * (self.upper + self.lower)

    @property
    def transmittance(self) -> float:
        """U, W/(m²·K)."""
        return 1.0 / self.total

    @property
    def error(self) -> float:
        """Largest relative error of the method, a fraction."""
        return (self.upper - self.lower) / (2.0 * self.total)


def combined_method(
    fractions: Sequence[float], layers: Sequence[float | Sequence[float]], surfaces: tuple[float, float]
) -> Combined:
    """Return upper and lower resistance of a part made of layers that are not alike all over.

    Parameters
    ----------
    fractions
        Part of the area of each section through the layers; they add up to 1.
    layers
        Resistance of each layer, m²·K/W: one number where it is alike, else one number per section.
    surfaces
        Surface resistances of the two sides, m²·K/W.

    Raises
    ------
    ValueError
        Fractions that don't add up to 1, or a layer with another number of sections.

    Examples
    --------
    >>> wall = combined_method([0.85, 0.15], [0.132, [3.5, 1.167], 0.060], (0.13, 0.04))
    >>> wall.lower < wall.total < wall.upper
    True
    """
    if abs(math.fsum(fractions) - 1.0) > 1e-6:
        raise ValueError(f"the fractions add up to {math.fsum(fractions):g}, not 1")
    rows = [[layer] * len(fractions) if isinstance(layer, (int, float)) else list(layer) for layer in layers]
    if any(len(row) != len(fractions) for row in rows):
        raise ValueError(f"every layer needs one resistance, or one for each of the {len(fractions)} sections")
    ends = math.fsum(surfaces)
    through = [ends + math.fsum(row[n] for row in rows) for n in range(len(fractions))]
    upper = 1.0 / math.fsum(f / r for f, r in zip(fractions, through, strict=True))
    lower = ends + math.fsum(1.0 / math.fsum(f / r for f, r in zip(fractions, row, strict=True)) for row in rows)
    return Combined(upper=upper, lower=lower)


def fastener_correction(
    *,
    conductivity: float,
    section: float,
    density: float,
    length: float,
    layer_resistance: float,
    total_resistance: float,
    insulation: float | None = None,
) -> float:
    """Return ΔU_f of mechanical fasteners, W/(m²·K).

    ``ΔU_f = alpha λ_f A_f n_f / d1 (R1 / R_tot)²`` with alpha 0.8, or 0.8 d1/d0 where the fastener is recessed.

    Parameters
    ----------
    conductivity
        Of the fastener, W/(m·K).
    section
        Its cross-section, m².
    density
        Fasteners per area, 1/m².
    length
        d1, the length that lies in the insulation, m.
    layer_resistance, total_resistance
        R1 of the insulation they pierce, and R_tot of the part without bridges, m²·K/W.
    insulation
        d0, thickness of the insulation, m; None where they pass all of it.
    """
    alpha = 0.8 if insulation is None else 0.8 * length / insulation
    return alpha * conductivity * section * density / length * (layer_resistance / total_resistance) ** 2


def void_correction(level: int, layer_resistance: float, total_resistance: float) -> float:
    """Return ΔU_g for air voids in the insulation, W/(m²·K), from the level 0, 1 or 2 and R1, R_tot (m²·K/W)."""
    return VOID_LEVELS[level] * (layer_resistance / total_resistance) ** 2
