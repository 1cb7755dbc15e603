"""Equivalent conductivity of air in cavities: ISO 10077-2 (rectangular) and the small voids of ISO 6946.

``lambda_eq = d / R``, ``R = 1 / (h_a + h_r)``, d along the heat flow and b across it. Constants C1, C3, C4 from a
public article on the standard, the rest from memory; scalars in SI, temperatures in °C.
"""

from __future__ import annotations

import math

from coldseam.physics.iso6946 import radiative_coefficient

C1, C2, C3, C4 = 0.025, 0.73, 1.57, 2.11
NARROW = 5e-3
"""m: below this width the air does not move."""
STANDARD_MEAN = 283.0 - 273.15
STANDARD_DIFFERENCE = 10.0


def convective(d: float, b: float, difference: float = STANDARD_DIFFERENCE) -> float:
    """Return h_a of a rectangular cavity, W/(m² K), for a temperature difference in K; sizes in m."""
    if b < NARROW:
        return C1 / d
    return max(C1 / d, C2 * abs(difference) ** (1.0 / 3.0))


def exchange(emissivities: tuple[float, float]) -> float:
    """Return E of two parallel faces, ``1 / (1/e1 + 1/e2 - 1)``."""
    return 1.0 / (1.0 / emissivities[0] + 1.0 / emissivities[1] - 1.0)


def radiative(d: float, b: float, emissivities: tuple[float, float] = (0.9, 0.9), mean: float = STANDARD_MEAN) -> float:
    """Return h_r of a rectangular cavity, W/(m² K), at a mean temperature in °C; sizes in m."""
    shape = 0.5 * (1.0 + math.sqrt(1.0 + (d / b) ** 2) - d / b)
    return radiative_coefficient(mean) * exchange(emissivities) * shape


def cavity_conductivity(
    d: float,
    b: float,
    *,
    emissivities: tuple[float, float] = (0.9, 0.9),
    mean: float = STANDARD_MEAN,
    difference: float = STANDARD_DIFFERENCE,
) -> float:
    """Return the equivalent conductivity of a rectangular cavity by ISO 10077-2, W/(m K).

    Parameters
    ----------
    d, b
        Size along and across the heat flow, m.
    emissivities
        Of the two faces that the heat flows between.
    mean, difference
        Mean temperature, °C, and temperature difference of the faces, K.

    Examples
    --------
    >>> round(cavity_conductivity(0.02, 0.02), 4)
    0.0909
    """
    return d * (convective(d, b, difference) + radiative(d, b, emissivities, mean))


def standard_conductivity(d: float, b: float) -> float:
    """Return the same with the rounded constants of the standard (283 K, 10 K, emissivities 0.9), W/(m K); sizes in m.

    Examples
    --------
    >>> round(standard_conductivity(0.02, 0.02), 4)
    0.0911
    """
    h_a = C1 / d if b < NARROW else max(C1 / d, C3)
    return d * (h_a + C4 * (1.0 + math.sqrt(1.0 + (d / b) ** 2) - d / b))


def rectangle_of(area: float, along: float, across: float) -> tuple[float, float]:
    """Return d and b, m, of the rectangle of the same area (m²) and shape as a cavity's bounding one (m).

    Examples
    --------
    >>> rectangle_of(2.0, 4.0, 1.0)
    (2.8284271247461903, 0.7071067811865476)
    """
    return math.sqrt(area * along / across), math.sqrt(area * across / along)


def small_void_radiative(
    d: float, b: float, emissivities: tuple[float, float] = (0.9, 0.9), coefficient: float = 5.1
) -> float:
    """Return h_r of a small or divided void by ISO 6946 D.6, W/(m² K).

    ``h_r = h_r0 / (1/e1 + 1/e2 - 2 + 2 / (1 + sqrt(1 + d²/b²) - d/b))``

    Parameters
    ----------
    d, b
        Depth along the heat flow and width, m.
    coefficient
        h_r0, W/(m² K).
    """
    shape = 2.0 / (1.0 + math.sqrt(1.0 + (d / b) ** 2) - d / b)
    return coefficient / (1.0 / emissivities[0] + 1.0 / emissivities[1] - 2.0 + shape)
