"""The make-up of foam: its parts, ageing, the cold, against ranges of handbooks and limits of the formulas."""

import numpy as np
import pytest

from coldseam.case.laws import ConductivityLaw
from coldseam.physics import foam, gases, laws


def made(**keys):
    plain = {"density": 35, "cell_size": 0.3, "gas": {"cyclopentane": 0.4, "carbon dioxide": 0.4}}
    return ConductivityLaw.model_validate({"foam": plain | keys})


def k(law, t):
    return float(laws.conductivity(law, np.array(float(t))))


def test_fresh_and_aged_rigid_foam():
    """ASHRAE Refrigeration 2014 ch. 24: aged polyurethane board .023 to .026 at 24 °C; fresh foam is below .021."""
    fresh, aged = made(), made(gas={"cyclopentane": 0.35, "carbon dioxide": 0.02, "air": 0.9})
    assert 0.016 < k(fresh, 24) < 0.021
    assert 0.021 < k(aged, 24) < 0.026


def test_gas_part_is_the_gas_of_the_cells():
    """Foam of air alone: still air (.0251 W/(m K) at 10 °C, CoolProp) in all but the solid's part of the volume."""
    law = made(gas={"air": 1.0}).foam
    gas = foam.parts(law, np.array([10.0]))[0][0]
    assert gas == pytest.approx((1 - 35 / 1240) * 0.0251, rel=0.05)


def test_condensing_gas_makes_a_minimum():
    law = made(gas={"cyclopentane": 0.4, "air": 0.4})
    t = np.linspace(-60, 40, 201)
    values = laws.conductivity(law, t)
    lowest = t[np.argmin(values)]
    assert -10 < lowest < 25
    # it lies where cyclopentane's partial pressure meets its saturation
    partial = 0.4e5 * (lowest + 273.15) / 293.15
    assert float(gases.vapour_pressure(gases.GASES["cyclopentane"], lowest)) == pytest.approx(
        partial, rel=0.1
    )  # steps of .5 K
    assert values[0] > values.min() * 1.05


def test_parts_add_up_and_radiation_grows_as_t_cubed():
    law = made().foam
    t = np.array([0.0, 20.0])
    gas, solid, radiation = foam.parts(law, t)
    assert foam.conductivity(law, t) == pytest.approx(gas + solid + radiation, rel=1e-12)
    assert radiation[1] / radiation[0] == pytest.approx((293.15 / 273.15) ** 3, rel=1e-12)
    # Rosseland: 16 sigma T³ / (3 K), by hand with K of finer cells
    finer = made(cell_size=0.1).foam
    assert foam.extinction(finer) > 2.5 * foam.extinction(law)
    assert radiation[1] == pytest.approx(16 * 5.670374419e-8 * 293.15**3 / (3 * foam.extinction(law)), rel=1e-9)


def test_solid_part():
    """rho/rho_s k_s (2 - f) / 3: 35/1240 x .26 x 1.2 / 3 = .002935 (by hand)."""
    assert foam.parts(made().foam, np.array([10.0]))[1][0] == pytest.approx(0.002935, rel=1e-3)
