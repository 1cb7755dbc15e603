"""ISO 10211 case 3 by its coupling table and weighting factors, case 4 again as a point bridge.

Case files of tests/published, case 4 on a mesh small enough for every day; published values and their limits as there.
"""

from __future__ import annotations

import pytest
from published import runs

from coldseam.case import read
from coldseam.study import run

COUPLINGS = {("lower", "upper"): 2.094, ("lower", "outside"): 1.781, ("upper", "outside"): 1.624}
"""W/K, ISO 10211:2007 annex A, case 3 (from memory; the published flows follow from them)."""
FACTORS = {
    "lower room": {"lower": 0.399, "upper": 0.223, "outside": 0.378},
    "upper room": {"lower": 0.214, "upper": 0.455, "outside": 0.331},
}
"""Weighting factors of the coldest point of each room (general finite element vendor's page)."""


def small(stem: str, most_nodes: int, **keys):
    """Return a run of a published case whose mesh may not grow beyond so many nodes."""
    case = read.replace(runs.case_of(runs.HERE / f"{stem}.toml"), "model.max_nodes", most_nodes)
    for key, value in keys.items():
        case = read.replace(case, [key], value)
    return run(case)


@pytest.fixture(scope="module")
def three():
    return runs.result_of("iso10211-case-3")


def test_case_3_coupling(three):
    """1 % each, the standard's limit for flows; and within the intervals, given the rounding of the print."""
    for (one, other), value in COUPLINGS.items():
        assert three.answers.coupling[one][other] == pytest.approx(value, rel=0.01)
        assert three.answers.coupling[one][other] == three.answers.coupling[other][one]
        low, high = three.answers.coupling_intervals[one][other]
        assert low - 0.0005 <= value <= high + 0.0005


def test_case_3_flows_and_coldest_points(three):
    """46.09, 13.89, -59.98 W to 1 %; 11.32 and 11.11 °C to 0.1 K at the corners named in the standard."""
    for name, flow in {"lower": 46.09, "upper": 13.89, "outside": -59.98}.items():
        assert three.answers.spaces[name].heat_flow == pytest.approx(flow, rel=0.01)
    for name, (coldest, at) in {
        "lower room": (11.32, (200, 200, 1000)),
        "upper room": (11.11, (200, 200, 1200)),
    }.items():
        found = three.answers.surfaces[name]
        assert found["lowest"] == pytest.approx(coldest, abs=0.1)
        assert found["lowest_at"] == pytest.approx(at, abs=1e-3)


def test_case_3_weighting_factors(three):
    """0.1 K of 20 K is 0.005; the factors of a point add up to 1."""
    for name, factors in FACTORS.items():
        found = three.answers.weighting["surfaces"][name]["coldest"]
        assert sum(found["factors"].values()) == pytest.approx(1.0, abs=1e-9)
        assert found["factors"] == pytest.approx(factors, abs=0.005)


def test_case_3_at_other_temperatures(three):
    """L and g at 22/18/-10 °C, from the published tables, against the superposed answers."""
    answers = three.at({"lower": 22, "upper": 18, "outside": -10}).answers
    assert answers.spaces["lower"].heat_flow == pytest.approx(2.094 * 4 + 1.781 * 32, rel=0.01)
    lowest = 0.399 * 22 + 0.223 * 18 - 0.378 * 10
    assert answers.surfaces["lower room"]["lowest"] == pytest.approx(lowest, abs=0.16)  # 0.005 of 32 K


def test_case_4_as_a_point_bridge():
    """0.540 W/K with the bar; without it 1 m² of U = 1/(0.1 + 2 + 0.1). 1 % of the flow is 6 % of chi."""
    bridge = [{"name": "bar", "kind": "point", "without": ["bar"]}]
    entry = small("iso10211-case-4", 12_000, bridge=bridge).answers.bridges["bar"]
    plain = 1 / 2.2
    assert entry["coupling_without"]["value"] == pytest.approx(plain, rel=1e-6)
    assert entry["chi"] == pytest.approx(0.540 - plain, abs=0.0054)
    assert entry["chi_low"] - 0.0005 <= 0.540 - plain <= entry["chi_high"] + 0.0005
