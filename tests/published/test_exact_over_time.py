"""The exact solutions against numbers that others printed, before anything is measured with them."""

from __future__ import annotations

import pytest

from published import exact_over_time as exact

# Incropera, DeWitt, table 5.1 (from memory), summed independently (published-checks 4.1): centre, surface, Q/Q0.
PRINTED = {
    ("slab", 0.1, 1.0): (0.922389, 0.878126, 0.092413),
    ("slab", 1.0, 0.05): (0.999751, 0.790377, 0.042690),
    ("slab", 10.0, 0.2): (0.829255, 0.122482, 0.416738),
    ("cylinder", 0.1, 1.0): (0.842990, 0.802375, 0.177401),
    ("cylinder", 1.0, 0.2): (0.870174, 0.570228, 0.281484),
    ("cylinder", 10.0, 0.2): (0.600232, 0.074844, 0.688324),
    ("sphere", 0.1, 1.0): (0.767431, 0.730368, 0.254901),
    ("sphere", 1.0, 0.2): (0.772312, 0.495912, 0.398190),
    ("sphere", 10.0, 0.2): (0.382664, 0.041055, 0.847561),
}


@pytest.mark.parametrize(("shape", "biot", "fourier"), PRINTED)
def test_series(shape, biot, fourier):
    of = getattr(exact, shape)
    found = of(biot, fourier, 0.0), of(biot, fourier, 1.0), exact.given_off(of, biot, fourier)
    assert found == pytest.approx(PRINTED[shape, biot, fourier], abs=2e-6)


def test_half_space_wave_bar_and_front():
    """published-checks 2, 4.2 and 4.4: concrete and air, daily wave, NAFEMS T3, water freezing at -10 and -20 °C."""
    concrete = dict(k=1.65, alpha=1.65 / 2.2e6, h=25.0)
    assert 20 - 40 * exact.half_space_with_film(0.05, 3600, **concrete) == pytest.approx(11.702, abs=1e-3)
    assert 20 - 40 * exact.half_space_with_film(0.0, 6 * 3600, **concrete) == pytest.approx(-9.470, abs=1e-3)
    amplitude, lag = exact.periodic(0.1, alpha=1.65 / 2.2e6, period=86400)
    assert (amplitude, lag / 3600) == pytest.approx((0.49843, 2.6596), abs=1e-4)
    assert exact.nafems_t3(0.08, 32.0) == pytest.approx(36.6031, abs=1e-3)
    assert exact.nafems_t3(0.06, 32.0) == pytest.approx(8.6678, abs=1e-3)
    water = dict(k=2.22, c=2050, rho=1000, latent=333.6e3)
    assert exact.freezing(10, 3600, **water) == pytest.approx((21.670e-3, 1034.7), rel=1e-4)
    assert exact.freezing(20, 3600, **water) == pytest.approx((30.350e-3, 1491.8), rel=1e-4)
