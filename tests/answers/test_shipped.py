"""The shipped cases of bridges and moisture, against estimates by hand and against each other."""

from __future__ import annotations

import math

import pytest
from published import exact, runs
from scipy.special import iv, kv

from coldseam.case import read

H, FOAM, STEEL, STAINLESS, PLASTIC = 1 / 0.13, 0.026, 50.0, 17.0, 0.3
"""Film (W/(m² K)) and conductivities (W/(m K)), typed again from the cases and the library's sources."""


def test_folded_skins_cost_what_fins_and_a_web_cost():
    """Four half-infinite skins as fins that lose to their room and through the foam to the middle plane, a web between.

    As skinned_bolt in test_cases.py: the undisturbed skins differ by `share` of the rooms' difference, and by
    reciprocity a watt from a skin is missed by the room in the same share. The foam about the web is left out: 15 %.
    """
    fin = 2 * math.sqrt((H + 2 * FOAM / 0.1) * STEEL * 0.0005)
    web = STEEL * 0.001 / 0.1
    share = (0.1 / FOAM) * exact.series(1 / H, 0.1 / FOAM, 1 / H)
    estimate = share**2 / (1 / fin + 1 / web + 1 / fin)
    joint = runs.shipped("panel-joint-through")["bridges"]["joint"]
    assert joint["psi"] == pytest.approx(estimate, rel=0.15)
    plain = exact.series(1 / H, 0.1 / FOAM, 1 / H)
    assert joint["psi_plain"] == pytest.approx(2.4 * plain, rel=1e-9)


def test_a_break_between_the_skins_pays():
    """Maxwell: better conductors in place of foam can only raise the flow, so both psi are above 0."""
    through, broken = (runs.shipped(f"panel-joint-{kind}") for kind in ("through", "broken"))
    psi = [answers["bridges"]["joint"] for answers in (through, broken)]
    assert 0 < psi[1]["psi_low"]
    assert psi[1]["psi"] < 0.2 * psi[0]["psi"]
    wet, dry = (answers["surfaces"]["warm face"]["moisture"] for answers in (through, broken))
    assert wet["surface_humidity"] > 1 > dry["surface_humidity"]
    assert 0 < wet["share_condensation"] < wet["share_mould"] < 0.2 and dry["share_condensation"] == 0
    assert [a["limits"]["no dew on the warm side"]["met"] for a in (through, broken)] == [False, True]


def bolt_estimate(k: float) -> float:
    """Return chi of a bolt between skins that collect for it and heads in the air, W/K: fins, rod, fins in series."""
    t, radius, reach = 0.0005, 0.012, 0.1693
    m = math.sqrt((H + 2 * FOAM / 0.1) / (STEEL * t))
    a, b = m * radius, m * reach
    shape = (iv(1, b) * kv(1, a) - kv(1, b) * iv(1, a)) / (kv(0, a) * iv(1, b) + iv(0, a) * kv(1, b))
    end = 2 * math.pi * STEEL * t * a * shape + H * math.pi * (radius**2 + 2 * radius * 0.005)
    share = (0.1 / FOAM) * exact.series(1 / H, 0.1 / FOAM, 1 / H)
    return share**2 / (2 / end + 0.101 / ((k - FOAM) * math.pi * 0.004**2))


@pytest.mark.parametrize(("name", "k"), [("steel", STEEL), ("stainless", STAINLESS), ("plastic", PLASTIC)])
def test_bolts_of_a_pattern(name, k):
    """By hand, to 20 %: the foam beside the bolt and the spread of heat in the head are left out."""
    entry = runs.shipped(f"bolt-pattern-{name}")["bridges"]["bolt"]
    assert entry["chi"] == pytest.approx(bolt_estimate(k), rel=0.2)
    assert entry["relative_width"] <= 0.1
    assert 0 < entry["chi_low"] < entry["chi_high"] < k * math.pi * 0.004**2 / 0.1  # the bare rod between the rooms
    plain = exact.series(1 / H, 0.1 / FOAM, 1 / H) * math.pi * 0.1693**2
    # Half a millimetre of steel at each side: 2e-5 of the resistance.
    assert entry["coupling_without"]["low"] <= plain <= entry["coupling_without"]["high"] * (1 + 1e-4)


