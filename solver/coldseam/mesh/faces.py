"""Faces in words: where a piece of the exterior surface lies, how large it is, what would select it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.mesh.measure import facet_measure, facet_normals, facet_vectors
from coldseam.mesh.surface import shell_volumes, surface_faces
from coldseam.mesh.types import Mesh

AXES = "xyz"
FLAT = 1e-6
"""Of the model's size; see ``PLACE_TOLERANCE`` in boundaries.py."""


@dataclass(frozen=True, kw_only=True)
class Face:
    """A face for a message: its kind as given, its description, the selectors that fit it."""

    kind: int
    area: float
    text: str
    selectors: str


def mm(value: float) -> str:
    """Return a length (m) in mm as one types it.

    >>> mm(0.1)
    '100'
    """
    return f"{round(float(value) * 1e3, 6) + 0.0:.10g}"


def listed(names: list[str], most: int = 12) -> str:
    """Return quoted names in a row, the first ``most`` of them.

    >>> listed(["a", "b"])
    '"a", "b"'
    """
    text = ", ".join(f'"{name}"' for name in names[:most])
    return text + (f" and {len(names) - most} more" if len(names) > most else "")


def names_text(names: list[str], quote: str = '"') -> str:
    """Return names joined as in a sentence.

    >>> names_text(["a", "b", "c"])
    '"a", "b" and "c"'
    """
    quoted = [f"{quote}{name}{quote}" for name in names]
    return quoted[0] if len(quoted) == 1 else f"{', '.join(quoted[:-1])} and {quoted[-1]}"


def area_text(area: float, dim: int, axisymmetric: bool) -> str:
    """Return the size of a face in the unit that suits it (area in m², or m in a cross-section)."""
    if dim == 2 and not axisymmetric:
        return f"length {mm(area)} mm" if area < 1 else f"length {area:.4g} m"
    return f"area {area * 1e6:.4g} mm²" if area < 0.01 else f"area {area:.4g} m²"


def describe_faces(mesh: Mesh, which: np.ndarray, kind: np.ndarray, most: int = 8) -> tuple[list[Face], int]:
    """Gather facets into faces and put the largest into words.

    Parameters
    ----------
    which
        Numbers of exterior facets, shape (n,).
    kind
        Facets of different kind never share a face, shape (n,).
    most
        How many faces to put into words.

    Returns
    -------
    faces
        The largest first.
    count
        How many faces there are in all.
    """
    body = mesh.cell_body[mesh.facet_cell[which]]
    normals = facet_normals(mesh)
    number = surface_faces(mesh, which, normals, kind * len(mesh.bodies) + body)
    n_faces = int(number.max()) + 1
    area = np.bincount(number, weights=facet_measure(mesh)[which], minlength=n_faces)
    corner = mesh.points[mesh.facets[which]]
    low = np.full((n_faces, mesh.dim), np.inf)
    high = -low
    np.minimum.at(low, number, corner.min(axis=1))
    np.maximum.at(high, number, corner.max(axis=1))
    vector = np.zeros((n_faces, mesh.dim))
    np.add.at(vector, number, facet_vectors(mesh)[which])
    vector /= np.linalg.norm(vector, axis=1, keepdims=True).clip(1e-300)
    bend = np.zeros(n_faces)
    np.maximum.at(bend, number, np.linalg.norm(normals[which] - vector[number], axis=1))
    shell, volume = shell_volumes(mesh)
    first = np.unique(number, return_index=True)[1]
    order = np.argsort(-area, kind="stable")[:most]
    faces = []
    for i in order:
        facet = which[first[i]]
        flat = bool(bend[i] < 1e-3)
        shell_name = ("outer" if volume[shell[facet]] > 0 else "cavity") if len(volume) > 1 else None
        groups = _groups(mesh, facet)
        name = mesh.bodies[body[first[i]]].name
        place = _place(low[i], high[i], FLAT * mesh.size)
        looks = _looks(vector[i], flat)
        text = f'{place}, {area_text(area[i], mesh.dim, mesh.axisymmetric)}, of body "{name}", {looks}'
        fits = _selectors(low[i], high[i], FLAT * mesh.size, vector[i] if flat else None, name, shell_name, groups)
        faces.append(Face(kind=int(kind[first[i]]), area=float(area[i]), text=text, selectors=fits))
    return faces, n_faces


def _groups(mesh: Mesh, facet: int) -> list[str]:
    patch = mesh.facet_patch[facet]
    return sorted(mesh.patch_groups[patch]) if patch < len(mesh.patch_groups) else []


def _place(low: np.ndarray, high: np.ndarray, spare: float) -> str:
    """Return a bounding box in words, mm: fixed coordinates first."""
    fixed = [f"{AXES[i]} = {mm(low[i])}" for i in range(len(low)) if high[i] - low[i] <= spare]
    spans = [f"{AXES[i]} {mm(low[i])} to {mm(high[i])}" for i in range(len(low)) if high[i] - low[i] > spare]
    return "at " + ", ".join(fixed + spans) + " mm"


def _axis_of(normal: np.ndarray) -> str | None:
    axis = int(np.argmax(np.abs(normal)))
    nearly = np.linalg.norm(np.abs(normal) - np.eye(len(normal))[axis]) <= 1e-3
    return ("-" if normal[axis] < 0 else "+") + AXES[axis] if nearly else None


def _looks(vector: np.ndarray, flat: bool) -> str:
    if not flat:
        return "curved"
    axis = _axis_of(vector)
    return f"facing {axis}" if axis else "facing (" + ", ".join(f"{part + 0.0:.3g}" for part in vector) + ")"


def _selectors(
    low: np.ndarray,
    high: np.ndarray,
    spare: float,
    normal: np.ndarray | None,
    body: str,
    shell: str | None,
    groups: list[str],
) -> str:
    """Return the selectors that take in a face, as they are typed."""
    fits = [f'group = "{group}"' for group in groups[:3]]
    fits += [f"plane = {{ {AXES[i]} = {mm(low[i])} }}" for i in range(len(low)) if high[i] - low[i] <= spare]
    axis = _axis_of(normal) if normal is not None else None
    if axis:
        fits.append(f'facing = "{axis}"')
    fits.append(f'body = "{body}"')
    if shell:
        fits.append(f'shell = "{shell}"')
    if not axis:
        corners = [", ".join(mm(part) for part in corner) for corner in (low, high)]
        fits.append(f"within = {{ from = [{corners[0]}], to = [{corners[1]}] }}")
    return " or ".join(fits)
