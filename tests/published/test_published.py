"""Every value of references.py, from its case file through the whole program."""

from __future__ import annotations

import pytest

from published import runs
from published.references import REFERENCES

ROUND_OFF = 1e-9
"""Relative widening of every interval: the references are exact to about this much only."""

_RUNS = {str((r.case, r.change, r.slow)): (r.case, r.change, r.slow) for r in REFERENCES}  # changes hold dicts
CASES = [_RUNS[key] for key in sorted(_RUNS)]


def parameters(references):
    """Return pytest parameters, slow ones marked."""
    return [pytest.param(r, id=r.label, marks=[pytest.mark.slow] if r.slow else []) for r in references]


@pytest.mark.parametrize("reference", parameters(REFERENCES))
def test_value_within_the_source_s_tolerance(reference):
    value = reference.of(runs.published(reference.case, reference.change))
    assert value == pytest.approx(reference.value, rel=0, abs=reference.tolerance), (
        f"{value:.8g} {reference.unit} is {value - reference.value:+.3g} from {reference.value:.8g}: {reference.source}"
    )


@pytest.mark.parametrize("reference", parameters([r for r in REFERENCES if r.is_flow]))
def test_reference_within_the_interval(reference):
    interval = reference.interval(runs.published(reference.case, reference.change))
    assert interval is not None, "every heat flow has an interval"
    low, high = interval
    slack = reference.allowance + ROUND_OFF * (abs(reference.value) + abs(reference.offset))
    assert low - slack <= reference.value <= high + slack, (
        f"{reference.value:.8g} {reference.unit} lies outside {low:.8g} ... {high:.8g}"
    )


@pytest.mark.parametrize(
    ("case", "change"),
    [pytest.param(case, change, marks=[pytest.mark.slow] if slow else []) for case, change, slow in CASES],
)
def test_balance_closes_and_intervals_hold_their_flow(case, change):
    assert runs.faults(runs.published(case, change)) == []


def test_every_case_file_has_a_reference():
    files = {path.stem for path in runs.HERE.glob("*.toml")}
    assert files == {reference.case for reference in REFERENCES}


@pytest.mark.parametrize("reference", REFERENCES, ids=lambda reference: reference.label)
def test_every_reference_says_where_from_and_how_close(reference):
    assert reference.source and reference.reason and reference.unit
    assert 0 < reference.tolerance
