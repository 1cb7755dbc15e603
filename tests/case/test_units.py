"""Units against hand-checked values.

Sources: [F] FAO, conversion factors (T0713E, section 13), four digits or so; [N] the rounded
factors of NIST SP 811, appendix B.8 (from memory; 1.730734908 and 5.678264134 also in a public
program's tests); [D] the definition of the unit.
"""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from coldseam.case.units import QUANTITIES, accepted, parse

# (quantity, as typed, SI value, relative tolerance = rounding of the source)
VALUES = [
    ("length", 300, 0.3, 1e-15),  # [D] bare numbers are mm
    ("length", "4 in", 0.1016, 1e-12),  # [D]
    ("length", '4"', 0.1016, 1e-12),  # [D]
    ("length", "4″", 0.1016, 1e-12),  # [D]
    ("length", "0.5 ft", 0.1524, 1e-12),  # [D]
    ("length", "25.4mm", 0.0254, 1e-12),  # [D]
    ("length", "1e-3 m", 1e-3, 1e-15),  # [D]
    ("length", "50 µm", 50e-6, 1e-12),  # [D] micro sign
    ("length", "50 μm", 50e-6, 1e-12),  # [D] Greek mu
    ("length", "−3 mm", -3e-3, 1e-12),  # [D] true minus
    ("length", "+.5 cm", 5e-3, 1e-12),  # [D]
    ("temperature", -20, -20.0, 1e-15),
    ("temperature", "-20 °C", -20.0, 1e-15),
    ("temperature", "−20\u00a0°C", -20.0, 1e-15),  # true minus, no-break space
    ("temperature", "-20 C", -20.0, 1e-15),
    ("temperature", "-20 degC", -20.0, 1e-15),
    ("temperature", "-20 ℃", -20.0, 1e-15),
    ("temperature", "70 degF", 21.1111111111, 1e-10),  # [D] (70 - 32) / 1.8
    ("temperature", "-40 °F", -40.0, 1e-12),  # [D] the scales meet
    ("temperature", "32 F", 0.0, 1e-12),  # [D]
    ("temperature", "70 deg F", 21.1111111111, 1e-10),  # [D]
    ("temperature", "253.15 K", -20.0, 1e-12),  # [D]
    ("temperature", "459.67 °R", -17.7777777778, 1e-10),  # [D] = 0 °F
    ("temperature", "0 K", -273.15, 1e-12),  # [D]
    ("temperature difference", 10, 10.0, 1e-15),
    ("temperature difference", "10 K", 10.0, 1e-15),  # [D] no offset, unlike a temperature
    ("temperature difference", "18 °F", 10.0, 1e-12),  # [D]
    ("conductivity", 0.022, 0.022, 1e-15),
    ("conductivity", "22 mW/mK", 0.022, 1e-12),  # [D]
    ("conductivity", "0.022 W/mK", 0.022, 1e-12),
    ("conductivity", "0.022 W/(m·K)", 0.022, 1e-12),
    ("conductivity", "0.022 W/(m K)", 0.022, 1e-12),
    ("conductivity", "0.022 W/m K", 0.022, 1e-12),
    ("conductivity", "0.022 W/m/K", 0.022, 1e-12),
    ("conductivity", "0.022 W·m⁻¹·K⁻¹", 0.022, 1e-12),
    ("conductivity", "0.022 W/m°C", 0.022, 1e-12),
    ("conductivity", "1 BTU/(h ft F)", 1.730735, 1e-6),  # [N]
    ("conductivity", "1 Btu/hr-ft-°F", 1.730735, 1e-6),  # [N]
    ("conductivity", "1 BTU·in/(h·ft²·°F)", 0.1442279, 1e-6),  # [N]; [F] 0.1442
    ("conductivity", "1 Btu in/h ft2 F", 0.1442279, 1e-6),  # [N]
    ("conductivity", "1 Btu-in/hr-ft2-degF", 0.1442279, 1e-6),  # [N]
    ("conductivity", "1 kcal/m h °C", 1.163, 1e-12),  # [F]
    ("linear transmittance", "0.1 W/mK", 0.1, 1e-12),
    ("point transmittance", "4 mW/K", 0.004, 1e-12),
    ("density", "30 kg/m³", 30.0, 1e-12),
    ("density", "30 kg/m3", 30.0, 1e-12),
    ("density", "2.2 lb/ft3", 2.2 * 16.01846, 1e-6),  # [N]; [F] 16.0185
    ("density", "7.9 g/cm3", 7900.0, 1e-12),  # [D]
    ("specific heat", "1.4 kJ/kgK", 1400.0, 1e-12),
    ("specific heat", "1.4 kJ/(kg·K)", 1400.0, 1e-12),
    ("specific heat", "1 Btu/lb F", 4186.8, 1e-6),  # [N]; [F] 4.187 kJ
    ("film", 8, 8.0, 1e-15),
    ("film", "8 W/m²K", 8.0, 1e-12),
    ("film", "8 W/m2K", 8.0, 1e-12),
    ("film", "8 W/(m²·K)", 8.0, 1e-12),
    ("film", "8 W/(m^2 K)", 8.0, 1e-12),
    ("film", "1 BTU/(h ft2 F)", 5.678263, 1e-6),  # [N]; [F] 5.678
    ("film", "1 BTU/(hr sq ft °F)", 5.678263, 1e-6),  # [N]
    ("film", "1 kcal/m²h°C", 1.163, 1e-12),  # [F]
    ("resistance", "0.13 m2K/W", 0.13, 1e-12),
    ("resistance", "0.13 m²·K/W", 0.13, 1e-12),
    ("resistance", "0.13 (m² K)/W", 0.13, 1e-12),
    ("resistance", "25 h·ft²·°F/BTU", 25 * 0.1761102, 1e-6),  # [N]
    ("resistance", "32 h ft2 F/Btu", 5.636, 1e-4),  # 10 CFR 431 subpart R: R-32 = 5.636 (from memory)
    ("flux", "1 kW/m2", 1e3, 1e-12),
    ("flux", "1 Btu/(h ft2)", 3.154591, 1e-6),  # [N]; [F] 3.155
    ("power", "0.25 kW", 250.0, 1e-12),
    ("power", "1 BTU/h", 0.2930711, 1e-6),  # [N]; [F] 0.293
    ("power", "1 Btu/hr", 0.2930711, 1e-6),  # [N]
    ("power", "1000 kcal/h", 1163.0, 1e-12),  # [F]
    ("power per depth", "12 W/m", 12.0, 1e-12),
    ("power per depth", "1 BTU/(h ft)", 0.9615, 1e-4),  # 0.2930711 / 0.3048
    ("heat_density", "20 kW/m³", 2e4, 1e-12),
    ("heat_density", "1 Btu/(h ft3)", 10.34971, 1e-6),  # 0.2930711 / 0.02831685
    ("heat capacity", "180 kJ/K", 1.8e5, 1e-12),
    ("heat capacity", "1 BTU/F", 1899.1, 1e-4),  # 1055.056 * 1.8
    ("time", "24 h", 86400.0, 1e-12),
    ("time", "10 min", 600.0, 1e-12),
    ("time", "2 days", 172800.0, 1e-12),
    ("air flow", "12 m3/h", 12 / 3600, 1e-12),
    ("air flow", "100 cfm", 0.04719474, 1e-6),  # [N] 4.719474 E-04 each
    ("per area", 4, 4.0, 1e-15),
    ("per area", "1 /ft2", 10.763910, 1e-7),  # 1 ft² = 0.09290304 m²
    ("per area", "0.5 m/m2", 0.5, 1e-15),
    ("mass", "2 lb", 0.90718474, 1e-12),  # [D] 0.45359237 kg each
    ("area", "100 cm2", 0.01, 1e-12),  # [D]
    ("latent heat", "333.6 kJ/kg", 333600.0, 1e-12),  # [D]
    ("ratio", 0.6, 0.6, 1e-15),
    ("ratio", "60 %", 0.6, 1e-12),
    ("ratio", "60%", 0.6, 1e-12),
    ("ratio", "0.005", 0.005, 1e-15),
    ("length per depth", "2 m2/m", 2.0, 1e-12),
    ("speed", 4, 4.0, 1e-15),
    ("speed", "24 km/h", 6.666667, 1e-6),  # 24000 m / 3600 s
    ("speed", "15 mph", 6.7056, 1e-9),  # [N] 4.4704 E-01 each
    ("pressure", 1, 1e5, 1e-15),  # bare numbers are bar
    ("pressure", "1 atm", 101325.0, 1e-12),
    ("pressure", "14.7 psi", 101353.0, 1e-5),  # [N] 6.894757 E+03 each
    ("viscosity", "1 cP", 1e-3, 1e-12),  # [N]
    ("angle", "30 deg", 30.0, 1e-12),
]


