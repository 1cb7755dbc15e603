"""Checkpoints of a run over time: everything from which it goes on as if it had never stopped.

A checkpoint is one npz file, written under another name, flushed and renamed, so that a run killed at any moment
leaves the last whole one. The mesh is kept beside it, for a mesher need not give the same one twice; the rows of the
history, which are only ever added to; and the basis of a reduced model, once: the multigrid solver that it came from
begins with random numbers. Arrays and JSON text only: a file from a stranger can't run code.
"""

from __future__ import annotations

import json
import os
from dataclasses import asdict, fields
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam._version import __version__
from coldseam.errors import CaseError, Fault, OutputError
from coldseam.mesh.types import Mesh, MeshBody
from coldseam.solution.events import Happened
from coldseam.solution.heatsystem import HeatSystem
from coldseam.solution.reduced import Basis, reduced_system
from coldseam.solution.reducing import Reduction
from coldseam.solution.stepper import EXTRAPOLATED, State
from coldseam.solution.transient import Totals, Transient, Work

if TYPE_CHECKING:
    from coldseam.case.model import Case

CHECKPOINT, MESH = "checkpoint.npz", "checkpoint_mesh.npz"
ROWS, REDUCTION = "checkpoint_rows.bin", "checkpoint_reduced.npz"
_MESH_ARRAYS = ("points", "cells", "cell_body", "facets", "facet_cell", "facet_patch")


def _write(path: Path, arrays: dict[str, Any]) -> None:
    part = path.with_suffix(".part")
    try:
        with part.open("wb") as stream:
            np.savez(stream, **arrays)
            stream.flush()
            os.fsync(stream.fileno())
        os.replace(part, path)
    except OSError as error:
        raise OutputError(f"the checkpoint {path} could not be written: {error.strerror or error}") from error


def _text(value: Any) -> np.ndarray:
    return np.frombuffer(json.dumps(value).encode(), dtype=np.uint8)


def _value(array: np.ndarray) -> Any:
    return json.loads(array.tobytes().decode())


def save_mesh(folder: Path, mesh: Mesh, facts: dict[str, Any]) -> None:
    """Write the mesh of a run (contacts not opened) and what is known of how it was made, as JSON values.

    Raises
    ------
    OutputError
        It could not be written.
    """
    told = {
        "bodies": [[body.name, body.material, body.source] for body in mesh.bodies],
        "groups": [sorted(groups) for groups in mesh.patch_groups],
        "axisymmetric": mesh.axisymmetric,
        "facts": facts,
    }
    _write(folder / MESH, {name: getattr(mesh, name) for name in _MESH_ARRAYS} | {"told": _text(told)})


def load_mesh(folder: Path) -> tuple[Mesh, dict[str, Any]]:
    """Return the mesh of a run that was interrupted, and what :func:`save_mesh` was told of it."""
    with np.load(folder / MESH, allow_pickle=False) as file:
        told = _value(file["told"])
        arrays = {name: file[name] for name in _MESH_ARRAYS}
    mesh = Mesh(
        **arrays,
        bodies=tuple(MeshBody(name=n, material=m, source=s) for n, m, s in told["bodies"]),
        patch_groups=tuple(frozenset(groups) for groups in told["groups"]),
        axisymmetric=told["axisymmetric"],
    )
    return mesh, told["facts"]


def save_reduction(folder: Path, found: Reduction) -> None:
    """Write what became of a reduced model, with its basis.

    Raises
    ------
    OutputError
        It could not be written.
    """
    basis = None if found.system is None else found.system.basis
    arrays = {} if basis is None else {"vectors": basis.vectors, "rates": basis.rates, "seen": basis.seen}
    told = {entry.name: getattr(found, entry.name) for entry in fields(found) if entry.name != "system"}
    _write(folder / REDUCTION, arrays | {"told": _text(told)})


def load_reduction(folder: Path, system: HeatSystem) -> Reduction | None:
    """Return what :func:`save_reduction` was given, for the same equations of all nodes; None where nothing was."""
    if not (folder / REDUCTION).is_file():
        return None
    with np.load(folder / REDUCTION, allow_pickle=False) as file:
        told = _value(file["told"])
        if "vectors" not in file.files:
            return Reduction(system=None, **told)
        basis = Basis(vectors=np.asfortranarray(file["vectors"]), rates=file["rates"], seen=file["seen"])
    return Reduction(system=reduced_system(system, basis), **told)


def has_checkpoint(folder: Path) -> bool:
    """Whether a folder holds what a run can go on from."""
    return (folder / CHECKPOINT).is_file() and (folder / MESH).is_file()


