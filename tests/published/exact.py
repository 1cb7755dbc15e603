"""Exact solutions the published checks are compared with, each with its source; nothing here uses coldseam."""

from __future__ import annotations

import math

import numpy as np
from scipy.optimize import brentq

EDGE_EXCESS = 1.0 - 2.0 * math.log(2.0) / math.pi
"""Excess shape factor of a right-angled edge over its plain walls, per length; conformal mapping, 0.558729."""

CORNER_EXCESS = 0.1053
"""Excess of a three-wall corner in units of the wall thickness, ± 0.0003 (independent Richardson extrapolation)."""


def square_column(x: float, depth: float) -> float:
    """Return °C in a unit square with one side at 20 °C, the others at 0 °C.

    ``depth`` is the distance from the hot side. Carslaw, Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, section
    5.3 (series from memory, checked against the printed table of ISO 10211 case 1).
    """
    y = 1.0 - depth
    n = np.arange(1, 200, 2)
    # sinh(n pi y)/sinh(n pi) written so that nothing overflows.
    ratio = np.exp(-n * np.pi * depth) * (1 - np.exp(-2 * n * np.pi * y)) / (1 - np.exp(-2 * n * np.pi))
    return float(np.sum(80.0 / (n * np.pi) * np.sin(n * np.pi * x) * ratio))


def _film_roots(width: float, ratio: float, count: int) -> np.ndarray:
    """Return the first roots of b tan(b width) = ratio, 1/m, shape (count,)."""
    roots = []
    for n in range(count):
        low, high = n * math.pi / width + 1e-12, (n + 0.5) * math.pi / width - 1e-12
        roots.append(brentq(lambda b: b * math.sin(b * width) - ratio * math.cos(b * width), low, high))
    return np.array(roots)


def plate_with_films(x: float, y: float) -> tuple[float, float]:
    """Return °C at (x, y) m of NAFEMS T4 and the heat flow into its hot side, W/m.

    Separation of variables (Carslaw, Jaeger 1959, section 5.6): 0.6 x 1.0 m, k 52, 100 °C at y = 0, insulated at
    x = 0, film 750 to 0 °C at the two other sides.
    """
    a, length, k, h, hot = 0.6, 1.0, 52.0, 750.0, 100.0
    b = _film_roots(a, h / k, 4000)
    c = hot * 2 * np.sin(b * a) / (b * a + np.sin(b * a) * np.cos(b * a))
    e = np.exp(-2 * b * (length - y))
    e0 = np.exp(-2 * b * length)
    profile = np.exp(-b * y) * ((b + h / k) + (b - h / k) * e) / ((b + h / k) + (b - h / k) * e0)
    slope = ((b + h / k) - (b - h / k) * e0) / ((b + h / k) + (b - h / k) * e0)
    return float(np.sum(c * np.cos(b * x) * profile)), float(k * np.sum(c * np.sin(b * a) * slope))


def straight_fin(length: float, thickness: float, k: float, h: float, excess: float) -> tuple[float, float]:
    """Return the heat flow into the root, W/m, and the excess temperature of an adiabatic tip, K.

    Incropera, DeWitt, Fundamentals of Heat and Mass Transfer, section 3.6, table 3.4 case B (from memory).
    """
    m = math.sqrt(2 * h / (k * thickness))
    flow = math.sqrt(2 * h * k * thickness) * excess * math.tanh(m * length)
    return flow, excess / math.cosh(m * length)


def skin_over_slab() -> tuple[float, float]:
    """Return for sheet-film.toml the heat flow into the air side, W/m (negative), and °C at the skin's far end.

    With u = T0 - T = sum a_n cos(b_n x) cosh(b_n y), b_n = (n + 1/2) pi/L, the condition on the skin's face
    k dT/dy = k_s t d2T/dx2 - h T gives a_n = h c_n / (k b sinh(bH) + (k_s t b² + h) cosh(bH)), where the c_n
    expand T0. Own derivation by separation of variables.
    """
    length, height, k, skin, h, hot = 0.3, 0.06, 0.03, 50 * 0.001, 10.0, 20.0
    n = np.arange(20000)
    b = (n + 0.5) * np.pi / length
    c = hot * 2 * (-1.0) ** n / (b * length)
    face = h * c / (k * b * np.tanh(b * height) + skin * b**2 + h)
    mean_excess = np.sum(face * (-1.0) ** n / b) / length
    return float(-h * length * (hot - mean_excess)), float(hot - np.sum(face))


def eccentric_cylinders(outer: float, inner: float, offset: float) -> float:
    """Return S/L between two cylinders (diameters, distance of axes). Incropera, DeWitt, table 4.1 (from memory)."""
    return 2 * math.pi / math.acosh((outer**2 + inner**2 - 4 * offset**2) / (2 * outer * inner))


def series(*resistances: float) -> float:
    """Return the coefficient of heat transmission of layers in series, W/(m² K), from m² K/W."""
    return 1.0 / math.fsum(resistances)
