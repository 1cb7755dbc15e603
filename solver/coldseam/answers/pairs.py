"""A model with some bodies and the same without them, meshed alike and refined together."""

from __future__ import annotations

import copy
import dataclasses
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.case.read import loads
from coldseam.case.write import to_toml
from coldseam.errors import CaseError, Fault
from coldseam.geometry.mesher import open_geometry
from coldseam.mesh.boundaries import select
from coldseam.mesh.measure import facet_measure
from coldseam.mesh.types import Mesh, SizeField
from coldseam.solution.adapt import size_field, wanted_sizes
from coldseam.solution.bounds import cell_sizes, local_gap, prove
from coldseam.solution.memory import room_for
from coldseam.solution.readings import Interval, coupling
from coldseam.solution.rounds import MOST_NODES
from coldseam.solution.steady import Steady, solve_on

if TYPE_CHECKING:
    from coldseam.case.model import Case

Log = Callable[[str, str], None]
MOST_ROUNDS = 6
LARGEST_STEP = 8.0
MARGIN = 1.3
FLAT = 1e-3
"""Relative difference of the areas facing two spaces below which the model without the bodies is a flat wall."""


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """What some bodies add to the coupling of two outside points.

    Parameters
    ----------
    present, absent
        Coupling with the bodies and without them, W/K.
    nodes
        Nodes of the two meshes.
    rounds
        Meshes made of each.
    stopped
        Why the refining ended.
    whole
        Area (m²) and U of the wall with and without them, where it is flat; else None.
    remarks
        What had to be left out with the bodies.
    """

    present: Interval
    absent: Interval
    nodes: tuple[int, int]
    rounds: int
    stopped: str
    whole: dict[str, float] | None
    remarks: tuple[str, ...] = ()

    @property
    def difference(self) -> Interval:
        """Coupling with less coupling without, W/K, with the interval of both."""
        reason = self.present.reason or self.absent.reason
        kinds = {self.present.kind, self.absent.kind}
        value = self.present.value - self.absent.value
        ends = (self.present.low, self.absent.high, self.present.high, self.absent.low)
        if any(end is None for end in ends):
            return Interval(value=value, low=None, high=None, kind="estimate", reason=reason)
        low, high = ends[0] - ends[1], ends[2] - ends[3]
        kind = "guaranteed" if kinds == {"guaranteed"} else "estimate"
        return Interval(value=value, low=min(low, value), high=max(high, value), kind=kind, reason=reason)

    @property
    def relative_width(self) -> float | None:
        """Width of the difference's interval over its size; None without an interval."""
        d = self.difference
        if d.low is None or d.high is None:
            return None
        return (d.high - d.low) / abs(d.value) if d.value else np.inf


def compare(steady: Steady, number: int, pair: tuple[str, str], mesher, widest: float, log: Log) -> Comparison:
    """Return what the bodies of a point bridge add to the coupling of two outside points.

    Parameters
    ----------
    steady
        The solved case, with the bodies.
    number
        Position of the bridge.
    pair
        Names of the two points.
    mesher
        The open geometry of the case.
    widest
        Width of the difference's interval, as a part of it, that is good enough.
    log
        Called with a stage and a message.

    Raises
    ------
    CaseError
        Without the bodies the case is at fault.
    """
    bridge = steady.case.bridge[number]
    bare = case_without(steady.case, bridge.without, number)
    size = size_field(steady.mesh, cell_sizes(steady.mesh))
    with open_geometry(bare, log=log) as bare_mesher:
        options = _segments(steady)
        for rounds in range(1, MOST_ROUNDS + 1):
            mesh = bare_mesher.mesh(size, **options)
            if rounds == 1:
                bare, remarks = fitted(bare, mesh, bridge.name, number)
            absent = _solved(bare, mesh, number)
            result = _comparison(steady, absent, pair, rounds, remarks)
            width = result.relative_width
            log(
                "bridge",
                f"{bridge.name}: {steady.mesh.n_nodes} and {mesh.n_nodes} nodes, interval of {_percent(width)} of chi",
            )
            if width is None or width <= widest:
                return result
            size, target, stop = _finer(steady, pair[0], min(MARGIN * width / widest, LARGEST_STEP))
            if stop or rounds == MOST_ROUNDS:
                return dataclasses.replace(result, stopped=stop or f"stopped after {rounds} meshes")
            steady = proven(steady.case, mesher.mesh(size, target, **options))
    raise AssertionError("unreachable")


def _percent(width: float | None) -> str:
    return "unknown size" if width is None else f"{width:.0%}"


def _segments(steady: Steady) -> dict[str, int]:
    """Return as many segments per circle as the solved mesh has."""
    segments = steady.mesh.quality.get("curve_segments")
    return {} if segments is None else {"curve_segments": int(segments)}


def _comparison(steady: Steady, absent: Steady, pair: tuple[str, str], rounds: int, remarks) -> Comparison:
    tables = [coupling(one) for one in (steady, absent)]
    zero = Interval(value=0.0, low=0.0, high=0.0, kind="guaranteed")  # a point that nothing touches any more
    present, bare = (table.get(pair[0], {}).get(pair[1], zero) for table in tables)
    return Comparison(
        present=present,
        absent=bare,
        nodes=(steady.mesh.n_nodes, absent.mesh.n_nodes),
        rounds=rounds,
        stopped="",
        whole=_whole(absent, pair, present.value, bare.value),
        remarks=remarks,
    )