def save(folder: Path, transient: Transient, extra: dict[str, Any]) -> None:
    """Write a checkpoint of a run; ``extra`` is kept with it as JSON values.

    Raises
    ------
    OutputError
        It could not be written; the one before is left.
    """
    told = {
        "version": __version__,
        "sha256": transient.system.case.source.sha256,
        "status": transient.status,
        "time": transient.state.time,
        "rung": transient.rung,
        "patience": transient.patience,
        "recorded": transient.recorded,
        "rows": transient.rows.spill(folder / ROWS),
        "fields": transient.fields,
        "work": asdict(transient.work),
        "counts": [transient.solver.factorisations, transient.solver.solves, transient.solver.iterations],
        "watches": [
            {
                "closest": watch.closest,
                "closest_at": watch.closest_at,
                "happened": None if watch.happened is None else asdict(watch.happened),
            }
            for watch in transient.watches
        ],
        "strayed": {} if transient.refresh is None else transient.refresh.strayed,
        "extra": extra,
    }
    guesses = {
        f"guess_{stage}_{n}": np.concatenate([[start, h], d])
        for stage, past in transient.stepper.guesses.items()
        for n, (start, h, d) in enumerate(past)
    }
    refresh = {} if transient.refresh is None else transient.refresh.memory()
    _write(
        folder / CHECKPOINT,
        {
            "told": _text(told),
            "temperature": transient.state.temperature,
            "y": transient.state.y,
            "running": transient.state.running,
            "initial_temperature": transient.initial.temperature,
            "initial_y": transient.initial.y,
            "initial_running": transient.initial.running,
            "heat": transient.totals.heat,
            "magnitude": transient.totals.magnitude,
            "peak": transient.totals.peak,
            "extremes": transient.extremes.values,
            "causes": np.array([transient.causes.low, transient.causes.high]),
            "reached": transient.reached,
            **guesses,
            **{f"refresh_{name}": array for name, array in refresh.items()},
        },
    )


def extra_of(folder: Path) -> dict[str, Any]:
    """Return the ``extra`` that a folder's checkpoint was saved with."""
    with np.load(folder / CHECKPOINT, allow_pickle=False) as file:
        return _value(file["told"])["extra"]


def require_same(folder: Path, case: Case) -> None:
    """Raise a CaseError when a folder's checkpoint is of another case file or another version."""
    with np.load(folder / CHECKPOINT, allow_pickle=False) as file:
        _require_same(_value(file["told"]), case)


def _require_same(told: dict[str, Any], case: Case) -> None:
    for key, now, what in (
        ("sha256", case.source.sha256, "the case file has changed since the run that is to be resumed"),
        ("version", __version__, "another version of coldseam began the run that is to be resumed"),
    ):
        if told[key] != now:
            raise CaseError([Fault(path=(), what=f"{what}; leave --resume out to begin anew")])


def restore(folder: Path, transient: Transient) -> dict[str, Any]:
    """Put a run that has just been made back to where its checkpoint is; return the ``extra`` of :func:`save`.

    Raises
    ------
    CaseError
        The case file has changed since, or another version wrote the checkpoint.
    """
    with np.load(folder / CHECKPOINT, allow_pickle=False) as file:
        stored = {name: file[name] for name in file.files}
    told = _value(stored["told"])
    _require_same(told, transient.system.case)
    transient.state = State(
        time=told["time"], temperature=stored["temperature"], y=stored["y"], running=stored["running"]
    )
    transient.initial = State(
        time=0.0, temperature=stored["initial_temperature"], y=stored["initial_y"], running=stored["initial_running"]
    )
    transient.totals = Totals(heat=stored["heat"], magnitude=stored["magnitude"], peak=stored["peak"])
    transient.status = told["status"]  # a run may be killed after its last step, while its answers are written
    transient.rows.recall(folder / ROWS, told["rows"])
    transient.extremes.values = stored["extremes"]
    transient.causes.low, transient.causes.high = stored["causes"].tolist()
    transient.reached = stored["reached"]
    transient.rung, transient.patience = told["rung"], told["patience"]
    transient.recorded, transient.fields = told["recorded"], told["fields"]
    transient.work = Work(**told["work"])
    if transient.refresh is not None:
        transient.refresh.strayed = told["strayed"]
        kept = {name.removeprefix("refresh_"): array for name, array in stored.items() if name.startswith("refresh_")}
        system = transient.refresh.recall(kept)
        if system is not None:
            transient.adopt(system)
    transient.solver.factorisations, transient.solver.solves, transient.solver.iterations = told["counts"]
    for watch, known in zip(transient.watches, told["watches"], strict=True):
        watch.closest, watch.closest_at = known["closest"], known["closest_at"]
        watch.happened = None if known["happened"] is None else Happened(**known["happened"])
    for stage in transient.stepper.guesses:
        past = [stored[name] for name in (f"guess_{stage}_{n}" for n in range(EXTRAPOLATED)) if name in stored]
        transient.stepper.guesses[stage] = [(float(array[0]), float(array[1]), array[2:]) for array in past]
    return told["extra"]


def remove(folder: Path) -> None:
    """Remove the checkpoint of a run that has come to its end."""
    for name in (CHECKPOINT, MESH, ROWS, REDUCTION):
        (folder / name).unlink(missing_ok=True)
