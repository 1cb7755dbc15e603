"""Limits: met, not met, undecided - with the sign of flows kept from deciding the wrong way."""

from __future__ import annotations

import pytest

from coldseam.answers.limits import judge, limit_warnings, limits, magnitude, require_answerable
from coldseam.case import read
from coldseam.errors import CaseError
from coldseam.study import run


def limited(texts, name: str, result, quantity: str, bounds: str) -> dict:
    """Return the verdict on one limit of a solved case."""
    text = f'{texts[name]}\n[[limit]]\nname = "it"\nquantity = {{ {quantity} }}\n{bounds}\n'
    case = read.loads(text)
    require_answerable(case)
    return limits(case, result.answers)["it"]


def test_judge():
    assert judge(1.0, 0.9, 1.1, 1.2, None) == {"met": True, "undecided": False, "margin": pytest.approx(0.2)}
    assert judge(1.0, 0.9, 1.1, 0.8, None) == {"met": False, "undecided": False, "margin": pytest.approx(-0.2)}
    assert judge(1.0, 0.9, 1.1, 1.05, None) == {"met": False, "undecided": True, "margin": pytest.approx(0.05)}
    assert judge(1.0, 0.9, 1.1, 0.95, None) == {"met": False, "undecided": True, "margin": pytest.approx(-0.05)}
    assert judge(1.0, 0.9, 1.1, None, 0.8)["met"] and not judge(1.0, 0.9, 1.1, None, 1.2)["met"]
    assert judge(1.0, 0.9, 1.1, 1.5, 0.7)["margin"] == pytest.approx(0.3)
    assert not judge(1.0, 0.9, 1.1, 1.5, 1.2)["met"]
    assert judge(1.0, None, None, 1.0, None) == {"met": True, "undecided": False, "margin": 0.0}


def test_magnitude_of_an_interval_across_zero():
    assert magnitude(-2.0, -3.0, 1.0) == (2.0, 0.0, 3.0)


def test_a_space_that_gains_heat_does_not_meet_a_limit_by_its_sign(tee, texts):
    """The facade's space takes heat: its flow is negative, and "at most" must not be met by that alone."""
    flow = tee.answers.spaces["outside"].heat_flow
    assert flow < 0
    for bound, met in ((1.1 * abs(flow), True), (0.9 * abs(flow), False)):
        found = limited(texts, "tee", tee, 'space = "outside", heat_flow = true', f"at_most = {bound}")
        assert (found["met"], found["undecided"], found["unit"]) == (met, False, "W/m")
        assert found["margin"] == pytest.approx(bound - abs(flow), rel=1e-6)
    signed = limited(texts, "tee", tee, 'space = "outside", heat_flow = true', f"at_least = {1.1 * flow}")
    assert signed["met"] and signed["value"] == pytest.approx(flow, rel=1e-6)


def test_a_limit_inside_the_interval_is_undecided(tee, texts):
    entry = tee.answers.spaces["outside"]
    bound = -0.5 * (entry.heat_flow + entry.heat_flow_low)
    found = limited(texts, "tee", tee, 'space = "outside", heat_flow = true', f"at_most = {bound!r}")
    assert (found["met"], found["undecided"]) == (False, True) and found["margin"] > 0
    assert limit_warnings(read.loads(texts["tee"]), {"it": found})[0].startswith('limit "it" is undecided')


@pytest.mark.parametrize(
    ("quantity", "look", "unit"),
    [
        ('boundary = "left wall", temperature = "min"', lambda a: a.boundaries["left wall"].temperature.min, "°C"),
        ('boundary = "left wall", temperature = "mean"', lambda a: a.boundaries["left wall"].temperature.mean, "°C"),
        ('probe = "in the brick", temperature = true', lambda a: a.probes["in the brick"].temperature, "°C"),
        ('boundary = "right", f_Rsi = true', lambda a: a.surfaces["right"]["f_Rsi"].value, ""),
        ('boundary = "right", surface_humidity = true', lambda a: a.surfaces["right"]["moisture"].surface_humidity, ""),
        ('boundary = "facade", heat_flow = true', lambda a: abs(a.boundaries["facade"].heat_flow), "W/m"),
    ],
)
def test_every_quantity(tee, texts, quantity, look, unit):
    value = look(tee.answers)
    found = limited(texts, "tee", tee, quantity, f"at_least = {value - 0.5 * abs(value)!r}")
    assert found["value"] == pytest.approx(value, rel=1e-9)
    assert (found["met"], found["unit"]) == (True, unit)
    assert not limited(texts, "tee", tee, quantity, f"at_least = {value + 0.5 * abs(value)!r}")["met"]


def test_bridges_have_limits(corner, pin, texts):
    psi = corner.answers.bridges["corner"]["psi"]
    found = limited(texts, "corner", corner, 'bridge = "corner", psi = true', f"at_most = {psi + 0.1}")
    assert found["met"] and found["margin"] == pytest.approx(0.1, abs=1e-9)
    assert found["low"] <= found["value"] <= found["high"]
    pin = limited(texts, "pin", pin, 'bridge = "pin", chi = true', "at_most = 1e-4")
    assert not pin["met"] and pin["unit"] == "W/K"


@pytest.mark.parametrize(
    ("name", "quantity", "what"),
    [
        ("corner", 'boundary = "inside", surface_humidity = true', 'space "room" has no relative_humidity'),
        ("tee", 'boundary = "cuts", f_Rsi = true', "faces no space"),
        ("heated", 'boundary = "right", f_Rsi = true', "heat is released"),
        ("corner", 'bridge = "corner", chi = true', "linear bridge and has no chi"),
    ],
)
def test_limits_that_have_no_answer_are_refused(texts, request, name, quantity, what):
    with pytest.raises(CaseError, match=what):
        limited(texts, name, request.getfixturevalue(name), quantity, "at_most = 0.5")


def test_touch_limits_carry_their_caution(texts):
    text = (
        texts["tee"]
        + '\n[[limit]]\nname = "hand"\nquantity = { boundary = "facade", temperature = "min" }\nat_least = -5\n'
    )
    assert limit_warnings(read.loads(text), {}) == []
    (caution,) = limit_warnings(read.loads(f"{text}touch = true\n"), {})
    assert "hand" in caution and "ISO 13732" in caution and "local codes" in caution
    with pytest.raises(CaseError, match="goes with the temperature"):
        read.loads(
            f"{text}touch = true\n".replace(
                'boundary = "facade", temperature = "min"', 'space = "left", heat_flow = true'
            )
        )


def test_limits_of_a_run_follow_other_temperatures(texts, tee):
    """The whole way: a bound between the flow as it is and the flow at another temperature."""
    bound = 1.2 * abs(tee.answers.spaces["outside"].heat_flow)
    text = (
        texts["tee"]
        + f'\n[[limit]]\nname = "it"\nquantity = {{ space = "outside", heat_flow = true }}\nat_most = {bound}\n'
    )
    result = run(read.loads(text))
    assert result.answers.limits["it"]["met"]
    assert not result.at({"outside": -60}).answers.limits["it"]["met"]