def test_steel_sweats_and_plastic_does_not():
    wet = {
        name: runs.shipped(f"bolt-pattern-{name}")["surfaces"]["warm head"]["moisture"]
        for name in ("steel", "stainless", "plastic")
    }
    humidity = [wet[name]["surface_humidity"] for name in ("steel", "stainless", "plastic")]
    assert humidity == sorted(humidity, reverse=True)
    assert humidity[0] > 1 > humidity[1]
    met = [runs.shipped(f"bolt-pattern-{name}")["limits"]["no dew on the head"]["met"] for name in wet]
    assert met == [False, True, True]


def test_door_heater():
    """The watts of the wire leave through the two spaces; 8 W/m are too few, 10 W/m keep the seal dry."""
    answers = runs.shipped("door-gasket-heater")
    assert sum(space["heat_flow"] for space in answers["spaces"].values()) == pytest.approx(-10, rel=1e-3)
    assert answers["limits"]["seal stays dry"]["met"]
    few = runs.shipped("door-gasket-heater", (("body[heater wire].heat_source", 8),))
    assert not few["limits"]["seal stays dry"]["met"]
    assert few["surfaces"]["seal, warm side"]["moisture"]["margin_condensation_kelvin"] < 0
    # The rise is in proportion to the watts: from two runs to the third.
    place = "root of the seal"
    cold = runs.shipped("door-gasket-heater", (("body[heater wire].heat_source", 1e-6),))["probes"][place][
        "temperature"
    ]
    rises = [a["probes"][place]["temperature"] - cold for a in (few, answers)]
    assert rises[1] / rises[0] == pytest.approx(10 / 8, rel=0.02)
    assert answers["surfaces"]["seal, warm side"]["f_Rsi"]["value"] is None


@pytest.mark.slow
def test_floor_wall_corner_lies_between_plain_walls_and_edges():
    """All of the freezer's surroundings at one temperature: L to hall and ground together.

    Below: inside areas as plain walls and floor, hall's film or the ground's resistance behind. Above: concrete and
    films perfect, all foam as good a conductor as XPS, plain walls of the foam's inside plus full edges and a corner.
    """
    answers = runs.shipped("floor-wall-corner")
    whole = sum(answers["coupling"]["freezer"].values())
    pir, xps, slab = 0.027, 0.035, 2.3
    low = 2 * 0.7 * 0.7 * exact.series(0.13, 0.1 / pir, 0.13)
    low += 0.7 * 0.7 * exact.series(0.13, 0.1 / slab, 0.15 / xps, 0.15 / slab, 1.5)
    # An edge between walls of 100 and 150 mm: its square filled by the better of both trial fields, at most 1 each way.
    high = xps * (
        2 * 0.7 * 0.8 / 0.1 + 0.49 / 0.15 + 0.8 * exact.EDGE_EXCESS + 2 * 0.7 * 1.0 + 0.15 * exact.CORNER_EXCESS
    )
    assert high < 2.2 * low, "a bracket that says something"
    assert low < whole < high
    corner = answers["weighting"]["probes"]["inside corner"]["factors"]
    assert sum(corner.values()) == pytest.approx(1.0, abs=1e-9)
    assert corner["freezer"] > 0.8


def test_shipped_cases_with_bridges_can_be_changed():
    """A longer cell leaves the bolt's chi as it is: the field about the bolt has died out (within both intervals)."""
    wide = runs.shipped("bolt-pattern-stainless", tuple(
        (f"body[{name}].box.to", [250, y]) for name, y in (("skins", 100.5), ("core", 100))
    ))["bridges"]["bolt"]  # fmt: skip
    base = runs.shipped("bolt-pattern-stainless")["bridges"]["bolt"]
    assert wide["chi"] == pytest.approx(base["chi"], rel=0.02)
    assert read.load(runs.SHIPPED / "bolt-pattern-stainless.toml").bridge[0].pieces == 1
