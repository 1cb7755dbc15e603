"""From a solution to the answers a user reads."""

from __future__ import annotations

import dataclasses

import numpy as np

from coldseam._version import __version__
from coldseam.answers.bridges import BridgeAnswers
from coldseam.answers.cautions import cautions
from coldseam.answers.enclosure import enclosures
from coldseam.answers.limits import limit_warnings, limits
from coldseam.answers.losses import losses
from coldseam.answers.parts import parts
from coldseam.answers.points import weighting
from coldseam.answers.surfaces import surfaces
from coldseam.answers.types import Answers, BodyAnswer, BoundaryAnswer, Extremes, ProbeAnswer, SpaceAnswer, place
from coldseam.errors import CaseError, Fault
from coldseam.mesh.locate import locate
from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.mesh.types import Mesh
from coldseam.solution.frozen import film_of
from coldseam.solution.readings import (
    CLASH,
    Interval,
    body_energy,
    boundary_intervals,
    coupling,
    shape_error,
    space_intervals,
)
from coldseam.solution.rounds import EXACT, Solution, point_limit
from coldseam.solution.steady import Steady
from coldseam.volumes.section import facet_shares, node_shares_of_cells

UNITS = {
    "length": "mm",
    "temperature": "degC",
    "heat_flow": "W",
    "heat_flux": "W/m2",
    "area": "m2",
    "volume": "m3",
    "coupling": "W/K",
    "psi": "W/(m K)",
    "chi": "W/K",
    "film": "W/(m2 K)",
    "transmittance": "W/(m2 K)",
    "resistance": "m2 K/W",
    "vapour_pressure": "Pa",
    "humidity": "1",
    "share": "1",
    "f_Rsi": "1",
    "weighting": "1",
    "flanking": "m",
}
SECTION_UNITS = {"heat_flow": "W/m", "area": "m2/m", "volume": "m3/m", "coupling": "W/(m K)"}


def build_answers(solution: Solution, bridges: BridgeAnswers | None = None) -> Answers:
    """Return the answers of a solved case.

    Parameters
    ----------
    solution
        The solved case.
    bridges
        Its thermal bridges, from :func:`coldseam.answers.bridges.solve_bridges`.

    Raises
    ------
    CaseError
        A probe lies outside the model, or a limit can't be answered.
    """
    bridges = bridges or BridgeAnswers()
    answers = _plain_answers(solution, bridges)
    verdicts = limits(solution.steady.case, answers)
    told = (*answers.warnings, *bridges.warnings, *limit_warnings(solution.steady.case, verdicts))
    return dataclasses.replace(answers, limits=verdicts, warnings=told)


def _plain_answers(solution: Solution, bridges: BridgeAnswers) -> Answers:
    """Return the answers without the limits, which are about them."""
    steady = solution.steady
    case, mesh = steady.case, steady.mesh
    section = mesh.dim == 2 and not mesh.axisymmetric
    couplings = coupling(steady)
    boxes = enclosures(steady)
    where, reacts = losses(steady)
    for name, entry in where.items():
        entry["parts"] = parts(steady, name, bridges.entries, boxes)
    return Answers(
        title=case.title,
        dimensions=case.model.dimensions,
        axisymmetric=mesh.axisymmetric,
        coldseam=__version__,
        case_sha256=case.source.sha256,
        units=UNITS | (SECTION_UNITS if section else {}),
        mesh=mesh_answer(solution),
        accuracy=accuracy_answer(solution),
        balance={
            "closure": steady.closure,
            "relative": steady.relative_closure,
            "throughput": steady.throughput,
            "heat_sources": steady.source_flow,
        },
        boundaries=_boundaries(steady),
        spaces=_spaces(steady),
        coupling={a: {b: i.value for b, i in row.items()} for a, row in couplings.items()},
        coupling_intervals={a: {b: (i.low, i.high) for b, i in row.items()} for a, row in couplings.items()},
        probes=probes(steady),
        bodies=_bodies(steady),
        bridges=bridges.entries,
        surfaces=surfaces(steady),
        weighting=weighting(steady),
        losses=where,
        sensitivities=reacts,
        enclosures=boxes,
        solver={
            "method": steady.response.method,
            "iterations": list(steady.response.iterations),
            "bound_method": None if steady.bounds is None else steady.bounds.response.method,
            "bound_iterations": [] if steady.bounds is None else list(steady.bounds.response.iterations),
            **_frozen(steady),
        },
        warnings=warnings(solution),
    )


