"""Meshes made by other programs: read, named, split into simplices, checked.

A mesh from outside is trusted in nothing: what would make heat flow where it can't, or stop it where
it can (cracks, folds, doubled cells, cells of no body), is refused with its count and place.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from coldseam.errors import CaseError, Fault
from coldseam.mesh.build import build_mesh
from coldseam.mesh.faces import listed
from coldseam.mesh.foreign_checks import check_nodes, check_simplices, check_surface
from coldseam.mesh.foreign_read import RawMesh, mesh_fault, read_file
from coldseam.mesh.refine import refine, within_budget
from coldseam.mesh.split import plane_quads_to_triangles, quads_to_triangles, split_cells
from coldseam.mesh.types import Mesh, MeshBody, SizeField

if TYPE_CHECKING:
    from coldseam.case.model import Case

Log = Callable[[str, str], None]


class ForeignMesher:
    """A mesh given by the user, behind the same interface as a geometry that is meshed.

    Attributes
    ----------
    remeshable
        False: finer meshes come from splitting cells, so curved sides keep their flat pieces.
    bodies
        The bodies of the mesh.
    """

    remeshable = False

    def __init__(self, mesh: Mesh):
        self._mesh = mesh
        self.bodies = mesh.bodies

    def __enter__(self) -> ForeignMesher:
        return self

    def __exit__(self, *stop: object) -> None:
        return None

    def mesh(self, size: SizeField | None = None, target_cells: int | None = None) -> Mesh:
        """Return the given mesh, or the mesh of ``size`` split until its cells have the wanted size.

        Parameters
        ----------
        size
            Wanted size at the nodes of a mesh this mesher gave before.
        target_cells
            About how many cells the finer mesh may have; the wanted sizes are scaled up to keep to it.
        """
        if size is None:
            return self._mesh
        wanted = size.size if target_cells is None else within_budget(size.mesh, size.size, target_cells)
        return refine(size.mesh, wanted)


def open_foreign(case: Case, log: Log | None = None) -> ForeignMesher:
    """Read the mesh that ``[model] mesh`` names and give its cells to the bodies of the case.

    Parameters
    ----------
    case
        With ``model.mesh`` (path) and ``model.mesh_unit`` (m).
    log
        Called with a stage and a message.

    Raises
    ------
    CaseError
        The file can't be read, the mesh has a defect, or groups and bodies don't match.
    """
    tell = log or (lambda stage, message: None)
    path = case.model.mesh
    if path is None:
        raise mesh_fault("no mesh is given")
    raw = read_file(path)
    for remark in raw.remarks:
        tell("mesh", remark)
    dim = case.model.dimensions
    points = _points(raw, dim, case)
    owners = _cells_to_bodies(case, raw, dim)
    void = np.array([bool(body.void) for body in case.body])
    simplices, body = _simplices(raw, points, owners, dim, void)
    if not len(simplices):
        raise mesh_fault("all cells of the mesh are void")
    used, local = np.unique(simplices, return_inverse=True)
    points, cells = points[used], local.reshape(simplices.shape)
    if len(used) < len(raw.points):
        tell("mesh", f"{len(raw.points) - len(used)} points that no cell of a body uses are left out")
    check_nodes(points)
    turned = check_simplices(points, cells)
    if turned:
        tell("mesh", f"{turned} cells were numbered inside out and have been turned round")
    bodies, number = _bodies(case, np.unique(body))
    quality = {"remarks": raw.remarks}
    mesh = build_mesh(points, cells, number[body], bodies, axisymmetric=case.model.axisymmetric, quality=quality)
    check_surface(mesh)
    mesh = replace(mesh, patch_groups=_facet_groups(raw, mesh, used, dim))
    tell("mesh", f"{mesh.n_nodes} nodes, {mesh.n_cells} simplices read from {path.name}")
    return ForeignMesher(mesh)


def _points(raw: RawMesh, dim: int, case: Case) -> np.ndarray:
    """Return the points in metres with as many columns as the case has dimensions."""
    points = raw.points * case.model.mesh_unit
    most = max(block.dim for block in raw.blocks)
    if most < dim:
        raise mesh_fault(f"the mesh has no {'solid cells' if dim == 3 else 'faces'}, but the case has {dim} dimensions")
    if dim == 3:
        return points
    if most == 3:
        raise mesh_fault("the mesh has solid cells, but the case is a cross-section (dimensions = 2)")
    size = np.linalg.norm(np.ptp(points, axis=0))
    if np.abs(points[:, 2]).max() > 1e-9 * size:
        raise mesh_fault("the mesh of a cross-section must lie in the plane z = 0")
    if case.model.axisymmetric:
        if points[:, 0].min() < -1e-9 * size:
            raise mesh_fault("an axisymmetric section has its axis at x = 0: no point may have x below 0")
        points[:, 0] = np.maximum(points[:, 0], 0.0)
    return points[:, :2].copy()


def _cells_to_bodies(case: Case, raw: RawMesh, dim: int) -> list[np.ndarray | None]:
    """Return for every block the body (index into ``case.body``) of its cells; None for lower dimensions."""
    owners = [np.full(len(b.cells), -1) if b.dim == dim else None for b in raw.blocks]
    present = sorted(name for name, rows in raw.groups.items() if _count(raw, rows, dim))
    faults = []
    for i, body in enumerate(case.body):
        path = ("body", i, "group")
        if body.group is None:
            faults.append(Fault(path=("body", i), what=f"with [model] mesh a body is a group; {_available(present)}"))
        elif body.group not in present:
            also = " (only faces or lines carry it)" if body.group in raw.groups else ""
            what = f'no cell of the mesh is in "{body.group}"{also}; {_available(present)}'
            faults.append(Fault(path=path, what=what))
        else:
            taken = _claim(owners, raw.groups[body.group], i)
            for other, count in taken.items():
                what = f'{count} cells are also in body "{case.body[other].name}"; a cell belongs to one body'
                faults.append(Fault(path=path, what=what))
    left = sum(int(np.count_nonzero(owner < 0)) for owner in owners if owner is not None)
    if left and not faults:
        used = {body.group for body in case.body}
        spare = [name for name in present if name not in used]
        what = f"{left} cells of the mesh belong to no body; " + _available(spare, "groups without a body")
        faults.append(Fault(path=("body",), what=what))
    if faults:
        raise CaseError(faults)
    return owners


def _count(raw: RawMesh, rows: list[np.ndarray], dim: int) -> int:
    return sum(len(some) for some, block in zip(rows, raw.blocks, strict=True) if block.dim == dim)


def _available(names: list[str], lead: str = "groups of cells in the mesh") -> str:
    return f"{lead}: {listed(names)}" if names else f"{lead}: none"


def _claim(owners: list[np.ndarray | None], rows: list[np.ndarray], body: int) -> dict[int, int]:
    """Give cells to a body; return how many were other bodies' already, by body."""
    taken: dict[int, int] = {}
    for owner, some in zip(owners, rows, strict=True):
        if owner is None or not len(some):
            continue
        before = owner[some]
        for other in np.unique(before[before >= 0]):
            taken[int(other)] = taken.get(int(other), 0) + int(np.count_nonzero(before == other))
        owner[some] = body
    return taken


