"""What a run over time says of its own error holds the exact values."""

from __future__ import annotations

import pytest

from published import over_time, runs

EVERY = [reference for group in over_time.GROUPS for reference in group()]
QUICK = [reference for reference in EVERY if not reference.slow]


@pytest.mark.parametrize(
    "reference", [r for r in QUICK if r.quantity[-1] in ("temperature", "mean_temperature")], ids=lambda r: r.label
)
def test_estimate_holds_the_exact_temperature(reference):
    answers = runs.published(reference.case, reference.change)
    said = answers["accuracy"]["over_time"]
    assert abs(reference.of(answers) - reference.value) <= said["temperature"]
    assert said["temperature"] <= 2.5 * reference.tolerance, "an estimate that holds anything says nothing"


@pytest.mark.parametrize("reference", [r for r in QUICK if "events" in r.quantity], ids=lambda r: r.label)
def test_estimate_holds_the_exact_moment(reference):
    answers = runs.published(reference.case, reference.change)
    event = answers["history"]["events"][reference.quantity[2]]
    assert abs(event["time"] - reference.value) <= event["error"] <= 0.05 * event["time"]
    assert event["error_from_steps"] < event["error"]


def test_there_are_such():
    assert sum("events" in r.quantity for r in QUICK) == 4
    assert sum(r.quantity[-1] == "temperature" for r in QUICK) > 10
