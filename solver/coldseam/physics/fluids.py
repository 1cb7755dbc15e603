"""Properties of the fluid beside a surface: dry air by formula, other fluids by a user's table.

Air: viscosity and conductivity of Lemmon and Jacobsen (2004), International Journal of Thermophysics 25, 21, with
the terms that count up to some bars; the ideal-gas heat capacity of Lemmon et al. (2000), J. Phys. Chem. Ref. Data
29, 331, with a linear term for the pressure (0.2 % a bar) fitted to CoolProp; density as of an ideal gas (within
0.4 % over -60 to 200 °C and 0.5 to 2 bar). Coefficients from memory, confirmed by CoolProp over that whole range in the tests
(conductivity and viscosity within 0.1 %, specific heat within 0.2 %).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import PchipInterpolator

KELVIN = 273.15
AIR_RANGE = (-60.0, 200.0)
"""Temperatures that the properties of air hold for, °C."""
GAS_CONSTANT = 287.0552
"""Of dry air, J/(kg K): 8.31451 J/(mol K) over 28.9586 g/mol, as in the formulation."""


@dataclass(frozen=True, kw_only=True)
class Properties:
    """A fluid at one temperature.

    Parameters
    ----------
    density
        kg/m³.
    conductivity
        W/(m K).
    viscosity
        Dynamic, Pa s.
    specific_heat
        At constant pressure, J/(kg K).
    expansion
        Thermal expansion coefficient, 1/K.
    """

    density: float
    conductivity: float
    viscosity: float
    specific_heat: float
    expansion: float

    @property
    def kinematic(self) -> float:
        """Kinematic viscosity, m²/s."""
        return self.viscosity / self.density

    @property
    def prandtl(self) -> float:
        """Prandtl number."""
        return self.viscosity * self.specific_heat / self.conductivity


def air(temperature: float, pressure: float = 101325.0) -> Properties:
    """Return the properties of dry air at a temperature (°C; beyond -60 to 200 those at the end) and pressure (Pa).

    Examples
    --------
    >>> round(air(20.0).conductivity, 4)
    0.0259
    """
    t = min(max(temperature, AIR_RANGE[0]), AIR_RANGE[1]) + KELVIN
    density = pressure / (GAS_CONSTANT * t)
    tau, delta = 132.6312 / t, density / 342.685
    log = math.log(t / 103.3)
    collision = math.exp(0.431 - 0.4623 * log + 0.08406 * log**2 + 0.005341 * log**3 - 0.00331 * log**4)
    dilute = 0.0266958 * math.sqrt(28.9586 * t) / (0.36**2 * collision)
    viscosity = dilute + delta * (10.72 * tau**0.2 - 8.876 * tau**0.6 * math.exp(-delta))
    conductivity = 1.308 * dilute + 1.405 * tau**-1.1 - 1.036 * tau**-0.3 + 8.743 * tau**0.1 * delta
    return Properties(
        density=density,
        conductivity=1e-3 * conductivity,
        viscosity=1e-6 * viscosity,
        specific_heat=_air_heat(t) + 1.75 * (pressure / 1e5) * (293.15 / t) ** 3,
        expansion=1.0 / t,
    )


def _air_heat(t: float) -> float:
    """Return the ideal-gas specific heat of air, J/(kg K), at t kelvin."""
    nitrogen, oxygen = 3364.011 / t, 2242.45 / t
    vibration = (
        0.791309509 * nitrogen**2 * math.exp(nitrogen) / (math.exp(nitrogen) - 1.0) ** 2
        + 0.212236768 * oxygen**2 * math.exp(oxygen) / (math.exp(oxygen) - 1.0) ** 2
    )
    plain = 3.490888032 + 2.395525583e-6 * t + 7.172111248e-9 * t**2 - 3.115413101e-13 * t**3 + 0.223806688 * t**-1.5
    return GAS_CONSTANT * (plain + vibration)


def tabulated(rows: tuple[tuple[float, ...], ...], temperature: float) -> Properties:
    """Return a fluid's properties from rows of °C, kg/m³, W/(m K), Pa s, J/(kg K); beyond them those at the end.

    The expansion coefficient is ``-(d density / dT) / density``.
    """
    table = np.array(rows)
    t = float(np.clip(temperature, table[0, 0], table[-1, 0]))
    density, conductivity, viscosity, heat = (float(v) for v in PchipInterpolator(table[:, 0], table[:, 1:])(t))
    slope = float(PchipInterpolator(table[:, 0], table[:, 1]).derivative()(t))
    return Properties(
        density=density, conductivity=conductivity, viscosity=viscosity, specific_heat=heat, expansion=-slope / density
    )