def _frozen(steady: Steady) -> dict:
    """Return how temperature-dependent coefficients were settled; nothing for a linear case."""
    if steady.settled is None:
        return {}
    return {
        "coefficient_steps": steady.settled.iterations,
        "last_step": steady.settled.history[-1],
        "linearised": "coupling coefficients, bridges and sensitivities are those of the linear problem with the films "
        "and conductivities of the answer, and outside temperatures that give its heat flows",
    }


def mesh_answer(solution: Solution) -> dict:
    """Return the size and quality of the last mesh."""
    mesh = solution.steady.mesh
    quality = {key: value for key, value in mesh.quality.items() if key not in ("cad_volume", "mesh_volume")}
    return {"nodes": mesh.n_nodes, "cells": mesh.n_cells, "rounds": len(solution.rounds), "quality": quality}


def accuracy_answer(solution: Solution) -> dict:
    """Return what accuracy was asked and reached, round by round."""
    asked = solution.steady.case.model.accuracy
    last = solution.rounds[-1]
    return {
        "asked": asked,
        "reached": None if last.error is None else asked * last.error,
        "flows_met": solution.flows_met and last.error is not None,
        "points_met": solution.points_met,
        "shape_error": shape_error(solution.steady),
        "rounds": [
            {
                "nodes": r.nodes,
                "cells": r.cells,
                "reached": None if r.error is None else asked * r.error,
                "temperatures_moved": r.moved,
                "seconds": round(r.seconds, 3),
            }
            for r in solution.rounds
        ],
    }


def warnings(solution: Solution) -> tuple[str, ...]:
    """Return everything a user must know beside the numbers."""
    steady = solution.steady
    found = [*steady.case.warnings, *steady.mesh.quality.get("remarks", ())]
    if steady.given.clashes:
        found.append(CLASH)
    cells = np.bincount(steady.mesh.cell_body, minlength=len(steady.mesh.bodies))
    coarse = [f'"{body.name}"' for body, n in zip(steady.mesh.bodies, cells, strict=True) if n == 1]
    if coarse and not exact_on(solution):
        found.append(
            f"the mesh is so coarse that a body has one cell ({', '.join(coarse)}): its temperatures are rough"
        )
    asked = steady.case.model.accuracy
    if not solution.flows_met and solution.rounds[-1].error is not None:
        reached = asked * solution.rounds[-1].error
        found.append(
            f"the asked accuracy of {asked:.2%} was not reached: the worst heat flow is known to {reached:.2%}"
        )
    if not solution.points_met:
        found.append(
            f"surface or probe temperatures still moved by more than {point_limit(steady.case):.2%} of their range on "
            "the last mesh"
        )
    if steady.settled is not None:
        found += steady.settled.remarks
        found += cautions(steady)
    found += [*solution.remarks, *steady.remarks]
    return tuple(found)


def exact_on(solution: Solution) -> bool:
    """Return whether the bounds close to rounding: the field is linear in every cell, however few there are."""
    reached = solution.rounds[-1].error
    return reached is not None and reached * solution.steady.case.model.accuracy < EXACT


def extremes(mesh: Mesh, temperature: np.ndarray, facets: np.ndarray) -> Extremes:
    """Return the extremes of a temperature on facets.

    Parameters
    ----------
    mesh
        The mesh.
    temperature
        °C, shape (n_nodes,).
    facets
        A mask, shape (n_facets,), or positions among the exterior facets, shape (n,).
    """
    chosen = mesh.facets[facets]
    nodes = np.unique(chosen)
    values = temperature[nodes]
    low, high = nodes[np.argmin(values)], nodes[np.argmax(values)]
    shares = facet_shares(mesh, chosen)
    mean = float((shares * temperature[chosen]).sum() / shares.sum())
    return Extremes(
        min=float(temperature[low]),
        min_at=place(mesh.points[low]),
        max=float(temperature[high]),
        max_at=place(mesh.points[high]),
        mean=mean,
    )


