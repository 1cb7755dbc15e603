"""Where the watts go, what each would react to, and how sure a heat flow is of its inputs.

See shares.py: the terms that a flow is the sum of are at once its sensitivities. The terms are those of the node
network; the flow that is reported is the mean of two networks' (bounds.py), and the terms are scaled to
it by a factor that differs from 1 by less than the flow's error. Per space,

- ``by_boundary``: what its own boundaries give (only boundaries that face it);
- ``by_body``, ``by_film``, ``by_sheet``, ``by_contact``, ``from_heat_sources``: terms that add up to the flow;
- ``sensitivities``: d ln Q / d ln of every material's k, film's h, contact's R, body's source and boundary's given flow.

The interval from stated input uncertainties is of first order: each input's sensitivity times its uncertainty,
added up for inputs that are all off the worst way at once, and as the root of the sum of squares for independent ones.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.answers.shares import Shares, shares_of
from coldseam.solution.readings import boundary_intervals, space_intervals, space_terminals
from coldseam.solution.steady import Steady
from coldseam.volumes.conditions import boundary_film

if TYPE_CHECKING:
    from coldseam.case.model import Body, Case

KINDS = ("material", "film", "contact", "heat source", "given flow")
NOTHING = 1e-9
"""A flow below this part of what passes through the model is none: it has no relative sensitivity."""


@dataclass(frozen=True, kw_only=True)
class Sensitivity:
    """What a heat flow does when one input changes.

    Parameters
    ----------
    kind
        ``"material"`` (its conductivity), ``"film"`` (its coefficient), ``"contact"`` (its resistance), ``"heat source"``
        (of a body) or ``"given flow"`` (of a boundary).
    name
        Of the material, boundary, contact or body.
    heat_flow
        d Q / d ln(input), W (2D: W/m): a hundredth of it is what 1 % does.
    relative
        d ln Q / d ln(input); None where nothing flows.
    uncertainty
        Stated for the input, a fraction; None where none is.
    """

    kind: str
    name: str
    heat_flow: float
    relative: float | None
    uncertainty: float | None = None


def losses(steady: Steady) -> tuple[dict[str, Any], dict[str, Any]]:
    """Return where each space's heat goes, and what its flow is sensitive to, by space."""
    where, reacts = {}, {}
    reported = space_intervals(steady)
    for name, (terminals, boundaries) in space_terminals(steady).items():
        shares = shares_of(steady, terminals)
        flow = float(reported[name].value)
        shares = scaled(shares, flow, NOTHING * steady.throughput)
        where[name] = _terms(steady, shares, boundaries, flow)
        found = sensitivities(steady, shares, flow)
        reacts[name] = {
            **{f"{kind.replace(' ', '_')}s": {s.name: s for s in found if s.kind == kind} for kind in KINDS},
            "interval": input_interval(found, flow),
            "ranked": ranked(found),
        }
    return where, reacts


def scaled(shares: Shares, flow: float, nothing: float) -> Shares:
    """Return shares that add up to a flow, W (2D: W/m); as they are where no more than ``nothing`` (W) flows."""
    total = shares.total
    if abs(total) <= nothing or abs(flow) <= nothing:
        return shares
    factor = flow / total
    return Shares(
        body=factor * shares.body,
        film=factor * shares.film,
        sheet=factor * shares.sheet,
        contact=factor * shares.contact,
        released=factor * shares.released,
        given=factor * shares.given,
    )


def _terms(steady: Steady, shares: Shares, boundaries: list[int], flow: float) -> dict[str, Any]:
    case, mesh = steady.case, steady.mesh
    films = [n for n, b in enumerate(case.boundary) if b.space is not None and np.isfinite(boundary_film(case, b))]

    def entry(value: float) -> dict[str, float | None]:
        share = float(value) / flow if abs(flow) > NOTHING * steady.throughput else None
        return {"heat_flow": float(value), "share": share}

    own = boundary_intervals(steady)
    present = np.bincount(mesh.cell_body, minlength=len(mesh.bodies)) > 0
    return {
        "heat_flow": flow,
        "by_boundary": {case.boundary[n].name: entry(own[n].value) for n in boundaries},
        "by_body": {b.name: entry(v) for b, v, here in zip(mesh.bodies, shares.body, present, strict=True) if here},
        "by_film": {case.boundary[n].name: entry(shares.film[n]) for n in films},
        "by_sheet": {sheet.name: entry(v) for sheet, v in zip(case.sheet, shares.sheet, strict=True)},
        "by_contact": {contact.name: entry(v) for contact, v in zip(case.contact, shares.contact, strict=True)},
        "from_heat_sources": entry(float(shares.released.sum() + shares.given.sum())),
        "sum": shares.total,
    }


