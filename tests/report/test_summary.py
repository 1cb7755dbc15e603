"""The printed summary: digits that follow the error, units, and an interval that is never made narrower."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from coldseam.mesh.types import Mesh, MeshBody
from coldseam.report.summary import accuracy_sentence, flow_unit, model_summary, number, summary, with_error
from coldseam.report.view import View

SHOWN = re.compile(r"^(-?[\d.e+-]+) ± ([\d.e+-]+) W$")


@given(
    value=st.floats(-1e5, 1e5).filter(lambda x: abs(x) > 1e-3),
    below=st.floats(1e-6, 0.5),
    above=st.floats(1e-6, 0.5),
)
def test_the_printed_interval_covers_the_interval(value, below, above):
    low, high = value - below * abs(value), value + above * abs(value)
    shown, error = map(float, SHOWN.match(with_error(value, low, high, "W")).groups())
    slack = 1e-8 * abs(value)
    assert shown - error <= low + slack
    assert shown + error >= high - slack
    # and it is not padded: at most a quarter and the rounding of the value wider than it must be
    assert error <= 1.8 * max(high - value, value - low)


@pytest.mark.parametrize(
    ("value", "low", "high", "text"),
    [
        (12.4, 12.3, 12.5, "12.4 ± 0.1 W"),
        (-12.4, -12.5, -12.3, "-12.4 ± 0.1 W"),
        (1234.0, 1190.0, 1260.0, "1230 ± 40 W"),
        (9.4909, 9.4889, 9.4929, "9.4909 ± 0.0020 W"),
        (0.0, -1e-4, 1e-4, "0.0000 ± 0.0001 W"),
        (5.0, 5.0, 5.0, "5.00000 W"),
        (5.0, None, None, "5.000 W"),
    ],
)
def test_digits_follow_the_error(value, low, high, text):
    assert with_error(value, low, high, "W") == text


@given(st.floats(-1e30, 1e30).filter(lambda x: abs(x) > 1e-30))
def test_numbers_keep_four_digits(value):
    assert float(number(value)) == pytest.approx(value, rel=5.1e-4)


def test_what_is_no_number_is_not_printed_as_one():
    assert number(math.nan) == "not known"


def test_films_that_followed_from_the_answer():
    used = {
        "film": 7.06,
        "convection": {"film": 2.07, "correlation": "Churchill, Chu 1975, vertical plate, all Ra", "Ra": 1.83e10},
        "radiation": {"film": 4.99, "temperature": -20.0},
        "sun": {"absorbed": 200.0},
    }
    made = answers()
    assert "as the answer made them" not in summary(made)
    made["boundaries"]["warm face"]["film_used"] = used
    row = next(line for line in summary(made).splitlines() if "convection" in line)
    assert "warm face" in row and "7.06 W/(m²·K)" in row and "convection 2.07 (Churchill, Ra 1.8e+10)" in row
    assert "radiation to -20.0 °C 4.99" in row and "sun 200 W/m²" in row


def answers(**changes):
    """Return the answers of a two-space panel, made up by hand."""
    kind = {"interval": "estimate", "interval_reason": "meshes were compared"}
    bay = {"heat_flow": 12.4, "heat_flow_low": 12.3, "heat_flow_high": 12.5, **kind}
    freezer = {"heat_flow": -12.4, "heat_flow_low": -12.5, "heat_flow_high": -12.3, **kind}
    warm = {"min": 18.24, "min_at": [150, 150, 100], "max": 23.8, "max_at": [0, 0, 100], "mean": 23.1}
    return {
        "title": "Freezer panel",
        "dimensions": 3,
        "mesh": {"nodes": 14203, "cells": 70000, "rounds": 3},
        "accuracy": {"asked": 0.01, "reached": 0.004},
        "balance": {"closure": 1.2e-9, "relative": 9.7e-11},
        "boundaries": {
            "warm face": {**bay, "kind": "space", "area": 0.09, "temperature": warm},
            "cold face": {**freezer, "kind": "space", "area": 0.09, "temperature": {**warm, "min": -19.4}},
        },
        "spaces": {"bay": {**bay, "temperature": 25.0}, "freezer": {**freezer, "temperature": -20.0}},
        "coupling": {"bay": {"freezer": 0.27556}, "freezer": {"bay": 0.27556}},
        "probes": {"bolt head": {"temperature": 18.24, "at": [150, 150, 100]}},
        "bridges": {"bolt": {"chi": 0.0123, "chi_low": 0.0121, "chi_high": 0.0125}},
        "limits": {
            "heat leak": {"met": True, "value": -12.4, "at_most": 250.0, "unit": "W"},
            "sweat": {"met": False, "value": 18.24, "at_least": 19.0, "unit": "°C"},
        },
        "warnings": ["a body has one cell"],
        **changes,
    }


def test_the_answer_comes_first_and_everything_has_its_unit():
    text = summary(answers(), ["out/answers.json"])
    lines = text.splitlines()
    assert lines[0] == "Freezer panel"
    assert lines[2].startswith("Heat flow")
    assert "12.4 ± 0.1 W" in lines[3]
    assert re.search(r"from space freezer +-12.4 ± 0.1 W +at -20.0 °C", text)
    assert re.search(r"bay - freezer +0.2756 W/K", text)
    assert text.count("freezer - bay") == 0
    assert re.search(r"bolt +chi +0.0123 ± 0.0002 W/K", text)
    assert re.search(r"NOT MET +sweat +18.24 °C +at least 19.00 °C", text)
    assert "a body has one cell" in text
    assert "out/answers.json" in text


def test_the_coldest_surface_is_named_first_with_its_place():
    text = summary(answers())
    assert text.index("cold face   -19.4 °C   at (150, 150, 100) mm") < text.index("warm face    18.2 °C")


def test_a_cross_section_is_per_metre():
    text = summary(answers(dimensions=2))
    assert "12.4 ± 0.1 W/m" in text
    assert "0.2756 W/(m·K)" in text
    assert "0.09000 m²/m" in text
    assert flow_unit({"dimensions": 2, "axisymmetric": True}) == "W"


def test_guaranteed_is_said_only_when_all_are():
    assert "0.4 %, 1 % asked (an estimate: meshes were compared)" in summary(answers())
    proven = answers()
    for entry in [*proven["spaces"].values(), *proven["boundaries"].values()]:
        entry["interval"] = "guaranteed"
    assert "0.4 %, 1 % asked (a guaranteed interval)" in summary(proven)
    proven["boundaries"]["warm face"]["interval"] = "estimate"
    assert "(an estimate" in summary(proven)
    assert "not known (1 % asked)" in summary(answers(accuracy={"asked": 0.01, "reached": None}))


def test_adiabatic_cuts_are_no_surfaces():
    cut = answers()
    cut["boundaries"]["cut"] = {**cut["boundaries"]["warm face"], "kind": "adiabatic"}
    assert "cut" not in summary(cut)


def test_a_check_names_bodies_and_boundaries_with_their_sizes():
    # A unit square of two triangles, one for each body: 0.5 m² each, sides of 1 m.
    mesh = Mesh(
        points=np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]]),
        cells=np.array([[0, 1, 2], [0, 2, 3]]),
        cell_body=np.array([0, 1]),
        bodies=(MeshBody(name="lower", material="foam", source=0), MeshBody(name="upper", material="steel", source=1)),
        facets=np.array([[0, 1], [1, 2], [2, 3], [3, 0]]),
        facet_cell=np.array([0, 0, 1, 1]),
        facet_patch=np.arange(4),
    )
    view = View(
        mesh=mesh,
        facet_boundary=np.array([0, 1, 1, 1]),
        boundary_names=("bottom", "others"),
        boundary_space=("room", None),
        boundary_kind=("space", "adiabatic"),
        title="A square",
    )
    text = model_summary(view)
    assert text.startswith("A square\n\nBodies\n")
    assert re.search(r"lower +0.5000 m³/m +foam", text)
    assert re.search(r"bottom +1.000 m²/m +space room", text)
    assert re.search(r"others +3.000 m²/m +adiabatic", text)


def test_answers_without_optional_parts_still_read_well():
    bare = {"title": "", "dimensions": 3, "spaces": {"a": {"heat_flow": 1.0, "temperature": 20.0}}}
    assert summary(bare).startswith("Untitled case\n\nHeat flow")


def test_accuracy_over_time_is_called_an_estimate():
    over_time = {"share": 0.01, "temperature": 0.55, "temperature_from_steps": 0.05}
    said = accuracy_sentence({"asked": 0.01, "reached": 0.004, "over_time": over_time}, [])
    assert said == (
        "Accuracy (an estimate, not a proof): temperatures to some 0.55 K, of which the time steps 0.05 K; times and heat to "
        "some 1 %; steady heat flows on the mesh before it to 0.4 %"
    )
