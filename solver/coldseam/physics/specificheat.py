"""Specific heat over temperature as heat content: what a kilogram holds, not how its slope is.

    e(T) = integral of c from the lower end of the law's range to T

with c interpolated by the monotone cubic of a table's points, or of ``POINTS`` points of a fit (evenly spaced in the
logarithm of kelvin, as c falls off fastest near absolute zero), so that e is its exact integral: a quartic
spline that rises strictly. Beyond the range c keeps the value at its end and e goes on straight. A step over time carries e
(solution/stepper.py), so no heat is lost however much c changes in it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import PchipInterpolator, PPoly

from coldseam.physics import laws

if TYPE_CHECKING:
    from coldseam.case.laws import SpecificHeatLaw

POINTS = 401


@dataclass(frozen=True, kw_only=True, eq=False)
class HeatCurve:
    """Heat content of a kilogram.

    Parameters
    ----------
    slope, content
        c, J/(kg K), and e, J/kg, as piecewise polynomials of °C.
    low, high
        The law's range, °C.
    """

    slope: PPoly
    content: PPoly
    low: float
    high: float

    def specific_heat(self, temperature: np.ndarray) -> np.ndarray:
        """Return c, J/(kg K), at temperatures in °C, shape (n,) or any other."""
        found: np.ndarray = self.slope(np.clip(temperature, self.low, self.high))
        return found

    def heat(self, temperature: np.ndarray) -> np.ndarray:
        """Return e, J/kg, at temperatures in °C, shape (n,) or any other."""
        inside = np.clip(temperature, self.low, self.high)
        found: np.ndarray = self.content(inside) + self.specific_heat(temperature) * (temperature - inside)
        return found


def heat_curve(law: SpecificHeatLaw) -> HeatCurve:
    """Return the heat content that belongs to a specific heat over temperature.

    Examples
    --------
    >>> from coldseam.case.laws import SpecificHeatLaw
    >>> curve = heat_curve(SpecificHeatLaw.model_validate({"table": [[0, 100], [100, 300]]}))
    >>> curve.heat(np.array([0.0, 100.0, 110.0])).round(6).tolist()
    [0.0, 20000.0, 23000.0]
    """
    low, high = law.limits
    if law.table is not None:
        points = np.array(law.table)[:, 0]
    else:
        points = np.geomspace(low + laws.KELVIN, high + laws.KELVIN, POINTS) - laws.KELVIN
        points[0], points[-1] = low, high
    slope = PchipInterpolator(points, laws.value(law, points))
    return HeatCurve(slope=slope, content=slope.antiderivative(), low=low, high=high)
