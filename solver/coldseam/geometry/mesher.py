"""From a case to its meshes: :func:`open_geometry` gives a mesher that stays open for refinement."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager

import numpy as np

from coldseam.errors import GeometryError
from coldseam.geometry import client, sizes
from coldseam.geometry.parts import MM, Part, expand, fault
from coldseam.geometry.quality import check_measure, mesh_quality
from coldseam.geometry.slivers import without_flat
from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import Mesh, MeshBody, SizeField

Log = Callable[[str, str], None]

FLAT_ALGORITHMS = ((6, "Frontal-Delaunay"), (5, "Delaunay"), (1, "MeshAdapt"))
SOLID_ALGORITHMS = ((10, "HXT", 0.01), (10, "HXT, more optimised", 0.05), (1, "Delaunay", 0.3), (4, "Frontal", 0.3))
"""gmsh's numbers of its meshers, in the order of trial; in 3D with the threshold of quality under
which the optimiser works on a cell. It costs ten to forty times as much at 0.05 as at 0.01 where elements are long or
flat, and may not end at gmsh's usual 0.3 (measured on a bolt in foam, 30 000 cells: 0.7 s and 29 s)."""

FLATTEST = 1e-5
"""Least radius ratio of a tetrahedron. A skin of 0.5 mm under triangles of 300 mm makes some 1e-4; four
nodes on one circle make rounding errors, and a conductance (area²/volume) without bound."""

OFF_TARGET = 1.6
"""A cell count off by more than this factor is put right by one more try."""


@contextmanager
def open_geometry(case, *, log: Log | None = None) -> Iterator[Mesher]:
    """Build the geometry of a case and keep it for meshing.

    Parameters
    ----------
    case
        The case.
    log
        Called with a stage and a message, or None.

    Yields
    ------
    Mesher
        With ``mesh(size, target_cells)``; for a foreign mesh an object of the same interface that
        is not ``remeshable``.

    Raises
    ------
    CaseError
        A body can't be built as written.
    GeometryError
        gmsh is not to be had or fails.
    """
    if case.model.mesh is not None:
        from coldseam.mesh.foreign import open_foreign

        with open_foreign(case, log) as mesher:
            yield mesher
        return
    parts = expand(case)
    if not any(not part.void for part in parts):
        raise fault(("body",), "holds no body with a material")
    with client.Worker() as worker:
        yield Mesher(case, parts, worker, log)


