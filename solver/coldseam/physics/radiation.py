"""Radiation of grey surfaces to large surroundings, the sky, and the sun: arrays in, arrays out.

``q = emissivity sigma (T_r^4 - T_s^4)`` into the surface, T in kelvin. T_r is that of a black enclosure; where a
part F of it is sky, ``T_r^4 = F T_sky^4 + (1 - F) T_surroundings^4``.
"""

from __future__ import annotations

import numpy as np

STEFAN_BOLTZMANN = 5.670374419e-8
"""W/(m² K⁴), CODATA 2018."""
KELVIN = 273.15


def secant(emissivity: np.ndarray | float, surface: np.ndarray, radiant: float) -> np.ndarray:
    """Return h_r with ``q = h_r (t_r - t_s)`` exactly, W/(m² K).

    Parameters
    ----------
    emissivity
        Of the surface, 0 to 1, one number or shape (n,).
    surface
        °C, shape (n,).
    radiant
        Temperature of the surroundings, °C.

    Examples
    --------
    >>> round(float(secant(0.9, np.array(10.0), 20.0)), 4)
    4.8854
    """
    a, b = np.asarray(surface, dtype=float) + KELVIN, radiant + KELVIN
    return emissivity * STEFAN_BOLTZMANN * (a**2 + b**2) * (a + b)


def tangent(emissivity: np.ndarray | float, surface: np.ndarray) -> np.ndarray:
    """Return ``-dq/dT_s = 4 emissivity sigma T_s³``, W/(m² K), at surface temperatures in °C, (n,)."""
    return 4.0 * emissivity * STEFAN_BOLTZMANN * (np.asarray(surface, dtype=float) + KELVIN) ** 3


def radiant_temperature(surroundings: float, sky: float | None = None, share: float = 0.0) -> float:
    """Return T_r in °C of surroundings (°C) with a sky (°C) as the part ``share`` of the view.

    Examples
    --------
    >>> round(radiant_temperature(10.0, -10.0, 0.5), 2)
    0.55
    """
    if sky is None:
        return surroundings
    fourth = share * (sky + KELVIN) ** 4 + (1.0 - share) * (surroundings + KELVIN) ** 4
    return float(fourth**0.25) - KELVIN


def clear_sky(air: float) -> float:
    """Return the temperature of a clear sky, °C, from that of the air near the ground, °C.

    ``T_sky = 0.0552 T_air^1.5`` in kelvin (Swinbank 1963, Q. J. R. Meteorol. Soc. 89, 339; from memory).

    Examples
    --------
    >>> round(clear_sky(20.0), 1)
    3.9
    """
    return 0.0552 * (air + KELVIN) ** 1.5 - KELVIN
