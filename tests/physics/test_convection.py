"""Film coefficients against published values and handbook examples (published-checks section 7)."""

import math

import pytest

from coldseam.case.films import Convection
from coldseam.physics.convection import film, slope
from coldseam.physics.fluids import Properties, air

FREE = {"kind": "free"}
FORCED = {"kind": "forced"}


def made(t_surface, t_fluid, properties=air, **keys):
    return film(Convection.model_validate(keys), t_surface, t_fluid, properties)


# surface and air temperature, keys, number, its value, Nu, h: `ht` 1.2.0 with air from CoolProp.
PUBLISHED = [
    (5, 25, FREE | {"surface": "vertical", "length": 2000}, 1.7964e10, 303.64, 3.871),
    (20, 25, FREE | {"surface": "vertical", "length": 2000}, 3.9874e9, 188.80, 2.460),
    (10, 20, FREE | {"surface": "vertical", "length": 500}, 1.4035e8, 67.56, 3.445),
    (20, 10, FREE | {"surface": "facing up", "length": 500}, 1.4035e8, 77.95, 3.975),
    (10, 20, FREE | {"surface": "facing down", "length": 500}, 1.4035e8, 77.95, 3.975),
    (10, 20, FREE | {"surface": "facing up", "length": 500}, 1.4035e8, 29.39, 1.499),
    (20, 10, FREE | {"surface": "facing down", "length": 500}, 1.4035e8, 29.39, 1.499),
    (20, 0, FREE | {"surface": "horizontal cylinder", "length": 100}, 2.4355e6, 18.717, 4.702),
    (20, 20, FORCED | {"surface": "cylinder", "length": 50, "speed": 5}, 16541, 71.04, 36.76),
    (20, 20, FORCED | {"surface": "cylinder", "length": 100, "speed": 10}, 66165, 164.01, 42.44),
    (20, 20, FORCED | {"surface": "plate", "length": 2000, "speed": 1}, 1.3233e5, 2.785 * 2 / 0.02587, 2.785),
    (20, 20, FORCED | {"surface": "plate", "length": 2000, "speed": 4}, 5.2932e5, 6.138 * 2 / 0.02587, 6.138),
    (20, 20, FORCED | {"surface": "plate", "length": 2000, "speed": 10}, 1.3233e6, 23.636 * 2 / 0.02587, 23.636),
]


@pytest.mark.parametrize(("surface", "outside", "keys", "number", "nusselt", "h"), PUBLISHED)
def test_published_values(surface, outside, keys, number, nusselt, h):
    found = made(surface, outside, **keys)
    # the properties of air differ by up to 0.1 % from CoolProp's
    assert found.value == pytest.approx(number, rel=2e-3)
    assert (found.nusselt, found.h) == pytest.approx((nusselt, h), rel=1e-3)
    assert found.in_range


def constant(k, nu, alpha, beta):
    """Return properties that do not depend on the temperature."""
    return lambda t: Properties(density=1.0, conductivity=k, viscosity=nu, specific_heat=k / alpha, expansion=beta)


def test_incropera_example_9_2():
    """Glass fire screen, 232 °C in air of 23 °C, .71 m high, 1.02 m wide: Ra 1.813e9, Nu 147, h 7.0, 1060 W."""
    properties = constant(0.0338, 26.4e-6, 38.3e-6, 1 / 400)
    found = made(232.0, 23.0, properties, kind="free", surface="vertical", length=710)
    assert found.value == pytest.approx(1.813e9, rel=2e-3)
    assert found.nusselt == pytest.approx(147, abs=0.5)
    assert found.h * 1.02 * 0.71 * 209 == pytest.approx(1060, abs=2)


def test_incropera_example_7_4():
    """Cylinder of 12.7 mm across 10 m/s of air: Re 6071, Pr .70, Nu 40.6, h 96 (k 0.030)."""
    nu = 10 * 0.0127 / 6071
    found = made(
        128.4, 26.2, constant(0.030, nu, nu / 0.70, 1 / 350), kind="forced", surface="cylinder", length=12.7, speed=10
    )
    assert found.nusselt == pytest.approx(40.6, abs=0.05)
    assert found.h == pytest.approx(96, abs=0.5)


def test_iso_6946_films():
    """ISO 6946: h_c 5.0, 2.5, 0.7 inside by direction of flow; 4 + 4 v outside."""
    h = {d: made(20, 15, kind="standard", surface=d).h for d in ("up", "horizontal", "down")}
    assert h == {"up": 5.0, "horizontal": 2.5, "down": 0.7}
    assert made(0, 0, kind="standard", surface="outside", speed=4).h == 20.0


def test_inclined_surface_lessens_gravity():
    upright = made(30, 20, kind="free", surface="vertical", length=500)
    tilted = made(30, 20, kind="free", surface="inclined", length=500, tilt=60)
    assert tilted.value == pytest.approx(0.5 * upright.value, rel=1e-12) and tilted.h < upright.h


def test_small_sphere_is_pure_conduction():
    """A sphere in still air that hardly moves: Nu = 2 (exact)."""
    assert made(20.01, 20, kind="free", surface="sphere", length=0.1).nusselt == pytest.approx(2.0, rel=0.02)


def test_wide_vertical_cylinder_is_a_plate_and_a_thin_one_has_more():
    plate = made(30, 20, kind="free", surface="vertical", length=500)
    wide = made(30, 20, kind="free", surface="vertical cylinder", length=500, diameter=900)
    thin = made(30, 20, kind="free", surface="vertical cylinder", length=500, diameter=10)
    assert wide.h == plate.h and thin.h > 1.2 * plate.h


