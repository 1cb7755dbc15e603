"""Parts -> an OpenCASCADE model in gmsh, in millimetres. Runs in the child process only.

All solids are fragmented together, so that neighbours share faces; each fragment goes to the last
part that contains it, and fragments of voids are removed. Round bodies are drawn from two half
circles: their side is then made of four-sided faces, which can be meshed with elements much longer
than they are wide (see :mod:`coldseam.geometry.sizes`).
"""

from __future__ import annotations

import math
import os
from dataclasses import dataclass, field

from coldseam.errors import GeometryError
from coldseam.geometry.parts import Part, Solid, fault

READABLE = (".step", ".stp", ".brep", ".iges", ".igs")
SCRIPTS = (".geo", ".geo_unrolled")


@dataclass(kw_only=True)
class Model:
    """What the child remembers of the geometry between requests.

    Parameters
    ----------
    dim
        2 or 3.
    bodies
        Entity tags (dimension ``dim``) of every named body, in order.
    size
        Diagonal of the bounding box, mm.
    """

    dim: int
    bodies: list[list[int]] = field(default_factory=list)
    size: float = 0.0


@dataclass(frozen=True, kw_only=True)
class Named:
    """A body before fragmentation: its name, where it came from, and its entities."""

    name: str
    solid: str | None
    part: int
    tags: list[int]


def build(gmsh, _, *, parts: list[Part], dim: int, trust_scripts: bool = False) -> tuple[Model, dict]:
    """Build the model.

    Returns
    -------
    model
        Kept by the child.
    about
        ``bodies``: list of (name, part, solid name or None, measure in mm² or mm³);
        ``groups``: {patch tag: [names]} of named faces; ``size``: diagonal, mm.

    Raises
    ------
    CaseError
        A body is displaced as a whole, touches no other, or its file can't be used.
    """
    gmsh.clear()
    gmsh.option.setString("Geometry.OCCTargetUnit", "MM")
    gmsh.option.setNumber("Geometry.OCCImportLabels", 1)
    gmsh.model.add("coldseam")
    named: list[Named] = []
    for p, part in enumerate(parts):
        if part.file is not None:
            named.extend(_imported(gmsh, part, p, dim, trust_scripts))
        else:
            tags = [_DRAW[solid.kind](gmsh.model.occ, solid) for solid in part.solids]
            named.append(Named(name=part.name, solid=None, part=p, tags=tags))
    owner = _fragment(gmsh, named, dim)
    kept = _assign(gmsh, named, parts, owner, dim)
    gmsh.model.occ.synchronize()
    _check_touching(gmsh, kept, parts, dim)
    low_high = gmsh.model.getBoundingBox(-1, -1)
    size = math.dist(low_high[:3], low_high[3:])
    measure = [sum(gmsh.model.occ.getMass(dim, tag) for tag in tags) for _, tags in kept]
    about = {
        "bodies": [(n.name, n.part, n.solid, m) for (n, _), m in zip(kept, measure, strict=True)],
        "groups": _groups(gmsh, dim),
        "size": size,
    }
    return Model(dim=dim, bodies=[tags for _, tags in kept], size=size), about


def _fragment(gmsh, named: list[Named], dim: int) -> dict[int, int]:
    """Fragment everything; return {piece: position in ``named`` of its owner}."""
    solids = [(dim, tag) for body in named for tag in body.tags]
    position = [k for k, body in enumerate(named) for _ in body.tags]
    if len(solids) == 1:
        return {solids[0][1]: 0}
    _, pieces = gmsh.model.occ.fragment(solids[:1], solids[1:])
    owner: dict[int, int] = {}
    for k, made in zip(position, pieces, strict=True):
        for d, tag in made:
            if d == dim:
                owner[tag] = max(k, owner.get(tag, -1))
    return owner


def _assign(gmsh, named: list[Named], parts: list[Part], owner: dict[int, int], dim: int):
    """Remove the voids' pieces; return [(named body, its pieces)] of the bodies that remain."""
    pieces: list[list[int]] = [[] for _ in named]
    for tag, k in sorted(owner.items()):
        pieces[k].append(tag)
    kept, gone = [], []
    for body, tags in zip(named, pieces, strict=True):
        part = parts[body.part]
        if part.void:
            gone.extend(tags)
            continue
        if not tags or sum(gmsh.model.occ.getMass(dim, tag) for tag in tags) <= 0.0:
            if part.implied:
                continue
            raise fault(
                ("body", part.source),
                f"'{body.name}' has no place left: later bodies or voids displace the whole of it",
            )
        kept.append((body, tags))
    if not kept:
        raise GeometryError("No body is left: every one is a void or displaced by one.")
    if gone:
        gmsh.model.occ.remove([(dim, tag) for tag in gone], recursive=True)
    return kept