def _simplices(
    raw: RawMesh, points: np.ndarray, owners: list[np.ndarray | None], dim: int, void: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Split all cells; return simplices and the body of each, those of void bodies left out."""
    simplices, body = [], []
    for block, owner in zip(raw.blocks, owners, strict=True):
        if owner is None:
            continue
        if dim == 3:
            pieces, origin = split_cells(block.kind, block.cells)
        elif block.kind == "quad":
            pieces = plane_quads_to_triangles(points, block.cells)
            origin = np.repeat(np.arange(len(block.cells)), 2)
            whole = np.all(pieces != np.roll(pieces, 1, axis=1), axis=1)
            pieces, origin = pieces[whole], origin[whole]
        else:
            pieces, origin = block.cells, np.arange(len(block.cells))
        solid = ~void[owner[origin]]
        simplices.append(pieces[solid])
        body.append(owner[origin][solid])
    return np.concatenate(simplices), np.concatenate(body)


def _bodies(case: Case, present: np.ndarray) -> tuple[tuple[MeshBody, ...], np.ndarray]:
    """Return the mesh's bodies and the number among them of each body of the case."""
    number = np.full(len(case.body), -1)
    number[present] = np.arange(len(present))
    named = [MeshBody(name=case.body[i].name, material=case.body[i].material, source=int(i)) for i in present]
    return tuple(named), number


def _facet_groups(raw: RawMesh, mesh: Mesh, used: np.ndarray, dim: int) -> tuple[frozenset[str], ...]:
    """Return the group names of every exterior facet, from the file's faces (3D) or lines (2D)."""
    new = np.full(len(raw.points), -1)
    new[used] = np.arange(len(used))
    key = _facet_keys(np.sort(mesh.facets, axis=1))
    order = np.argsort(key)
    ordered = key[order]
    sets = np.zeros(len(key), dtype=np.int64)  # number of the set of names each facet carries
    names: list[frozenset[str]] = [frozenset()]
    for name, rows in sorted(raw.groups.items()):
        parts = [b.cells[some] for b, some in zip(raw.blocks, rows, strict=True) if b.dim == dim - 1 and len(some)]
        if not parts:
            continue
        pieces = np.vstack([quads_to_triangles(p) if p.shape[1] == 4 else p for p in parts])
        pieces = new[pieces]
        wanted = _facet_keys(np.sort(pieces[np.all(pieces >= 0, axis=1)], axis=1))
        at = np.searchsorted(ordered, wanted).clip(max=len(ordered) - 1)
        hit = np.unique(order[at[ordered[at] == wanted]])
        old, position = np.unique(sets[hit], return_inverse=True)
        sets[hit] = len(names) + position
        names += [names[i] | {name} for i in old]
    return tuple(names[i] for i in sets.tolist())


def _facet_keys(nodes: np.ndarray) -> np.ndarray:
    """Return rows of sorted nodes as single comparable values, shape (n,)."""
    nodes = np.ascontiguousarray(nodes.astype(">i8"))  # big-endian bytes compare as the numbers do
    return nodes.view(np.dtype((np.void, 8 * nodes.shape[1]))).ravel()