def test_inside_of_a_box_is_the_mean_of_its_faces():
    walls = made(5, 25, kind="free", surface="vertical", length=2000).h
    ceiling = made(5, 25, kind="free", surface="facing down", length=500).h  # area over perimeter of 2 m x 2 m
    floor = made(5, 25, kind="free", surface="facing up", length=500).h
    assert ceiling > walls > floor
    box = made(5, 25, kind="free", surface="inside of a box", box=[2000, 2000, 2000])
    assert box.h == pytest.approx((4 * walls + ceiling + floor) / 6, rel=1e-12)


def test_duct_and_tube_bank():
    """Laminar duct: Nu 3.66 (exact to its digits); turbulent: Dittus and Boelter's 0.023 Re^.8 Pr^.4 within the 25 %
    that handbooks give it."""
    slow = made(30, 20, kind="forced", surface="duct", length=50, speed=0.3)
    assert slow.nusselt == pytest.approx(3.66, abs=0.005) and slow.in_range
    fast = made(30, 20, kind="forced", surface="duct", length=200, speed=5)
    assert fast.nusselt == pytest.approx(0.023 * fast.value**0.8 * air(20).prandtl ** 0.4, rel=0.25)
    between = made(30, 20, kind="forced", surface="duct", length=50, speed=0.85)
    assert 2300 < between.value < 3000 and not between.in_range
    # Incropera 7.7 (from memory): 7 staggered rows, 16.4 mm, pitches 34.3 and 31.3 mm, air 15 °C, 12.6 m/s: Nu 91
    bank = made(70, 15, kind="forced", surface="tube bank", length=16.4, speed=12.6, pitch=[34.3, 31.3], rows=7)
    assert bank.nusselt == pytest.approx(91, rel=0.1)


def test_mixed_convection_tends_to_its_parts():
    free = made(30, 20, kind="free", surface="vertical", length=1000)
    forced = made(30, 20, kind="forced", surface="plate", length=1000, speed=20)
    keys = {"kind": "mixed", "surface": "vertical", "length": 1000, "mixing": "assisting"}
    assert made(30, 20, speed=0.001, **keys).h == pytest.approx(free.h, rel=1e-3)
    assert made(30, 20, speed=20, **keys).h == pytest.approx(forced.h, rel=2e-3)
    both = made(30, 20, speed=1, **keys)
    against = made(30, 20, speed=1, **(keys | {"mixing": "opposing"}))
    assert both.h > free.h > against.h


def test_incropera_example_7_6():
    """A sphere of 10 mm at 75 falling to 35 °C in air of 23 °C and 10 m/s (table values of the book): Nu 47.4, h 122.

    Example 7.6 of the 7th edition, from memory; mu_s at the mean of 55 °C.
    """
    book = {296.0: (0.0258, 181.6e-7), 328.0: (0.0258, 197.8e-7)}

    def properties(t):
        k, mu = book[min(book, key=lambda kelvin: abs(kelvin - 273.15 - t))]
        density = 181.6e-7 / 15.36e-6
        return Properties(
            density=density, conductivity=k, viscosity=mu, specific_heat=0.709 * k / mu, expansion=1 / 296
        )

    found = made(55, 23, properties, kind="forced", surface="sphere", length=10, speed=10)
    assert (found.value, found.nusselt, found.h) == pytest.approx((6510, 47.4, 122), rel=3e-3)


def test_mixed_convection_of_a_sphere_tends_to_its_parts():
    """And to the 2 of conduction into still air where neither is left."""
    keys = {"kind": "mixed", "surface": "sphere", "mixing": "across"}
    free = made(30, 20, kind="free", surface="sphere", length=100)
    forced = made(30, 20, kind="forced", surface="sphere", length=100, speed=5)
    assert made(30, 20, speed=1e-4, length=100, **keys).h == pytest.approx(free.h, rel=2e-3)
    assert made(30, 20, speed=5, length=100, **keys).h == pytest.approx(forced.h, rel=2e-3)
    assert made(20.01, 20, speed=1e-6, length=0.01, **keys).nusselt == pytest.approx(2.0, rel=0.02)


def test_out_of_range_is_told():
    assert not made(20.2, 20, kind="free", surface="facing up", length=20).in_range
    assert not made(20, 20, kind="forced", surface="plate", length=5, speed=0.5).in_range


@pytest.mark.parametrize("place", [0.9, 0.97, 1.0, 1.03, 1.1])
def test_no_jump_where_mcadams_changes_his_law(place):
    """At Ra = 1e7 the two laws differ by 6 %; a film that jumps may have no solution."""

    def at(ra):
        difference = ra / (made(20.5, 19.5, kind="free", surface="facing up", length=200).value)
        return made(20 + difference / 2, 20 - difference / 2, kind="free", surface="facing up", length=200)

    here, beside = at(1e7 * place), at(1e7 * place * 1.001)
    assert abs(beside.h / here.h - 1) < 2e-3


@pytest.mark.parametrize("pressure", [0.5, 2])
def test_pressure_changes_rayleigh_as_the_square(pressure):
    plain = made(10, 20, kind="free", surface="vertical", length=500)
    other = made(10, 20, lambda t: air(t, pressure * 101325.0), kind="free", surface="vertical", length=500)
    assert other.value == pytest.approx(plain.value * pressure**2, rel=3e-3)


def test_slope_of_a_film():
    """For h ~ |T_s - T|^(1/3) (large Ra) the slope is about h / (3 (T_s - T))."""
    law = Convection.model_validate({"kind": "free", "surface": "facing up", "length": 2000})
    h = film(law, 30.0, 20.0, air).h
    assert slope(law, 30.0, 20.0, air) == pytest.approx(h / 30.0, rel=0.05)
    assert math.isclose(slope(Convection.model_validate({"kind": "standard", "surface": "up"}), 1.0, 2.0, air), 0.0)