@pytest.mark.parametrize(("quantity", "typed", "value", "tolerance"), VALUES)
def test_values(quantity, typed, value, tolerance):
    assert parse(quantity, typed) == pytest.approx(value, rel=tolerance, abs=1e-12)


def test_every_quantity_has_a_hand_checked_value():
    assert {row[0] for row in VALUES} == set(QUANTITIES)


def test_millimetres_are_exact():
    """0.3 m typed as 300 mm is the float 0.3, so that planes and corners meet exactly."""
    assert [parse("length", mm) for mm in (300, 100.1, 47.5)] == [0.3, 0.1001, 0.0475]


REFUSED = [
    ("length", True, "true is not a length"),
    ("length", None, "is not a length"),
    ("length", [1], "is not a length"),
    ("length", math.nan, "not a finite number"),
    ("length", -math.inf, "not a finite number"),
    ("length", 10**400, "not a finite number"),
    ("length", "1e999 mm", "not a finite number"),
    ("length", "nan mm", "does not begin with a number"),
    ("length", "", "does not begin with a number"),
    ("length", "mm", "does not begin with a number"),
    ("length", "300", "has no unit"),
    ("length", "3,5 mm", "has a comma"),
    ("length", "1.000,5 mm", "has a comma"),
    ("length", "1 000 mm", "not a unit of length"),
    ("length", "1/2 in", "decimal"),
    ("length", "1 1/2 in", "decimal"),
    ("length", "3 kg", "accepted is a number in mm or text with one of mm, cm, m"),
    ("length", "3 MM", "not a unit of length"),
    ("length", "3 mm 4", "not a unit of length"),
    ("conductivity", "8 W/m2K", "it is one of film coefficient"),
    ("film", "8 W/mK", "it is one of conductivity"),
    ("film", "8 W/m", "it is one of heat flow per metre of depth"),
    ("temperature", -274, "below absolute zero"),
    ("temperature", "-1 K", "below absolute zero"),
    ("temperature", "-460 F", "below absolute zero"),
    ("temperature", "5 mK", "not a unit of temperature"),
    ("ratio", "60 K", 'text such as "5 %"'),
    ("power", "1 W/m", "not a unit of heat flow"),
]


@pytest.mark.parametrize(("quantity", "typed", "words"), REFUSED)
def test_refusals_say_why_and_what_is_accepted(quantity, typed, words):
    with pytest.raises(ValueError) as error:
        parse(quantity, typed)
    assert words in str(error.value)


@pytest.mark.parametrize("quantity", QUANTITIES)
def test_units_in_messages_are_accepted(quantity):
    table = QUANTITIES[quantity]
    for unit in (*table.units, *table.also):
        assert math.isfinite(parse(quantity, f"1 {unit}")), unit
        name = table.also.get(unit, unit)
        assert parse(quantity, f"300 {unit}") == parse(quantity, f"300 {name}")
    assert parse(quantity, 300) == parse(quantity, f"300 {table.bare}")
    if quantity != "ratio":
        assert all(unit in accepted(quantity) for unit in table.units)


@given(st.sampled_from(sorted(QUANTITIES)), st.text(max_size=20))
def test_any_text_gives_a_number_or_a_value_error(quantity, text):
    try:
        value = parse(quantity, text)
    except ValueError as error:
        assert str(error)
    else:
        assert math.isfinite(value)
