"""The shipped cases whose films and conductivities depend on the answer, against estimates by hand.

The brackets are Rayleigh's, as in test_cases.py: adiabatic tubes below, isothermal planes above. Formulas and properties
are typed again from their sources, so that nothing here comes from the program.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from published import runs
from scipy.optimize import brentq

SIGMA = 5.670374419e-8
STEPS = 12


def churchill_chu(warm, cold, length, k, nu, pr):
    """Return h of a vertical plate, W/(m² K) (Churchill, Chu 1975, all Ra)."""
    ra = 9.80665 / (0.5 * (warm + cold) + 273.15) * (warm - cold) * length**3 / nu**2 * pr
    nusselt = (0.825 + 0.387 * ra ** (1 / 6) / (1 + (0.492 / pr) ** (9 / 16)) ** (8 / 27)) ** 2
    return nusselt * k / length


def radiated(surface, around, emissivity):
    return emissivity * SIGMA * ((surface + 273.15) ** 4 - (around + 273.15) ** 4)


def wall_flux(resistance: float) -> float:
    """Return W/m² through a wall (m² K/W) of the freezer case: outer and inner surface balances, by hand.

    Air at 253 K: k .02281, nu 1.1608e-5, Pr .7141 (CoolProp). Outside 4 + 4 v (ISO 6946); clear sky by Swinbank.
    """
    sky = 0.0552 * 305.15**1.5
    around = (0.5 * sky**4 + 0.5 * 305.15**4) ** 0.25 - 273.15

    def inner(t):
        if t <= -24:
            return t + 24  # no solution lies here
        return churchill_chu(t, -24, 4.0, 0.02281, 1.1608e-5, 0.7141) * (t + 24) + radiated(t, -24, 0.9)

    def lacking(q):
        outer = brentq(lambda t: 20 * (32 - t) - radiated(t, around, 0.9) + 0.4 * 500 - q, -60, 90)
        return inner(outer - q * resistance) - q

    return brentq(lacking, 0.5, 80 / resistance)


def test_freezer_wall_between_tubes_and_planes():
    answers = runs.shipped("freezer-wall-sun-and-wind")
    foam, post = 0.15 / 0.027, 0.15 / 0.13
    tubes = 1.14 * wall_flux(foam) + 0.06 * wall_flux(post)
    planes = 1.2 * wall_flux(1 / (0.95 / foam + 0.05 / post))
    # air's properties differ by .1 % and those at -23 °C are used throughout
    assert 0.998 * tubes <= answers["boundaries"]["outside"]["heat_flow"] <= 1.002 * planes
    inside = answers["boundaries"]["inside"]["film_used"]["convection"]
    step = answers["boundaries"]["inside"]["film_used"]["surface_temperature"] + 24
    assert inside["film"] == pytest.approx(churchill_chu(step - 24, -24, 4.0, 0.02281, 1.1608e-5, 0.7141), rel=0.01)
    assert inside["in_range"] and answers["solver"]["coefficient_steps"] <= STEPS


def nist(coefficients, celsius):
    return 10.0 ** np.polynomial.polynomial.polyval(np.log10(celsius + 273.15), coefficients)


def heat(coefficients, warm, cold):
    """Return the integral of a NIST fit over the temperature, W/m."""
    t = np.linspace(cold, warm, 4001)
    k = nist(coefficients, t)
    return float(((k[1:] + k[:-1]) / 2 * np.diff(t)).sum())


STEEL_304 = [-1.4087, 1.3982, 0.2543, -0.6260, 0.2334, 0.4256, -0.4658, 0.1650, -0.0199]
G10_NORMAL = [-4.1236, 13.788, -26.068, 26.272, -14.663, 4.4954, -0.6905, 0.0397]


def test_cold_box_support_between_tubes_and_planes():
    """Tube and pad in series: the pad under the tube's rim alone, and all of the pad at one temperature where they meet."""
    tube = math.pi * (0.030**2 - 0.028**2) / 0.2

    def through(pad_area):
        shape = pad_area / 0.012
        joint = brentq(lambda t: tube * heat(STEEL_304, 26.85, t) - shape * heat(G10_NORMAL, t, -196.15), -196, 26)
        return tube * heat(STEEL_304, 26.85, joint)

    low, high = through(math.pi * (0.030**2 - 0.028**2)), through(math.pi * (0.032**2 - 0.022**2))
    answers = runs.shipped("cold-box-support")
    assert low < answers["boundaries"]["foot"]["heat_flow"] < high
    # the rim's heat spreads into three times its width of pad or more, which brings it near the upper end
    assert answers["boundaries"]["foot"]["heat_flow"] > 0.5 * (low + high)
    assert answers["solver"]["coefficient_steps"] <= STEPS


def test_power_supply_as_a_surface_of_one_temperature():
    """45 W over 0.192 m² of sides and 0.024 m² of lid at one temperature; air at 315 K from Incropera table A.4."""
    air = dict(k=0.0274, nu=17.4e-6, pr=0.705)

    def lost(t):
        sides = churchill_chu(t, 30, 0.3, **air)
        ra = 9.80665 / (0.5 * (t + 30) + 273.15) * (t - 30) * 0.0375**3 / air["nu"] ** 2 * air["pr"]
        lid = 0.54 * ra**0.25 * air["k"] / 0.0375  # McAdams
        return (0.192 * sides + 0.024 * lid) * (t - 30) + 0.216 * radiated(t, 30, 0.55)

    alone = brentq(lambda t: lost(t) - 45, 31, 120)
    answers = runs.shipped("potted-power-supply")
    # one film serves each boundary and 3 mm of aluminium evens out what 0.9 W/(m K) of resin does not
    assert answers["boundaries"]["sides"]["temperature"]["mean"] == pytest.approx(alone, abs=0.5)
    assert answers["boundaries"]["top"]["temperature"]["mean"] == pytest.approx(alone, abs=2.5)
    assert any("caution" in told and "sides" in told for told in answers["warnings"])
    assert answers["limits"]["touch temperature of the sides"]["met"]


def test_double_skin_lid_between_tubes_and_planes():
    """ISO 6946, heat flowing down, more than 5 K: h_a = max(.025/d, .09 dT^.187 d^-.44), E h_r0 for two faces of .9."""

    def gap(mean, fall):
        h_a = max(0.025 / 0.02, 0.09 * fall**0.187 * 0.02**-0.44)
        return 1 / (h_a + 4 * SIGMA * (mean + 273.15) ** 3 / (2 / 0.9 - 1))

    def flux(fraction):
        """Flux where the air, taken to fill the fraction, lies in parallel with the polyamide of the frame."""

        def lacking(q):
            warm, cold = 25 - q * (0.13 + 0.005 / 0.18), -20 + q * (0.2 + 0.005 / 0.18)
            passes = fraction / gap(0.5 * (warm + cold), warm - cold) + (1 - fraction) * 0.25 / 0.02
            return passes * (warm - cold) - q

        return brentq(lacking, 1, 115)

    tubes, planes = 0.33 * flux(1.0) + 0.02 * flux(0.0), 0.35 * flux(0.33 / 0.35)
    answers = runs.shipped("double-skin-lid")
    assert tubes < answers["boundaries"]["above"]["heat_flow"] < planes
    told = answers["bodies"]["gap"]["air_gap"]
    assert told["resistance"] == pytest.approx(gap(told["mean_temperature"], told["difference"]), rel=1e-6)
