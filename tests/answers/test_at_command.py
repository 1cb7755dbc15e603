"""The ``at`` command: one solve, answers at other temperatures."""

from __future__ import annotations

import json

import pytest

from coldseam.cli import main


@pytest.fixture
def case(tmp_path, texts):
    path = tmp_path / "tee.toml"
    path.write_text(texts["tee"], encoding="utf-8")
    return path


def test_answers_are_those_of_the_superposed_result(case, tee, tmp_path, capsys):
    assert main(["at", str(case), "left=5", "outside=-13 degF", "--out", str(tmp_path / "out")]) == 0
    assert "at -25.0 °C" in capsys.readouterr().out
    written = json.loads((tmp_path / "out" / "answers.json").read_text(encoding="utf-8"))
    expected = tee.at({"left": 5, "outside": "-13 degF"}).answers
    for name, space in expected.spaces.items():
        assert written["spaces"][name]["heat_flow"] == pytest.approx(space.heat_flow, rel=1e-6)


@pytest.mark.parametrize(
    ("words", "what"),
    [
        (["lefft=3"], "no such space"),
        (["left"], "not of the form SPACE=TEMPERATURE"),
        (["left=warm"], "does not begin with a number"),
    ],
)
def test_what_cannot_be_read_ends_before_the_work(case, capsys, words, what):
    assert main(["at", str(case), *words]) == 2
    told = capsys.readouterr()
    assert what in told.err and told.out == "" and "mesh" not in told.err
