"""Which boundary of the case claims which exterior facet of the mesh.

Every exterior facet belongs to exactly one boundary; nothing is adiabatic by silence. A patch (a
face of the geometry) is selected as a whole or not at all: selecting a part of it would make the
answer depend on where the mesh happens to put its nodes.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.errors import CaseError, Fault
from coldseam.mesh.faces import Face, describe_faces, listed, mm, names_text
from coldseam.mesh.measure import facet_normals
from coldseam.mesh.surface import shell_volumes
from coldseam.mesh.types import Mesh

if TYPE_CHECKING:
    from coldseam.case.model import Case, Selector, Within

AXES = "xyz"
PLACE_TOLERANCE = 1e-6
"""Of the model's size: geometry kernels place points to about 1e-7 of it (common practice, no source)."""
FACING_TOLERANCE = 1e-3
"""Length of the difference of unit normals: 0.06 degrees, far above rounding, far below a drawn slope."""
PARTS = ("plane", "within", "body", "facing", "shell", "group")
MOST_FAULTS = 8


def select(selector: Selector, mesh: Mesh) -> np.ndarray:
    """Return the exterior facets that a selector picks.

    Parameters
    ----------
    selector
        The parts that are given must all hold.
    mesh
        The mesh.

    Returns
    -------
    ndarray of bool
        Shape (n_facets,). A patch is in it with all its facets or with none.
    """
    chosen = facets_satisfying(selector, mesh)
    missed = np.bincount(mesh.facet_patch, weights=~chosen, minlength=1)
    return missed[mesh.facet_patch] == 0


def facets_satisfying(selector: Selector, mesh: Mesh) -> np.ndarray:
    """Return the facets that satisfy a selector each by itself, patches disregarded, shape (n_facets,)."""
    chosen = np.ones(len(mesh.facets), dtype=bool)
    for part in PARTS:
        value = getattr(selector, part)
        if value is not None:
            chosen &= _PART_MASKS[part](value, mesh)
    return chosen


def _on_plane(plane: dict[str, float], mesh: Mesh) -> np.ndarray:
    ((axis, at),) = plane.items()
    if AXES.index(axis) >= mesh.dim:
        return np.zeros(len(mesh.facets), dtype=bool)
    off = np.abs(mesh.points[mesh.facets, AXES.index(axis)] - at)
    return np.all(off <= PLACE_TOLERANCE * mesh.size, axis=1)


def _within(box: Within, mesh: Mesh) -> np.ndarray:
    low, high = np.array(box.start), np.array(box.end)
    spare = PLACE_TOLERANCE * mesh.size
    inside = np.all((mesh.points >= low - spare) & (mesh.points <= high + spare), axis=1)
    return np.all(inside[mesh.facets], axis=1)


def bodies_named(name: str, mesh: Mesh) -> np.ndarray:
    """Return which bodies of the mesh a name means: itself, or all parts ``name/...``, shape (n_bodies,)."""
    return np.array([body.name == name or body.name.startswith(name + "/") for body in mesh.bodies], dtype=bool)


def _of_body(name: str, mesh: Mesh) -> np.ndarray:
    return bodies_named(name, mesh)[mesh.cell_body[mesh.facet_cell]]


def _facing(direction: str, mesh: Mesh) -> np.ndarray:
    wanted = np.zeros(mesh.dim)
    axis = AXES.index(direction[1])
    if axis >= mesh.dim:
        return np.zeros(len(mesh.facets), dtype=bool)
    wanted[axis] = -1.0 if direction[0] == "-" else 1.0
    return np.linalg.norm(facet_normals(mesh) - wanted, axis=1) <= FACING_TOLERANCE


def _of_shell(shell: str, mesh: Mesh) -> np.ndarray:
    of_facet, volume = shell_volumes(mesh)
    return (volume > 0)[of_facet] if shell == "outer" else (volume <= 0)[of_facet]


def _of_group(name: str, mesh: Mesh) -> np.ndarray:
    count = max(int(mesh.facet_patch.max(initial=-1)) + 1, len(mesh.patch_groups))
    carries = np.zeros(count, dtype=bool)
    carries[: len(mesh.patch_groups)] = [name in groups for groups in mesh.patch_groups]
    return carries[mesh.facet_patch]