def _boundaries(steady: Steady) -> dict[str, BoundaryAnswer]:
    area = np.bincount(steady.facet_boundary, facet_measure(steady.mesh), len(steady.case.boundary))
    found = {}
    for number, (boundary, interval) in enumerate(zip(steady.case.boundary, boundary_intervals(steady), strict=True)):
        film = film_of(steady, number)
        found[boundary.name] = BoundaryAnswer(
            kind=kind_of(boundary),
            space=boundary.space,
            area=float(area[number]),
            heat_flux_mean=interval.value / float(area[number]),
            film=float(film) if boundary.space is not None and np.isfinite(film) else None,
            temperature=extremes(steady.mesh, steady.read_temperature, steady.facet_boundary == number),
            film_used=None if steady.settled is None else steady.settled.films.get(boundary.name),
            **_flow(interval),
        )
    return found


def _flow(interval: Interval) -> dict:
    return {
        "heat_flow": float(interval.value),
        "heat_flow_low": None if interval.low is None else float(interval.low),
        "heat_flow_high": None if interval.high is None else float(interval.high),
        "interval": interval.kind,
        "interval_reason": interval.reason,
    }


def kind_of(boundary) -> str:
    """Return what a boundary of the case sets."""
    for kind in ("space", "temperature", "heat_flux", "heat_flow", "cavity"):
        if getattr(boundary, kind) is not None:
            return kind
    return "adiabatic"


def _spaces(steady: Steady) -> dict[str, SpaceAnswer]:
    return {
        name: SpaceAnswer(temperature=steady.case.spaces[name].temperature, **_flow(interval))
        for name, interval in space_intervals(steady).items()
    }


def probes(steady: Steady) -> dict[str, ProbeAnswer]:
    """Return the temperatures at the case's probes.

    Raises
    ------
    CaseError
        A probe lies outside the model.
    """
    if not steady.case.probe:
        return {}
    at = np.array([probe.at for probe in steady.case.probe], dtype=float)
    cells, weights = locate(steady.mesh, at)
    faults = [
        Fault(path=("probe", n, "at"), what=f"the point {place(at[n])} mm lies outside the model")
        for n in np.flatnonzero(cells < 0)
    ]
    if faults:
        raise CaseError(faults)
    values = (steady.read_temperature[steady.mesh.cells[cells]] * weights).sum(axis=1)
    return {
        probe.name: ProbeAnswer(temperature=float(value), at=place(point))
        for probe, point, value in zip(steady.case.probe, at, values, strict=True)
    }


def _bodies(steady: Steady) -> dict[str, BodyAnswer]:
    mesh = steady.mesh
    volume = cell_measure(mesh)
    energy = body_energy(steady)
    total = float(energy.sum())
    found = {}
    for number, body in enumerate(mesh.bodies):
        cells = mesh.cell_body == number
        size = float(volume[cells].sum())
        if size == 0.0:
            continue
        share = node_shares_of_cells(mesh, cells.astype(float))
        nodes = np.unique(mesh.cells[cells])
        found[body.name] = BodyAnswer(
            material=body.material,
            volume=size,
            mean_temperature=float(share @ steady.read_temperature / share.sum()),
            min_temperature=float(steady.read_temperature[nodes].min()),
            max_temperature=float(steady.read_temperature[nodes].max()),
            heat_source=float((steady.given.source[cells] * volume[cells]).sum()),
            loss_share=float(energy[number]) / total if total > 0 else 0.0,
            air_gap=None if steady.settled is None else steady.settled.coefficients.gaps.get(body.name),
        )
    return found
