"""Linear and point transmittances, with the intervals of the flows they are made of."""

from __future__ import annotations

import pytest

from coldseam.answers.bridges import whole_transmittance
from coldseam.answers.pairs import Comparison
from coldseam.case import read
from coldseam.errors import CaseError
from coldseam.solution.readings import Interval
from coldseam.study import run

EXACT_EDGE = 0.558729
"""1 - (2 ln 2)/pi, conformal mapping: psi of a homogeneous corner over its conductivity, inside lengths."""
K = 2.5


def test_homogeneous_corner(corner):
    """Exact 0.558729 k inside, -1.441271 k outside; walls cut at ten thicknesses change it by less than 1e-12."""
    entry = corner.answers.bridges["corner"]
    assert entry["psi_low"] <= EXACT_EDGE * K <= entry["psi_high"]
    assert entry["psi_external_low"] <= (EXACT_EDGE - 2) * K <= entry["psi_external_high"]
    assert entry["psi"] == pytest.approx(EXACT_EDGE * K, rel=0.005)  # 0.02 % of L is 0.7 % of psi
    assert entry["psi_external"] == pytest.approx((EXACT_EDGE - 2) * K, rel=0.002)


def test_both_bases_differ_by_the_walls_ends(corner):
    """Exactly U times the difference of the lengths: two walls of U = k/t, 0.1 m longer outside."""
    entry = corner.answers.bridges["corner"]
    assert entry["psi"] - entry["psi_external"] == pytest.approx(2 * K / 0.1 * 0.1, rel=1e-12)
    assert entry["psi_basis"], entry["psi_external_basis"] == ("internal", "external")


def test_width_of_psi_is_that_of_the_coupling(corner):
    entry = corner.answers.bridges["corner"]
    low, high = corner.answers.coupling_intervals["room"]["outside"]
    assert entry["psi_high"] - entry["psi_low"] == pytest.approx(high - low, rel=1e-6)
    assert entry["interval"] == "guaranteed"


@pytest.mark.parametrize("basis", ["internal", "external"])
def test_one_basis_takes_its_own_length(texts, corner, basis):
    text = texts["corner"].replace('basis = "both"', f'basis = "{basis}"')
    length = {"internal": 1000, "external": 1100}[basis]
    text = text.replace("length = 1000, length_external = 1100", f"length = {length}")
    entry = run(read.loads(text)).answers.bridges["corner"]
    expected = corner.answers.bridges["corner"]["psi" if basis == "internal" else "psi_external"]
    assert entry["psi"] == pytest.approx(expected, rel=1e-9)


def test_parts_are_plain_walls_and_corner(corner):
    loss = corner.answers.losses["room"]["parts"]
    assert loss["plain walls"]["heat_flow"] == pytest.approx(25 * 2 * 25, rel=1e-9)
    assert loss["corner"]["heat_flow"] == pytest.approx(corner.answers.bridges["corner"]["psi"] * 25, rel=1e-6)


def test_flanking_u_has_the_films():
    """Two flat halves of a plain wall with films: no bridge at all, psi is 0 within its interval."""
    entry = run(read.loads(FLAT)).answers
    psi = entry.bridges["joint"]
    u = 1 / (0.13 + 0.1 / 0.026 + 1 / 8)
    assert psi["flanking"][0].transmittance == pytest.approx(u, rel=1e-12)
    assert psi["psi"] == pytest.approx(0.0, abs=1e-9)
    assert psi["psi_whole"]["U_with_bridge"] == pytest.approx(u, rel=1e-9)
    assert not [w for w in entry.warnings if "cut plane" in w]


FLAT = """
title = "no bridge"
[model]
dimensions = 2
[spaces.hall]
temperature = 20
surface_resistance = 0.13
[spaces.store]
temperature = -20
film = 8
[materials.foam]
conductivity = 0.026
[[body]]
name = "panel"
material = "foam"
box = { from = [0, 0], to = [2000, 100] }
[[boundary]]
name = "warm"
on = { plane = { y = 100 } }
space = "hall"
[[boundary]]
name = "cold"
on = { plane = { y = 0 } }
space = "store"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
[[bridge]]
name = "joint"
kind = "linear"
basis = "internal"
flanking = [
  { layers = [["foam", 100]], length = 1000, between = ["hall", "store"] },
  { layers = [["foam", 100]], length = 1000, between = ["hall", "store"] },
]
"""


def test_cut_planes_too_near_are_warned_of():
    near = FLAT.replace("[2000, 100]", "[1900, 100]").replace("length = 1000", "length = 950")
    told = run(read.loads(near)).answers.warnings
    assert sum("cut plane of flanking wall" in w and "950 mm" in w and "1000 mm" in w for w in told) == 2
    thick = (
        FLAT.replace('[["foam", 100]]', '[["foam", 400]]')
        .replace("y = 100", "y = 400")
        .replace("[2000, 100]", "[2000, 400]")
    )
    told = run(read.loads(thick)).answers.warnings
    assert any("asks for 1200 mm" in w for w in told)


