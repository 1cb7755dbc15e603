"""The whole way from a case to its answers: geometry, meshes, solution, answers, files."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from coldseam.answers.bridges import BridgeAnswers, require_bridges, solve_bridges
from coldseam.answers.build import build_answers
from coldseam.answers.limits import require_answerable
from coldseam.answers.maps import surface_maps
from coldseam.answers.superpose import superposed
from coldseam.answers.types import Answers
from coldseam.case.model import Case
from coldseam.errors import CaseError, Fault
from coldseam.geometry.mesher import open_geometry
from coldseam.mesh.boundaries import claim_facets
from coldseam.mesh.locate import locate
from coldseam.mesh.types import Mesh
from coldseam.report.artists import Artists
from coldseam.report.shown import Shown
from coldseam.report.view import View, model_view
from coldseam.solution.flux import cell_flux
from coldseam.solution.rounds import Solution, solve
from coldseam.timed import TimedResult, run_over_time

Log = Callable[[str, str], None]


def _quiet(stage: str, message: str) -> None:
    """Log nothing."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Result:
    """A solved case.

    Parameters
    ----------
    case
        The case.
    answers
        What is written to answers.json, as dataclasses.
    solution
        Mesh, temperatures (°C at the nodes), bounds and rounds, as arrays.
    bridges
        Its thermal bridges.
    """

    case: Case
    answers: Answers
    solution: Solution
    bridges: BridgeAnswers = BridgeAnswers()

    def at(self, temperatures: Mapping[str, float | str]) -> Result:
        """Return the result at other temperatures of some spaces, superposed and not solved again.

        Parameters
        ----------
        temperatures
            By name of the space: °C, or text with its unit; the others stay.

        Raises
        ------
        CaseError
            An unknown space, or fixed surfaces that touch and would no longer be alike.
        """
        try:
            solution = superposed(self.solution, temperatures)
            case = solution.steady.case
            answers = build_answers(solution, self.bridges)
            return Result(case=case, answers=answers, solution=solution, bridges=self.bridges)
        except CaseError as error:
            raise error.located(self.case.source.place) from error

    @property
    def mesh(self) -> Mesh:
        """The last mesh, m."""
        return self.solution.steady.mesh

    @property
    def temperature(self) -> np.ndarray:
        """Temperature at the mesh's nodes, °C, shape (n_nodes,)."""
        return self.solution.steady.read_temperature

    def view(self) -> View:
        """Return what pictures and field files are made from."""
        steady = self.solution.steady
        plain = model_view(self.case, steady.mesh, steady.facet_boundary)
        return View(
            **{
                **plain.__dict__,
                "temperature": steady.read_temperature,
                "cell_flux": cell_flux(steady),
                "answers": self.answers.as_dict(),
                "maps": surface_maps(steady, self.answers.bridges, self.answers.enclosures),
            }
        )

    def grid(self):
        """Return the field as a ``pyvista.UnstructuredGrid`` (m, °C, W/m²)."""
        from coldseam.report.grid import grid

        return grid(self.view())

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
        """Write answers.json, tables, fields, pictures and report.html into a folder and return the paths.

        Parameters
        ----------
        folder
            Made if need be.
        pictures
            Whether to draw.
        log
            Called with a stage and a message.
        units
            Of the report, "metric" or "inch"; files for machines are always metric.
        scale
            Temperatures (°C) that the pictures' colours begin and end with; None for each picture's own.
        artists
            Processes that draw, started early so that they are ready; None starts them when they are needed.

        Raises
        ------
        OutputError
            The folder can't be written.
        """
        from coldseam.report.output import write_all

        view = replace(self.view(), scale=scale)
        shown = Shown(system=units, flat=view.mesh.dim == 2 and not view.mesh.axisymmetric)
        return write_all(view, self.case, Path(folder), shown, pictures=pictures, log=log or _quiet, artists=artists)


def run(
    case: Case, log: Log | None = None, *, folder: Path | None = None, resume: bool = False
) -> Result | TimedResult:
    """Solve a case to its asked accuracy; one with a ``[time]`` table over time.

    Parameters
    ----------
    case
        From :func:`coldseam.case.read.load`.
    log
        Called with a stage ("geometry", "mesh", "solve", ...) and a message; None for silence.
    folder
        Where a run over time leaves its fields and checkpoints while it goes on; None keeps neither.
    resume
        Whether a run over time goes on from the folder's checkpoint.

    Raises
    ------
    ColdseamError
        With one clear message; faults of the case name file, line and key.
    """
    log = log or _quiet
    try:
        if case.time is not None:
            return run_over_time(case, log, folder=folder, resume=resume)
        if resume:
            raise CaseError(
                [Fault(path=(), what="only a run over time can be resumed, and this case has no [time] table")]
            )
        require_bridges(case)
        require_answerable(case)
        with open_geometry(case, log=log) as mesher:
            solution = solve(case, mesher, log)
            bridges = solve_bridges(solution, mesher, log)
        return Result(case=case, answers=build_answers(solution, bridges), solution=solution, bridges=bridges)
    except CaseError as error:
        raise error.located(case.source.place) from error


@dataclass(frozen=True, kw_only=True, eq=False)
class Checked:
    """A case whose geometry was built and whose boundaries fit, with nothing solved."""

    case: Case
    view: View


def check(case: Case, log: Log | None = None) -> Checked:
    """Build the geometry of a case and claim its faces, but solve nothing.

    Raises
    ------
    ColdseamError
        As :func:`run`.
    """
    log = log or _quiet
    try:
        with open_geometry(case, log=log) as mesher:
            mesh = mesher.mesh()
        facet_boundary = claim_facets(case, mesh)
        require_probes_inside(case, mesh)
    except CaseError as error:
        raise error.located(case.source.place) from error
    return Checked(case=case, view=model_view(case, mesh, facet_boundary))


def require_probes_inside(case: Case, mesh: Mesh) -> None:
    """Raise a CaseError that names every probe outside the model."""
    from coldseam.errors import Fault

    if not case.probe:
        return
    cells, _ = locate(mesh, np.array([probe.at for probe in case.probe], dtype=float))
    faults = [
        Fault(path=("probe", int(n), "at"), what=f'the probe "{case.probe[n].name}" lies outside the model')
        for n in np.flatnonzero(cells < 0)
    ]
    if faults:
        raise CaseError(faults)
