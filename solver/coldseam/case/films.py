"""Heat exchange of a surface with what is outside it: convection by name, radiation, sun; and fluids.

The laws are evaluated in :mod:`coldseam.physics`. Beside ``convection`` and ``radiation`` a ``film`` of the
same table is the convective part alone.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any, ClassVar, Literal

from pydantic import Field, WithJsonSchema

from coldseam.case.schedules import Changing, Schedule
from coldseam.case.tables import Context, Table, Trouble, fail, listing
from coldseam.case.timing import ScheduledTemperature
from coldseam.case.values import Amount, Emissivity, Film, Numbers, Ref, Size, checked

if TYPE_CHECKING:
    from coldseam.case.model import Boundary, Space

FREE = (
    "vertical", "inclined", "facing up", "facing down", "horizontal cylinder", "vertical cylinder", "sphere",
    "inside of a box",
)  # fmt: skip
"""Surfaces of free and mixed convection."""
FORCED = ("plate", "cylinder", "sphere", "tube bank", "duct")
"""Surfaces of forced convection."""
STANDARD = ("up", "horizontal", "down", "outside")
"""Directions of heat flow at an inside surface, and the outside surface, of ISO 6946."""
ATMOSPHERE = 101325.0
"""Pa."""
TYPICAL = {"free": 3.0, "forced": 15.0, "mixed": 8.0, "standard": 3.0}
TYPICAL_RADIATION = 5.0
"""Film coefficients to start from, W/(m² K)."""

Speed = Annotated[float, Amount("speed", at_least=0.0)]
Pressure = Annotated[
    float, Amount("pressure", at_least=0.5e5, at_most=2.0e5, hint=" (the air properties hold for 0.5 to 2 bar)")
]
Angle = Annotated[float, Amount("angle", at_least=0.0, at_most=60.0, hint=" (tilt from the vertical, 0 to 60 degrees)")]
Irradiance = Annotated[float | Schedule, Changing(Amount("flux", at_least=0.0))]
Share = Annotated[float, Amount("ratio", at_least=0.0, at_most=1.0)]


class Convection(Table):
    """Convection by name; the film coefficient follows from the answer."""

    kind: Literal["free", "forced", "mixed", "standard"]
    surface: str = Field(
        description=f"free, mixed: {listing(FREE, last='or')}; forced: {listing(FORCED, last='or')}; "
        f"standard: {listing(STANDARD, last='or')}"
    )
    length: Size | None = Field(
        None,
        description="mm: height of a vertical or inclined surface, area over perimeter of a level one, diameter of a "
        "cylinder or sphere, length of a plate along the flow, hydraulic diameter of a duct",
    )
    tilt: Angle | None = Field(None, description="of an inclined surface from the vertical, degrees")
    diameter: Size | None = Field(None, description="of a vertical cylinder, mm")
    box: Annotated[tuple[float, ...], Numbers(Amount("length", above=0.0), 3)] | None = Field(
        None, description="inside of a box: width, depth, height, mm"
    )
    speed: Speed | None = Field(None, description="of the flow or the wind, m/s")
    pitch: Annotated[tuple[float, ...], Numbers(Amount("length", above=0.0), 2)] | None = Field(
        None, description="of a tube bank along and across the flow, mm"
    )
    rows: Annotated[int, Field(strict=True, ge=1)] | None = Field(None, description="of a tube bank along the flow")
    mixing: Literal["assisting", "opposing", "across"] | None = Field(
        None, description="mixed: how the buoyancy stands to the flow"
    )
    pressure: Pressure = Field(ATMOSPHERE, description="of the air, bar")
    fluid: Annotated[str, Ref("fluid")] | None = Field(None, description="name of a table of fluids; air if not given")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield surfaces that a kind has not, and keys that a surface needs or does not take."""
        surfaces = {"free": FREE, "mixed": FREE[:-1], "forced": FORCED, "standard": STANDARD}[self.kind]
        if self.surface not in surfaces:
            what = (
                f'kind = "{self.kind}" has the surfaces {listing([f"{s!r}" for s in surfaces])}, not "{self.surface}"'
            )
            yield ("surface",), what.replace("'", '"')
            return
        needed = self._needed()
        for key in ("length", "tilt", "diameter", "box", "speed", "pitch", "rows", "mixing"):
            if key in needed and getattr(self, key) is None:
                yield (key,), f'is required for kind = "{self.kind}", surface = "{self.surface}" and missing'
            if key not in needed and getattr(self, key) is not None:
                yield (key,), f'has no meaning for kind = "{self.kind}", surface = "{self.surface}"'
        if "speed" in needed and self.speed == 0.0 and self.kind == "forced":
            yield ("speed",), 'must be above 0; still air is kind = "free"'
        if self.kind == "standard" and self.fluid is not None:
            yield ("fluid",), "the films of ISO 6946 are for air"

    def _needed(self) -> tuple[str, ...]:
        if self.kind == "standard":
            return ("speed",) if self.surface == "outside" else ()
        own = {
            "inclined": ("length", "tilt"),
            "vertical cylinder": ("length", "diameter"),
            "inside of a box": ("box",),
            "tube bank": ("length", "pitch", "rows"),
        }.get(self.surface, ("length",))
        return (*own, *{"forced": ("speed",), "mixed": ("speed", "mixing")}.get(self.kind, ()))


