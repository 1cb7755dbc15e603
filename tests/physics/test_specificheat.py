"""Specific heat over temperature: heat content against integrals by quadrature, and the library's fits against handbooks."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from coldseam.case import library
from coldseam.case.laws import SpecificHeatLaw
from coldseam.physics import laws
from coldseam.physics.specificheat import heat_curve

GAS = 8.314462618  # J/(mol K), CODATA 2018


def law(**keys) -> SpecificHeatLaw:
    return SpecificHeatLaw.model_validate(keys)


def of_library(name: str) -> SpecificHeatLaw:
    return SpecificHeatLaw.model_validate(library.lookup(name).heat_law)


def debye(kelvin: float, theta: float, kilogram_per_mole: float) -> float:
    """Return Debye's c_v, J/(kg K): 9 R/M (T/theta)^3 times the integral of x^4 e^x/(e^x - 1)^2 to theta/T."""
    inside, _ = quad(lambda x: x**4 * np.exp(x) / np.expm1(x) ** 2, 1e-9, theta / kelvin)
    return 9 * GAS / kilogram_per_mole * (kelvin / theta) ** 3 * inside


@pytest.mark.parametrize(
    "made",
    [
        law(polynomial=[400.0, 1.5, 2e-3], range=[-190, 40]),
        law(polynomial=[10.0, 2.0], argument="K", range=[-190, 40]),
        of_library("Stainless steel 304, 4 to 300 K"),
        of_library("Aluminium 6061-T6, 4 to 300 K"),
    ],
    ids=["°C", "K", "304", "6061"],
)
def test_content_is_the_integral_of_the_fit(made):
    """scipy's quadrature of the same fit; 401 points of a monotone cubic leave 1e-5."""
    curve = heat_curve(made)
    low, high = made.limits
    for first, second in ((low + 1, high - 1), (low + 60, low + 100), (high - 30, high)):
        exact, _ = quad(lambda t: float(laws.value(made, np.array(t))), first, second, epsrel=1e-10, limit=200)
        found = curve.heat(np.array([second])) - curve.heat(np.array([first]))
        assert float(found[0]) == pytest.approx(exact, rel=1e-5)


def test_content_goes_on_straight_beyond_the_range():
    curve = heat_curve(law(table=[[-100, 200], [0, 400]]))
    at = np.array([-150.0, -100.0, 0.0, 30.0])
    assert curve.heat(at) == pytest.approx([-10_000, 0, 30_000, 42_000], abs=1e-6)
    assert curve.specific_heat(at) == pytest.approx([200, 200, 400, 400])


@pytest.mark.parametrize(
    ("name", "handbook"),
    [
        # Corruccini, Gniewek 1960, NBS Monograph 21: pure metals (from memory); NIST states 5 % for the fit of 6061.
        ("Aluminium 6061-T6, 4 to 300 K", {80: 357, 100: 481, 200: 797, 300: 902}),
        ("Copper, OFHC, RRR 100, 4 to 300 K", {80: 205, 100: 254, 200: 356, 300: 386}),
        # Handbooks of cryogenics for 18-8 steel (from memory); 77 K differs between them by some 5 %.
        ("Stainless steel 304, 4 to 300 K", {77: 200, 300: 477}),
        ("Stainless steel 316, 4 to 300 K", {77: 200, 300: 468}),
    ],
)
def test_cryogenic_fits_are_near_handbook_values(name, handbook):
    made = of_library(name)
    for kelvin, value in handbook.items():
        assert float(laws.value(made, np.array(kelvin - 273.15))) == pytest.approx(value, rel=0.06), kelvin


@pytest.mark.parametrize(
    ("name", "theta", "mole", "within"),
    [
        ("Copper, OFHC, RRR 100, 4 to 300 K", 310, 0.063546, 0.06),
        ("Aluminium 6061-T6, 4 to 300 K", 390, 0.026982, 0.06),
    ],
)
def test_metals_follow_debye(name, theta, mole, within):
    """Debye temperatures at 298 K (Gschneidner 1964, from memory; those of the limit at 0 K are a tenth higher).

    They hold well above a fifth of themselves; the fits are good to 2 and 5 %.
    """
    made = of_library(name)
    for kelvin in (77, 100, 150):
        assert float(laws.value(made, np.array(kelvin - 273.15))) == pytest.approx(
            debye(kelvin, theta, mole), rel=within
        )


def test_two_fits_of_316_meet():
    """The table at 50 K, where NIST changes from one fit to the other, has no step above the fits' 2 to 3 %."""
    made = of_library("Stainless steel 316, 4 to 300 K")
    around = [float(laws.value(made, np.array(k - 273.15))) for k in (45, 50, 55)]
    assert around[1] == pytest.approx(0.5 * (around[0] + around[2]), rel=0.05)