_PART_MASKS: dict[str, Callable[[Any, Mesh], np.ndarray]] = {
    "plane": _on_plane,
    "within": _within,
    "body": _of_body,
    "facing": _facing,
    "shell": _of_shell,
    "group": _of_group,
}


def claim_facets(case: Case, mesh: Mesh) -> np.ndarray:
    """Return the boundary that each exterior facet belongs to.

    Returns
    -------
    ndarray of int
        Index into ``case.boundary``, shape (n_facets,).

    Raises
    ------
    CaseError
        A facet is claimed by no boundary or by several, or a boundary claims nothing; all such
        faults at once, each face with its place, its area and the selectors that could claim it.
    """
    by_place = {i: boundary.on for i, boundary in enumerate(case.boundary) if not isinstance(boundary.on, str)}
    rest = [i for i, boundary in enumerate(case.boundary) if isinstance(boundary.on, str)]
    claims = np.zeros((len(case.boundary), len(mesh.facets)), dtype=bool)
    for i, on in by_place.items():
        claims[i] = select(on, mesh)
    faults = [
        Fault(path=("boundary", i, "on"), what=why_nothing(on, mesh))
        for i, on in by_place.items()
        if not claims[i].any()
    ]
    for i in rest[1:]:
        first = case.boundary[rest[0]].name
        faults.append(Fault(path=("boundary", i, "on"), what=f'only one boundary can take "rest"; "{first}" does'))
    times = claims.sum(axis=0)
    if rest:
        claims[rest[0]] = times == 0
        if not claims[rest[0]].any() and not faults:
            what = "no face is left for it: the other boundaries claim all; remove it, or narrow the others"
            faults.append(Fault(path=("boundary", rest[0], "on"), what=what))
    faults += _doubly_claimed(case, mesh, claims, times)
    if not rest:
        faults += _unclaimed(case, mesh, times)
    if faults:
        raise CaseError(faults)
    return np.argmax(claims, axis=0)


def _doubly_claimed(case: Case, mesh: Mesh, claims: np.ndarray, times: np.ndarray) -> list[Fault]:
    """Return one fault for each face that several boundaries claim."""
    which = np.flatnonzero(times > 1)
    if not len(which):
        return []
    who, kind = np.unique(claims[:, which], axis=1, return_inverse=True)
    faults = []
    faces, count = describe_faces(mesh, which, kind.ravel(), MOST_FAULTS)
    for face in faces:
        first, *others = np.flatnonzero(who[:, face.kind]).tolist()
        names = names_text([case.boundary[i].name for i in (first, *others)])
        what = f"a face is claimed by {names} at once: {face.text}; narrow one, for example with {face.selectors}"
        faults.append(Fault(path=("boundary", others[0], "on"), what=what))
    return faults + _more(count, "claimed by several boundaries")


def _unclaimed(case: Case, mesh: Mesh, times: np.ndarray) -> list[Fault]:
    """Return one fault for each face that no boundary claims."""
    which = np.flatnonzero(times == 0)
    if not len(which):
        return []
    partly = np.zeros((len(case.boundary), len(which)), dtype=bool)
    for i, boundary in enumerate(case.boundary):
        if not isinstance(boundary.on, str):
            touched = np.bincount(mesh.facet_patch, weights=facets_satisfying(boundary.on, mesh))
            partly[i] = touched[mesh.facet_patch[which]] > 0
    who, kind = np.unique(partly, axis=1, return_inverse=True)
    faults = []
    faces, count = describe_faces(mesh, which, kind.ravel(), MOST_FAULTS)
    for face in faces:
        what = f"a face belongs to no boundary: {face.text}; "
        for i in np.flatnonzero(who[:, face.kind]).tolist():
            what += f'"{case.boundary[i].name}" takes in only part of it, and a face is claimed whole; '
        what += f'claim it with {face.selectors}, or all that is left with on = "rest"'
        faults.append(Fault(path=("boundary",), what=what))
    return faults + _more(count, "in no boundary")


def _more(count: int, state: str) -> list[Fault]:
    left = count - MOST_FAULTS
    return [Fault(path=("boundary",), what=f"and {left} more face{'s' * (left > 1)} {state}")] if left > 0 else []


