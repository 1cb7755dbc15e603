"""The shapes of bodies, lengths in m. The keys ``from`` and ``to`` are ``start`` and ``end`` here."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Annotated, Any, ClassVar, Literal, NamedTuple

from pydantic import Field, ValidationInfo, WrapValidator

from coldseam.case.tables import Context, Table, Trouble, context_of, fail, listing
from coldseam.case.values import Amount, Length, MaterialRef, Pair, Ref, Size, SizeOrZero, Vector

AXES = ("x", "y", "z")
MOST_COPIES = 10_000  # of one body; each is a solid of its own for the mesher
FACES = ("-x", "+x", "-y", "+y", "-z", "+z")


class Layer(NamedTuple):
    """One layer of a wall: the key of its material and its thickness, m."""

    material: MaterialRef
    thickness: Size


def _layer(value: Any, handler: Any, info: ValidationInfo) -> Layer:
    """Read ``["material", thickness]`` with one clear fault for each of the two."""
    if isinstance(value, Layer):
        return value
    if not isinstance(value, (list, tuple)) or len(value) != 2:
        raise ValueError('a layer is a pair: ["material", thickness]')
    context = context_of(info)
    troubles: list[Trouble] = []
    read: list[Any] = []
    for position, reader in enumerate((Ref("material").read, Amount("length", above=0.0).read)):
        try:
            read.append(reader(value[position], context))
        except ValueError as error:
            troubles.append(((position,), str(error)))
    if troubles:
        raise fail("layer", troubles, value)
    return Layer(*read)


AnyLayer = Annotated[Layer, WrapValidator(_layer)]
Layers = tuple[AnyLayer, ...]


class Extent(Table):
    """An upright box from its lowest to its highest corner, m."""

    start: Vector = Field(alias="from", description="lowest corner, mm")
    end: Vector = Field(alias="to", description="highest corner, mm")


class Within(Extent):
    """A box that selects what lies wholly inside it; it may be flat."""

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield directions in which the box is inside out."""
        for axis, low, high in zip(AXES, self.start, self.end, strict=False):
            if low > high:
                yield ("to",), f"{axis} must not be less than in from"


class Box(Extent):
    """A box with sides along the axes."""

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield directions in which the box has no size."""
        for axis, low, high in zip(AXES, self.start, self.end, strict=False):
            if low >= high:
                size = "the box has no size" if low == high else "from and to are the wrong way round"
                yield ("to",), f"{size} along {axis}: {axis} must be greater than in from"
        if context.axisymmetric and self.start[0] < 0:
            yield ("from",), "x is the radius of an axisymmetric section and can't be negative"


class _Round(Table):
    """What has one diameter or radius; after reading both are set."""

    ONE_OF: ClassVar = (("diameter", "radius"),)
    diameter: Size | None = Field(None, description="mm")
    radius: Size | None = Field(None, description="mm")

    def model_post_init(self, context: Any) -> None:
        """Fill in the other of diameter and radius (pydantic's frozen check is for users)."""
        if self.radius is None and self.diameter is not None:
            self.__dict__["radius"] = self.diameter / 2
        elif self.diameter is None and self.radius is not None:
            self.__dict__["diameter"] = 2 * self.radius


class _Along(Table):
    """What runs along a straight line between two points."""

    start: Vector = Field(alias="from", description="one end of the axis, mm")
    end: Vector = Field(alias="to", description="other end of the axis, mm")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault when the line has no length."""
        if self.start == self.end:
            yield ("to",), "the body has no length: to must differ from from"


class Cylinder(_Along, _Round):
    """A solid cylinder; ``diameter`` and ``radius`` are both set."""


class Sphere(_Round):
    """A ball; ``diameter`` and ``radius`` are both set."""

    center: Vector = Field(description="mm")


class Disc(_Round):
    """A disc in a cross-section; ``diameter`` and ``radius`` are both set."""

    center: Vector = Field(description="mm")


class Cone(_Along):
    """A cone or the stump of one; one of its diameters may be zero."""

    diameter_from: SizeOrZero = Field(description="diameter at from, mm")
    diameter_to: SizeOrZero = Field(description="diameter at to, mm")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault when the cone has no size."""
        yield from super().check(context)
        if self.diameter_from == 0 and self.diameter_to == 0:
            yield ("diameter_to",), "only one of diameter_from and diameter_to may be 0"


class _Hollow(Table):
    """What has an outer and an inner diameter."""

    outer_diameter: Size = Field(description="mm")
    inner_diameter: Size = Field(description="mm")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault when there is no wall."""
        yield from super().check(context)
        if self.inner_diameter >= self.outer_diameter:
            yield ("inner_diameter",), "must be less than outer_diameter"


class Tube(_Hollow, _Along):
    """A round tube."""


class Ring(_Hollow):
    """A round ring in a cross-section."""

    center: Vector = Field(description="mm")


class Polygon(Table):
    """A polygon in a cross-section, or drawn out along an axis.

    ``points`` are (y, z) for axis x, (z, x) for y, (x, y) for z, and (x, y) in two dimensions.
    """

    points: tuple[Pair, ...] = Field(description="corners in order, mm, without repeating the first")
    axis: Literal["x", "y", "z"] | None = Field(None, description="direction in which it is drawn out (3D only)")
    start: Length | None = Field(None, alias="from", description="where it begins along the axis, mm (3D only)")
    end: Length | None = Field(None, alias="to", description="where it ends along the axis, mm (3D only)")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield faults of the outline and of the drawing out."""
        drawn = {"axis": self.axis, "from": self.start, "to": self.end}
        if context.dim == 3:
            yield from (((key,), "is required in 3D and missing") for key, value in drawn.items() if value is None)
        if context.dim == 2:
            yield from (((key,), "is for 3D only") for key, value in drawn.items() if value is not None)
        if self.start is not None and self.end is not None and self.start >= self.end:
            yield ("to",), "must be greater than from"
        wrong = outline_fault(self.points)
        if wrong:
            yield ("points",), wrong
        if context.axisymmetric and any(point[0] < 0 for point in self.points):
            yield ("points",), "x is the radius of an axisymmetric section and can't be negative"


def outline_fault(points: tuple[tuple[float, float], ...]) -> str:
    """Return what is wrong with a closed outline, or nothing.

    Parameters
    ----------
    points
        Corners in order, m, shape (n, 2).
    """
    import numpy as np

    if len(points) < 3:
        return "needs at least three points"
    first = np.array(points, dtype=float)
    second = np.roll(first, -1, axis=0)
    same = np.flatnonzero(np.all(first == second, axis=1))
    if len(same):
        where = int(same[0]) + 1
        return f"points {where} and {where % len(points) + 1} are the same; the first point must not be repeated"
    span = float(np.max(np.ptp(first, axis=0)))
    area = 0.5 * float(np.sum(first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]))
    if abs(area) <= 1e-12 * span**2:
        return "the polygon has no area"
    crossing = _crossing(first, second)
    return f"sides {crossing[0] + 1} and {crossing[1] + 1} of the polygon cross or touch" if crossing else ""


