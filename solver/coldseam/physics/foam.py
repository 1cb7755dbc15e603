"""Conductivity of closed-cell foam from its parts: gas in the cells, solid, and radiation through both.

    k = (1 - s) k_gas + s k_solid (2 - f) / 3 + 16 sigma T³ / (3 K),     s = density / solid density
    K = 4.10 sqrt(f s) / d + (1 - f) s K_w

f is the part of the solid in the struts, d the cells' diameter, K_w the extinction of the solid of the walls
(Glicksman 1994, in Hilyard and Cunningham, Low Density Cellular Plastics, chapter 5; from memory). The gas is a
mixture by kinetic theory (:mod:`coldseam.physics.gases`) whose amounts are given as partial pressures at 20 °C: they
change as air comes in and the blowing gas leaves, which is ageing. In the cold a vapour condenses: no partial pressure
is above saturation, so that the conductivity rises again below some temperature.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from coldseam.physics import gases
from coldseam.physics.radiation import STEFAN_BOLTZMANN

if TYPE_CHECKING:
    from coldseam.case.laws import FoamLaw

KELVIN = 273.15
REFERENCE = 20.0
"""°C, at which the partial pressures are given."""


def gas_conductivity(pressures: Mapping[str, float], temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity of the gas in closed cells, W/(m K), shape (n,).

    Parameters
    ----------
    pressures
        Partial pressures at 20 °C, Pa, by name of the gas.
    temperature
        °C, shape (n,).
    """
    t = np.asarray(temperature, dtype=float)
    warm = (t + KELVIN) / (REFERENCE + KELVIN)
    there = {n: np.minimum(p * warm, gases.vapour_pressure(gases.GASES[n], t)) for n, p in pressures.items()}
    return gases.mixture_conductivity(there, t)


def extinction(foam: FoamLaw) -> float:
    """Return the extinction coefficient K of a foam for heat radiation, 1/m."""
    solid = foam.density / foam.solid_density
    struts = foam.strut_fraction
    return 4.10 * (struts * solid) ** 0.5 / foam.cell_size + (1.0 - struts) * solid * foam.wall_extinction


def parts(foam: FoamLaw, temperature: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the parts of gas, solid and radiation of a foam's conductivity, W/(m K), each (n,), at °C, (n,)."""
    t = np.asarray(temperature, dtype=float)
    solid = foam.density / foam.solid_density
    gas = (1.0 - solid) * gas_conductivity(foam.gas, t)
    matter = np.full_like(t, solid * foam.solid_conductivity * (2.0 - foam.strut_fraction) / 3.0)
    return gas, matter, 16.0 * STEFAN_BOLTZMANN * (t + KELVIN) ** 3 / (3.0 * extinction(foam))


def conductivity(foam: FoamLaw, temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity of a foam, W/(m K), at temperatures in °C, shape (n,)."""
    gas, matter, radiation = parts(foam, temperature)
    return gas + matter + radiation
