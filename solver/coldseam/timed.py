"""A run over time from case to files: mesh, start, steps with progress and checkpoints, answers."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from coldseam.answers.build import accuracy_answer, mesh_answer
from coldseam.answers.history import headings, require_timed_limits, timed_answers
from coldseam.answers.trust import accuracy_over_time
from coldseam.answers.types import Answers, plain
from coldseam.case.model import Case
from coldseam.case.schedules import Schedule
from coldseam.geometry.mesher import open_geometry
from coldseam.mesh.types import Mesh
from coldseam.physics.melting import heat_content
from coldseam.report.artists import Artists
from coldseam.report.history import HistoryView, scale_of
from coldseam.report.series import FieldSeries
from coldseam.report.shown import Shown
from coldseam.report.view import View, model_view
from coldseam.solution import checkpoint
from coldseam.solution.heatsystem import HeatSystem, heat_system
from coldseam.solution.reducing import Reduction, not_tried, reduced_run, reduction
from coldseam.solution.refresh import refresher
from coldseam.solution.starting import FINAL, machine_outlook, save_final, starting_state
from coldseam.solution.timeconstants import time_constants
from coldseam.solution.timemesh import mesh_over_time
from coldseam.solution.transient import History, Transient

Log = Callable[[str, str], None]
SAY_EVERY = 1.0  # s between progress lines
CHECKPOINT_EVERY = 1.0  # s between checkpoints, or longer where they cost much


@dataclass(frozen=True, kw_only=True, eq=False)
class TimedResult:
    """A solved case over time.

    Parameters
    ----------
    case
        The case.
    answers
        What is written to answers.json, as dataclasses.
    history
        The recorded run, as arrays.
    """

    case: Case
    answers: Answers
    history: History

    @property
    def mesh(self) -> Mesh:
        """The mesh, m."""
        return self.history.system.mesh

    @property
    def temperature(self) -> np.ndarray:
        """Temperature at the mesh's nodes at the end, °C, shape (n_nodes,)."""
        return self.history.temperature

    def view(self) -> View:
        """Return what pictures and files are made from; its fields are those at the end."""
        plain = _model(self.history.system)
        return replace(
            plain, temperature=self.temperature, answers=self.answers.as_dict(), history=history_view(self.history)
        )

    def write(
        self,
        folder: str | Path,
        *,
        pictures: bool = True,
        log: Log | None = None,
        units: str = "metric",
        scale: tuple[float, float] | None = None,
        artists: Artists | None = None,
    ) -> list[Path]:
        """Write answers.json, history.csv, tables, the final field, pictures and report.html; return the paths.

        Parameters
        ----------
        folder, pictures, log, units, scale, artists
            As in :meth:`coldseam.study.Result.write`.

        Raises
        ------
        OutputError
            The folder can't be written.
        """
        from coldseam.report.output import write_all

        view, log = replace(self.view(), scale=scale), log or (lambda stage, message: None)
        shown = Shown(system=units, flat=view.mesh.dim == 2 and not view.mesh.axisymmetric)
        written = write_all(view, self.case, Path(folder), shown, pictures=pictures, log=log, artists=artists)
        save_final(Path(folder) / FINAL, self.history.system, self.history.final)
        checkpoint.remove(Path(folder))
        fields = [path for path in (Path(folder) / "fields.pvd",) if path.is_file()]
        return [*written, Path(folder) / FINAL, *fields]


def run_over_time(case: Case, log: Log, *, folder: Path | None = None, resume: bool = False) -> TimedResult:
    """Solve a case with a ``[time]`` table.

    Parameters
    ----------
    case
        The case.
    log
        Called with a stage and a message.
    folder
        Where fields and checkpoints go while the run goes on; None keeps neither.
    resume
        Go on from the folder's checkpoint.

    Raises
    ------
    ColdseamError
        As :func:`coldseam.study.run`.
    """
    require_timed_limits(case)
    go_on = resume and folder is not None and checkpoint.has_checkpoint(folder)
    if resume and not go_on:
        log("run", "no checkpoint to go on from: the run begins anew")
    if go_on and folder:
        checkpoint.require_same(folder, case)
    mesh, facts = checkpoint.load_mesh(folder) if go_on and folder else _mesh(case, log, folder)
    system = heat_system(case, mesh)
    wanted = folder is not None and (case.time.fields is not None or case.time.fields_every is not None)
    fields = FieldSeries(folder, _model(system)) if wanted and folder else None
    transient, reduced = _begun(system, log, folder, fields)
    if go_on and folder and checkpoint.extra_of(folder)["decided"]:
        entries = checkpoint.restore(folder, transient)["fields"]
        if fields is not None:
            fields.entries = [(float(moment), str(name)) for moment, name in entries]
        log("run", f"goes on at {transient.time:.6g} s")
    elif fields is not None:
        fields(0.0, transient.system.expand(transient.state.temperature))
    _go(transient, log, folder, fields)
    history = transient.result()
    history = replace(history, solver=reduced.told(history.solver))
    remarks = [*facts["remarks"], *machine_outlook(history.system)]
    accuracy = accuracy_over_time(history, facts["accuracy"], facts["relaxed"])
    answers = timed_answers(history, facts["mesh"], accuracy, remarks, {"time_constants": time_constants(system)})
    return TimedResult(case=case, answers=answers, history=history)