class Sky(Table):
    """The part of the sky in what a surface sees."""

    ONE_OF: ClassVar = (("temperature", "clear"),)
    temperature: ScheduledTemperature | None = Field(None, description="°C, of the sky as a black body, or a schedule")
    clear: Annotated[bool, Field(strict=True)] | None = Field(
        None, description="true: a clear sky, from the space's temperature"
    )
    share: Share = Field(1.0, description="view factor of the sky: 1 for a roof, 0.5 for a wall")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a denial."""
        if self.clear is False:
            yield ("clear",), "can only be true; leave it out otherwise"


class Radiation(Table):
    """A grey surface that exchanges with large surroundings of one temperature, and with the sky."""

    emissivity: Emissivity | None = Field(None, description="of the surface; that of its material if not given")
    surroundings: ScheduledTemperature | None = Field(
        None, description="°C, or a schedule; the space's temperature if not given"
    )
    sky: Sky | None = None


class Sun(Table):
    """Sunshine that a surface absorbs."""

    absorptivity: Emissivity = Field(description="of the surface for sunshine")
    irradiance: Irradiance = Field(
        description="W/m² on the surface, direct, diffuse and reflected, or a schedule over time"
    )


class Cavity(Table):
    """A hollow whose surfaces exchange radiation with one another: those of all boundaries that name it."""

    film: Film | None = Field(None, description="W/(m²·K), between its surfaces and the air in it; none if not given")
    surroundings: ScheduledTemperature | None = Field(
        None, description="°C, or a schedule, of what is seen through openings; closed if not given"
    )


class _Rows:
    """Rows of a fluid's properties, temperatures rising."""

    KINDS = ("temperature", "density", "conductivity", "viscosity", "specific heat")

    def read(self, value: Any, context: Context) -> tuple[tuple[float, ...], ...]:
        """Return the rows: °C and SI."""
        if not isinstance(value, (list, tuple)) or len(value) < 2:
            raise ValueError(
                "expected at least two rows [temperature, density, conductivity, viscosity, specific heat]"
            )
        amounts = [Amount(kind, above=None if kind == "temperature" else 0.0) for kind in self.KINDS]
        troubles: list[Trouble] = []
        rows: list[tuple[float, ...]] = []
        for number, row in enumerate(value):
            if not isinstance(row, (list, tuple)) or len(row) != len(amounts):
                troubles.append(((number,), "expected [temperature, density, conductivity, viscosity, specific heat]"))
                continue
            read = []
            for column, amount in enumerate(amounts):
                try:
                    read.append(amount.read(row[column], context))
                except ValueError as error:
                    troubles.append(((number, column), str(error)))
            rows.append(tuple(read))
        if troubles:
            raise fail("table", troubles, value)
        if any(after[0] <= before[0] for before, after in zip(rows, rows[1:], strict=False)):
            raise ValueError("the temperatures must rise from row to row")
        return tuple(rows)

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


_ROW = {"type": "array", "minItems": 5, "maxItems": 5, "items": {"type": ["number", "string"]}}


class Fluid(Table):
    """A fluid other than air, by its properties over temperature."""

    table: Annotated[
        tuple[tuple[float, ...], ...], _Rows(), WithJsonSchema({"type": "array", "minItems": 2, "items": _ROW})
    ] = Field(description="rows of °C, kg/m³, W/(m·K), Pa·s, J/(kg·K)")
    source: str = Field("", description="where the values come from")


@dataclass(frozen=True, kw_only=True)
class Exchange:
    """What a boundary exchanges heat by, its own keys and those it takes over from its space.

    Parameters
    ----------
    film
        Film coefficient, W/(m² K): with ``radiation`` its convective part; inf where the surface is held; None
        with ``convection``.
    convection, radiation, sun
        The laws, None where there are none.
    """

    film: float | None
    convection: Convection | None
    radiation: Radiation | None
    sun: Sun | None

    @property
    def depends(self) -> bool:
        """Whether the exchange is more than one constant film."""
        return self.convection is not None or self.radiation is not None or self.sun is not None

    @property
    def start(self) -> float:
        """A film coefficient to start from, W/(m² K); the given one where there is no law."""
        h = self.film or 0.0
        h += 0.0 if self.convection is None else TYPICAL[self.convection.kind]
        return h + (0.0 if self.radiation is None else TYPICAL_RADIATION)


def exchange(space: Space, boundary: Boundary | None = None) -> Exchange:
    """Return how a boundary exchanges heat with its space; without a boundary, how the space's surfaces do."""
    if boundary is not None and boundary.surface_resistance is not None:
        return Exchange(film=boundary.h, convection=None, radiation=None, sun=boundary.sun)
    own = boundary is not None and (boundary.film is not None or boundary.convection is not None)
    table = boundary if own and boundary is not None else space
    resistance = space.surface_resistance if not own else None
    return Exchange(
        film=table.film if resistance is None else 1.0 / resistance if resistance > 0.0 else math.inf,
        convection=table.convection,
        radiation=(boundary.radiation if boundary is not None else None) or space.radiation,
        sun=boundary.sun if boundary is not None else None,
    )
