"""Surfaces: temperature factors, dew and frost, humidity and the area in trouble."""

from __future__ import annotations

import numpy as np
import pytest

from coldseam.answers.surfaces import area_below, fraction_below, humidity_map
from coldseam.case import read
from coldseam.physics import humidity
from coldseam.study import run

PANEL = """
title = "cold room panel"
[model]
dimensions = 2
[spaces.hall]
temperature = {hall}
surface_resistance = 0.13
relative_humidity = "{rh} %"
[spaces.store]
temperature = {store}
surface_resistance = 0.13
relative_humidity = "{store_rh} %"
[materials.foam]
conductivity = {k}
[[body]]
name = "panel"
material = "foam"
box = {{ from = [0, 0], to = [100, 100] }}
[[boundary]]
name = "outside"
on = {{ plane = {{ y = 100 }} }}
space = "hall"
[[boundary]]
name = "inside"
on = {{ plane = {{ y = 0 }} }}
space = "store"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
"""


def panel(*, hall=25, rh=60, store=-20, store_rh=90, k=0.022):
    return run(read.loads(PANEL.format(hall=hall, rh=rh, store=store, store_rh=store_rh, k=k)))


@pytest.fixture(scope="module")
def cold_room():
    return panel().answers.surfaces


def test_cold_room_panel(cold_room):
    """[own calculation] λ 0.022, 100 mm, Rs 0.13/0.13, 25 °C 60 % outside, -20 inside: 23.783 °C, 64.5 %."""
    outside = cold_room["outside"]
    assert outside["lowest"] == pytest.approx(23.783, abs=6e-4)
    wet = outside["moisture"]
    assert wet.surface_humidity == pytest.approx(0.645, abs=6e-4)
    assert wet.dew_point == pytest.approx(16.70, abs=6e-3)
    assert (wet.frost_point, wet.saturation, wet.saturation_over) == (None, wet.dew_point, "water")
    assert wet.margin_mould == pytest.approx(0.8 - wet.surface_humidity)
    assert wet.margin_condensation == pytest.approx(1.0 - wet.surface_humidity)
    assert wet.margin_condensation_kelvin == pytest.approx(23.783 - 16.70, abs=7e-3)
    assert (wet.share_condensation, wet.share_mould) == (0.0, 0.0)
    # Trouble begins at the humidity that makes this surface's humidity 80 % and 100 %: in proportion.
    assert wet.humidity_for_mould == pytest.approx(0.6 * 0.8 / wet.surface_humidity)
    assert wet.humidity_for_condensation == pytest.approx(0.6 / wet.surface_humidity)


def test_temperature_factor_of_a_plane_wall_is_its_resistances(cold_room):
    """f_Rsi = 1 - U Rsi, on either side with its own Rsi."""
    factor = 1 - 0.13 / (0.26 + 0.1 / 0.022)
    for name, (inside, outside) in {"outside": ("hall", "store"), "inside": ("store", "hall")}.items():
        found = cold_room[name]["f_Rsi"]
        assert found.value == pytest.approx(factor, abs=1e-6)
        assert (found.inside, found.outside, found.remark) == (inside, outside, "")


def test_cold_side_is_over_ice(cold_room):
    """-18.8 °C: the frost point is higher than the dew point, and the two humidities differ by ice over water."""
    inside, wet = cold_room["inside"], cold_room["inside"]["moisture"]
    assert wet.surface_over == "ice"
    assert wet.saturation == wet.frost_point > wet.dew_point
    t = inside["lowest"]
    ratio = humidity.saturation_pressure(t) / humidity.saturation_pressure(t, "water")
    assert wet.surface_humidity_over_water == pytest.approx(wet.surface_humidity * ratio)
    assert wet.surface_humidity < 0.9  # the surface is warmer than its room: never in trouble
    assert (wet.humidity_for_condensation, wet.share_condensation) == (None, 0.0)