def sensitivities(steady: Steady, shares: Shares, flow: float) -> list[Sensitivity]:
    """Return what a flow (W; 2D: W/m) is sensitive to, from the terms it is the sum of."""
    case = steady.case
    found: dict[tuple[str, str], float] = {}
    for body, value in zip(steady.mesh.bodies, shares.body, strict=True):
        found["material", body.material] = found.get(("material", body.material), 0.0) + float(value)
    for sheet, value in zip(case.sheet, shares.sheet, strict=True):
        found["material", sheet.material] = found.get(("material", sheet.material), 0.0) + float(value)
    for number, boundary in enumerate(case.boundary):
        if boundary.space is not None and np.isfinite(boundary_film(case, boundary)):
            found["film", boundary.name] = float(shares.film[number])
    for contact, value in zip(case.contact, shares.contact, strict=True):
        found["contact", contact.name] = -float(value)  # of the resistance, not of the conductance
    for body, value in zip(steady.mesh.bodies, shares.released, strict=True):
        if value:
            source = case_body(case, body.name).name
            found["heat source", source] = found.get(("heat source", source), 0.0) + float(value)
    for boundary, value in zip(case.boundary, shares.given, strict=True):
        if value:
            found["given flow", boundary.name] = float(value)
    return [
        Sensitivity(
            kind=kind,
            name=name,
            heat_flow=value,
            relative=value / flow if abs(flow) > NOTHING * steady.throughput else None,
            uncertainty=_uncertainty(steady, kind, name),
        )
        for (kind, name), value in found.items()
    ]


def case_body(case: Case, name: str) -> Body:
    """Return the body of the case that a body of the mesh, or a part of it, comes from."""
    return next(body for body in case.body if name == body.name or name.startswith(f"{body.name}/"))


def _uncertainty(steady: Steady, kind: str, name: str) -> float | None:
    """Return the uncertainty that the case states for an input, a fraction."""
    case = steady.case
    if kind == "material":
        return case.materials[name].uncertainty
    if kind == "film":
        boundary = next(b for b in case.boundary if b.name == name)
        own = boundary.uncertainty is not None or boundary.h is not None
        return (boundary if own else case.spaces[boundary.space]).uncertainty
    if kind == "contact":
        return next(c for c in case.contact if c.name == name).uncertainty
    if kind == "heat source":
        return case_body(case, name).uncertainty
    return next(b for b in case.boundary if b.name == name).uncertainty


def input_interval(found: list[Sensitivity], flow: float) -> dict[str, Any] | None:
    """Return the first-order interval of a flow from its inputs' uncertainties; None where none is stated.

    Parameters
    ----------
    found
        From :func:`sensitivities`.
    flow
        W (2D: W/m).
    """
    stated = [s for s in found if s.uncertainty is not None]
    if not stated:
        return None
    effects = [abs(s.heat_flow) * s.uncertainty for s in stated if s.uncertainty is not None]
    worst, independent = math.fsum(effects), math.hypot(*effects)
    return {
        "heat_flow_low": flow - worst,
        "heat_flow_high": flow + worst,
        "half_width_worst": worst,
        "half_width_independent": independent,
        "stated": [f"{s.kind} {s.name}" for s in stated],
        "not_stated": [f"{s.kind} {s.name}" for s in found if s.uncertainty is None],
        "kind": "first order",
    }


def ranked(found: list[Sensitivity]) -> list[dict[str, Any]]:
    """Return the inputs by what they do to the flow: stated uncertainties first, then by what 1 % would do."""

    def effect(s: Sensitivity) -> float:
        return abs(s.heat_flow) * (0.01 if s.uncertainty is None else s.uncertainty)

    order = sorted(found, key=lambda s: (s.uncertainty is None, -effect(s)))
    return [
        {
            "input": f"{s.kind} {s.name}",
            "relative": s.relative,
            "change": 0.01 if s.uncertainty is None else s.uncertainty,
            "change_stated": s.uncertainty is not None,
            "heat_flow_change": effect(s),
        }
        for s in order
    ]
