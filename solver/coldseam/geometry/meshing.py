"""Mesh requests on the built model. Runs in the child process only.

Curves and faces first (:func:`mesh_boundary`), volumes in a second request
(:func:`mesh_interior`), so that the parent can set its time limit by the number of triangles.

The side of a round bar is made of four-sided faces between arcs and straight lines
(:class:`Sides`). Those are meshed as a mapped grid: the arcs with their number of segments, the
lines graded freely, opposite ones alike. A bar's elements can so be long where the temperature
along it is smooth, whatever its circle needs.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from coldseam.geometry import fields, sizes
from coldseam.geometry.occ import Model


@dataclass(kw_only=True)
class Sides:
    """The mapped four-sided faces.

    Parameters
    ----------
    corners
        {face: its four vertices in order}.
    arcs, lines
        Pairs of opposite curves.
    """

    corners: dict[int, list[int]] = field(default_factory=dict)
    arcs: list[tuple[int, int]] = field(default_factory=list)
    lines: list[tuple[int, int]] = field(default_factory=list)


def mesh_boundary(
    gmsh, model: Model, *, algorithm: int, segments: int, cap: float | None, view: dict | None, scale: float
) -> int:
    """Mesh curves and faces anew; return the number of triangles.

    Parameters
    ----------
    algorithm
        gmsh's number of the surface mesher.
    segments
        Segments of a full circle.
    cap
        Largest element size, mm, or None.
    view
        A size field on an earlier mesh: ``points`` (mm), ``cells``, ``size`` (mm); None for the first sizes.
    scale
        Factor on all sizes of the field (or the first sizes).
    """
    _clear(gmsh)
    largest = min(cap or np.inf, model.size / 8.0)
    if view is None:
        largest *= scale
    curves = _curves(gmsh)
    sides = _sides(gmsh, curves) if model.dim == 3 else Sides()
    option = gmsh.option.setNumber
    option("Mesh.Algorithm", algorithm)
    option("Mesh.RandomSeed", 1)
    option("Mesh.Optimize", 1)
    option("Mesh.OptimizeNetgen", 0)
    option("Mesh.MeshSizeMin", 0.0)
    option("Mesh.MeshSizeMax", largest if view is None else min(cap or np.inf, model.size))
    option("Mesh.MeshSizeFromCurvature", 0)
    option("Mesh.MeshSizeFromPoints", 0)
    option("Mesh.MeshSizeExtendFromBoundary", 0)
    if view is None:
        _first_sizes(gmsh, model, curves, sides, segments, largest, scale)
    else:
        _field_sizes(gmsh, model, curves, sides, segments, view, scale)
    for face, corners in sides.corners.items():
        gmsh.model.mesh.setTransfiniteSurface(face, "AlternateLeft", corners)
    gmsh.model.mesh.generate(2)
    return sum(len(gmsh.model.mesh.getElementsByType(2, tag)[0]) for _, tag in gmsh.model.getEntities(2))


def mesh_interior(gmsh, model: Model, *, algorithm: int, threshold: float = 0.3) -> dict:
    """Mesh the volumes and return the whole mesh as arrays (lengths mm).

    Parameters
    ----------
    algorithm
        gmsh's number of the volume mesher.
    threshold
        Quality below which the optimiser works on a tetrahedron. Flat layers hold many that can't
        be bettered to gmsh's usual 0.3; HXT then tries for ever.

    Returns
    -------
    dict
        ``points`` (n, dim), ``cells`` (m, dim + 1), ``cell_body`` (m,), ``facets`` (f, dim),
        ``patch_of`` (f,), ``patches``: entity number of each patch.
    """
    dim = model.dim
    mesh = gmsh.model.mesh
    if dim == 3:
        gmsh.option.setNumber("Mesh.Algorithm3D", algorithm)
        gmsh.option.setNumber("Mesh.OptimizeThreshold", threshold)
        mesh.generate(3)
    tags, coordinates, _ = mesh.getNodes()
    order = np.argsort(tags)
    number = np.zeros(int(tags.max()) + 1, dtype=np.int64)
    number[tags[order]] = np.arange(len(tags))
    cells, cell_body = [], []
    for k, entities in enumerate(model.bodies):
        for entity in entities:
            nodes = mesh.getElementsByType(4 if dim == 3 else 2, entity)[1]
            cells.append(number[nodes].reshape(-1, dim + 1))
            cell_body.append(np.full(len(cells[-1]), k))
    facets, patch_of, patches = [], [], []
    for _, entity in gmsh.model.getEntities(dim - 1):
        nodes = mesh.getElementsByType(2 if dim == 3 else 1, entity)[1]
        facets.append(number[nodes].reshape(-1, dim))
        patch_of.append(np.full(len(facets[-1]), len(patches)))
        patches.append(entity)
    return {
        "points": coordinates.reshape(-1, 3)[order, :dim],
        "cells": np.vstack(cells),
        "cell_body": np.concatenate(cell_body),
        "facets": np.vstack(facets),
        "patch_of": np.concatenate(patch_of),
        "patches": patches,
    }


def _clear(gmsh) -> None:
    """Drop mesh, constraints, fields and views of the last request."""
    gmsh.model.mesh.clear()
    gmsh.model.mesh.removeConstraints()
    for tag in gmsh.model.mesh.field.list():
        gmsh.model.mesh.field.remove(tag)
    for tag in gmsh.view.getTags():
        gmsh.view.remove(tag)


# ---------------------------------------------------------------- the geometry as arrays


def _curves(gmsh) -> sizes.Curves:
    """Return the model's curves; vertices by their position in ``getEntities(0)``."""
    position = {tag: k for k, (_, tag) in enumerate(gmsh.model.getEntities(0))}
    tags, ends, lengths, turns = [], [], [], []
    for _, tag in gmsh.model.getEntities(1):
        vertices = [abs(v) for _, v in gmsh.model.getBoundary([(1, tag)], oriented=False)]
        length = gmsh.model.occ.getMass(1, tag)
        tags.append(tag)
        ends.append([position[v] for v in vertices] if len(vertices) == 2 else [-1, -1])
        lengths.append(length)
        turns.append(_turn(gmsh, tag, length))
    return sizes.Curves(
        tag=np.array(tags), ends=np.array(ends).reshape(-1, 2), length=np.array(lengths), turn=np.array(turns)
    )


