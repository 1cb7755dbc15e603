"""What the pictures, tables and field files are made from: one frozen view of a result.

The report knows nothing of solvers. Whoever has a result makes a :class:`View` of it; whoever has
only a model (``coldseam check``) makes one without fields through :func:`model_view`.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from coldseam.answers.surfacemap import SurfaceMap
from coldseam.mesh.measure import facet_measure
from coldseam.mesh.types import Mesh
from coldseam.report.shown import Shown

if TYPE_CHECKING:
    from coldseam.report.history import HistoryView

BOUNDARY_KINDS = ("space", "temperature", "heat_flux", "heat_flow", "adiabatic")


@dataclass(frozen=True, kw_only=True, eq=False)
class View:
    """A result as the report sees it.

    Parameters
    ----------
    mesh
        The mesh, metres.
    facet_boundary
        Index into ``boundary_names`` of every exterior facet, shape (n_facets,).
    boundary_names, boundary_space, boundary_kind
        Name, space faced (or None) and kind (one of ``BOUNDARY_KINDS``) of every boundary.
    temperature
        °C at the nodes, shape (n_nodes,); None for a model that was not solved.
    cell_flux
        Heat flux in every cell, W/m², shape (n_cells, dim); None like ``temperature``.
    title
        The case's title.
    probes
        Probe name -> position, m, shape (dim,).
    answers
        The content of answers.json.
    maps
        Fields on the surfaces beside the temperature.
    history
        The recorded rows of a run over time.
    scale
        Temperatures (°C) that the colours of pictures begin and end with; None for each picture's own.
    shown
        Units of the pictures.
    metre
        How long a metre is in the mesh's points: 1, save in views that :func:`in_drawing_units` has made.
    """

    mesh: Mesh
    facet_boundary: np.ndarray
    boundary_names: tuple[str, ...]
    boundary_space: tuple[str | None, ...]
    boundary_kind: tuple[str, ...]
    temperature: np.ndarray | None = None
    cell_flux: np.ndarray | None = None
    title: str = ""
    probes: dict[str, np.ndarray] = field(default_factory=dict)
    answers: dict = field(default_factory=dict)
    maps: tuple[SurfaceMap, ...] = ()
    history: HistoryView | None = None
    scale: tuple[float, float] | None = None
    shown: Shown = Shown()
    metre: float = 1.0

    def __post_init__(self):
        if len(self.facet_boundary) != len(self.mesh.facets):
            raise ValueError("facet_boundary does not have one entry per facet")
        if not len(self.boundary_names) == len(self.boundary_space) == len(self.boundary_kind):
            raise ValueError("boundary_names, boundary_space and boundary_kind differ in length")
        if self.temperature is not None and len(self.temperature) != self.mesh.n_nodes:
            raise ValueError("temperature does not have one entry per node")

    @property
    def spaces(self) -> tuple[str, ...]:
        """Names of the spaces that some boundary faces, in order of the boundaries."""
        return tuple(dict.fromkeys(space for space in self.boundary_space if space is not None))

    def faces_space(self, space: str) -> np.ndarray:
        """Return which exterior facets face a space, shape (n_facets,), bool."""
        faces = np.array([other == space for other in self.boundary_space])
        return faces[self.facet_boundary]


@dataclass(frozen=True, kw_only=True)
class Table:
    """The numbers behind a picture: column headings with units, and rows."""

    columns: tuple[str, ...]
    rows: tuple[tuple, ...]


@dataclass(frozen=True, kw_only=True)
class Picture:
    """One picture that was written.

    Parameters
    ----------
    file
        Name of the PNG in the output folder.
    title
        What it shows, one line.
    alt
        What someone who can't see it must know.
    table
        The numbers behind it.
    vector
        Name of the SVG, if there is one.
    """

    file: str
    title: str
    alt: str
    table: Table
    vector: str | None = None


@dataclass(frozen=True, kw_only=True)
class Drawings:
    """The pictures that were made, and a plain sentence for whatever could not be."""

    pictures: tuple[Picture, ...]
    warnings: tuple[str, ...] = ()


def model_view(case, mesh: Mesh, facet_boundary: np.ndarray) -> View:
    """Return the view of a model that has not been solved.

    Parameters
    ----------
    case
        The case; its ``boundary`` entries give names, spaces and kinds, ``probe`` the points.
    mesh
        Its mesh.
    facet_boundary
        Index into ``case.boundary`` of every exterior facet, shape (n_facets,).
    """
    return View(
        mesh=mesh,
        facet_boundary=facet_boundary,
        boundary_names=tuple(entry.name for entry in case.boundary),
        boundary_space=tuple(entry.space for entry in case.boundary),
        boundary_kind=tuple(boundary_kind(entry) for entry in case.boundary),
        title=case.title or "",
        probes={probe.name: np.asarray(probe.at, dtype=float) for probe in getattr(case, "probe", ())},
    )


def boundary_kind(entry) -> str:
    """Return which of ``BOUNDARY_KINDS`` a ``[[boundary]]`` entry of a case is."""
    for kind in BOUNDARY_KINDS[:-1]:
        if getattr(entry, kind, None) is not None:
            return kind
    return "adiabatic"


def without_fields(view: View) -> View:
    """Return the same view without temperature and flux."""
    return replace(view, temperature=None, cell_flux=None, maps=())


def boundary_areas(view: View) -> np.ndarray:
    """Return the area of every boundary, m² (m² per metre of depth in a cross-section), shape (n_boundaries,)."""
    power = 1 if view.mesh.dim == 2 and not view.mesh.axisymmetric else 2
    areas = np.bincount(view.facet_boundary, weights=facet_measure(view.mesh), minlength=len(view.boundary_names))
    return areas / view.metre**power


def in_drawing_units(view: View) -> View:
    """Return a view as pictures draw it: fields in the units of ``view.shown``, answers as they are.

    Points are in thousands of the unit of length (m where that is mm), so that pictures turn them alike; the flux is
    such that flux times length is a heat flow in the unit shown.
    """
    shown, mesh = view.shown, view.mesh
    metre = shown.measure("length").factor
    if shown.system == "metric":
        return view
    power = 1 if mesh.dim == 2 and not mesh.axisymmetric else 2
    flow = shown.measure("flow").factor / metre**power
    return replace(
        view,
        mesh=replace(mesh, points=mesh.points * metre),
        metre=metre,
        temperature=None if view.temperature is None else shown.value("temperature", view.temperature),
        cell_flux=None if view.cell_flux is None else view.cell_flux * flow,
        probes={name: np.asarray(at) * metre for name, at in view.probes.items()},
        maps=tuple(_drawn_map(field, shown) for field in view.maps),
        scale=None if view.scale is None else tuple(shown.value("temperature", end) for end in view.scale),
    )


def _drawn_map(field: SurfaceMap, shown: Shown) -> SurfaceMap:
    if field.unit != "W/m²":
        return field
    values, unit = shown.value("flux", field.values), shown.unit("flux")
    return replace(field, values=values, unit=unit, note=shown.sentence(field.note))