class Mesher:
    """Makes meshes of one geometry.

    Parameters
    ----------
    case
        The case.
    parts
        Its bodies as solids.
    worker
        The gmsh child.
    log
        Called with a stage and a message, or None.
    limits
        Factor on all time limits.
    """

    remeshable = True

    def __init__(self, case, parts: list[Part], worker: client.Worker, log: Log | None = None, limits: float = 1.0):
        self._case = case
        self._parts = parts
        self._worker = worker
        self._log = log or (lambda stage, message: None)
        self._limits = limits
        self._about: dict = {}
        self._failed: list[str] = []
        self._build()
        self.bodies: tuple[MeshBody, ...] = tuple(self._bodies())

    @property
    def cad_volume(self) -> dict[str, float]:
        """Exact volume (m³) or area (m²) of every body by name."""
        return {name: measure / MM**self._dim for name, _, _, measure in self._about["bodies"]}

    @property
    def _dim(self) -> int:
        return self._case.model.dimensions

    def mesh(
        self, size: SizeField | None = None, target_cells: int | None = None, *, curve_segments: int | None = None
    ) -> Mesh:
        """Mesh the geometry.

        Parameters
        ----------
        size
            Wanted element sizes on an earlier mesh; None for the first sizes.
        target_cells
            Wanted number of cells: all sizes are scaled once when the count is far off.
        curve_segments
            Segments of a full circle; 24 unless given, 16 where there are many circles.

        Raises
        ------
        GeometryError
            No mesher succeeds, or the mesh does not fill the geometry.
        """
        segments = curve_segments or self._first_segments()
        view = None if size is None else _view(size)
        self._failed = []
        raw, algorithm = self._raw(view, segments, 1.0)
        scale = 1.0
        if target_cells is not None:
            ratio = len(raw["cells"]) / target_cells
            if not 1 / OFF_TARGET < ratio < OFF_TARGET:
                scale = ratio ** (1.0 / self._dim)
                self._log("mesh", f"{len(raw['cells'])} cells for {target_cells} wanted: all sizes times {scale:.2f}")
                raw, algorithm = self._raw(view, segments, scale)
        return self._finished(raw, algorithm, segments, scale)

    def _first_segments(self) -> int:
        kinds = [solid.kind for part in self._parts for solid in part.solids]
        return sizes.first_segments(sum(kind not in ("box", "polygon", "file") for kind in kinds))

    def _build(self) -> None:
        self._log("geometry", f"building {sum(len(part.solids) for part in self._parts)} solids")
        limit = self._limits * (120.0 + 2.0 * sum(len(part.solids) for part in self._parts))
        trust = bool(getattr(self._case.model, "trust_scripts", False))
        try:
            self._about = self._worker.ask("build", limit, parts=self._parts, dim=self._dim, trust_scripts=trust)
        except client.Lost as lost:
            raise GeometryError(f"The geometry could not be built: gmsh {lost.why}.") from lost
        except client.Refused as refused:
            raise GeometryError(f"The geometry could not be built: {refused}") from refused

    def _bodies(self) -> Iterator[MeshBody]:
        """Yield the named bodies, with the materials of imported solids looked up."""
        solids: dict[int, list[str]] = {}
        for _, p, solid, _ in self._about["bodies"]:
            if solid is not None:
                solids.setdefault(p, []).append(solid)
        for name, p, solid, _ in self._about["bodies"]:
            part = self._parts[p]
            unknown = set(part.materials) - set(solids.get(p, ()))
            if unknown:
                raise fault(
                    ("body", part.source, "materials", sorted(unknown)[0]),
                    f"is no solid of that file; it holds: {', '.join(solids.get(p, ())) or 'none'}",
                )
            material = part.materials.get(solid, part.material) if solid is not None else part.material
            if material is None:
                raise fault(("body", part.source, "materials"), f"gives no material for the solid '{solid}'")
            yield MeshBody(name=name, material=material, source=part.source)

    def _raw(self, view: dict | None, segments: int, scale: float) -> tuple[dict, str]:
        """Return bare arrays from the first mesher that succeeds."""
        cap = None if self._case.model.size is None else MM * self._case.model.size
        common = {"segments": segments, "cap": cap, "view": view, "scale": scale}
        attempts = list(_attempts(self._dim))
        again = 1
        while attempts:
            flat, solid = attempts.pop(0)
            stage = flat[1]
            try:
                if self._worker.pid is None:
                    self._build()
                triangles = self._worker.ask("boundary", self._limits * _flat_limit(view), algorithm=flat[0], **common)
                if self._dim == 2:
                    return self._worker.ask("interior", None, algorithm=0), flat[1]
                stage = solid[1]
                self._log("mesh", f"{triangles} triangles on the faces; filling with {stage}")
                limit = self._limits * _solid_limit(triangles, solid[0])
                raw = self._worker.ask("interior", limit, algorithm=solid[0], threshold=solid[2])
                raw, removed = without_flat(raw, FLATTEST)
                raw["flat_removed"] = removed
                if removed:
                    self._log("mesh", f"{removed} flat cells taken out")
                worst = raw["worst"]
                if worst >= FLATTEST:
                    return raw, solid[1]
                self._failed.append(f"{stage}: left flat cells (radius ratio {worst:.1e})")
                self._log("mesh", f"{self._failed[-1]}; trying another way")
            except (client.Lost, client.Refused) as error:
                self._worker.close()  # after an error gmsh meshes nothing any more: start anew
                if isinstance(error, client.Ended) and again:
                    attempts.insert(0, (flat, solid))  # killed from outside, it may be: the same once more
                    again = 0
                self._failed.append(f"{stage}: {error}")
                self._log("mesh", f"{stage} failed ({error}); trying another way")
        raise GeometryError("No mesh could be made. " + "; ".join(self._failed))

    def _finished(self, raw: dict, algorithm: str, segments: int, scale: float) -> Mesh:
        points = raw["points"] / MM
        used = np.zeros(len(points), dtype=bool)
        used[raw["cells"]] = True
        number = np.cumsum(used) - 1
        facets = raw["facets"]
        inside = np.all(used[facets], axis=1)
        groups = self._about["groups"]
        quality = {"algorithm": algorithm, "curve_segments": segments, "scale": scale, "failed": tuple(self._failed)}
        quality["flat_removed"] = raw.get("flat_removed", 0)
        mesh = build_mesh(
            points[used],
            number[raw["cells"]],
            raw["cell_body"],
            self.bodies,
            patch_facets=number[facets[inside]],
            patch_of=raw["patch_of"][inside],
            patch_groups=tuple(frozenset(groups.get(entity, ())) for entity in raw["patches"]),
            axisymmetric=bool(self._case.model.axisymmetric),
            quality=quality,
        )
        quality |= mesh_quality(mesh)
        quality["cad_volume"] = self.cad_volume
        quality["mesh_volume"] = check_measure(mesh, self.cad_volume, segments)
        self._log("mesh", f"{mesh.n_nodes} nodes, {mesh.n_cells} cells ({algorithm})")
        return Mesh(**{**mesh.__dict__, "quality": quality})


def _view(size: SizeField) -> dict:
    wanted = np.asarray(size.size, dtype=float)
    if wanted.shape != (size.mesh.n_nodes,) or not np.all(np.isfinite(wanted)) or wanted.min() <= 0.0:
        raise ValueError("a size field needs one positive size per node")
    return {"points": size.mesh.points * MM, "cells": size.mesh.cells.astype(np.int32), "size": wanted * MM}


def _attempts(dim: int):
    """Yield (face mesher, volume mesher or None) in the order of trial."""
    if dim == 2:
        yield from ((flat, None) for flat in FLAT_ALGORITHMS)
        return
    yield from ((FLAT_ALGORITHMS[0], solid) for solid in SOLID_ALGORITHMS)
    yield from ((FLAT_ALGORITHMS[2], SOLID_ALGORITHMS[k]) for k in (0, 2))


def _flat_limit(view: dict | None) -> float:
    """Return the CPU seconds that curves and faces may take: ten times 12 s a million triangles."""
    return 90.0 if view is None else 90.0 + 1.2e-4 * len(view["cells"])


def _solid_limit(triangles: int, algorithm: int) -> float:
    """Return the CPU seconds that the volumes may take: some ten times what they take when all is well.

    HXT needs 2 s, Delaunay 35 s a million tetrahedra, of which there are some 10 a triangle.
    """
    return 15.0 + triangles * (3e-4 if algorithm == 10 else 4e-3)