def _check_touching(gmsh, kept, parts: list[Part], dim: int) -> None:
    """Refuse a body that shares no face with another."""
    if len(kept) < 2:
        return
    at_face: dict[int, set[int]] = {}
    for k, (_, tags) in enumerate(kept):
        for _, face in gmsh.model.getBoundary([(dim, tag) for tag in tags], combined=False, oriented=False):
            at_face.setdefault(face, set()).add(k)
    touching = {k for owners in at_face.values() if len(owners) > 1 for k in owners}
    for k, (body, _) in enumerate(kept):
        if k not in touching:
            raise fault(
                ("body", parts[body.part].source),
                f"'{body.name}' touches no other body: it lies outside them or a gap parts them",
            )


# ---------------------------------------------------------------- drawing


def _direction(start, end) -> tuple[float, tuple[float, float, float]]:
    along = [b - a for a, b in zip(start, end, strict=True)]
    length = math.hypot(*along)
    return length, tuple(x / length for x in along)


def _across(axis) -> tuple[float, float, float]:
    """Return a unit vector normal to the axis, along a coordinate axis where that is possible."""
    k = min(range(3), key=lambda n: (abs(axis[n]), n))
    unit = [1.0 if n == k else 0.0 for n in range(3)]
    dot = axis[k]
    across = [u - dot * a for u, a in zip(unit, axis, strict=True)]
    size = math.hypot(*across)
    return tuple(x / size for x in across)


def _circle(occ, centre, radius: float, u, v) -> int:
    """Draw a circle in the plane of u and v from two half circles; return its loop."""

    def at(a: float, b: float) -> int:
        return occ.addPoint(*(c + radius * (a * x + b * y) for c, x, y in zip(centre, u, v, strict=True)))

    left, right, top, bottom = at(-1, 0), at(1, 0), at(0, 1), at(0, -1)
    arcs = [
        occ.addCircleArc(right, top, left, center=False),
        occ.addCircleArc(left, bottom, right, center=False),
    ]
    loop = occ.addCurveLoop(arcs)
    occ.remove([(0, top), (0, bottom)])
    return loop


def _round_face(occ, centre, radii, axis) -> int:
    """Draw a disc, or a ring when there are two radii, across the axis."""
    u = _across(axis)
    v = _cross(axis, u)
    return occ.addPlaneSurface([_circle(occ, centre, radius, u, v) for radius in radii])


def _cross(a, b):
    return (a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0])


def _draw_box(occ, solid: Solid) -> int:
    size = [b - a for a, b in zip(solid.start, solid.end, strict=True)]
    if len(size) == 2:
        return occ.addRectangle(*solid.start, 0.0, *size)
    return occ.addBox(*solid.start, *size)


def _draw_cylinder(occ, solid: Solid) -> int:
    length, axis = _direction(solid.start, solid.end)
    face = _round_face(occ, solid.start, solid.radii, axis)
    return _drawn_out(occ, face, [length * a for a in axis])


def _drawn_out(occ, face: int, vector) -> int:
    """Return the volume that a face sweeps along a vector."""
    swept = occ.extrude([(2, face)], *vector)
    return next(tag for d, tag in swept if d == 3)


def _draw_cone(occ, solid: Solid) -> int:
    vector = [b - a for a, b in zip(solid.start, solid.end, strict=True)]
    if abs(solid.radii[0] - solid.radii[1]) < 1e-7 * max(solid.radii):
        return _draw_cylinder(occ, Solid(kind="cylinder", start=solid.start, end=solid.end, radii=solid.radii[:1]))
    return occ.addCone(*solid.start, *vector, *solid.radii)


def _draw_sphere(occ, solid: Solid) -> int:
    return occ.addSphere(*solid.start, solid.radii[0])


def _draw_round(occ, solid: Solid) -> int:
    if solid.half:
        return _half_round(occ, solid.start, solid.radii)
    return _round_face(occ, (*solid.start[:2], 0.0), solid.radii, (0.0, 0.0, 1.0))


def _half_round(occ, centre, radii) -> int:
    """Draw the right half of a disc, or of a ring when there are two radii, about the axis x = 0."""
    x, y = centre[:2]
    ends, arcs, middles = [], [], []
    for radius in radii:
        low, high = occ.addPoint(x, y - radius, 0.0), occ.addPoint(x, y + radius, 0.0)
        ends.append((low, high))
        middles.append((0, occ.addPoint(x + radius, y, 0.0)))
        arcs.append(occ.addCircleArc(low, middles[-1][1], high, center=False))
    if len(radii) == 1:
        curves = [arcs[0], occ.addLine(ends[0][1], ends[0][0])]
    else:
        (low, high), (inner_low, inner_high) = ends
        curves = [arcs[0], occ.addLine(high, inner_high), arcs[1], occ.addLine(inner_low, low)]
    face = occ.addPlaneSurface([occ.addCurveLoop(curves)])
    occ.remove(middles)
    return face


