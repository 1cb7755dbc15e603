"""Broken on purpose: an error in the physics must turn the published checks red, or they prove nothing.

Each sabotage changes one number or sign inside the program and runs the published case that should notice. It counts
as noticed when a value leaves its tolerance or its interval, or when the program itself refuses the result.
"""

from __future__ import annotations

from dataclasses import replace

import pytest
from published import runs
from published.references import REFERENCES

from coldseam.errors import ColdseamError
from coldseam.solution import heatsystem
from coldseam.study import run
from coldseam.volumes import conditions


def complaints(answers: dict, case: str) -> list[str]:
    """Return what the published checks say of a run of a case: nothing when all is well."""
    found = runs.faults(answers)
    for reference in REFERENCES:
        if reference.case != case or reference.change:
            continue
        value = reference.of(answers)
        if not abs(value - reference.value) <= reference.tolerance:
            found.append(f"{reference.label}: {value:g}, not {reference.value:g}")
        interval = reference.interval(answers)
        slack = reference.allowance + 1e-9 * (abs(reference.value) + abs(reference.offset))
        if interval and not interval[0] - slack <= reference.value <= interval[1] + slack:
            found.append(f"{reference.label}: {reference.value:g} outside {interval}")
    return found


def notices(case: str) -> bool:
    """Return whether a fresh run of a published case is refused or complained of."""
    try:
        answers = runs.as_json(run(runs.case_of(runs.HERE / f"{case}.toml")))
    except ColdseamError:
        return True
    return bool(complaints(answers, case))


def change_conditions(monkeypatch, **change):
    """Let the arrays that the networks are built from come out wrong, each by its function."""
    honest = conditions.conditions

    def wrong(case, mesh, facet_boundary):
        given = honest(case, mesh, facet_boundary)
        return replace(given, **{name: alter(getattr(given, name)) for name, alter in change.items()})

    for module in _users(honest):
        monkeypatch.setattr(module, "conditions", wrong)


def _users(function):
    """Return every module of coldseam that holds a function under its own name."""
    import sys

    found = [m for name, m in sys.modules.items() if name.startswith("coldseam") and m is not None]
    return [m for m in found if getattr(m, function.__name__, None) is function]


CONDUCTING = [
    "plane-wall",
    "two-layers",
    "contact",
    "cylinder-axisymmetric",
    "fin",
    "anisotropic",
    "edge",
    "sheet-along-3d",
]


@pytest.mark.parametrize("case", [*CONDUCTING, "source-slab", "flux", "sheet-film", "nafems-t4"])
def test_the_honest_program_passes(case):
    assert complaints(runs.published(case), case) == []


@pytest.mark.parametrize("case", [case for case in CONDUCTING if case not in ("sheet-along-3d",)])
def test_a_conductivity_one_percent_high_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, conductivity=lambda k: 1.01 * k)
    assert notices(case)


@pytest.mark.parametrize("case", ["plane-wall", "two-layers", "flux", "fin", "sheet-film", "nafems-t4"])
def test_a_film_of_the_wrong_sign_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, film=lambda h: -h)
    assert notices(case)


@pytest.mark.parametrize("case", ["plane-wall", "two-layers", "flux", "sheet-film"])
def test_films_two_percent_high_are_noticed(monkeypatch, case):
    change_conditions(monkeypatch, film=lambda h: 1.02 * h)
    assert notices(case)


@pytest.mark.parametrize("case", ["source-slab", "source-cylinder-axisymmetric"])
def test_a_source_one_percent_low_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, source=lambda q: 0.99 * q)
    assert notices(case)


@pytest.mark.parametrize("case", ["flux", "flow", "anisotropic"])
def test_a_prescribed_flux_of_the_wrong_sign_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, flux=lambda q: -q)
    assert notices(case)


@pytest.mark.parametrize("case", ["contact", "contact-3d"])
def test_a_contact_one_percent_off_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, link_conductance=lambda g: 1.01 * g)
    assert notices(case)


@pytest.mark.parametrize("case", ["sheet-along", "sheet-along-3d", "sheet-film"])
def test_a_sheet_two_percent_thick_is_noticed(monkeypatch, case):
    change_conditions(monkeypatch, sheet_conductance=lambda g: 1.02 * g)
    assert notices(case)


def test_material_axes_ignored_are_noticed(monkeypatch):
    change_conditions(monkeypatch, tensors=lambda t: None)
    assert notices("anisotropic")
    assert notices("anisotropic-turned-plate")


def test_material_axes_turned_the_wrong_way_are_noticed(monkeypatch):
    def mirrored(tensors):
        wrong = tensors.copy()
        wrong[:, 0, 1] *= -1
        wrong[:, 1, 0] *= -1
        return wrong

    change_conditions(monkeypatch, tensors=mirrored)
    assert notices("anisotropic")
    assert notices("anisotropic-turned-plate")


def test_a_radius_that_does_not_count_is_noticed(monkeypatch):
    """An axisymmetric section computed as a plane one of the same mean width."""
    from coldseam.volumes import nodes, section

    honest = section.cell_radius

    def mean(mesh):
        radius = honest(mesh)
        return None if radius is None else 0 * radius + radius.mean()

    monkeypatch.setattr(nodes, "cell_radius", mean)
    assert notices("cylinder-axisymmetric")


@pytest.mark.parametrize("factor", [0.97, 1.03])
def test_wrong_heat_capacities_are_noticed(monkeypatch, factor):
    """Over time; 3 % shift the temperatures of a half-space by more than the accuracy asked."""
    honest = heatsystem.node_capacities
    monkeypatch.setattr(heatsystem, "node_capacities", lambda *given: factor * honest(*given))
    assert notices("half-space-with-film")


def test_a_time_step_that_lags_is_noticed(monkeypatch):
    """Schedules read two seconds late: NAFEMS T3 must turn red."""
    honest = heatsystem.value_at
    late = lambda course, time, *, before=False: honest(course, max(time - 2.0, 0.0), before=before)  # noqa: E731
    monkeypatch.setattr(heatsystem, "value_at", late)
    assert notices("nafems-t3")