def _turn(gmsh, tag: int, length: float) -> float:
    """Return the largest curvature of a curve times its length, 0 when straight."""
    if length <= 1e-9 or gmsh.model.getType(1, tag) == "Line":
        return 0.0
    (low,), (high,) = gmsh.model.getParametrizationBounds(1, tag)
    curvature = gmsh.model.getCurvature(1, tag, np.linspace(low, high, 9)[1:-1])
    turn = float(np.max(np.abs(curvature))) * length
    return turn if turn > 1e-6 else 0.0


def _sides(gmsh, curves: sizes.Curves) -> Sides:
    """Find the four-sided faces of cylinders."""
    sides = Sides()
    bent = dict(zip(curves.tag.tolist(), (curves.turn > 0.0).tolist(), strict=True))
    for _, face in gmsh.model.getEntities(2):
        if gmsh.model.getType(2, face) != "Cylinder":
            continue
        ring = [abs(c) for _, c in gmsh.model.getBoundary([(2, face)], oriented=False)]
        if len(ring) != 4 or len(set(ring)) != 4:
            continue
        ends = {c: {abs(v) for _, v in gmsh.model.getBoundary([(1, c)], oriented=False)} for c in ring}
        arcs = [c for c in ring if bent[c]]
        lines = [c for c in ring if not bent[c]]
        if len(arcs) != 2 or len(lines) != 2 or ends[arcs[0]] & ends[arcs[1]] or len(ends[arcs[0]]) != 2:
            continue
        a, b = sorted(ends[arcs[0]])
        c = next(iter(ends[arcs[1]] & next(ends[line] for line in lines if b in ends[line])))
        d = next(iter(ends[arcs[1]] - {c}))
        sides.corners[face] = [a, b, c, d]
        sides.arcs.append((arcs[0], arcs[1]))
        sides.lines.append((lines[0], lines[1]))
    return sides


# ---------------------------------------------------------------- sizes


def _arc_counts(curves: sizes.Curves, sides: Sides, count: np.ndarray) -> dict[int, int]:
    """Return {curve: segments} of all bent curves, opposite arcs of mapped faces alike."""
    bent = {int(t): int(n) for t, n in zip(curves.tag, count, strict=True) if n > 0}
    root = sizes.joined(sides.arcs, list(bent))
    most: dict[int, int] = {}
    for tag, n in bent.items():
        most[root[tag]] = max(n, most.get(root[tag], 0))
    return {tag: most[root[tag]] for tag in bent}


