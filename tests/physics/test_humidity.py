"""Humidity against ISO 13788's formulas as tabulated independently, and against ASHRAE's equation."""

from __future__ import annotations

import pytest

from coldseam.physics import humidity

# Pa; the formulas of ISO 13788 (from memory, constants confirmed in public code) evaluated independently.
PRESSURES = {-30: 37.62, -20: 102.74, -10: 259.33, -5: 401.18, 0: 610.5, 10: 1227.31, 20: 2336.95, 25: 3165.92,
             30: 4240.51, 43: 8634.01}  # fmt: skip
DEW_POINTS = {(30, 0.70): 23.92, (25, 0.60): 16.70, (35, 0.80): 31.02, (32, 0.85): 29.15}


@pytest.mark.parametrize(("temperature", "pressure"), PRESSURES.items())
def test_saturation_pressure(temperature, pressure):
    assert humidity.saturation_pressure(temperature) == pytest.approx(pressure, abs=0.006)  # printed to 0.01 Pa


@pytest.mark.parametrize(("air", "dew_point"), DEW_POINTS.items())
def test_dew_points(air, dew_point):
    found = humidity.saturation_temperature(humidity.vapour_pressure(*air))
    assert found == pytest.approx(dew_point, abs=0.006)  # printed to 0.01 K


def test_temperature_factor_of_the_german_minimum():
    """DIN 4108-2: f_Rsi >= 0.70 is 20 °C, 50 % inside, -5 °C outside, 80 % at the surface."""
    pressure = humidity.vapour_pressure(20, 0.5)
    assert pressure == pytest.approx(1168.48, abs=0.006)
    assert humidity.saturation_temperature(pressure) == pytest.approx(9.269, abs=6e-4)
    coldest = humidity.critical_temperature(pressure, humidity.MOULD)
    assert coldest == pytest.approx(12.625, abs=6e-4)
    assert (coldest + 5) / 25 == pytest.approx(0.70498, abs=6e-6)


@pytest.mark.parametrize(
    ("over", "temperatures"), [("water", (-25, -3, 4, 30)), ("ice", (-30, -0.1)), ("standard", (-8, 8))]
)
def test_saturation_temperature_is_the_inverse(over, temperatures):
    for t in temperatures:
        assert humidity.saturation_temperature(humidity.saturation_pressure(t, over), over) == pytest.approx(
            t, abs=1e-9
        )


def test_the_two_conventions_below_zero():
    """Ice holds its vapour more tightly: saturated over ice is below 100 % over water, by 1 % a kelvin or so."""
    over_ice, over_water = (humidity.surface_humidity(102.74, -20, over) for over in ("standard", "water"))
    assert over_ice == pytest.approx(1.0, abs=1e-4)
    # WMO-No. 8 (from memory): e_i/e_w at -20 °C is 103.24/125.40 = 0.823.
    assert over_water == pytest.approx(0.823, abs=0.005)
    assert humidity.surface_humidity(1000, 10, "standard") == humidity.surface_humidity(1000, 10, "water")
    # Frost comes before dew on cooling: the frost point is above the dew point of the same vapour.
    assert humidity.saturation_temperature(200, "ice") > humidity.saturation_temperature(200, "water")


def test_ashrae_s_equation_is_near():
    """psychrolib (Hyland, Wexler 1983): 0.25 % from -10 to 43 °C, 0.5 % (printed to 0.1) at -20, 1.1 % at -30 °C."""
    psychrolib = pytest.importorskip("psychrolib")
    psychrolib.SetUnitSystem(psychrolib.SI)
    for temperature, allowed in ((-30, 0.011), (-20, 0.0055), (-10, 0.0025), (5, 0.0025), (20, 0.0025), (43, 0.0025)):
        expected = psychrolib.GetSatVapPres(temperature)
        assert humidity.saturation_pressure(temperature) == pytest.approx(expected, rel=allowed)


def test_cold_room_panel():
    """[own calculation] λ 0.022, Rs 0.13/0.13, 25 °C 60 % outside, -20 inside: humidity on the outer surface."""
    for thickness, surface, relative in ((0.06, 23.042, 0.675), (0.1, 23.783, 0.645), (0.15, 24.174, 0.630)):
        u = 1 / (0.26 + thickness / 0.022)
        assert 25 - 45 * 0.13 * u == pytest.approx(surface, abs=6e-4)
        pressure = humidity.vapour_pressure(25, 0.6)
        assert humidity.surface_humidity(pressure, surface) == pytest.approx(relative, abs=6e-4)


def test_humidity_at_which_trouble_begins():
    for trouble in (humidity.MOULD, humidity.CONDENSATION):
        begins = humidity.critical_humidity(25, 18.0, trouble)
        pressure = humidity.vapour_pressure(25, begins)
        assert humidity.surface_humidity(pressure, 18.0) == pytest.approx(trouble, rel=1e-12)
