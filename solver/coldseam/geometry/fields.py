"""Size fields in gmsh: growth from sources in the first round, a nodal view in later ones.

Runs in the child process only. A size interpolated from the boundary, which gmsh offers, stays
small between two small things far apart (bolts in a panel), hence the explicit growth::

    h(x) = min(cap, min over sources (h_source + GROWTH distance(x, source)))
"""

from __future__ import annotations

import math

import numpy as np

GROWTH = {2: 0.3, 3: 0.7}
"""Growth of the element size per distance, by dimension."""

STEP = 1.5
"""Sources whose sizes lie within this factor share one distance field."""


def growing(
    gmsh,
    dim: int,
    cap: float,
    vertices: list[tuple[int, float]],
    curves: list[tuple[int, float, float]],
    faces: list[tuple[int, float]],
) -> list[int]:
    """Return fields of sizes that grow away from sources.

    Parameters
    ----------
    dim, cap
        Dimensions; largest size, mm.
    vertices, faces
        (tag, size) of the sources.
    curves
        (tag, size, length).
    """  # fmt: skip
    field = gmsh.model.mesh.field
    classes: dict[int, dict[str, list]] = {}
    for kind, sources in (("PointsList", vertices), ("CurvesList", curves), ("SurfacesList", faces)):
        for source in sources:
            if source[1] < cap:
                level = math.floor(math.log(source[1] / cap, STEP))
                classes.setdefault(level, {}).setdefault(kind, []).append(source)
    made = []
    for _, kinds in sorted(classes.items()):
        least = min(source[1] for sources in kinds.values() for source in sources)
        distance = field.add("Distance")
        for kind, sources in kinds.items():
            field.setNumbers(distance, kind, [source[0] for source in sources])
        longest = max((source[2] / source[1] for source in kinds.get("CurvesList", ())), default=10.0)
        field.setNumber(distance, "Sampling", min(200, max(10, math.ceil(longest))))
        threshold = field.add("Threshold")
        field.setNumber(threshold, "InField", distance)
        for key, value in (
            ("SizeMin", least),
            ("SizeMax", cap),
            ("DistMin", 0.5 * least),
            ("DistMax", 0.5 * least + (cap - least) / GROWTH[dim]),
        ):
            field.setNumber(threshold, key, value)
        made.append(threshold)
    return made


def nodal(gmsh, points: np.ndarray, cells: np.ndarray, size: np.ndarray) -> int:
    """Return the field of a size, mm, (n_nodes,), on a simplex mesh: points, mm, (n_nodes, dim), cells (n_cells, dim + 1)."""
    corners = np.zeros((len(cells), 3, cells.shape[1]))
    corners[:, : points.shape[1]] = points[cells].transpose(0, 2, 1)
    data = np.concatenate([corners.reshape(len(cells), -1), size[cells]], axis=1)
    view = gmsh.view.add("size")
    gmsh.view.addListData(view, "SS" if cells.shape[1] == 4 else "ST", len(cells), data.ravel())
    made = gmsh.model.mesh.field.add("PostView")
    gmsh.model.mesh.field.setNumber(made, "ViewTag", view)
    return made


def use(gmsh, made: list[int]) -> None:
    """Make the least of the fields the one that sets all sizes."""
    if not made:
        return
    field = gmsh.model.mesh.field
    least = made[0]
    if len(made) > 1:
        least = field.add("Min")
        field.setNumbers(least, "FieldsList", made)
    field.setAsBackgroundMesh(least)


def round_faces(gmsh, mapped, segments: int) -> list[tuple[int, float]]:
    """Return (face, size) of the curved faces that are not mapped: ``segments`` per full turn."""
    found = []
    for _, face in gmsh.model.getEntities(2):
        if face in mapped or gmsh.model.getType(2, face) == "Plane":
            continue
        low, high = gmsh.model.getParametrizationBounds(2, face)
        u, v = (np.linspace(a, b, 5)[1:-1] for a, b in zip(low, high, strict=True))
        grid = np.stack(np.meshgrid(u, v), axis=-1).ravel()
        largest, least, *_ = gmsh.model.getPrincipalCurvatures(face, grid)
        curvature = float(np.median(np.maximum(np.abs(largest), np.abs(least))))  # not the tip of a cone's
        if curvature > 0.0:
            found.append((face, 2 * math.pi / (segments * curvature)))
    return found


def constant(gmsh, faces: list[tuple[int, float]]) -> list[int]:
    """Return one field per face that holds on that face only."""
    made = []
    for face, size in faces:
        field = gmsh.model.mesh.field.add("Constant")
        gmsh.model.mesh.field.setNumbers(field, "SurfacesList", [face])
        gmsh.model.mesh.field.setNumber(field, "VIn", size)
        gmsh.model.mesh.field.setNumber(field, "VOut", 1e22)
        made.append(field)
    return made
