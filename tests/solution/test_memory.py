"""A mesh that would not fit is refused before it is made, with the size that would fit."""

from types import SimpleNamespace

import pytest

from coldseam.errors import SolveError
from coldseam.solution import memory

GIB = 2**30
CUBE = SimpleNamespace(cad_volume={"body": 1.0})


def case(size):
    """Return what the check reads of a case with elements of a size, m."""
    return SimpleNamespace(model=SimpleNamespace(size=size, dimensions=3))


def test_too_fine_a_size_is_refused_and_the_one_named_fits(monkeypatch):
    monkeypatch.setattr(memory, "available", lambda: 2.0 * GIB)
    with pytest.raises(SolveError, match=r"elements of 1 mm .* GiB of memory; a size of (\S+) mm would fit") as refused:
        memory.require_room(case(1e-3), CUBE)
    named = float(str(refused.value).split("size of ")[1].split()[0]) * 1e-3
    memory.require_room(case(1.02 * named), CUBE)
    with pytest.raises(SolveError):
        memory.require_room(case(0.9 * named), CUBE)


def test_no_size_or_no_geometry_asks_for_nothing(monkeypatch):
    monkeypatch.setattr(memory, "available", lambda: 0.0)
    memory.require_room(case(None), CUBE)
    memory.require_room(case(1e-3), SimpleNamespace())


def test_this_computer_has_some_memory():
    assert 1e6 < memory.available()
    assert memory.room_for(1000) and not memory.room_for(1e13)
