"""Enclosures: volumes by hand."""

from __future__ import annotations

import pytest
from geometry_cases import make_case, mesh_of

from coldseam.errors import CaseError
from coldseam.geometry.parts import expand

INSIDE = "inside = { from = [0, 0, 0], to = [100, 80, 60] }"


def enclosure(rest: str, inside: str = INSIDE) -> str:
    return f'[[body]]\nname = "room"\n[body.enclosure]\n{inside}\n{rest}\n'


def test_layers_all_round():
    volume = mesh_of(enclosure('layers = [["a", 5], ["b", 20]]')).quality["mesh_volume"]
    inside, first, second = 100 * 80 * 60, 110 * 90 * 70, 150 * 130 * 110
    assert volume == pytest.approx(
        {"room/layer 1 a": (first - inside) * 1e-9, "room/layer 2 b": (second - first) * 1e-9}
    )


def test_own_and_open_faces():
    """Floor of its own material within the walls' outline; open top; the wall wraps down to the floor's level."""
    rest = 'layers = [["a", 10]]\nfaces = { "-z" = [["b", 25]], "+z" = [] }'
    volume = mesh_of(enclosure(rest)).quality["mesh_volume"]
    floor = 100 * 80 * 25
    wall = (120 * 100 - 100 * 80) * (60 + 25)
    assert volume == pytest.approx({"room/-z layer 1 b": floor * 1e-9, "room/layer 1 a": wall * 1e-9})


def test_further_layer_under_everything():
    rest = 'layers = [["a", 10]]\nfaces = { "-z" = [["a", 10], ["b", 15]] }'
    volume = mesh_of(enclosure(rest)).quality["mesh_volume"]
    assert volume["room/-z layer 2 b"] == pytest.approx(120 * 100 * 15e-9)
    shell = sum(value for name, value in volume.items() if name != "room/-z layer 2 b")
    assert shell == pytest.approx((120 * 100 * 80 - 100 * 80 * 60) * 1e-9)


def test_opening_filled_by_later_body():
    rest = 'layers = [["a", 10]]\nopenings = [{ face = "+x", from = [20, 10], to = [50, 40] }]'
    door = '[[body]]\nname = "door"\nmaterial = "b"\nbox = { from = [100, 20, 10], to = [104, 50, 40] }\n'
    volume = mesh_of(enclosure(rest) + door).quality["mesh_volume"]
    shell = 120 * 100 * 80 - 100 * 80 * 60
    assert volume["room/layer 1 a"] == pytest.approx((shell - 30 * 30 * 10) * 1e-9)
    assert volume["door"] == pytest.approx(30 * 30 * 4e-9)


def test_opening_beyond_enclosure():
    rest = 'layers = [["a", 10]]\nopenings = [{ face = "+x", from = [20, 10], to = [500, 40] }]'
    with pytest.raises(CaseError):
        expand(make_case(enclosure(rest)))
