"""Water vapour over surfaces, by ISO 13788: saturation pressure, dew point, frost point, relative humidity.

    p_sat = 610.5 exp(17.269 t / (237.3 + t))   over water
    p_sat = 610.5 exp(21.875 t / (265.5 + t))   over ice, t < 0

t in °C, pressures in Pa (ISO 13788, annex E of the 2012 text; formulas from memory, constants confirmed in public
code). The standard takes water from 0 °C up and ice below. Below 0 °C two conventions of relative humidity
are in use: that of the standard, over ice, and that of meteorology and of most instruments, over
supercooled water (WMO-No. 8). Air just saturated over ice at -20 °C has 82 % over water, so
every function names its surface: ``"water"``, ``"ice"``, or ``"standard"`` for the rule of the standard.

All functions take numbers or arrays of any shape.
"""

from __future__ import annotations

from typing import Literal

import numpy as np

Surface = Literal["standard", "water", "ice"]

TRIPLE = 610.5
"""Saturation pressure at 0 °C, Pa."""
WATER = (17.269, 237.3)
ICE = (21.875, 265.5)
MOULD = 0.80
"""Surface relative humidity (monthly mean) from which mould can grow, ISO 13788."""
CONDENSATION = 1.0


def saturation_pressure(temperature, over: Surface = "standard"):
    """Return the saturation pressure of water vapour, Pa.

    Parameters
    ----------
    temperature
        °C, any shape.
    over
        Liquid water (supercooled below 0 °C), ice, or water from 0 °C up and ice below.

    Examples
    --------
    >>> round(float(saturation_pressure(20.0)), 2), round(float(saturation_pressure(-10.0)), 2)
    (2336.95, 259.33)
    >>> round(float(saturation_pressure(-10.0, "water")), 2)
    285.58
    """
    t = np.asarray(temperature, dtype=float)
    water = TRIPLE * np.exp(WATER[0] * t / (WATER[1] + t))
    if over == "water":
        return water
    ice = TRIPLE * np.exp(ICE[0] * t / (ICE[1] + t))
    return ice if over == "ice" else np.where(t < 0.0, ice, water)


def saturation_temperature(pressure, over: Surface = "standard"):
    """Return the temperature at which vapour of a pressure is saturated, °C.

    Parameters
    ----------
    pressure
        Partial pressure of the vapour, Pa, above 0, any shape.
    over
        ``"water"`` gives the dew point, ``"ice"`` the frost point (below 0 °C only), ``"standard"`` the one
        that is met first on cooling a dry surface: the dew point above 0 °C, else the frost point.

    Examples
    --------
    >>> round(float(saturation_temperature(1168.475)), 3)
    9.269
    """
    logarithm = np.log(np.asarray(pressure, dtype=float) / TRIPLE)
    water = WATER[1] * logarithm / (WATER[0] - logarithm)
    if over == "water":
        return water
    ice = ICE[1] * logarithm / (ICE[0] - logarithm)
    return ice if over == "ice" else np.where(logarithm < 0.0, ice, water)


def vapour_pressure(temperature, humidity, over: Surface = "standard"):
    """Return the partial pressure of vapour in air, Pa, from its temperature (°C) and relative humidity (fraction)."""
    return humidity * saturation_pressure(temperature, over)


def surface_humidity(pressure, temperature, over: Surface = "standard"):
    """Return the relative humidity at a surface (fraction, may pass 1).

    Parameters
    ----------
    pressure
        Partial pressure of vapour in the air before it, Pa.
    temperature
        Of the surface, °C, any shape.
    over
        Convention below 0 °C.
    """
    return pressure / saturation_pressure(temperature, over)


def critical_temperature(pressure, humidity):
    """Return the surface temperature (°C) at which the surface's relative humidity is ``humidity`` (fraction).

    ``pressure`` is that of the air's vapour, Pa; over water or ice as in the standard.

    Examples
    --------
    >>> round(float(critical_temperature(vapour_pressure(20.0, 0.5), 0.8)), 3)
    12.625
    """
    return saturation_temperature(np.asarray(pressure, dtype=float) / humidity)


def critical_humidity(temperature, surface_temperature, humidity=CONDENSATION):
    """Return the relative humidity (fraction) of air at which its surface reaches ``humidity``.

    Parameters
    ----------
    temperature, surface_temperature
        Of the air and of the surface, °C, any shape.
    humidity
        Relative humidity at the surface, fraction.
    """
    return humidity * saturation_pressure(surface_temperature) / saturation_pressure(temperature)
