"""Exact solutions over time, each with its source; nothing here uses coldseam.

Slab, cylinder and sphere of one temperature meet air at theta = 0 (theta = 1 inside at first): Biot number h L/k, Fourier
number alpha t/L², places x/L from 0 (middle) to 1, L the half thickness or the radius. Series with eigenvalues from the
transcendental equations, found by brentq (Carslaw, Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, 3.11, 7.7, 9.4;
Incropera, DeWitt, Fundamentals of Heat and Mass Transfer, 5.5, 5.6; equations from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from scipy.optimize import brentq
from scipy.special import erf, erfc, erfcx, j0, j1

TERMS = 60


def _roots(equation: Callable[[float], float], ends: np.ndarray) -> np.ndarray:
    """Return the root of an equation in each interval between given ends, (len(ends) - 1,)."""
    pairs = zip(ends[:-1] + 1e-12, ends[1:] - 1e-12, strict=True)
    return np.array([brentq(equation, low, high, xtol=1e-14) for low, high in pairs])


def slab(biot: float, fourier: float, place: float) -> float:
    """Return theta: zeta tan zeta = Bi, C = 4 sin zeta/(2 zeta + sin 2 zeta)."""
    ends = np.append(0.0, (np.arange(TERMS) + 0.5) * np.pi)
    z = np.array([  # one root in each of (n pi, (n + 1/2) pi)
        brentq(lambda z: z * math.sin(z) - biot * math.cos(z), n * math.pi + 1e-12, ends[n + 1]) for n in range(TERMS)
    ])  # fmt: skip
    c = 4 * np.sin(z) / (2 * z + np.sin(2 * z))
    return float(np.sum(c * np.exp(-(z**2) * fourier) * np.cos(z * place)))


def cylinder(biot: float, fourier: float, place: float) -> float:
    """Return theta: zeta J1/J0 = Bi, C = 2 J1/(zeta (J0² + J1²))."""
    from scipy.special import jn_zeros

    zeros = jn_zeros(0, TERMS)
    low = np.append(1e-9, jn_zeros(1, TERMS - 1))
    z = np.array([brentq(lambda z: z * j1(z) - biot * j0(z), a, b) for a, b in zip(low, zeros, strict=True)])
    c = 2 * j1(z) / (z * (j0(z) ** 2 + j1(z) ** 2))
    return float(np.sum(c * np.exp(-(z**2) * fourier) * j0(z * place)))


def sphere(biot: float, fourier: float, place: float) -> float:
    """Return theta: 1 - zeta cot zeta = Bi, C = 4 (sin zeta - zeta cos zeta)/(2 zeta - sin 2 zeta)."""
    z = _roots(lambda z: (1 - biot) * math.sin(z) - z * math.cos(z), np.arange(TERMS + 1) * np.pi)
    c = 4 * (np.sin(z) - z * np.cos(z)) / (2 * z - np.sin(2 * z))
    shape = np.ones(TERMS) if place == 0.0 else np.sin(z * place) / (z * place)
    return float(np.sum(c * np.exp(-(z**2) * fourier) * shape))


def given_off(shape: Callable[[float, float, float], float], biot: float, fourier: float) -> float:
    """Return the part of the whole heat that a slab, cylinder or sphere has given off, from its mean temperature."""
    power = {"slab": 0, "cylinder": 1, "sphere": 2}[shape.__name__]
    x, w = np.polynomial.legendre.leggauss(40)
    places = 0.5 * (x + 1)
    mean = sum(0.5 * w[n] * (power + 1) * p**power * shape(biot, fourier, p) for n, p in enumerate(places))
    return 1.0 - float(mean)


def half_space_with_film(depth: float, time: float, *, k: float, alpha: float, h: float) -> float:
    """Return (T - T_start)/(T_air - T_start) at a depth (m) after a time (s). Carslaw, Jaeger 1959, 2.7."""
    xi, biot = depth / (2 * math.sqrt(alpha * time)), h * math.sqrt(alpha * time) / k
    return float(erfc(xi) - math.exp(-(xi**2)) * erfcx(xi + biot))


def periodic(depth: float, *, alpha: float, period: float) -> tuple[float, float]:
    """Return amplitude (of 1 at the surface) and lag (s) at a depth (m). Carslaw, Jaeger 1959, 2.6."""
    delta = math.sqrt(alpha * period / math.pi)
    return math.exp(-depth / delta), depth / delta * period / (2 * math.pi)


def nafems_t3(place: float, time: float) -> float:
    """Return °C of NAFEMS TNSB rev. 3 (1990) T3: 0.1 m, k 35, rho 7200, c 440.5, from 0 °C; 100 sin(pi t/40) at its end.

    Duhamel's integral of the series for a unit step (Carslaw, Jaeger 1959, 3.5), integrated in closed form.
    """
    length, alpha, omega = 0.1, 35 / (7200 * 440.5), math.pi / 40
    n = np.arange(1, 4000)
    rate = alpha * (n * math.pi / length) ** 2
    weight = 2 * (-1.0) ** n / (n * math.pi) * np.sin(n * math.pi * place / length)
    # integral over s from 0 to t of omega cos(omega s) exp(-rate (t - s))
    wave = rate * math.cos(omega * time) + omega * math.sin(omega * time) - rate * np.exp(-rate * time)
    lag = np.sum(weight * omega * wave / (rate**2 + omega**2))
    return 100.0 * float(place / length * math.sin(omega * time) + lag)


def freezing(surface: float, time: float, *, k: float, c: float, rho: float, latent: float) -> tuple[float, float]:
    """Return front (m) and heat flux out of the surface (W/m²) of a liquid at its melting point, its face K below it.

    Neumann's solution, Carslaw, Jaeger 1959, 11.2: s = 2 lambda sqrt(alpha t), with
    sqrt(pi) lambda exp(lambda²) erf lambda = c ΔT/L.
    """
    alpha = k / (rho * c)
    root = brentq(lambda v: math.sqrt(math.pi) * v * math.exp(v * v) * erf(v) - c * surface / latent, 1e-9, 5.0)
    return 2 * root * math.sqrt(alpha * time), k * surface / (erf(root) * math.sqrt(math.pi * alpha * time))