def _begun(
    system: HeatSystem, log: Log, folder: Path | None, fields: FieldSeries | None
) -> tuple[Transient, Reduction]:
    """Return the run, over all nodes or in a reduced model, and what became of that.

    While it is looked for, ``folder`` holds a checkpoint of the start: a run killed then keeps its mesh.
    """
    phase, refresh = heat_content(system.case, system.mesh), refresher(system)
    whole = Transient(system, starting_state(system), phase=phase, refresh=refresh, on_field=fields)
    reduced = None if folder is None else checkpoint.load_reduction(folder, system)
    if reduced is None:
        if folder is not None and not not_tried(system, whole):
            checkpoint.save(folder, whole, {"fields": [], "decided": False})
        reduced = reduction(whole, log)
        if folder is not None:
            checkpoint.save_reduction(folder, reduced)
    if reduced.system is None:
        return whole, reduced
    return reduced_run(reduced.system, whole, fields), reduced


def _mesh(case: Case, log: Log, folder: Path | None) -> tuple[Mesh, dict]:
    """Return the mesh of the run and what is known of it; in ``folder`` it is kept for resuming."""
    with open_geometry(case, log=log) as mesher:
        mesh, solution, relaxed, remarks = mesh_over_time(case, mesher, log)
    facts = {
        "mesh": plain(mesh_answer(solution)),
        "accuracy": plain(accuracy_answer(solution)),
        "relaxed": float(relaxed),
        "remarks": list(remarks),
    }
    if folder is not None:
        checkpoint.remove(folder)
        checkpoint.save_mesh(folder, mesh, facts)
    return mesh, facts


def _go(transient: Transient, log: Log, folder: Path | None, fields: FieldSeries | None) -> None:
    """Step to the end, telling how far it is, and keeping checkpoints that cost at most a twentieth of the time."""
    begun = said = time.perf_counter()
    kept = -np.inf  # the first checkpoint comes with the first step: the mesh need not be made again
    pause, first = CHECKPOINT_EVERY, transient.time
    unit, seconds = scale_of(transient.duration)
    while transient.status == "running":
        step = transient.step()
        now = time.perf_counter()
        if now - said > SAY_EVERY:
            said = now
            left = (now - begun) * (transient.duration - transient.time) / max(transient.time - first, 1e-300)
            so_far = f"{transient.time / seconds:.4g} of {transient.duration / seconds:.4g} {unit}"
            log("run", f"{so_far}, step {step.h:.3g} s, some {left:.0f} s to go")
        if folder is not None and now - kept > pause:
            checkpoint.save(folder, transient, {"fields": [] if fields is None else fields.entries, "decided": True})
            kept = time.perf_counter()
            pause = max(CHECKPOINT_EVERY, 20.0 * (kept - now))


def _model(system: HeatSystem) -> View:
    return model_view(system.case, system.mesh, system.facet_boundary)


def history_view(history: History) -> HistoryView:
    """Return the recorded run as the report sees it, with levels and limits to draw in."""
    case = history.system.case
    levels = [(event.name, event.when.level) for event in case.event]
    for name, space in case.spaces.items():
        if space.floating is not None and space.floating.cooling is not None:
            setpoint = space.floating.cooling.setpoint
            if not isinstance(setpoint, Schedule):
                levels.append((f"setpoint of {name}", setpoint))
    bounds = []
    for limit in case.limit:
        marks = levels if limit.quantity.measure == "temperature" else bounds
        marks += [
            (f"{limit.name} {word}", value)
            for word, value in (("at most", limit.at_most), ("at least", limit.at_least))
            if value is not None
        ]
    return HistoryView(
        columns=tuple((c.kind, c.name, c.unit) for c in history.columns),
        headings=tuple(headings(history)),
        rows=history.rows,
        levels=tuple(levels),
        bounds=tuple(bounds),
        moments=tuple((h.name, h.time) for h in history.events if h.time is not None),
        given=tuple(name for name, space in case.spaces.items() if space.temperature is not None),
    )
