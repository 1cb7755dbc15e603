"""Every shipped case over time runs, closes its balance over time, and gives a number that a hand calculation brackets.

A wall's conductance lies between that of its inner and of its outer area over the plain resistance (for the walls here:
heat spreads outward). Heat capacities that may or may not count bracket a time from both sides.
"""

from __future__ import annotations

import math

import pytest
from published import runs
from scipy.integrate import quad

from coldseam import study
from coldseam.case import read

PIR, PUR, XPS = (0.027, 1400 * 32.0), (0.026, 1400 * 35.0), (0.035, 1450 * 35.0)
"""W/(m K) as in the sources of the library, and J/(m³ K) of about the right size: they only widen a bracket."""
CHECKED = {
    "freezer-room-pulldown": "heat of the air over the most, of air and walls over the least the machine can spare",
    "hold-after-power-cut": "goods behind a plain wall, with and without the wall's own heat",
    "vaccine-box-hold": "latent heat over the wall's conductance",
    "cryogenic-leg-warm-up": "the integral of a specific heat, by a differential equation of its own",
    "cabinet-heating-up": "load over conductance above the air",
    "ground-under-cold-store": "a half-space with a film: frost comes no sooner",
}
"""What each case's number rests on."""
QUICK = ("hold-after-power-cut", "cryogenic-leg-warm-up", "cabinet-heating-up")
FILES = sorted(p.stem for p in runs.SHIPPED.glob("*.toml") if "\n[time]\n" in p.read_text(encoding="utf-8"))


def test_every_timed_case_is_checked():
    assert set(FILES) == set(CHECKED)


@pytest.mark.parametrize("stem", FILES)
def test_timed_case_says_that_it_is_invented(stem):
    head = (runs.SHIPPED / f"{stem}.toml").read_text(encoding="utf-8").split("title =")[0]
    assert "invented" in head and "Caution" in head


@pytest.mark.parametrize(
    "stem", [stem if stem in QUICK else pytest.param(stem, marks=pytest.mark.slow) for stem in sorted(CHECKED)]
)
def test_balance_over_time_closes(stem):
    history = runs.shipped(stem)["history"]
    energies = history["energies"]
    assert energies["relative_closure"] < 1e-6
    assert energies["in"] == pytest.approx(energies["stored"], rel=1e-6)


def event(stem: str, name: str) -> float:
    """Return when an event of a shipped case happened, s."""
    found = runs.shipped(stem)["history"]["events"][name]
    assert found["happened"]
    return found["time"]


def test_cold_mass_warms_up_by_its_heat_content():
    """40.1 kg of 6061 (NIST's fit, written out here) and a head of 200 J/K behind 0.5 W/K and a leg of 6e-4 W/K.

    The time is the integral of heat capacity over heat flow. A block of height H that is warmed at one end has that end
    above its mean by q H/(3 k A) and its middle below by q H/(24 k A); k = 110 W/(m K) is the fit at -150 °C. The leg
    holds 0.2 % of the mass's heat.
    """
    area, height = math.pi * 0.15**2, 0.21
    mass, inside = 2700 * area * height, height / (110 * area)
    conductance = 1 / (1 / 0.5 + 1 / (5000 * area) + inside / 3) + 0.64 * math.pi * (0.025**2 - 0.023**2) / 0.3
    late = conductance * 120 * inside / 24
    fit = [46.6467, -314.292, 866.662, -1298.3, 1162.27, -637.795, 210.351, -38.3094, 2.96344]

    def capacity(t):
        return mass * 10 ** sum(a * math.log10(t + 273.15) ** n for n, a in enumerate(fit)) + 200

    expected, _ = quad(lambda t: capacity(t) / (conductance * (20 - t)), -190, -100 + late)
    assert event("cryogenic-leg-warm-up", "above -100 °C") == pytest.approx(expected, rel=0.003)
    # With the specific heat of room temperature for good it would be promised half as long again.
    assert expected < 0.7 * mass * 943 / conductance * math.log(210 / 120)


def test_goods_hold_after_the_cut():
    """60 kg of 2000 J/(kg K) behind 80 mm of foam: from -25 to -15 °C of the air, with and without the wall's heat."""
    resistance = 0.13 + 0.08 / PUR[0] + 0.13
    inner = 2 * math.pi * 0.3**2 + math.pi * 0.6 * 0.7
    outer = 2 * math.pi * 0.38**2 + math.pi * 0.76 * 0.86
    wall = PUR[1] * (math.pi * 0.38**2 * 0.86 - math.pi * 0.3**2 * 0.7)
    times = []
    for area, heat in ((outer, 120e3), (inner, 120e3 + 10e3 + wall)):
        wanted, goods = area / resistance, 1.2 * 6.0
        air = wanted / (wanted + goods)  # how far the air is from the goods, as a part of 28 - T_goods
        begin, end = 28 + 25, (28 + 15) / (1 - air)
        times.append(3600 + heat * (1 / wanted + 1 / goods) * math.log(begin / end))
    assert times[0] < event("hold-after-power-cut", "space at -15 °C") < times[1]