def test_walls_that_are_not_the_model_s_are_warned_of():
    other = FLAT.replace('[["foam", 100]]', '[["foam", 120]]')
    assert any("as wide as flanking wall" in w for w in run(read.loads(other)).answers.warnings)


def test_a_boundary_s_own_film_is_warned_of():
    own = FLAT.replace('space = "hall"\n[[boundary]]', 'space = "hall"\nfilm = 5\n[[boundary]]')
    assert any("film of its own" in w for w in run(read.loads(own)).answers.warnings)


def test_vague_psi_is_warned_of(texts):
    vague = texts["corner"].replace("0.02 %", "10 %")
    assert any("psi lies between" in w for w in run(read.loads(vague)).answers.warnings)


@pytest.mark.parametrize(
    ("change", "what"),
    [
        (("length = 1000", "length = 1400"), "don't fit the model: the walls add up to 2800 mm"),
        (("dimensions = 2", "dimensions = 2\naxisymmetric = true"), "computed in a plane cross-section"),
        (("conductivity = 0.026", "conductivity = [0.026, 0.02]"), "conducts differently by direction"),
        (('length = 1000, between = ["hall", "store"]', 'length = 1000, between = ["hall", "stor"]'), 'store'),
    ],
)  # fmt: skip
def test_walls_that_cannot_be_are_refused(change, what):
    with pytest.raises(CaseError, match=what) as caught:
        run(read.loads(FLAT.replace(*change)))
    assert "bridge" in str(caught.value)


def test_one_space_is_too_few(texts):
    one = texts["pin"].replace('space = "cold"', "temperature = -20")
    one = one.replace("[spaces.cold]\ntemperature = -20\nsurface_resistance = 0.13\n", "")
    with pytest.raises(CaseError, match="between two spaces, and the case has 1"):
        run(read.loads(one))


def test_walls_between_different_spaces_are_refused(texts):
    text = (
        texts["tee"]
        + """
[[bridge]]
name = "tee"
kind = "linear"
basis = "internal"
flanking = [
  { layers = [["foam", 80], ["brick", 120]], length = 450, between = ["left", "outside"] },
  { layers = [["foam", 80], ["brick", 120]], length = 450, between = ["right", "outside"] },
]
"""
    )
    with pytest.raises(CaseError, match="same two spaces"):
        run(read.loads(text))


def test_pin_lies_between_tubes_and_planes(pin):
    """Rayleigh's bounds: adiabatic tubes below, isothermal planes above, of the pin and of the wall without it."""
    from math import pi

    entry = pin.answers.bridges["pin"]
    section, head, area, film = pi * 0.006**2, pi * 0.015**2 + 2 * pi * 0.015 * 0.005, pi * 0.15**2, 0.13
    plain = area / (2 * film + 0.1 / 0.03)
    tube = section / (2 * film + 0.105 / 17) + (area - pi * 0.015**2) / (2 * film + 0.1 / 0.03) - plain
    middle = (17 * section + 0.03 * (area - section)) / 0.1
    air = area - pi * 0.015**2 + head
    plane = 1 / (film / air + 1 / middle + film / area) - plain
    assert tube < entry["chi_low"] <= entry["chi"] <= entry["chi_high"] < plane
    assert entry["relative_width"] <= 0.1
    bare = entry["coupling_without"]
    assert bare["low"] <= plain <= bare["high"]
    assert bare["value"] == pytest.approx(
        plain, rel=1e-3
    )  # the lower bound's share of the mean is not exact about an axis


def test_interval_of_chi_holds_a_finer_answer(pin, texts):
    fine = run(read.loads(texts["pin"].replace("2 %", "0.3 %"))).answers.bridges["pin"]
    coarse = pin.answers.bridges["pin"]
    assert coarse["chi_low"] <= fine["chi"] <= coarse["chi_high"]
    assert fine["relative_width"] < coarse["relative_width"]


def test_interval_of_a_difference_takes_the_far_ends():
    def between(low, value, high, kind="guaranteed"):
        return Interval(value=value, low=low, high=high, kind=kind)

    parts = dict(nodes=(1, 1), rounds=1, stopped="", whole=None)
    found = Comparison(present=between(4.0, 4.5, 5.0), absent=between(1.0, 1.2, 1.6), **parts)
    assert found.difference == between(4.0 - 1.6, 4.5 - 1.2, 5.0 - 1.0)
    assert found.relative_width == pytest.approx((4.0 - 2.4) / 3.3)
    vague = Comparison(present=between(4.0, 4.5, 5.0, "estimate"), absent=between(None, 1.2, None), **parts)
    assert (vague.difference.low, vague.difference.kind, vague.relative_width) == (None, "estimate", None)


