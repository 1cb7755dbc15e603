"""Air against CoolProp's values (published-checks section 7, and at the ends of its range); user's tables."""

import numpy as np
import pytest

from coldseam.case.films import Convection
from coldseam.physics.convection import film
from coldseam.physics.fluids import Properties, air, tabulated

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


# Pa, °C: density, conductivity, viscosity, specific heat, from CoolProp 8.0.0 (its pseudo-pure air).
COOLPROP_ENDS = {
    (0.5e5, -60): (0.817962, 0.0195734, 1.405848e-5, 1004.340),
    (0.5e5, 200): (0.368086, 0.0382390, 2.604089e-5, 1024.686),
    (101325, -60): (1.659187, 0.0195970, 1.406717e-5, 1006.230),
    (101325, 120): (0.897696, 0.0329895, 2.276314e-5, 1013.344),
    (101325, 200): (0.745810, 0.0382486, 2.604612e-5, 1024.965),
    (2e5, -60): (3.280998, 0.0196431, 1.408422e-5, 1009.890),
    (2e5, 0): (2.553794, 0.0243951, 1.723339e-5, 1007.639),
    (2e5, 200): (1.471670, 0.0382673, 2.605620e-5, 1025.502),
}


@pytest.mark.parametrize(("pressure", "celsius"), COOLPROP_ENDS)
def test_air_at_the_ends_of_its_range(pressure, celsius):
    found = air(celsius, pressure)
    density, conductivity, viscosity, heat = COOLPROP_ENDS[pressure, celsius]
    assert found.density == pytest.approx(density, rel=4e-3)  # an ideal gas at 2 bar and -60 °C
    assert (found.conductivity, found.viscosity) == pytest.approx((conductivity, viscosity), rel=1e-3)
    assert found.specific_heat == pytest.approx(heat, rel=2e-3)


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


@pytest.mark.slow  # importing CoolProp takes ten seconds
def test_air_against_coolprop_itself():
    """Over the whole range of temperatures and pressures, not the places above alone: CoolProp's pseudo-pure air."""
    coolprop = pytest.importorskip("CoolProp.CoolProp")
    worst = np.zeros(4)
    for pressure in (0.5e5, 101325.0, 2e5):
        for celsius in range(-60, 201, 20):
            found = air(float(celsius), pressure)
            own = np.array([found.density, found.conductivity, found.viscosity, found.specific_heat])
            other = [coolprop.PropsSI(key, "T", celsius + 273.15, "P", pressure, "Air") for key in ("D", "L", "V", "C")]
            worst = np.maximum(worst, np.abs(own / other - 1.0))
    # Density is an ideal gas's, 0.4 % off at 2 bar and -60 °C; the others are the formulas that CoolProp has as well.
    assert np.all(worst < [4e-3, 1e-3, 1e-3, 2e-3]), worst


@pytest.mark.slow  # importing CoolProp takes ten seconds
def test_damp_air_makes_the_same_films():
    """README: films of dry air are those of saturated air within 0.2 % up to 40 °C (CoolProp's humid air).

    Free on a plate of 1 m, along one at 5 m/s, across a cylinder of 50 mm at 5 m/s. Vapour that condenses is another matter.
    """
    humid = pytest.importorskip("CoolProp.HumidAirProp").HAPropsSI

    def of(humidity):
        def properties(t):
            volume, k, mu, heat = (
                humid(key, "T", t + 273.15, "P", 101325.0, "R", humidity) for key in ("Vha", "K", "M", "cp_ha")
            )
            return Properties(
                density=1 / volume, conductivity=k, viscosity=mu, specific_heat=heat, expansion=1 / (t + 273.15)
            )

        return properties

    laws = (
        {"kind": "free", "surface": "vertical", "length": 1000},
        {"kind": "forced", "surface": "plate", "length": 1000, "speed": 5},
        {"kind": "forced", "surface": "cylinder", "length": 50, "speed": 5},
    )
    for keys in laws:
        law = Convection.model_validate(keys)
        for celsius in (0.0, 10.0, 20.0, 30.0, 40.0):
            dry, damp = (film(law, celsius - 1.0, celsius + 1.0, of(h)).h for h in (0.0, 1.0))
            assert damp == pytest.approx(dry, rel=2.5e-3) and damp != dry