def test_cabinet_gets_as_hot_as_its_load_over_its_conductance():
    answers = runs.shipped("cabinet-heating-up")
    assert 8 * 3600 < event("cabinet-heating-up", "derating") < 18 * 3600
    heat = answers["history"]["energies"]["spaces"]["inside"]
    assert heat["gain"] == pytest.approx(2 * 10 * 3600 * 60.0, rel=1e-9)  # two days of ten hours at 60 W/m
    assert answers["history"]["energies"]["boundaries"]["outer face"] == pytest.approx(-heat["gain"], rel=0.02)
    # The outer face stays within what the load over its film can add to the warmest air.
    hottest = answers["limits"]["touch temperature"]["value"]
    assert 36.0 < hottest < 36.0 + 1.5 * 60 / (3.0 / 0.06)


@pytest.mark.slow
def test_ice_holds_for_its_latent_heat():
    """Latent heat of the packs over the conductance times 43 K below, all heat to the end point over the least flow above."""
    resistance = 0.13 + 0.08 / XPS[0] + 0.1
    inner = 2 * math.pi * 0.17**2 + math.pi * 0.34 * 0.34
    outer = 2 * math.pi * 0.25**2 + math.pi * 0.5 * 0.5
    ice = math.pi * (0.17**2 * 0.34 - 0.14**2 * 0.31) * 917
    wall = XPS[1] * math.pi * (0.25**2 * 0.5 - 0.17**2 * 0.34)
    shortest = 0.8 * ice * 333.6e3 / (outer / (resistance - 0.13) * 43)  # some ice may be left where it is coldest
    longest = (ice * (333.6e3 + 3 * 2050 + 43 * 4190) + wall * 43) / (inner / resistance * 35)
    assert shortest < event("vaccine-box-hold", "end point") < longest


@pytest.mark.slow
def test_room_pulls_down_between_its_bounds():
    resistance = 0.13 + 0.1 / PIR[0] + 0.13
    areas = [2 * 2 * 1.0 + 2 * 1.0 * 2.2 + 2 * 2.2, 2 * 2.2 * 1.1 + 2 * 1.1 * 2.4 + 2.2 * 2.4]
    wall = PIR[1] * (2.2 * 1.1 * 2.4 - 2 * 1.0 * 2.2)
    shortest = 30e3 * 43 / 900
    longest = (30e3 + wall) * 43 / (450 - 20 - areas[1] / resistance * 45)
    assert shortest < event("freezer-room-pulldown", "pulled down") < longest
    machine = runs.shipped("freezer-room-pulldown")["history"]["machines"]["room"]
    steady = [(area / resistance * 45 + 20) / 450 for area in areas]
    assert 0.9 * steady[0] < machine["running_share_at_end"] < 1.3 * steady[1]


@pytest.mark.slow
def test_frost_reaches_the_ground_no_sooner_than_in_a_half_space():
    """Half-space at 10 °C under foam and film, store at -20 °C at once: 0 °C at its face needs 1 - e^(H²) erfc H = 1/3."""
    low, high = 0.0, 5.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if 1 - math.exp(middle**2) * math.erfc(middle) < 1 / 3 else (low, middle)
    film = 1 / (0.17 + 0.15 / XPS[0])
    soonest = (low * 2.0 / film) ** 2 * (1950 * 1045) / 2.0
    assert 0.9 * soonest < event("ground-under-cold-store", "frost under the middle") < 730 * 86400


def test_a_body_that_starts_at_its_melting_point_is_told_to_be_half_melted():
    """Half way is what the enthalpy law says there, and hardly what anyone means."""
    text = """
    title = "ice"
    [model]
    dimensions = 2
    [time]
    duration = "2 min"
    start = 0
    [spaces.room]
    temperature = 20
    film = 8
    [materials.ice]
    conductivity = 2
    density = 917
    specific_heat = 2000
    melting = { at = 0, latent_heat = 334000 }
    [[body]]
    name = "pack"
    material = "ice"
    box = { from = [0, 0], to = [20, 10] }
    [[boundary]]
    name = "all"
    on = "rest"
    space = "room"
    """
    cold = text.replace("start = 0", "start = -5")
    assert any('"pack" starts' in warning for warning in study.run(read.loads(text)).answers.warnings)
    assert not any('"pack" starts' in warning for warning in study.run(read.loads(cold)).answers.warnings)
