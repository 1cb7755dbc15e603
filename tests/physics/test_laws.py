"""Conductivities over temperature against published fits, integrals and the definition of each form."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from coldseam.case.bodies import Material
from coldseam.case.laws import ConductivityLaw
from coldseam.physics import laws

KELVIN = 273.15


def law(**keys):
    return ConductivityLaw.model_validate(keys)


def library(name):
    return Material.model_validate({"library": name}).law


# NIST cryogenic material properties, published-checks section 8: the fits' own values (to their printed digits).
NIST = [
    ("Stainless steel 304, 4 to 300 K", {4: 0.2724, 20: 2.1686, 77: 7.9207, 150: 11.165, 300: 15.309}),
    ("Aluminium 6061-T6, 4 to 300 K", {4: 5.347, 20: 28.43, 77: 83.53, 150: 120.4, 300: 155.3}),
    ("G-10, through thickness, 10 to 300 K", {20: 0.1564, 77: 0.2800, 150: 0.3737, 300: 0.6080}),
    ("G-10, along warp, 12 to 300 K", {20: 0.1982, 77: 0.3858, 150: 0.5677, 300: 0.8636}),
]
# Integrals of k, W/m, same place; for 304 from 4 to 300 K the published value is about 3.06 kW/m.
INTEGRALS = [
    ("Stainless steel 304, 4 to 300 K", 77, 300, 2704.7, 1e-4),
    ("Stainless steel 304, 4 to 300 K", 4, 300, 3030.8, 2e-3),
    ("Stainless steel 304, 4 to 300 K", 4, 300, 3060.0, 0.015),
    ("Aluminium 6061-T6, 4 to 300 K", 77, 300, 28683.5, 1e-4),
    ("G-10, through thickness, 10 to 300 K", 77, 300, 96.71, 1e-4),
    ("G-10, along warp, 12 to 300 K", 77, 300, 143.25, 1e-4),
]


@pytest.mark.parametrize(("name", "values"), NIST)
def test_nist_fits(name, values):
    kelvin = np.array(list(values))
    found = laws.conductivity(library(name), kelvin - KELVIN)
    assert found == pytest.approx(np.array(list(values.values())), rel=5e-4)  # four digits


@pytest.mark.parametrize(("name", "low", "high", "integral", "tolerance"), INTEGRALS)
def test_integrals_of_conductivity(name, low, high, integral, tolerance):
    ends = np.array([low - KELVIN]), np.array([high - KELVIN])
    assert laws.mean_conductivity(library(name), *ends)[0] * (high - low) == pytest.approx(integral, rel=tolerance)


def test_polynomial_in_either_unit_and_its_mean():
    celsius = law(polynomial=[0.022, 8.8e-5], range=[-40, 40])
    kelvin = law(polynomial=[0.022 - 273.15 * 8.8e-5, 8.8e-5], argument="K", range=[-40, 40])
    t = np.array([-30.0, 0.0, 20.0])
    assert laws.conductivity(celsius, t) == pytest.approx(0.022 * (1 + 0.004 * t), rel=1e-12)
    assert laws.conductivity(kelvin, t) == pytest.approx(laws.conductivity(celsius, t), rel=1e-12)
    # the mean of a straight line lies in the middle
    assert laws.mean_conductivity(celsius, t[:1], t[2:])[0] == pytest.approx(0.022 * (1 - 0.004 * 5), rel=1e-12)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.floats(0.01, 100.0), min_size=2, max_size=7))
def test_tables_never_overshoot(values):
    table = law(table=[[10.0 * n - 30.0, value] for n, value in enumerate(values)])
    low, high = table.limits
    t = np.linspace(low, high, 10 * (len(values) - 1) + 1)
    k = laws.conductivity(table, t)
    for n in range(len(values) - 1):
        part = k[10 * n : 10 * n + 11]
        lowest, highest = sorted(values[n : n + 2])
        slack = 1e-12 * max(values)
        assert lowest - slack <= part.min() and part.max() <= highest + slack
    assert k[::10] == pytest.approx(values, rel=1e-9)


def test_iso_10456_conversions():
    """ISO 10456: times exp(f_T (T2 - T1)) exp(f_psi (psi2 - psi1)); f_T of EPS .0035, f_psi 4 (from memory)."""
    dry = law(value=0.035, at=10, per_kelvin=0.0035)
    wet = law(value=0.035, at=10, per_kelvin=0.0035, moisture={"factor": 4.0, "change": 0.02})
    assert laws.conductivity(dry, np.array(23.0)) == pytest.approx(0.035 * np.exp(0.0035 * 13), rel=1e-12)
    assert laws.conductivity(wet, np.array(10.0)) == pytest.approx(0.035 * np.exp(0.08), rel=1e-12)


FORMS = [
    law(table=[[-50, 0.018], [-20, 0.021], [0, 0.0205], [20, 0.024]]),
    law(polynomial=[0.022, 1e-5, 3e-7], range=[-50, 20]),
    law(log_polynomial=[-1.4, 1.39, 0.25, -0.62], range=[-150, 20]),
    law(value=0.03, at=10, per_kelvin=0.004, range=[-50, 20]),
]


@pytest.mark.parametrize("form", FORMS)
def test_slope_is_the_derivative(form):
    t = np.linspace(-45, 15, 7) + 0.3
    step = 1e-4
    expected = (laws.conductivity(form, t + step) - laws.conductivity(form, t - step)) / (2 * step)
    assert laws.slope(form, t) == pytest.approx(expected, rel=1e-5, abs=1e-12)


@pytest.mark.parametrize("form", FORMS)
def test_nothing_is_extrapolated(form):
    low, high = form.limits
    ends = laws.conductivity(form, np.array([low, high]))
    assert laws.conductivity(form, np.array([low - 100, high + 100])) == pytest.approx(ends, rel=1e-12)
    assert laws.slope(form, np.array([low - 100, high + 100])).tolist() == [0.0, 0.0]
    assert laws.beyond(form, np.array([low, high])) is None
    assert laws.beyond(form, np.array([low - 1, high])) == (low - 1, high)


@pytest.mark.parametrize("form", FORMS[1:])
def test_checks_of_the_case_agree_with_the_law(form):
    """The reader checks with its own scalar evaluation; for fits the two must be one."""
    for t in np.linspace(*form.limits, 5):
        assert form.scalar(float(t)) == pytest.approx(float(laws.conductivity(form, t)), rel=1e-12)


def test_ice():
    """Yen 1981 at 263.15 and 243.15 K (published-checks section 8)."""
    found = laws.conductivity(library("Ice, -30 to 0 °C"), np.array([-10.0, -30.0, 0.0]))
    assert found == pytest.approx([2.193, 2.458, 2.072], rel=5e-4)
