"""What is written down of a run over time: one row at every asked time, and the quantities that events watch."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from coldseam.errors import CaseError, Fault
from coldseam.mesh.locate import locate
from coldseam.solution.causes import Causes
from coldseam.solution.fronts import Fronts
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.stepper import State, Step, channels, rates_at
from coldseam.volumes.section import facet_shares

if TYPE_CHECKING:
    from coldseam.case.timing import When

MM = 1000.0  # mm in a metre


@dataclass(frozen=True, kw_only=True, eq=False)
class Column:
    """One column of the history.

    Parameters
    ----------
    kind
        ``"time"``, ``"space"``, ``"goods"``, ``"probe"``, ``"min"``, ``"mean"`` or ``"max"`` of a boundary, ``"melted"`` of
        a body and where its front is along every axis (``"front_from_x"``, ``"front_to_x"``; NaN without a front), or a
        kind of flow of :func:`coldseam.solution.stepper.channels`.
    name
        Of what.
    unit
        Of its values.
    """

    kind: str
    name: str
    unit: str


@dataclass(frozen=True, kw_only=True, eq=False)
class Weights:
    """What reads probes and surfaces from node temperatures.

    Parameters
    ----------
    probes, mean
        Weights of the nodes, (n_probes, n_nodes), and for boundaries' mean temperatures, (n_boundaries, n_nodes).
    surface
        Picks the nodes of every boundary in turn, (n_picked, n_nodes).
    starts
        Where each boundary's begin among them, (n_boundaries,).
    """

    probes: sparse.csr_array
    mean: sparse.csr_array
    surface: sparse.csr_array
    starts: np.ndarray


def weights_of(system: HeatSystem) -> Weights:
    """Return what reads the probes and surfaces of a system's case from its mesh.

    Raises
    ------
    CaseError
        A probe outside the model.
    """
    case, mesh = system.case, system.mesh
    count = len(case.boundary)
    rows = np.repeat(system.facet_boundary, mesh.dim)
    nodes = mesh.facets.ravel()
    shares = sparse.coo_array(
        (facet_shares(mesh, mesh.facets).ravel(), (rows, nodes)), shape=(count, mesh.n_nodes)
    ).tocsr()
    area = np.asarray(shares.sum(axis=1)).ravel()
    touched = sparse.coo_array((np.ones(len(nodes)), (rows, nodes)), shape=shares.shape).tocsr()
    return Weights(
        probes=_probe_weights(system),
        mean=sparse.csr_array(sparse.diags_array(1.0 / area) @ shares),
        surface=picked(touched.indices, mesh.n_nodes),
        starts=touched.indptr[:-1],
    )


class Gauges:
    """Reads temperatures at probes and surfaces from the unknowns.

    Parameters
    ----------
    system
        The equations; its case names probes and boundaries.
    causes
        The range within which temperatures are read.
    phase
        Heat content where bodies melt, or None.
    weights
        Of its mesh, where they are known already.
    """

    def __init__(self, system: HeatSystem, causes: Causes, phase=None, weights: Weights | None = None):
        self.system, self.causes, self.phase = system, causes, phase
        self.fronts = None if phase is None else Fronts(system.mesh, phase)
        self.weights = weights or weights_of(system)
        self.probes, self.mean = system.reading(self.weights.probes), system.reading(self.weights.mean)
        self.surface, self.starts = system.reading(self.weights.surface), self.weights.starts

    def columns(self) -> list[Column]:
        """Return the columns that :meth:`row` fills."""
        case, spaces = self.system.case, self.system.spaces
        found = [Column(kind="time", name="", unit="s")]
        found += [Column(kind="space", name=name, unit="degC") for name in case.spaces]
        found += [Column(kind="goods", name=name, unit="degC") for name in spaces.labels()[len(spaces.names) :]]
        found += [Column(kind="probe", name=probe.name, unit="degC") for probe in case.probe]
        for kind in ("min", "mean", "max"):
            found += [Column(kind=kind, name=boundary.name, unit="degC") for boundary in case.boundary]
        if self.phase is not None:
            found += [Column(kind="melted", name=name, unit="1") for name in self.phase.names]
            kinds = [f"front_{end}_{axis}" for end in ("from", "to") for axis in "xyz"[: self.system.mesh.dim]]
            found += [Column(kind=kind, name=name, unit="mm") for name in self.phase.names for kind in kinds]
        section = self.system.mesh.dim == 2 and not self.system.mesh.axisymmetric
        heat = "W/m" if section else "W"
        return found + [Column(kind=k, name=n, unit="1" if k == "share" else heat) for k, n in channels(self.system)]

    def limited(self) -> list[list[int]]:
        """Return for every limit of the case the positions in a row that add up to its quantity."""
        places = {(c.kind, c.name): n for n, c in enumerate(self.columns())}
        found: list[list[int]] = []
        for limit in self.system.case.limit:
            asked, name = limit.quantity, getattr(limit.quantity, limit.quantity.target)
            if asked.measure == "temperature":
                wanted = [("probe" if asked.target == "probe" else str(asked.temperature), name)]
            elif asked.target == "boundary":
                wanted = [("boundary", name)]
            else:
                wanted = [("boundary", b.name) for b in self.system.case.boundary if b.space == name]
            found.append([places[key] for key in wanted])
        return found

    def temperatures(self, state: State) -> np.ndarray:
        """Return the row's temperatures (°C), and what has melted with its fronts (mm)."""
        spaces, case = self.system.spaces, self.system.case
        room = [spaces.temperature_of(name, state.y, state.time, before=True) for name in case.spaces]
        t = state.temperature
        surface = self.surface @ t
        coldest, warmest = (pick.reduceat(surface, self.starts) for pick in (np.minimum, np.maximum))
        read = self.causes.within(np.concatenate([self.probes @ t, coldest, self.mean @ t, warmest]), state)
        found = [np.array(room), state.y[len(spaces.names) :], read]
        if self.phase is not None and self.fronts is not None:
            nodes = self.causes.within(t, state)
            found += [self.phase.melted(nodes), self.fronts.extents(nodes).ravel() * MM]
        return np.concatenate(found)

    def row(self, state: State, flows: np.ndarray) -> np.ndarray:
        """Return one row of the history, (n_columns,): time (s), temperatures (°C), flows (W, (n_channels,))."""
        return np.concatenate([[state.time], self.temperatures(state), flows])

    def reading(self, when: When):
        """Return a function of a state: the temperature (°C) that an event watches."""
        case, spaces = self.system.case, self.system.spaces
        if when.space is not None:
            return lambda state: spaces.temperature_of(when.space, state.y, state.time, before=True)
        if when.probe is not None:
            weights = self.probes[[[probe.name for probe in case.probe].index(when.probe)]]
            return lambda state: float(self.causes.within(weights @ state.temperature, state)[0])
        number = [boundary.name for boundary in case.boundary].index(when.boundary)
        if when.temperature == "mean":
            weights = self.mean[[number]]
            return lambda state: float(self.causes.within(weights @ state.temperature, state)[0])
        end = self.starts[number + 1] if number + 1 < len(self.starts) else self.surface.shape[0]
        rows, pick = self.surface[self.starts[number] : end], np.min if when.temperature == "min" else np.max
        return lambda state: float(pick(self.causes.within(rows @ state.temperature, state)))