def test_chi_is_per_piece(pin, texts):
    two = run(read.loads(texts["pin"].replace('without = ["pin", "head"]', 'without = ["pin", "head"]\ncount = 2')))
    assert two.answers.bridges["pin"]["chi"] == pytest.approx(pin.answers.bridges["pin"]["chi"] / 2, rel=1e-9)


def test_losses_name_the_pin(pin):
    parts = pin.answers.losses["warm"]["parts"]
    assert parts["pin"]["heat_flow"] == pytest.approx(40 * pin.answers.bridges["pin"]["chi"], rel=1e-9)
    assert sum(p["heat_flow"] for p in parts.values()) == pytest.approx(pin.answers.spaces["warm"].heat_flow, rel=1e-9)


def test_effect_on_the_whole(pin):
    entry = pin.answers.bridges["pin"]
    whole = entry["whole"] or {}
    assert whole["U_plain"] == pytest.approx(1 / (0.26 + 0.1 / 0.03), rel=1e-3)
    again = whole_transmittance(whole["U_plain"], point=[(entry["chi"], 1 / whole["area"])])
    assert whole["U_with_bridge"] == pytest.approx(again, rel=1e-9)


def test_effect_on_a_wall_with_so_many(pin, corner, texts):
    """U of the plain wall and per_area times chi or psi (ISO 6946, ISO 14683: the sum of both, from memory)."""
    text = texts["pin"].replace('without = ["pin", "head"]', 'without = ["pin", "head"]\nper_area = "5 1/m2"')
    entry = run(read.loads(text)).answers.bridges["pin"]
    assert entry["wall"]["U_added"] == pytest.approx(5 * pin.answers.bridges["pin"]["chi"], rel=1e-9)
    assert entry["wall"]["U_with_bridge"] == pytest.approx(1 / (0.26 + 0.1 / 0.03) + entry["wall"]["U_added"], rel=1e-3)
    assert pin.answers.bridges["pin"]["wall"] is None
    bridge = 'kind = "linear"'
    entry = run(read.loads(texts["corner"].replace(bridge, f"{bridge}\nper_area = 0.25"))).answers.bridges["corner"]
    assert entry["wall"]["U_added"] == pytest.approx(0.25 * corner.answers.bridges["corner"]["psi"], rel=1e-9)


def test_two_point_bridges_of_one_model(texts):
    """Pin and head each left out by themselves: the head alone adds little, without the pin nearly nothing is left."""
    text = (
        texts["pin"]
        + """
[[bridge]]
name = "head only"
kind = "point"
without = ["head"]
"""
    )
    bridges = run(read.loads(text)).answers.bridges
    assert 0 < bridges["head only"]["chi"] < bridges["pin"]["chi"]


def test_what_cannot_be_known_better_says_so(texts):
    """With no room for a finer mesh chi keeps its wide interval, and a warning tells it."""
    text = texts["pin"].replace('accuracy = "2 %"', 'accuracy = "2 %"\nmax_nodes = 60')
    answers = run(read.loads(text)).answers
    assert answers.bridges["pin"]["relative_width"] > 0.1
    assert any("chi is known within an interval" in w and "more than the 60 allowed" in w for w in answers.warnings)


@pytest.mark.parametrize(
    ("change", "what"),
    [
        (('without = ["pin", "head"]', 'without = ["foam", "pin", "head"]'), "leaves nothing of the model"),
        (('without = ["pin", "head"]', 'without = ["foam"]'), "leaving these bodies out gives no valid model"),
        (('without = ["pin", "head"]', 'without = ["pins"]'), '"pin"'),
        (("axisymmetric = true\n", ""), "bar without end"),
    ],
)
def test_bodies_that_cannot_be_left_out(texts, change, what):
    with pytest.raises(CaseError, match=what):
        run(read.loads(texts["pin"].replace(*change)))


def test_three_spaces_need_a_choice(texts):
    text = (
        texts["pin"]
        + """
[spaces.third]
temperature = 0
film = 5
"""
    )
    text = text.replace('space = "warm"\n[[boundary]]\nname = "cut"', 'space = "third"\n[[boundary]]\nname = "cut"')
    with pytest.raises(CaseError, match="3 outside points"):
        run(read.loads(text))
    chosen = text.replace('kind = "point"', 'kind = "point"\nbetween = ["cold", "third"]')
    assert run(read.loads(chosen)).answers.bridges["pin"]["between"] == ["cold", "third"]
