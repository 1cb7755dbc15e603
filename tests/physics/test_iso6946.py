"""Code formulas of ISO 6946 against printed tables and a worked example."""

from __future__ import annotations

import pytest

from coldseam.physics import iso6946

# ISO 6946, table of unventilated air layers (from memory): emissivity 0.9, 10 °C; mm: (up, horizontal, down).
LAYERS = {5: (0.11, 0.11, 0.11), 7: (0.13, 0.13, 0.13), 10: (0.15, 0.15, 0.15), 15: (0.16, 0.17, 0.17),
          25: (0.16, 0.18, 0.19), 50: (0.16, 0.18, 0.21), 100: (0.16, 0.18, 0.22), 300: (0.16, 0.18, 0.23)}  # fmt: skip


@pytest.mark.parametrize(("thickness", "row"), LAYERS.items())
def test_air_layers(thickness, row):
    for direction, resistance in zip(("up", "horizontal", "down"), row, strict=True):
        found = iso6946.air_layer_resistance(thickness / 1000, direction)
        assert found == pytest.approx(resistance, abs=0.0051), direction  # printed to 0.01


def test_air_layer_unrounded():
    """[independent calculation, printed h_r0 of 5.1] 25 mm up, horizontal, down; 300 mm; emissivity 0.2."""
    at = dict(temperature=(5.1 / (4 * iso6946.STEFAN_BOLTZMANN)) ** (1 / 3) - 273.15)
    found = [iso6946.air_layer_resistance(0.025, way, **at) for way in ("up", "horizontal", "down")]
    assert found == pytest.approx([0.1633, 0.1844, 0.1933], abs=6e-5)
    assert iso6946.air_layer_resistance(0.3, "down", **at) == pytest.approx(0.2285, abs=6e-5)
    low = iso6946.air_layer_resistance(0.025, "horizontal", emissivities=(0.2, 0.9), **at)
    assert low == pytest.approx(0.4449, abs=6e-5)


def test_radiative_coefficient():
    printed = {-10: 4.1, 0: 4.6, 10: 5.1, 20: 5.7, 30: 6.3}  # ISO 6946 table (from memory), printed to 0.1
    for temperature, h in printed.items():
        assert iso6946.radiative_coefficient(temperature) == pytest.approx(h, abs=0.051)
    assert iso6946.radiative_coefficient(10) == pytest.approx(5.149, abs=6e-4)


def test_combined_method():
    """Scottish Building Standards, annex 6.B, timber frame wall: R' 3.435, R'' 3.304, U 0.30."""
    wall = iso6946.combined_method([0.85, 0.15], [0.132, 0.180, 0.069, [3.500, 1.167], 0.060], (0.130, 0.040))
    assert wall.upper == pytest.approx(3.435, abs=6e-4)
    assert wall.lower == pytest.approx(3.304, abs=6e-4)
    assert round(wall.transmittance, 2) == 0.30
    assert wall.error == pytest.approx(0.0195, abs=6e-5)


def test_combined_method_refuses_what_does_not_fit():
    with pytest.raises(ValueError, match="add up to 0.9"):
        iso6946.combined_method([0.85, 0.05], [1.0], (0.13, 0.04))
    with pytest.raises(ValueError, match="one for each of the 2 sections"):
        iso6946.combined_method([0.85, 0.15], [[1.0, 2.0, 3.0]], (0.13, 0.04))


def test_fastener_correction():
    """[independent calculation] d 5 mm, 4 a m², 100 mm of λ 0.035, R_tot 3.12714: λ 50 and 17."""
    given = dict(section=3.14159265 / 4 * 0.005**2, density=4, length=0.1, layer_resistance=0.1 / 0.035,
                 total_resistance=3.12714)  # fmt: skip
    assert iso6946.fastener_correction(conductivity=50, **given) == pytest.approx(0.026225, abs=6e-7)
    assert iso6946.fastener_correction(conductivity=17, **given) == pytest.approx(0.0089166, abs=6e-8)
    recessed = iso6946.fastener_correction(conductivity=50, insulation=0.2, **given)
    assert recessed == pytest.approx(0.026225 / 2, abs=6e-7)


def test_void_correction():
    assert iso6946.void_correction(0, 3.0, 3.2) == 0.0
    assert iso6946.void_correction(2, 3.0, 3.2) == pytest.approx(0.04 * (3.0 / 3.2) ** 2)