def picked(nodes: np.ndarray, n_nodes: int) -> sparse.csr_array:
    """Return the weights that pick nodes, (n,), from node temperatures, (n, n_nodes)."""
    return sparse.csr_array((np.ones(len(nodes)), nodes, np.arange(len(nodes) + 1)), shape=(len(nodes), n_nodes))


def _probe_weights(system: HeatSystem) -> sparse.csr_array:
    case, mesh = system.case, system.mesh
    if not case.probe:
        return sparse.csr_array((0, mesh.n_nodes))
    cells, weights = locate(mesh, np.array([probe.at for probe in case.probe], dtype=float))
    faults = [
        Fault(path=("probe", int(n), "at"), what=f'the probe "{case.probe[n].name}" lies outside the model')
        for n in np.flatnonzero(cells < 0)
    ]
    if faults:
        raise CaseError(faults)
    rows = np.repeat(np.arange(len(cells)), mesh.dim + 1)
    return sparse.coo_array(
        (weights.ravel(), (rows, mesh.cells[cells].ravel())), shape=(len(cells), mesh.n_nodes)
    ).tocsr()


def flows_at(step: Step, s: float, extra: np.ndarray | float) -> np.ndarray:
    """Return the flows at a fraction of a step, W; ``extra`` is what fixed nodes store, (n_channels,)."""
    return rates_at(s) @ step.flows + extra