def _crossing(first: Any, second: Any) -> tuple[int, int] | None:
    """Return two sides of an outline that meet and are not neighbours, or None."""
    import numpy as np

    def turn(a: Any, b: Any, c: Any) -> Any:
        cross = (b[..., 0] - a[..., 0]) * (c[..., 1] - a[..., 1]) - (b[..., 1] - a[..., 1]) * (c[..., 0] - a[..., 0])
        return np.sign(cross)

    n = len(first)
    for i in range(n - 2):
        others = np.arange(i + 2, n if i else n - 1)
        a, b, c, d = first[i], second[i], first[others], second[others]
        apart = (turn(a, b, c) * turn(a, b, d) > 0) | (turn(c, d, a) * turn(c, d, b) > 0)
        low, high = np.minimum(a, b), np.maximum(a, b)
        clear = np.any((np.maximum(c, d) < low) | (np.minimum(c, d) > high), axis=1)
        met = others[~apart & ~clear]
        if len(met):
            return i, int(met[0])
    return None


Face = Literal["-x", "+x", "-y", "+y", "-z", "+z"]


class Opening(Table):
    """A rectangular hole in one face of an enclosure, through all of its layers."""

    face: Face = Field(description='which face: "-x" ... "+z"')
    start: Pair = Field(alias="from", description="lowest corner in the face: its two coordinates in axis order, mm")
    end: Pair = Field(alias="to", description="highest corner in the face, mm")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield directions in which the opening has no size."""
        for axis, low, high in zip(self.axes, self.start, self.end, strict=True):
            if low >= high:
                yield ("to",), f"the opening has no size along {axis}: {axis} must be greater than in from"

    @property
    def axes(self) -> tuple[str, str]:
        """The two directions in the face, in axis order."""
        first, second = (axis for axis in AXES if axis != self.face[1])
        return first, second


class Enclosure(Table):
    """A hollow box: its inside, and its layers from inside out."""

    inside: Box = Field(description="the hollow inside")
    layers: Layers = Field((), description='layers from inside out: ["material", thickness in mm]')
    faces: dict[Face, Layers] = Field({}, description="faces with layers of their own; [] leaves a face open")
    openings: tuple[Opening, ...] = Field((), description="holes")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield faces without a word on their layers, and openings off their face."""
        silent = [face for face in FACES if face not in self.faces]
        if not self.layers and silent:
            yield ("layers",), f"is required unless faces gives all six; no layers for {listing(silent)}"
        if not self.layers and not any(self.faces.values()):
            yield ("layers",), "every face is open: the enclosure has no walls"
        for position, opening in enumerate(self.openings):
            if self.faces.get(opening.face) == ():
                yield ("openings", position, "face"), f"the face {opening.face} is open already"
            for n, axis in enumerate(opening.axes):
                low, high = (corner[AXES.index(axis)] for corner in (self.inside.start, self.inside.end))
                slack = 1e-9 * (high - low)
                if opening.start[n] < low - slack or opening.end[n] > high + slack:
                    yield (("openings", position),
                           f"the opening must lie inside the enclosure's {axis} from {1e3 * low:g} to "
                           f"{1e3 * high:g} mm")  # fmt: skip


class Repeat(Table):
    """Copies of a body at equal steps, in one or more directions."""

    step: tuple[Vector, ...] = Field(description="one vector per direction, mm")
    count: tuple[Annotated[int, Field(strict=True, ge=1)], ...] = Field(description="number per direction")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield mismatched lists and steps of no length."""
        if not self.step or len(self.step) != len(self.count):
            yield ("count",), f"needs one number for each of the {len(self.step)} vectors in step"
        copies = math.prod(self.count)
        if copies > MOST_COPIES:
            yield ("count",), f"makes {copies:_} copies; at most {MOST_COPIES:_} can be meshed".replace("_", " ")
        for position, vector in enumerate(self.step):
            if not any(vector):
                yield ("step", position), "the step has no length"
