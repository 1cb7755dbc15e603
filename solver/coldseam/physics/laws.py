"""Values over temperature: arrays of temperatures (°C) in, conductivities, W/(m K), and their slopes out.

Tables are interpolated by the monotone cubic of Fritsch and Carlson (scipy's PCHIP), which never
leaves the range of neighbouring points. Nothing is extrapolated: beyond a law's range the value at its end
holds, with slope 0, and :func:`beyond` tells how far a field went.

References: NIST cryogenic material properties (log-polynomials: Marquardt, Le, Radebaugh 2000); ISO 10456 (conversions
by ``exp(f_T (T2 - T1))`` and ``exp(f_psi (psi2 - psi1))``); Fritsch, Carlson 1980, SIAM J. Numer. Anal. 17, 238.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import PchipInterpolator

from coldseam.physics import foam

if TYPE_CHECKING:
    from coldseam.case.laws import ConductivityLaw, Law

KELVIN = 273.15
STEP = 1e-3
"""K, for the slope of a foam's conductivity."""
_GAUSS = tuple(zip(*np.polynomial.legendre.leggauss(4), strict=True))
"""Points on [-1, 1] and weights: exact for polynomials of the seventh degree."""


def conductivity(law: ConductivityLaw, temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity, W/(m K), at temperatures in °C, shape (n,) or any other.

    Examples
    --------
    >>> from coldseam.case.laws import ConductivityLaw
    >>> law = ConductivityLaw.model_validate({"table": [[-20, 0.020], [20, 0.024]]})
    >>> conductivity(law, np.array([-50.0, 0.0, 20.0])).round(4).tolist()
    [0.02, 0.022, 0.024]
    """
    low, high = law.limits
    t = np.clip(np.asarray(temperature, dtype=float), low, high)
    if law.foam is not None:
        k = foam.conductivity(law.foam, t)
    elif law.value is not None:
        k = law.value * np.exp((law.per_kelvin or 0.0) * (t - law.at))
    else:
        k = value(law, t)
    return k * law.wet


def value(law: Law, temperature: np.ndarray) -> np.ndarray:
    """Return a table or a fit at temperatures in °C, shape (n,) or any other, in SI units of the law."""
    t = np.clip(np.asarray(temperature, dtype=float), *law.limits)
    if law.table is not None:
        points = np.array(law.table)
        found: np.ndarray = PchipInterpolator(points[:, 0], points[:, 1])(t)
        return found
    if law.polynomial is not None:
        return np.polynomial.polynomial.polyval(t + (KELVIN if law.argument == "K" else 0.0), law.polynomial)
    return 10.0 ** np.polynomial.polynomial.polyval(np.log10(t + KELVIN), law.log_polynomial)


def slope(law: ConductivityLaw, temperature: np.ndarray) -> np.ndarray:
    """Return dk/dT, W/(m K²), at temperatures in °C, shape (n,) or any other; 0 beyond the range."""
    low, high = law.limits
    temperature = np.asarray(temperature, dtype=float)
    t = np.clip(temperature, low, high)
    if law.foam is not None:
        found = (conductivity(law, t + STEP) - conductivity(law, t - STEP)) / (2.0 * STEP)
    elif law.table is not None:
        points = np.array(law.table)
        found = law.wet * PchipInterpolator(points[:, 0], points[:, 1]).derivative()(t)
    elif law.polynomial is not None:
        derivative = np.polynomial.polynomial.polyder(law.polynomial)
        found = law.wet * np.polynomial.polynomial.polyval(t + (KELVIN if law.argument == "K" else 0.0), derivative)
    elif law.log_polynomial is not None:
        derivative = np.polynomial.polynomial.polyder(law.log_polynomial)
        power = np.polynomial.polynomial.polyval(np.log10(t + KELVIN), derivative)
        found = conductivity(law, t) * power / (t + KELVIN)
    else:
        found = (law.per_kelvin or 0.0) * conductivity(law, t)
    return np.where((temperature < low) | (temperature > high), 0.0, found)


def mean_conductivity(law: ConductivityLaw, first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Return the mean conductivity between pairs of temperatures, ``integral of k dT / (T2 - T1)``.

    With it the heat flow along a straight bar is exact whatever its length is divided into (Kirchhoff's
    transformation). By Gauss's rule, which needs no difference of integrals where the temperatures are close.

    Parameters
    ----------
    first, second
        °C, both of shape (n,) or any other.

    Returns
    -------
    conductivity
        W/(m K), shape (n,) or what it was.
    """
    middle, half = 0.5 * (first + second), 0.5 * (second - first)
    total = np.zeros_like(middle)
    for place, weight in _GAUSS:
        total += 0.5 * weight * conductivity(law, middle + place * half)
    return total


def beyond(law: Law, temperature: np.ndarray) -> tuple[float, float] | None:
    """Return lowest and highest of some temperatures (°C, shape (n,)) where they leave the law's range, else None."""
    low, high = law.limits
    cold, warm = float(np.min(temperature)), float(np.max(temperature))
    slack = 1e-6 * (high - low)
    return (cold, warm) if cold < low - slack or warm > high + slack else None