def _whole(absent: Steady, pair: tuple[str, str], present: float, bare: float) -> dict[str, float] | None:
    area = np.bincount(absent.facet_boundary, facet_measure(absent.mesh), len(absent.case.boundary))
    names = [boundary.space or boundary.name for boundary in absent.case.boundary]
    faces = [float(area[[name == point for name in names]].sum()) for point in pair]
    if min(faces) <= 0.0 or abs(faces[0] - faces[1]) > FLAT * max(faces):
        return None
    return {"area": faces[0], "U_plain": bare / faces[0], "U_with_bridge": present / faces[0]}


def proven(case: Case, mesh: Mesh) -> Steady:
    """Return the solution of a case on a mesh, with the bounds of its heat flows.

    Raises
    ------
    ColdseamError
        As solve_on.
    """
    steady = solve_on(case, mesh)
    if steady.given.clashes:
        return steady
    return dataclasses.replace(steady, bounds=prove(steady.mesh, steady.given, steady.weights, steady.response))


def _solved(bare: Case, mesh: Mesh, number: int) -> Steady:
    try:
        return proven(bare, mesh)
    except CaseError as error:
        raise _left_out(error, number) from error


def _left_out(error: CaseError, number: int) -> CaseError:
    """Return the faults of the case without the bodies as faults of the bridge."""
    whats = [f"leaving these bodies out gives no valid model: {fault.what}" for fault in error.faults]
    return CaseError([Fault(path=("bridge", number, "without"), what=what) for what in whats])


def _finer(steady: Steady, point: str, factor: float) -> tuple[SizeField, int, str]:
    """Return smaller element sizes, the cells they make, and why they can't be had (empty if they can)."""
    from coldseam.answers.points import outside_points

    points = outside_points(steady)
    state = np.zeros(len(steady.state))
    state[points.get(point, [0])] = 1.0
    gap = local_gap(steady.mesh, steady.given, steady.weights, steady.response, steady.bounds, state)
    gap = np.maximum(gap, 0.0)
    sizes, _ = wanted_sizes(steady.mesh, gap, float(gap.sum()) / factor)
    size = size_field(steady.mesh, sizes)
    growth = (cell_sizes(steady.mesh) / size.size[steady.mesh.cells].mean(axis=1)) ** steady.mesh.dim
    target = max(int(growth.sum()), 1)
    nodes = target * steady.mesh.n_nodes / steady.mesh.n_cells
    most = steady.case.model.max_nodes or MOST_NODES[steady.mesh.dim]
    stop = ""
    if nodes > most:
        stop = f"a finer mesh would need some {nodes:.0f} nodes, more than the {most} allowed"
    elif not room_for(target, steady.mesh.dim):
        stop = f"a finer mesh of some {target} cells would not fit in this computer's free memory"
    return size, target, stop


def case_without(case: Case, names: Iterable[str], number: int) -> Case:
    """Return a case without some bodies and whatever refers to them; others fill their place.

    Probes, bridges and limits go as well: they ask nothing here.

    Raises
    ------
    CaseError
        What is left is no valid case.
    """
    gone = set(names)

    def stays(entry: dict[str, Any]) -> bool:
        on = entry.get("on")
        named = [*entry.get("between", ())] + ([on["body"]] if isinstance(on, dict) and "body" in on else [])
        return not any(name.split("/")[0] in gone for name in named)

    document = copy.deepcopy(case.raw)
    for key in ("probe", "bridge", "limit"):
        document.pop(key, None)
    for key in ("boundary", "sheet", "contact"):
        document[key] = [entry for entry in document.get(key, []) if stays(entry)]
    document["body"] = [entry for entry in document["body"] if entry["name"] not in gone]
    return _reread(case, document, number)


def _reread(case: Case, document: dict[str, Any], number: int) -> Case:
    faced = {boundary.get("space") for boundary in document.get("boundary", [])}
    spaces = {name: space for name, space in document.get("spaces", {}).items() if name in faced}
    kept = {key: value for key, value in (document | {"spaces": spaces}).items() if value not in ([], {})}
    try:
        return loads(to_toml(kept), folder=case.source.folder)
    except CaseError as error:
        raise _left_out(error, number) from error


def fitted(bare: Case, mesh: Mesh, bridge: str, number: int) -> tuple[Case, tuple[str, ...]]:
    """Return the case without its boundaries and sheets that have no face left, and a remark on each.

    Raises
    ------
    CaseError
        What is left is no valid case.
    """
    document = copy.deepcopy(bare.raw)
    claimed = np.zeros(len(mesh.facets), dtype=bool)
    empty: dict[str, list[str]] = {"boundary": [], "sheet": []}
    for boundary in bare.boundary:
        if boundary.on != "rest":
            chosen = select(boundary.on, mesh)
            claimed |= chosen
            empty["boundary"] += [boundary.name] * (not chosen.any())
    empty["boundary"] += [b.name for b in bare.boundary if b.on == "rest" and claimed.all()]
    empty["sheet"] += [s.name for s in bare.sheet if s.on is not None and not select(s.on, mesh).any()]
    if not empty["boundary"] and not empty["sheet"]:
        return bare, ()
    for key, names in empty.items():
        document[key] = [entry for entry in document.get(key, []) if entry["name"] not in names]
    listed = ", ".join(f'"{name}"' for names in empty.values() for name in names)
    remark = f'bridge "{bridge}": without its bodies nothing is left of {listed}'
    return _reread(bare, document, number), (remark,)