def test_worked_limit_of_din_4108():
    """20 °C, 50 %, -5 °C: a surface of 12.625 °C (f_Rsi 0.70498) is just at 80 %."""
    rsi, factor = 0.13, 0.70498
    u = (1 - factor) / rsi
    k = 0.1 / (1 / u - 0.26)
    found = panel(hall=20, rh=50, store=-5, k=k).answers.surfaces["outside"]
    assert found["f_Rsi"].value == pytest.approx(factor, abs=1e-5)
    assert found["lowest"] == pytest.approx(12.625, abs=6e-4)
    assert found["moisture"].margin_mould == pytest.approx(0.0, abs=2e-5)
    assert found["moisture"].humidity_for_mould == pytest.approx(0.5, abs=2e-5)


def test_all_of_a_surface_in_trouble():
    wet = panel(rh=98, k=0.5).answers.surfaces["outside"]["moisture"]
    assert wet.margin_condensation < 0 and wet.margin_condensation_kelvin < 0
    assert (wet.share_condensation, wet.share_mould) == (1.0, 1.0)


def test_dry_air_has_no_dew_point():
    wet = panel(rh=0).answers.surfaces["outside"]["moisture"]
    assert (wet.dew_point, wet.saturation, wet.surface_humidity, wet.share_mould) == (None, None, 0.0, 0.0)


def test_equal_spaces_have_no_temperature_factor():
    found = panel(hall=5, store=5).answers.surfaces["outside"]["f_Rsi"]
    assert found.value is None and "no other space" in found.remark


def test_share_in_trouble_near_a_pin(pin):
    """Where the field crosses a level the area below it is a disc about the axis; compared with sorting the facets."""
    steady = pin.solution.steady
    mask = steady.facet_boundary == [b.name for b in steady.case.boundary].index("warm face")
    values = steady.temperature[steady.mesh.facets[mask]]
    level = float(np.median(values))
    part = area_below(steady, mask, level)
    radius = steady.mesh.points[steady.mesh.facets[mask], 0]
    below = (
        values.max(axis=1) < level
    )  # temperature rises with the radius: the disc of the facets that are wholly below
    disc = (radius[below].max() ** 2 - radius.min() ** 2) / (0.15**2 - radius.min() ** 2)
    ring = radius[~below].min(), np.sort(radius[values.max(axis=1) >= level].ravel())[2]
    assert disc - 1e-9 <= part <= disc + (ring[1] ** 2 - ring[0] ** 2) / 0.15**2 + 1e-3
    assert area_below(steady, mask, -300.0) == 0.0
    assert area_below(steady, mask, 300.0) == pytest.approx(1.0, abs=1e-12)


def test_fraction_below_against_sampling():
    """A linear field on triangles and segments, against a count of random points (1e5: 0.5 % sure to 3 sigma)."""
    generator = np.random.default_rng(4)
    for corners in (2, 3):
        values = generator.normal(size=(20, corners))
        weights = generator.dirichlet(np.ones(corners), 100_000)
        for level in (-1.0, 0.0, 0.6):
            counted = (values @ weights.T < level).mean(axis=1)
            assert fraction_below(values, level) == pytest.approx(counted, abs=0.006)


def test_three_spaces_say_which_two(tee):
    """The middle room is held against the space farthest from it in temperature."""
    right = tee.answers.surfaces["right"]["f_Rsi"]
    assert (right.inside, right.outside) == ("right", "outside")
    assert "3 outside points" in right.remark
    lowest = tee.answers.boundaries["right"].temperature.min
    assert right.value == pytest.approx((lowest + 10) / 22, abs=1e-9)


def test_heat_inside_leaves_no_temperature_factor(heated):
    factor = heated.answers.surfaces["left wall"]["f_Rsi"]
    assert factor.value is None and "heat is released" in factor.remark


def test_map_holds_the_extremes(tee):
    found, steady = humidity_map(tee.solution.steady), tee.solution.steady
    for number, boundary in enumerate(steady.case.boundary):
        on = found[steady.facet_boundary == number]
        if boundary.space is None:
            assert np.isnan(on).all()
        else:
            assert on.max() == pytest.approx(tee.answers.surfaces[boundary.name]["moisture"].surface_humidity)