def _draw_polygon(occ, solid: Solid) -> int:
    a = 2 if solid.axis is None else "xyz".index(solid.axis)
    low = solid.start[0] if solid.axis is not None else 0.0
    points = []
    for point in solid.points:
        place = [0.0, 0.0, 0.0]
        place[a], place[(a + 1) % 3], place[(a + 2) % 3] = low, *point
        points.append(occ.addPoint(*place))
    lines = [occ.addLine(p, q) for p, q in zip(points, points[1:] + points[:1], strict=True)]
    face = occ.addPlaneSurface([occ.addCurveLoop(lines)])
    if solid.axis is None:
        return face
    vector = [0.0, 0.0, 0.0]
    vector[a] = solid.end[0] - low
    return _drawn_out(occ, face, vector)


_DRAW = {
    "box": _draw_box,
    "cylinder": _draw_cylinder,
    "tube": _draw_cylinder,
    "cone": _draw_cone,
    "sphere": _draw_sphere,
    "disc": _draw_round,
    "ring": _draw_round,
    "polygon": _draw_polygon,
}


# ---------------------------------------------------------------- files


def _imported(gmsh, part: Part, p: int, dim: int, trust_scripts: bool):
    """Read a CAD file once per copy; return its named solids."""
    path = ("body", part.source, "file")
    _check_file(part.file, path, trust_scripts)
    by_name: dict[str, list[int]] = {}
    names: list[str] = []
    for solid in part.solids:
        read = _read_shapes(gmsh, solid, path, dim)
        names = names or [name for _, name in read]  # a copy's solids are called as the first one's
        for ((_, tag), _), name in zip(read, names, strict=True):
            by_name.setdefault(name, []).append(tag)
    single = len(by_name) == 1
    return [
        Named(name=part.name if single else f"{part.name}/{name}", solid=name, part=p, tags=tags)
        for name, tags in by_name.items()
    ]


def _check_file(file: str, path, trust_scripts: bool) -> None:
    ending = os.path.splitext(file)[1].lower()
    if ending in SCRIPTS and not trust_scripts:
        raise fault(path, f"'{file}' is a script and could run commands on this machine; it is not read")
    if ending not in READABLE + SCRIPTS:
        raise fault(path, f"'{file}' has no known ending; accepted: {', '.join(READABLE)}")
    if not os.path.isfile(file):
        raise fault(path, f"there is no file '{file}'")
    if os.path.getsize(file) == 0:
        raise fault(path, f"'{file}' is empty")


def _read_shapes(gmsh, solid: Solid, path, dim: int):
    """Return [(dim_tag, name)] of the shapes of highest dimension in a file."""
    try:
        shapes = gmsh.model.occ.importShapes(solid.path, highestDimOnly=True)
    except Exception as error:
        raise fault(path, f"'{solid.path}' can't be read as {os.path.splitext(solid.path)[1]}: {error}") from error
    wanted = [shape for shape in shapes if shape[0] == dim]
    if not wanted:
        found = {3: "solids", 2: "open surfaces", 1: "curves", 0: "points"}[max((d for d, _ in shapes), default=0)]
        need = "solids" if dim == 3 else "faces"
        raise fault(path, f"'{solid.path}' holds no {need}, only {found if shapes else 'nothing at all'}")
    others = [shape for shape in shapes if shape[0] != dim]
    if others:
        gmsh.model.occ.remove(others, recursive=True)
    if any(solid.start):
        gmsh.model.occ.translate(wanted, *solid.start, *([0.0] * (3 - len(solid.start))))
    gmsh.model.occ.synchronize()
    names = [_last(gmsh.model.getEntityName(*shape)) for shape in wanted]
    return [(shape, name or f"solid {k + 1}") for k, (shape, name) in enumerate(zip(wanted, names, strict=True))]


def _last(label: str) -> str:
    """Return the last part of gmsh's label path (``Shapes/assembly/part``)."""
    return label.rpartition("/")[2].strip()


def _groups(gmsh, dim: int) -> dict[int, list[str]]:
    """Return the names of imported faces, where the file's reader gives any and nothing has cut the face."""
    groups: dict[int, list[str]] = {}
    for d, tag in gmsh.model.getEntities(dim - 1):
        label = _last(gmsh.model.getEntityName(d, tag))
        if label:
            groups.setdefault(tag, []).append(label)
    return groups
