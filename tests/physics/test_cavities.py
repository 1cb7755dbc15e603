"""Air cavities of ISO 10077-2 and small voids of ISO 6946 (published-checks sections 5.1 and 5.2)."""

import pytest

from coldseam.physics import cavities
from coldseam.physics.iso6946 import air_layer_resistance

# d, b in mm: lambda_eq of the full formula at 283 K, 10 K, emissivities 0.9.
PUBLISHED = [
    (5, 5, 0.03987), (10, 10, 0.05474), (20, 20, 0.09093), (10, 50, 0.06327), (50, 10, 0.19419), (20, 100, 0.10799),
    (50, 50, 0.22734),
]  # fmt: skip


@pytest.mark.parametrize(("d", "b", "expected"), PUBLISHED)
def test_equivalent_conductivity(d, b, expected):
    full = cavities.cavity_conductivity(1e-3 * d, 1e-3 * b)
    assert full == pytest.approx(expected, rel=2e-4)
    # the standard's rounded constants (C4 2.11 for 2.1029, C3 1.57 for .73 x 10^(1/3)): within 0.5 %
    assert cavities.standard_conductivity(1e-3 * d, 1e-3 * b) == pytest.approx(full, rel=5e-3)


def test_narrow_cavities_do_not_convect():
    assert cavities.convective(0.020, 0.004, 30.0) == 0.025 / 0.020
    assert cavities.convective(0.020, 0.006, 30.0) == pytest.approx(0.73 * 30 ** (1 / 3))


@pytest.mark.parametrize(("d", "b", "expected"), [(1.0, 1.0, 3.1165), (0.2, 1.0, 3.8600), (1e-9, 1.0, 4.1727)])
def test_small_voids_of_iso_6946(d, b, expected):
    assert cavities.small_void_radiative(d, b) == pytest.approx(expected, abs=2e-4)


def test_rectangle_of_the_same_area_and_shape():
    assert cavities.rectangle_of(6.0, 3.0, 2.0) == pytest.approx((3.0, 2.0))
    d, b = cavities.rectangle_of(0.785, 1.0, 1.0)  # a round hole
    assert d == b and d * b == pytest.approx(0.785)


# ISO 6946 table of unventilated layers, thickness mm: up, horizontal, down (from memory, reproduced by the formula).
TABLE = {
    5: (0.11, 0.11, 0.11), 7: (0.13, 0.13, 0.13), 10: (0.15, 0.15, 0.15), 15: (0.16, 0.17, 0.17),
    25: (0.16, 0.18, 0.19), 50: (0.16, 0.18, 0.21), 100: (0.16, 0.18, 0.22), 300: (0.16, 0.18, 0.23),
}  # fmt: skip


@pytest.mark.parametrize("thickness", TABLE)
def test_iso_6946_table_cell_by_cell(thickness):
    for direction, printed in zip(("up", "horizontal", "down"), TABLE[thickness], strict=True):
        found = air_layer_resistance(1e-3 * thickness, direction)
        assert round(found + 1e-9, 2) == printed
