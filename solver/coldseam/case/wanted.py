"""What a case asks for: probes, thermal bridges, limits."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, WithJsonSchema

from coldseam.case.shapes import Layers
from coldseam.case.tables import Context, Table, Trouble, listing
from coldseam.case.values import (
    Amount,
    BodyRef,
    BoundaryRef,
    BridgeRef,
    Name,
    PerArea,
    ProbeRef,
    Size,
    Some,
    SpaceRef,
    Vector,
    checked,
)


class Probe(Table):
    """A point whose temperature is wanted."""

    name: Name
    at: Vector = Field(description="mm")


class Flanking(Table):
    """A plain wall beside a linear bridge."""

    layers: Annotated[Layers, Some()] = Field(description='["material", thickness in mm], in order')
    length: Size = Field(description="mm; inside length, or outside length where the basis is external")
    length_external: Size | None = Field(None, description="outside length, mm")
    between: tuple[SpaceRef, SpaceRef] = Field(description="the spaces on its two sides")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault for a wall with one space on both sides."""
        if self.between[0] == self.between[1]:
            yield ("between",), "needs two different spaces"


class Bridge(Table):
    """A thermal bridge whose transmittance is wanted."""

    name: Name
    kind: Literal["linear", "point"]
    basis: Literal["internal", "external", "both"] | None = None
    flanking: Annotated[tuple[Flanking, ...], Some()] | None = None
    without: Annotated[tuple[BodyRef, ...], Some()] | None = None
    count: Annotated[int, Field(strict=True, ge=1)] | None = Field(None, description="pieces, 1 if not given")
    between: tuple[SpaceRef, SpaceRef] | None = Field(None, description="the two spaces; needed if there are more")
    per_area: PerArea | None = Field(
        None, description="in the whole wall: pieces per m², or m of a linear bridge per m²"
    )

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield keys that belong to the other kind, keys missing, and too few spaces."""
        linear, point = ("basis", "flanking"), ("without", "count", "between")
        needed, barred = (linear, point) if self.kind == "linear" else (("without",), linear)
        yield from (((key,), f'is required for kind = "{self.kind}" and missing')
                    for key in needed if getattr(self, key) is None)  # fmt: skip
        yield from (((key,), f'does not go with kind = "{self.kind}"')
                    for key in barred if getattr(self, key) is not None)  # fmt: skip
        spaces = context.names.get("space")
        if spaces is not None and len(spaces) < 2:
            yield (), f"a bridge lies between two spaces, and the case has {len(spaces)}"
        if self.between is not None and self.between[0] == self.between[1]:
            yield ("between",), "needs two different spaces"
        for position, wall in enumerate(self.flanking or ()):
            if self.basis == "both" and wall.length_external is None:
                yield ("flanking", position, "length_external"), 'is required for basis = "both" and missing'
        if self.without is not None and len(set(self.without)) < len(self.without):
            yield ("without",), "names a body twice"

    @property
    def pieces(self) -> int:
        """Number of pieces that a point bridge stands for."""
        return self.count or 1


Extreme = Literal["min", "max", "mean"]
_TARGETS = ("space", "boundary", "probe", "bridge", "body")
_MEASURES = {
    "space": ("heat_flow",),
    "boundary": ("heat_flow", "temperature", "f_Rsi", "surface_humidity"),
    "probe": ("temperature",),
    "bridge": ("psi", "chi"),
    "body": ("K",),
}
_MEASURE_UNITS = {
    "heat_flow": "heat flow",
    "temperature": "temperature",
    "f_Rsi": "ratio",
    "surface_humidity": "ratio",
    "psi": "linear transmittance",
    "chi": "point transmittance",
    "K": "film",
}


class Quantity(Table):
    """Which answer a limit is about."""

    ONE_OF: ClassVar = (_TARGETS, tuple(_MEASURE_UNITS))
    space: SpaceRef | None = None
    boundary: BoundaryRef | None = None
    probe: ProbeRef | None = None
    bridge: BridgeRef | None = None
    body: BodyRef | None = None
    heat_flow: Literal[True] | None = None
    temperature: Literal[True, "min", "max", "mean"] | None = None
    psi: Literal[True] | None = None
    chi: Literal[True] | None = None
    K: Literal[True] | None = Field(
        None, description="of an enclosure: heat leak over mean area and temperature difference"
    )
    f_Rsi: Literal[True] | None = None
    surface_humidity: Literal[True] | None = None

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """See that what is asked goes with what it is asked of."""
        targets = [key for key in _TARGETS if key in data]
        measures = [key for key in _MEASURE_UNITS if key in data]
        if len(targets) != 1 or len(measures) != 1:
            return data, []
        target, measure = targets[0], measures[0]
        accepted = _MEASURES[target]
        if measure not in accepted:
            return data, [((measure,), f"does not go with {target}, which takes {listing(accepted, last='or')}")]
        if target == "boundary" and measure == "temperature" and data[measure] is True:
            return data, [((measure,), 'of a boundary is one of "min", "max" and "mean"')]
        if target == "probe" and isinstance(data[measure], str):
            return data, [((measure,), "of a probe is temperature = true")]
        return data, []

    @property
    def target(self) -> str:
        """What it is asked of: ``"space"``, ``"boundary"``, ``"probe"``, ``"bridge"`` or ``"body"``."""
        return next(key for key in _TARGETS if getattr(self, key) is not None)

    @property
    def measure(self) -> str:
        """What is asked, for example ``"heat_flow"`` or ``"psi"``."""
        return next(key for key in _MEASURE_UNITS if getattr(self, key) is not None)


_BOUND_SCHEMA = WithJsonSchema({"type": ["number", "string"]})


class _Bound:
    """A bound whose unit depends on what is limited; read with the limit (see ``Limit.prepare``)."""

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(lambda value, context: value)


Bound = Annotated[float, _Bound(), _BOUND_SCHEMA]


def _bound_unit(asked: Any) -> str | None:
    """Return the quantity of a limit's bounds; None where what is asked makes no sense anyway."""
    if not isinstance(asked, dict):
        return None
    fitting = [key for target, keys in _MEASURES.items() if target in asked for key in keys if key in asked]
    return _MEASURE_UNITS[fitting[0]] if fitting else None


class Limit(Table):
    """A bound that an answer is held against; SI units of its quantity, °C."""

    name: Name
    quantity: Quantity
    at_most: Bound | None = Field(None, description="in the unit of the quantity")
    at_least: Bound | None = Field(None, description="in the unit of the quantity")
    touch: Literal[True] | None = Field(None, description="a surface that people touch: the usual caution is printed")

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Read the bounds in the units of what is limited."""
        given = [key for key in ("at_most", "at_least") if key in data]
        troubles: list[Trouble] = [] if given else [((), "needs at_most or at_least")]
        unit = _bound_unit(data.get("quantity"))
        for key in given:
            try:
                data[key] = Amount(unit).read(data[key], context) if unit else 0.0
            except ValueError as error:
                troubles.append(((key,), str(error)))
        asked = data.get("quantity")
        if "touch" in data and not (isinstance(asked, dict) and "temperature" in asked):
            troubles.append((("touch",), "goes with the temperature of a boundary or a probe"))
        if len(given) == 2 and not troubles and data["at_least"] > data["at_most"]:
            troubles.append((("at_least",), "must not be more than at_most"))
        return data, troubles
