"""Grey radiation against values of published-checks section 7 and the definition."""

import numpy as np
import pytest

from coldseam.physics import radiation

SIGMA = 5.670374419e-8


# surface, surroundings K, emissivity, h_r.
@pytest.mark.parametrize(
    ("surface", "around", "h"),
    [(293.15, 283.15, 4.8854), (298.15, 278.15, 4.8898), (253.15, 248.15, 3.2148)],
)
def test_published_films(surface, around, h):
    found = radiation.secant(0.9, np.array(surface - 273.15), around - 273.15)
    assert float(found) == pytest.approx(h, abs=6e-5)


def test_secant_and_tangent():
    t = np.array([-100.0, 0.0, 100.0])
    flux = radiation.secant(0.8, t, 20.0) * (20.0 - t)
    assert flux == pytest.approx(0.8 * SIGMA * (293.15**4 - (t + 273.15) ** 4), rel=1e-12)
    step = 1e-3
    beside = radiation.secant(0.8, t + step, 20.0) * (20.0 - t - step)
    assert radiation.tangent(0.8, t) == pytest.approx((flux - beside) / step, rel=1e-4)


def test_sky_is_mixed_in_fourth_powers():
    assert radiation.radiant_temperature(10.0) == 10.0
    mixed = radiation.radiant_temperature(10.0, -20.0, 0.5) + 273.15
    assert mixed**4 == pytest.approx(0.5 * (283.15**4 + 253.15**4), rel=1e-12)
    # Swinbank's formula at 20 °C: 0.0552 * 293.15^1.5 = 277.06 K (by hand)
    assert radiation.clear_sky(20.0) == pytest.approx(3.91, abs=0.01)