def _first_sizes(
    gmsh, model: Model, curves: sizes.Curves, sides: Sides, segments: int, largest: float, scale: float
) -> None:
    """Set the first sizes: vertices, bent curves by segments, lines along bars by number."""
    mesh = gmsh.model.mesh
    tags = [tag for _, tag in gmsh.model.getEntities(0)]
    at_vertex = np.minimum(largest, scale * sizes.vertex_sizes(curves, len(tags), model.dim, largest / scale))
    at_curve = sizes.curve_sizes(curves, at_vertex, largest)
    count = sizes.turn_segments(curves.turn, segments)
    count = np.ceil(np.maximum(count, np.where(curves.turn > 0.0, curves.length / largest, 0.0)))
    arcs = _arc_counts(curves, sides, count)
    number = {int(tag): k for k, tag in enumerate(curves.tag)}
    for tag, n in arcs.items():
        mesh.setTransfiniteCurve(tag, n + 1)
        at_curve[number[tag]] = curves.length[number[tag]] / n
    root = sizes.joined(sides.lines, sorted({line for pair in sides.lines for line in pair}))
    segment: dict[int, float] = {}
    for (arc, _), (line, _) in zip(sides.arcs, sides.lines, strict=True):
        r = root[line]
        segment[r] = min(at_curve[number[arc]], segment.get(r, math.inf))
    for line, r in root.items():
        length = curves.length[number[r]]
        n = max(sizes.bar_segments(length, segment[r]), math.ceil(length / largest))
        mesh.setTransfiniteCurve(line, n + 1)
        at_curve[number[line]] = max(segment[r], math.sqrt(segment[r] * length / n))
    round_ends = {int(v) for k in np.flatnonzero(curves.turn > 0.0) for v in curves.ends[k]}
    faces = fields.round_faces(gmsh, sides.corners, segments)
    made = fields.growing(
        gmsh,
        model.dim,
        largest,
        [(tag, float(h)) for k, (tag, h) in enumerate(zip(tags, at_vertex, strict=True)) if k not in round_ends],
        [
            (int(tag), float(h), float(length))
            for tag, h, length in zip(curves.tag, at_curve, curves.length, strict=True)
            if math.isfinite(h) and length > 0.0
        ],
        faces,
    )
    fields.use(gmsh, made + fields.constant(gmsh, faces))


def _field_sizes(
    gmsh, model: Model, curves: sizes.Curves, sides: Sides, segments: int, view: dict, scale: float
) -> None:
    """Set sizes from a field on an earlier mesh; bent curves and faces stay round."""
    from scipy.spatial import cKDTree

    wanted = scale * view["size"]
    tree = cKDTree(view["points"])
    count = sizes.turn_segments(curves.turn, segments).astype(float)
    for k in np.flatnonzero(curves.turn > 0.0):
        tag = int(curves.tag[k])
        (low,), (high,) = gmsh.model.getParametrizationBounds(1, tag)
        points = gmsh.model.getValue(1, tag, np.linspace(low, high, 17)).reshape(-1, 3)[:, : model.dim]
        count[k] = max(count[k], math.ceil(curves.length[k] * np.mean(1.0 / wanted[tree.query(points)[1]])))
    for tag, n in _arc_counts(curves, sides, count).items():
        gmsh.model.mesh.setTransfiniteCurve(tag, n + 1)
    _lines_alike(gmsh, sides)
    faces = fields.round_faces(gmsh, sides.corners, segments) if model.dim == 3 else []
    fields.use(gmsh, [fields.nodal(gmsh, view["points"], view["cells"], wanted), *fields.constant(gmsh, faces)])


def _lines_alike(gmsh, sides: Sides) -> None:
    """Make opposite lines of mapped faces carry the same nodes: copies of the first of each set."""
    root = sizes.joined(sides.lines, sorted({line for pair in sides.lines for line in pair}))
    for line, master in root.items():
        if line == master:
            continue
        shift = _midpoint(gmsh, line) - _midpoint(gmsh, master)
        affine = np.eye(4)
        affine[:3, 3] = shift
        gmsh.model.mesh.setPeriodic(1, [line], [master], affine.ravel().tolist())


def _midpoint(gmsh, curve: int) -> np.ndarray:
    (low,), (high,) = gmsh.model.getParametrizationBounds(1, curve)
    return np.asarray(gmsh.model.getValue(1, curve, [0.5 * (low + high)]))
