"""Runs of case files, each solved once a session however many tests ask for it."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path

from coldseam.case import read
from coldseam.study import run

HERE = Path(__file__).parent
SHIPPED = HERE.parents[1] / "cases"

KEPT = {"iso10211-case-3"}
"""Cases whose whole result is wanted; those of all would fill the memory."""

Change = tuple[tuple[str, object], ...]
"""Keys of a case file to replace, with their values."""


def case_of(path: Path, change: Change = ()):
    """Return the case of a file, with some keys replaced."""
    case = read.load(path)
    for key, value in change:
        case = read.replace(case, key, value)
    return case


def answers_of(path: Path, change: Change = ()) -> dict:
    """Return the answers of a case file as its answers.json holds them, solved at most once a session."""
    return _answers(path, json.dumps(change))


@cache
def _answers(path: Path, change: str) -> dict:
    return as_json(_kept(path, change) if path.stem in KEPT else _run(path, change))


def result_of(stem: str):
    """Return the result itself, fields and all, of a case of this folder that is in ``KEPT``."""
    assert stem in KEPT
    return _kept(HERE / f"{stem}.toml", json.dumps(()))


@cache
def _kept(path: Path, change: str):
    return _run(path, change)


def _run(path: Path, change: str):
    return run(case_of(path, tuple((key, value) for key, value in json.loads(change))))


def as_json(result) -> dict:
    """Return a result's answers after a round trip through JSON, as a reader of answers.json gets them."""
    return json.loads(json.dumps(result.answers.as_dict()))


def published(stem: str, change: Change = ()) -> dict:
    """Return the answers of a case file of this folder."""
    return answers_of(HERE / f"{stem}.toml", change)


def shipped(stem: str, change: Change = ()) -> dict:
    """Return the answers of a case file of cases/."""
    return answers_of(SHIPPED / f"{stem}.toml", change)


def faults(answers: dict) -> list[str]:
    """Return what is wrong with answers whatever the case: heat balance, intervals, names of spaces.

    The balance must close to 1e-6 of half the sum of the flows' sizes (this project's rule; ISO 10211 asks for 1e-4),
    which is recomputed here from the flows themselves and not only read.
    """
    wrong = []
    relative = answers["balance"]["relative"]
    if not abs(relative) <= 1e-6:
        wrong.append(f"balance {relative:g}")
    for kind in ("boundaries", "spaces"):
        for name, entry in answers[kind].items():
            low, high = entry.get("heat_flow_low"), entry.get("heat_flow_high")
            if low is None or high is None:
                continue
            slack = 1e-9 * max(abs(low), abs(high), 1e-9)
            if not low - slack <= entry["heat_flow"] <= high + slack:
                wrong.append(f"{kind} {name}: {entry['heat_flow']} outside {low} ... {high}")
    return wrong