def why_nothing(selector: Selector, mesh: Mesh) -> str:
    """Return why a selector picks no face of the mesh, with the nearest that would."""
    given = [part for part in PARTS if getattr(selector, part) is not None]
    for part in given:
        value = getattr(selector, part)
        if not _PART_MASKS[part](value, mesh).any():
            return f"selects nothing: {_HINTS[part](value, mesh)}"
    touched = facets_satisfying(selector, mesh)
    if touched.any():
        face = _largest(mesh, np.flatnonzero(touched))
        return (
            f"selects nothing: it takes in only part of a face, and faces are selected whole; the part is {face.text}"
        )
    return f"selects nothing: there are faces for each of {names_text(given, quote='')}, but none for all of them"


def _largest(mesh: Mesh, which: np.ndarray) -> Face:
    return describe_faces(mesh, which, np.zeros(len(which), dtype=int), 1)[0][0]


def _plane_hint(plane: dict[str, float], mesh: Mesh) -> str:
    ((axis, at),) = plane.items()
    number = AXES.index(axis)
    if number >= mesh.dim:
        return "a cross-section has only x and y"
    along = mesh.points[mesh.facets, number]
    flat = np.ptp(along, axis=1) <= PLACE_TOLERANCE * mesh.size
    # Whole grid steps of the tolerance, so that faces of one plane are one entry.
    step = 4 * PLACE_TOLERANCE * mesh.size
    _, first = np.unique(np.round(along[flat, 0] / step), return_index=True)
    places = along[flat, 0][first]
    if not len(places):
        return f"no flat face is square to {axis}"
    nearest = np.sort(places[np.argsort(np.abs(places - at))[:MOST_FAULTS]])
    verb = "faces lie at" if len(nearest) == len(places) else f"of {len(places)} planes with faces the nearest are"
    return f"no face lies at {axis} = {mm(at)}; {verb} {axis} = {', '.join(mm(place) for place in nearest)}"


def _within_hint(box: Within, mesh: Mesh) -> str:
    low, high = np.array(box.start), np.array(box.end)
    corner = mesh.points[mesh.facets].mean(axis=1)
    gap = np.linalg.norm(np.maximum(np.maximum(low - corner, corner - high), 0.0), axis=1)
    nearest = np.flatnonzero(mesh.facet_patch == mesh.facet_patch[np.argmin(gap)])
    face = _largest(mesh, nearest)
    return f"no face lies wholly inside the box; the nearest face is {face.text}"


def _body_hint(name: str, mesh: Mesh) -> str:
    bare = np.unique(mesh.cell_body[mesh.facet_cell])
    if bodies_named(name, mesh).any():
        return f'body "{name}" has no face on the outside; {listed([mesh.bodies[i].name for i in bare])} have'
    return f'there is no body "{name}"; bodies with faces on the outside: {listed([mesh.bodies[i].name for i in bare])}'


def _facing_hint(direction: str, mesh: Mesh) -> str:
    if AXES.index(direction[1]) >= mesh.dim:
        return "a cross-section has only x and y"
    normals = facet_normals(mesh)
    there = [
        sign + AXES[axis]
        for axis in range(mesh.dim)
        for sign, value in (("+", 1.0), ("-", -1.0))
        if np.any(value * normals[:, axis] > 1.0 - 0.5 * FACING_TOLERANCE**2)
    ]
    return f"no flat face looks to {direction}; faces look to {listed(there) if there else 'no axis at all'}"


def _shell_hint(shell: str, mesh: Mesh) -> str:
    return "the model encloses no hollow" if shell == "cavity" else "the model has no outer surface"


def _group_hint(name: str, mesh: Mesh) -> str:
    groups = sorted(set().union(*mesh.patch_groups)) if mesh.patch_groups else []
    return f'no face carries the group "{name}"; ' + (f"groups: {listed(groups)}" if groups else "there are no groups")


_HINTS: dict[str, Callable[[Any, Mesh], str]] = {
    "plane": _plane_hint,
    "within": _within_hint,
    "body": _body_hint,
    "facing": _facing_hint,
    "shell": _shell_hint,
    "group": _group_hint,
}
