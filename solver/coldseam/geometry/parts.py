"""What the case's bodies mean as solids: plain records in order, independent of any CAD kernel.

A :class:`Part` is one named body of the mesh (or a void). Parts come in the order of displacement:
where two overlap, the later one has the place. Lengths are **millimetres** from here to the child
process that runs gmsh, because CAD kernels' tolerances are absolute (1e-7) and meant for them.

An enclosure becomes nested boxes from the outermost layer to the innermost, then its cavity and
its openings as voids; displacement does the rest. Where a face has layers of its own, they lie
within the outline of what they cover (the wall's own layers run past them to the corner); a layer
number that only own faces have takes the whole outline, z over y over x.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from coldseam.errors import CaseError, Fault, KeyPath

MM = 1000.0
"""Millimetres in a metre."""

AXES = "xyz"


@dataclass(frozen=True, kw_only=True)
class Solid:
    """One primitive, lengths in mm.

    Parameters
    ----------
    kind
        ``box``, ``cylinder``, ``sphere``, ``cone``, ``tube``, ``polygon``, ``disc``, ``ring``, ``file``.
    start, end
        Corners of a box, ends of the axis of a cylinder, cone or tube; ``start`` is the centre of
        a sphere, disc or ring and the offset of a file's shapes.
    radii
        Outer, then inner radius; for a cone those at its two ends.
    points
        Corners of a polygon in the plane, or in the plane across ``axis``.
    axis
        Axis along which a polygon is drawn out from ``start[0]`` to ``end[0]``; None in the plane.
    path
        File of the shapes.
    half
        True for the right half only of a disc or ring centred on the axis of a turned section.
    """

    kind: str
    start: tuple[float, ...] = ()
    end: tuple[float, ...] = ()
    radii: tuple[float, ...] = ()
    points: tuple[tuple[float, float], ...] = ()
    axis: str | None = None
    path: str | None = None
    half: bool = False


@dataclass(frozen=True, kw_only=True)
class Part:
    """One named body of the mesh, or a void: the union of its solids.

    Parameters
    ----------
    name
        Name in the answers.
    material
        Key in the case's materials; None for a void, and for a file whose solids have their own.
    source
        Position of the ``[[body]]``.
    solids
        The primitives (several where the body is repeated).
    materials
        Of a file: solid name -> material.
    implied
        True when the part only follows from another choice (a cavity, a layer at an open face) and
        may be displaced as a whole without being an error.
    """

    name: str
    material: str | None
    source: int
    solids: tuple[Solid, ...]
    materials: dict[str, str] = field(default_factory=dict)
    implied: bool = False

    @property
    def void(self) -> bool:
        """Whether the part cuts out instead of filling."""
        return self.material is None and not self.materials

    @property
    def file(self) -> str | None:
        """The path of the file that the part is read from, or None."""
        return self.solids[0].path


def expand(case) -> list[Part]:
    """Return the parts of a case in order of displacement.

    Raises
    ------
    CaseError
        Bodies without extent, on the wrong side of the axis, or in the wrong number of dimensions.
    """
    dim = case.model.dimensions
    faults: list[Fault] = []
    parts: list[Part] = []
    for i, body in enumerate(case.body):
        try:
            made = _body_parts(body, i, dim)
            if case.model.axisymmetric:
                made = [_halved(part) for part in made]
                _check_axis(made, i)
        except CaseError as error:
            faults.extend(error.faults)
            continue
        parts.extend(made)
    if faults:
        raise CaseError(faults)
    return parts


def fault(path: KeyPath, what: str) -> CaseError:
    """Return the error of one fault."""
    return CaseError([Fault(path=path, what=what)])


def _body_parts(body, i: int, dim: int) -> list[Part]:
    """Return the parts of one ``[[body]]``, repeats included."""
    if getattr(body, "enclosure", None) is not None:
        made = _enclosure(body, i, dim)
    else:
        material = None if body.void else body.material
        materials = dict(getattr(body, "materials", None) or {})
        made = [Part(name=body.name, material=material, source=i, solids=(_solid(body, i, dim),), materials=materials)]
    shifts = _shifts(getattr(body, "repeat", None), dim)
    return [_repeated(part, shifts) for part in made]


def _shifts(repeat, dim: int) -> list[tuple[float, ...]]:
    """Return the offsets (mm) of all copies of a repeated body, the original first."""
    shifts = [(0.0,) * dim]
    if repeat is None:
        return shifts
    for step, count in zip(repeat.step, repeat.count, strict=True):
        step = _mm(step)
        shifts = [
            tuple(a + k * b for a, b in zip(shift, step, strict=True)) for k in range(int(count)) for shift in shifts
        ]
    return shifts


def _repeated(part: Part, shifts: list[tuple[float, ...]]) -> Part:
    solids = tuple(moved(solid, shift) for shift in shifts for solid in part.solids)
    return Part(**{**part.__dict__, "solids": solids})


def moved(solid: Solid, shift: tuple[float, ...]) -> Solid:
    """Return the solid moved by a vector in mm."""
    if not any(shift):
        return solid
    if solid.kind != "polygon":
        start = _sum(solid.start, shift)
        return Solid(**{**solid.__dict__, "start": start, "end": _sum(solid.end, shift) if solid.end else ()})
    if solid.axis is None:
        points = tuple(_sum(point, shift) for point in solid.points)
        return Solid(**{**solid.__dict__, "points": points})
    a = AXES.index(solid.axis)
    across = (shift[(a + 1) % 3], shift[(a + 2) % 3])
    points = tuple(_sum(point, across) for point in solid.points)
    along = (shift[a],)
    return Solid(
        **{**solid.__dict__, "points": points, "start": _sum(solid.start, along), "end": _sum(solid.end, along)}
    )


def _sum(a, b) -> tuple[float, ...]:
    return tuple(x + y for x, y in zip(a, b, strict=True))


def _mm(vector) -> tuple[float, ...]:
    return tuple(float(x) * MM for x in vector)


def _solid(body, i: int, dim: int) -> Solid:
    """Return the primitive of a body that has one shape."""
    kinds = ("box", "cylinder", "sphere", "cone", "tube", "polygon", "disc", "ring", "file")
    kind = next((k for k in kinds if getattr(body, k, None) is not None), None)
    if kind is None:
        raise fault(("body", i), "has no shape that can be built here")
    allowed = ("box", "polygon", "disc", "ring", "file") if dim == 2 else kinds[:6] + ("file",)
    if kind not in allowed:
        raise fault(("body", i, kind), f"is no shape in {dim} dimensions; accepted: {', '.join(allowed)}")
    shape = getattr(body, kind)
    if kind == "file":
        return Solid(kind="file", start=(0.0,) * dim, path=str(shape))
    solid = _PRIMITIVES[kind](shape, dim)
    _check_extent(solid, ("body", i, kind))
    return solid


def _box(shape, dim: int) -> Solid:
    start, end = _mm(shape.start), _mm(shape.end)
    low = tuple(min(a, b) for a, b in zip(start, end, strict=True))
    high = tuple(max(a, b) for a, b in zip(start, end, strict=True))
    return Solid(kind="box", start=low, end=high)


def _radius(shape, prefix: str = "") -> float:
    """Return a radius in mm from ``radius`` or ``diameter``, whichever is given."""
    diameter = getattr(shape, f"{prefix}diameter", None)
    radius = getattr(shape, f"{prefix}radius", None)
    return MM * float(radius if diameter is None else 0.5 * diameter)


def _cylinder(shape, dim: int) -> Solid:
    return Solid(kind="cylinder", start=_mm(shape.start), end=_mm(shape.end), radii=(_radius(shape),))


def _sphere(shape, dim: int) -> Solid:
    return Solid(kind="sphere", start=_mm(shape.center), radii=(_radius(shape),))


def _cone(shape, dim: int) -> Solid:
    radii = (0.5 * MM * float(shape.diameter_from), 0.5 * MM * float(shape.diameter_to))
    return Solid(kind="cone", start=_mm(shape.start), end=_mm(shape.end), radii=radii)


def _tube(shape, dim: int) -> Solid:
    radii = (_radius(shape, "outer_"), _radius(shape, "inner_"))
    return Solid(kind="tube", start=_mm(shape.start), end=_mm(shape.end), radii=radii)


def _disc(shape, dim: int) -> Solid:
    return Solid(kind="disc", start=_mm(shape.center), radii=(_radius(shape),))


def _ring(shape, dim: int) -> Solid:
    return Solid(kind="ring", start=_mm(shape.center), radii=(_radius(shape, "outer_"), _radius(shape, "inner_")))


def _polygon(shape, dim: int) -> Solid:
    points = tuple(_mm(point) for point in shape.points)
    if len(points) > 1 and points[0] == points[-1]:
        points = points[:-1]
    if dim == 2:
        return Solid(kind="polygon", points=points)
    low, high = sorted((MM * float(shape.start), MM * float(shape.end)))
    return Solid(kind="polygon", points=points, axis=shape.axis, start=(low,), end=(high,))


_PRIMITIVES = {
    "box": _box,
    "cylinder": _cylinder,
    "sphere": _sphere,
    "cone": _cone,
    "tube": _tube,
    "polygon": _polygon,
    "disc": _disc,
    "ring": _ring,
}


def _check_extent(solid: Solid, path: KeyPath) -> None:
    """Refuse a primitive of zero size."""
    small = 1e-6  # mm: ten times the CAD kernel's own tolerance
    if solid.kind == "box" and min(b - a for a, b in zip(solid.start, solid.end, strict=True)) <= small:
        raise fault(path, "has no extent: 'from' and 'to' must differ in every coordinate")
    if solid.kind in ("cylinder", "cone", "tube") and sum(
        (b - a) ** 2 for a, b in zip(solid.start, solid.end, strict=True)
    ) <= (small * small):
        raise fault(path, "has no extent: 'from' and 'to' must differ")
    if solid.kind in ("tube", "ring") and not solid.radii[0] - small > solid.radii[1] > small:
        raise fault(path, "needs an outer diameter larger than the inner one, and both above zero")
    if solid.kind == "cone" and (min(solid.radii) < 0 or max(solid.radii) <= small):
        raise fault(path, "needs one diameter above zero and none below")
    if solid.kind in ("cylinder", "sphere", "disc") and solid.radii[0] <= small:
        raise fault(path, "has no extent: the diameter must be above zero")
    if solid.kind == "polygon":
        _check_polygon(solid, path, small)


def _check_polygon(solid: Solid, path: KeyPath, small: float) -> None:
    """Refuse polygons without area, with sides that cross, or without length."""
    points = solid.points
    if len(points) < 3:
        raise fault(path, "needs at least three corners")
    n = len(points)
    sides = [(points[k], points[(k + 1) % n]) for k in range(n)]
    if any(abs(a[0] - b[0]) + abs(a[1] - b[1]) <= small for a, b in sides):
        raise fault(path, "has two neighbouring corners at the same place")
    area = 0.5 * sum(a[0] * b[1] - b[0] * a[1] for a, b in sides)
    if abs(area) <= small * max(abs(a[0] - b[0]) + abs(a[1] - b[1]) for a, b in sides):
        raise fault(path, "has no area")
    for k in range(n):
        for m in range(k + 2, n):
            if (m + 1) % n != k and _cross(*sides[k], *sides[m]):
                raise fault(path, f"has sides that cross: side {k + 1} and side {m + 1}")
    if solid.axis is not None and solid.end[0] - solid.start[0] <= small:
        raise fault(path, "has no extent: 'from' and 'to' must differ")


def _cross(a, b, c, d) -> bool:
    """Whether the open segments ab and cd cross."""

    def side(p, q, r):
        return (q[0] - p[0]) * (r[1] - p[1]) - (q[1] - p[1]) * (r[0] - p[0])

    return side(a, b, c) * side(a, b, d) < 0 and side(c, d, a) * side(c, d, b) < 0


def _halved(part: Part) -> Part:
    """Return the part with discs and rings about the axis x = 0, which mean spheres, cut to their right half."""
    solids = tuple(
        replace(solid, half=True) if solid.kind in ("disc", "ring") and abs(solid.start[0]) < 1e-6 else solid
        for solid in part.solids
    )
    return replace(part, solids=solids)


def _check_axis(parts: list[Part], i: int) -> None:
    """Refuse parts that reach across the axis x = 0 of a turned section."""
    for part in parts:
        for solid in part.solids:
            if solid.kind == "polygon":
                low = min(point[0] for point in solid.points)
            elif solid.kind in ("disc", "ring") and not solid.half:
                low = solid.start[0] - solid.radii[0]
            elif solid.kind == "box":
                low = solid.start[0]
            else:
                continue
            if low < -1e-6:
                raise fault(("body", i), f"reaches across the axis, to x = {low:g} mm; a turned section has x >= 0")


def _faces(dim: int) -> list[str]:
    return [sign + axis for axis in AXES[:dim] for sign in "-+"]


def _enclosure(body, i: int, dim: int) -> list[Part]:
    """Return the nested layers, cavity and openings of an enclosure."""
    shape = body.enclosure
    inside = _box(shape.inside, dim)
    _check_extent(inside, ("body", i, "enclosure", "inside"))
    default = _layers(shape.layers)
    own = {face: _layers(layers) for face, layers in (shape.faces or {}).items()}
    for face in own:
        if face not in _faces(dim):
            raise fault(("body", i, "enclosure", "faces", face), f"is no face here; accepted: {', '.join(_faces(dim))}")
    by_face = {face: own.get(face, default) for face in _faces(dim)}
    count = max((len(layers) for layers in by_face.values()), default=0)
    if count == 0:
        raise fault(("body", i, "enclosure"), "has no layer on any face")
    boxes = [inside]
    for k in range(count):
        boxes.append(_grown(boxes[-1], {f: ls[k][1] if k < len(ls) else 0.0 for f, ls in by_face.items()}))

    parts = []
    for k in reversed(range(count)):
        parts.extend(_shell(body.name, i, k, default, own, boxes[k], boxes[k + 1]))
    parts.append(Part(name=f"{body.name}/cavity", material=None, source=i, solids=(inside,), implied=True))
    for j, opening in enumerate(shape.openings or ()):
        path = ("body", i, "enclosure", "openings", j)
        solid = _opening(opening, inside, boxes[-1], path, dim)
        parts.append(Part(name=f"{body.name}/opening {j + 1}", material=None, source=i, solids=(solid,), implied=True))
    return parts


def _layers(layers) -> list[tuple[str, float]]:
    return [(material, MM * float(thickness)) for material, thickness in layers or ()]


def _grown(box: Solid, by: dict[str, float]) -> Solid:
    """Return the box with each face moved outwards."""
    axes = AXES[: len(box.start)]
    start = tuple(x - by["-" + axis] for x, axis in zip(box.start, axes, strict=True))
    end = tuple(x + by["+" + axis] for x, axis in zip(box.end, axes, strict=True))
    return Solid(kind="box", start=start, end=end)


def _shell(name: str, i: int, k: int, default, own, inner: Solid, outer: Solid) -> list[Part]:
    """Return layer ``k`` (from 0, inside out): the shell between two boxes, own faces after it."""
    parts = []
    wraps = k < len(default)
    if wraps:
        material = default[k][0]
        label = f"{name}/layer {k + 1} {material}"
        parts.append(Part(name=label, material=material, source=i, solids=(outer,), implied=True))
    for face in sorted(own, key=lambda f: (f[1], f[0])):
        if k >= len(own[face]):
            continue
        material, _ = own[face][k]
        outline = inner if wraps else outer
        solid = _slab(face, outline, inner, outer)
        parts.append(Part(name=f"{name}/{face} layer {k + 1} {material}", material=material, source=i, solids=(solid,)))
    return parts


def _slab(face: str, outline: Solid, inner: Solid, outer: Solid) -> Solid:
    """Return the slab on one face between the planes of two boxes, with the outline of a third."""
    a = AXES.index(face[1])
    start, end = list(outline.start), list(outline.end)
    if face[0] == "+":
        start[a], end[a] = inner.end[a], outer.end[a]
    else:
        start[a], end[a] = outer.start[a], inner.start[a]
    return Solid(kind="box", start=tuple(start), end=tuple(end))


def _opening(opening, inside: Solid, outer: Solid, path: KeyPath, dim: int) -> Solid:
    """Return the void that an opening cuts through all layers of its face."""
    if opening.face not in _faces(dim):
        raise fault((*path, "face"), f"is no face here; accepted: {', '.join(_faces(dim))}")
    a = AXES.index(opening.face[1])
    across = [axis for axis in range(dim) if axis != a]
    start, end = list(inside.start), list(inside.end)
    low, high = _mm(_tuple(opening.start)), _mm(_tuple(opening.end))
    for axis, one, other in zip(across, low, high, strict=True):
        start[axis], end[axis] = min(one, other), max(one, other)
        if start[axis] < outer.start[axis] or end[axis] > outer.end[axis]:
            raise fault(path, f"reaches beyond the enclosure in {AXES[axis]}")
    solid = _slab(opening.face, Solid(kind="box", start=tuple(start), end=tuple(end)), inside, outer)
    _check_extent(solid, path)
    return solid


def _tuple(value):
    return tuple(value) if isinstance(value, (tuple, list)) else (value,)
