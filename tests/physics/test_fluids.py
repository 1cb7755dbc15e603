"""Air against CoolProp's values (published-checks section 7; where installed over the whole range); user's tables."""

import numpy as np
import pytest

from coldseam.physics.fluids import air, tabulated

# T K: density, conductivity, kinematic viscosity, Prandtl number at 101325 Pa, from CoolProp.
COOLPROP = {
    253.15: (1.3956, 0.02281, 1.1608e-5, 0.7141),
    273.15: (1.2931, 0.02436, 1.3316e-5, 0.7108),
    283.15: (1.2472, 0.02512, 1.4204e-5, 0.7093),
    293.15: (1.2046, 0.02587, 1.5114e-5, 0.7080),
    303.15: (1.1647, 0.02662, 1.6046e-5, 0.7067),
}


@pytest.mark.parametrize("kelvin", COOLPROP)
def test_air_at_one_atmosphere(kelvin):
    found = air(kelvin - 273.15)
    # ideal gas: density 0.1 % low at -20 °C
    assert (found.density, found.conductivity, found.kinematic, found.prandtl) == pytest.approx(
        COOLPROP[kelvin], rel=1.5e-3
    )
    assert found.expansion == pytest.approx(1 / kelvin)


@pytest.mark.parametrize("pressure", [0.5e5, 101325.0, 2e5])
@pytest.mark.parametrize("celsius", [-60.0, -20.0, 20.0, 100.0, 200.0])
def test_air_over_the_whole_range(celsius, pressure):
    coolprop = pytest.importorskip("CoolProp.CoolProp", reason="the optional comparison with CoolProp")
    found = air(celsius, pressure)
    for ours, key, tolerance in (
        (found.density, "D", 4e-3),  # an ideal gas at 2 bar and -60 °C
        (found.conductivity, "L", 1e-3),
        (found.viscosity, "V", 1e-3),
        (found.specific_heat, "C", 2e-3),
    ):
        assert ours == pytest.approx(coolprop.PropsSI(key, "T", celsius + 273.15, "P", pressure, "Air"), rel=tolerance)


def test_air_ends_where_its_range_does():
    assert air(-200.0) == air(-60.0) and air(900.0) == air(200.0)


def test_tabulated_water():
    """Incropera table A.6, saturated water at 280, 290 and 300 K; its expansion coefficient is 174e-6 at 290 K."""
    rows = (
        (280 - 273.15, 1000.0, 0.582, 1422e-6, 4198.0),
        (290 - 273.15, 999.0, 0.598, 1080e-6, 4184.0),
        (300 - 273.15, 997.0, 0.613, 855e-6, 4179.0),
    )
    found = tabulated(rows, 290 - 273.15)
    assert (found.density, found.conductivity, found.viscosity) == (999.0, 0.598, pytest.approx(1080e-6))
    assert found.prandtl == pytest.approx(7.56, rel=2e-3)  # printed
    assert found.expansion == pytest.approx(174e-6, rel=0.25)  # from densities of four digits
    assert np.isfinite(tabulated(rows, 500.0).density)
