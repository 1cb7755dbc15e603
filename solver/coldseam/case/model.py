"""What a case file says, as frozen models: lengths in m, temperatures in °C, all else SI.

Attribute names are the keys of the file, except that ``from`` and ``to`` are ``start`` and
``end``. A key that is absent is None. Make a :class:`Case` with :mod:`coldseam.case.read`.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, PrivateAttr, ValidationInfo, WithJsonSchema, WrapValidator

from coldseam.case.bodies import FLAT_SHAPES, SHAPES, SOLID_SHAPES, Body, Material
from coldseam.case.crosscheck import document_troubles, unused_materials
from coldseam.case.films import Cavity, Convection, Fluid, Radiation, Sun, exchange
from coldseam.case.overtime import time_troubles
from coldseam.case.schedules import Schedule
from coldseam.case.shapes import (
    AXES,
    FACES,
    Box,
    Cone,
    Cylinder,
    Disc,
    Enclosure,
    Extent,
    Face,
    Layer,
    Opening,
    Polygon,
    Repeat,
    Ring,
    Sphere,
    Tube,
    Within,
)
from coldseam.case.source import Source
from coldseam.case.tables import Context, Table, Trouble, listing
from coldseam.case.timing import Event, Floating, ScheduledTemperature, TimeTable
from coldseam.case.values import (
    Amount,
    Attached,
    BodyRef,
    Emissivity,
    Film,
    Flag,
    HeatFlow,
    HeatFlux,
    Humidity,
    Length,
    MaterialRef,
    Name,
    Ref,
    Resistance,
    ResistanceOrZero,
    Size,
    Some,
    SpaceRef,
    Uncertainty,
    checked,
)
from coldseam.case.wanted import Bridge, Flanking, Limit, Probe, Quantity

__all__ = [
    "AXES", "FACES", "FLAT_SHAPES", "SHAPES", "SOLID_SHAPES", "Body", "Boundary", "Box", "Bridge", "Case", "Cone",
    "Contact", "Convection", "Cylinder", "Disc", "Enclosure", "Event", "Extent", "Flanking", "Floating", "Fluid", "Layer",
    "Limit", "Material", "ModelTable", "Opening", "Polygon", "Probe", "Quantity", "Radiation", "Repeat", "Ring",
    "Schedule", "Selector", "Sheet", "Space", "Sphere", "Sun", "TimeTable", "Tube", "Within",
]  # fmt: skip

FINEST_ACCURACY = 1e-6


class _LengthUnit:
    """The unit of a foreign mesh's coordinates, as a factor to metres."""

    def read(self, value: Any, context: Context) -> float:
        """Return one of the unit in m."""
        from coldseam.case.units import QUANTITIES, parse

        units = listing(QUANTITIES["length"].units, last="or")
        if not isinstance(value, str) or not value.strip():
            raise ValueError(f"expected a unit of length as text: {units}")
        try:
            return parse("length", f"1 {value}")
        except ValueError as error:
            raise ValueError(f'"{value}" is not a unit of length; accepted is {units}') from error

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


class ModelTable(Table):
    """What kind of model it is, and how good its answers must be."""

    dimensions: Annotated[Literal[2, 3], WithJsonSchema({"enum": [2, 3]})] = Field(
        description="2 = cross-section, per metre of depth; 3 = solid"
    )
    axisymmetric: Flag = Field(False, description="turns a cross-section: x is the radius, y the axis")
    accuracy: Annotated[float, Amount("ratio", at_least=FINEST_ACCURACY, below=0.5)] = Field(
        0.01, description='of every heat flow, a fraction or text such as "1 %"'
    )
    mesh: Annotated[Path, Attached()] | None = Field(None, description="a whole mesh in place of bodies with shapes")
    mesh_unit: Annotated[float, _LengthUnit(), WithJsonSchema({"type": "string"})] = Field(
        1e-3, description='unit of the coordinates in mesh, "mm" if not given'
    )
    size: Size | None = Field(None, description="largest element size, mm; normally left to the program")
    max_nodes: Annotated[int, Field(strict=True, ge=10)] | None = Field(None, description="most nodes of the mesh")
    trust_scripts: Flag = Field(False, description="permits gmsh scripts, which can run commands on this machine")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield keys that don't go together."""
        if self.axisymmetric and self.dimensions == 3:
            yield ("axisymmetric",), "needs dimensions = 2"
        if self.mesh is None and "mesh_unit" in self.model_fields_set:
            yield ("mesh_unit",), "goes with mesh only"


class Space(Table):
    """Air, or whatever else is of one temperature, before the surfaces."""

    ONE_OF: ClassVar = (("temperature", "floating"),)
    AT_MOST_ONE: ClassVar = (("film", "surface_resistance", "convection"), ("surface_resistance", "radiation"))
    ANY_OF: ClassVar = (("film", "surface_resistance", "convection", "radiation"),)
    temperature: ScheduledTemperature | None = Field(None, description="°C, or a schedule over time")
    film: Film | None = Field(None, description="W/(m²·K)")
    surface_resistance: ResistanceOrZero | None = Field(
        None, description="m²·K/W; 0: the surface has the space's temperature"
    )
    convection: Convection | None = Field(None, description="in place of a film: convection by name")
    radiation: Radiation | None = Field(None, description="beside film or convection, or alone")
    relative_humidity: Humidity | None = Field(None, description='a fraction, or text such as "60 %"')
    uncertainty: Uncertainty | None = Field(None, description="of the film coefficient, a fraction")
    floating: Floating | None = Field(None, description="its temperature follows from its heat balance")
    _name: str = PrivateAttr("")

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Refuse a space that does not say how it exchanges heat with its surfaces."""
        keys = cls.ANY_OF[0]
        misspelled = cls._misspelled(data)
        missing = not any(key in data or (key,) in misspelled for key in (*keys, *cls.LATER))
        return data, [((), f"needs at least one of {listing(keys, last='or')}")] if missing else []

    @property
    def name(self) -> str:
        """The key of the space in the case."""
        return self._name

    @property
    def h(self) -> float:
        """Film coefficient, W/(m² K); inf when the surface resistance is 0; where laws make it, one to start from."""
        return exchange(self).start


def _film(film: float | None, resistance: float | None) -> float | None:
    if film is not None:
        return film
    if resistance is None:
        return None
    return 1.0 / resistance if resistance > 0.0 else math.inf


class Selector(Table):
    """Picks exterior faces; what is given must all hold."""

    ANY_OF: ClassVar = (("plane", "within", "body", "facing", "shell", "group"),)
    plane: dict[Literal["x", "y", "z"], Length] | None = Field(None, description="one axis and its position, mm")
    within: Within | None = Field(None, description="faces wholly inside this box")
    body: BodyRef | None = None
    facing: Face | None = Field(None, description='direction of the outward normal, "-x" ... "+z"')
    shell: Literal["outer", "cavity"] | None = Field(None, description="which of the connected exterior surfaces")
    group: Name | None = Field(None, description="name of a group of an imported geometry")

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Refuse a selector that picks everything by saying nothing."""
        keys = cls.keys()
        return data, [] if any(key in keys for key in data) else [((), f"needs at least one of {listing(keys)}")]

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield planes with more than one axis and directions that the case has not."""
        if self.plane is not None and len(self.plane) != 1:
            yield ("plane",), "needs exactly one axis, such as { x = 20 }"
        if context.dim == 2:
            if self.plane and "z" in self.plane:
                yield ("plane",), "z has no meaning in two dimensions"
            if self.facing and self.facing[1] == "z":
                yield ("facing",), "z has no meaning in two dimensions"


def _on(value: Any, handler: Any, info: ValidationInfo) -> Any:
    """Read a selector or the word ``rest`` without pydantic's double complaint of a union."""
    if value == "rest" or isinstance(value, Selector):
        return value
    if not isinstance(value, dict):
        raise ValueError('expected a selector such as { plane = { x = 20 } }, or "rest"')
    return Selector.model_validate(value, context=info.context)


class Boundary(Table):
    """What holds on a part of the exterior."""

    ONE_OF: ClassVar = (("space", "temperature", "heat_flux", "heat_flow", "adiabatic", "cavity"),)
    AT_MOST_ONE: ClassVar = (("film", "surface_resistance", "convection"), ("surface_resistance", "radiation"))
    name: Name
    on: Annotated[Selector | Literal["rest"], WrapValidator(_on)] = Field(description='a selector, or "rest"')
    space: SpaceRef | None = None
    temperature: ScheduledTemperature | None = Field(None, description="°C, or a schedule over time")
    heat_flux: HeatFlux | None = Field(None, description="W/m² into the solid")
    heat_flow: HeatFlow | None = Field(None, description="W into the solid, spread evenly (W/m in a cross-section)")
    adiabatic: Flag | None = None
    film: Film | None = Field(None, description="W/(m²·K), in place of that of the space")
    surface_resistance: ResistanceOrZero | None = Field(None, description="m²·K/W, in place of that of the space")
    uncertainty: Uncertainty | None = Field(None, description="of its film or given flow, a fraction")
    convection: Convection | None = Field(None, description="in place of the film of the space: convection by name")
    radiation: Radiation | None = Field(None, description="in place of that of the space")
    sun: Sun | None = None
    cavity: Annotated[str, Ref("cavity")] | None = Field(None, description="name of the cavity that it is a wall of")
    emissivity: Emissivity | None = Field(None, description="of a cavity's wall; that of its material if not given")

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """See that films go with spaces, and that adiabatic is said and not denied."""
        troubles: list[Trouble] = [
            ((key,), "goes with space only")
            for key in ("film", "surface_resistance", "convection", "radiation", "sun")
            if key in data and "space" not in data
        ]
        if "uncertainty" in data and not {"space", "heat_flux", "heat_flow"} & set(data):
            troubles.append((("uncertainty",), "goes with space, heat_flux or heat_flow"))
        if "emissivity" in data and "cavity" not in data:
            troubles.append((("emissivity",), "goes with cavity; beside a space it stands in radiation"))
        if data.get("adiabatic") is False:
            troubles.append((("adiabatic",), "can only be true; leave it out otherwise"))
        return data, troubles

    @property
    def h(self) -> float | None:
        """The boundary's own film coefficient, W/(m² K); inf for none at all, None where the space's holds."""
        return _film(self.film, self.surface_resistance)


class Sheet(Table):
    """A thin skin that conducts along a face without being meshed through its thickness."""

    ONE_OF: ClassVar = (("on", "between"),)
    name: Name
    material: MaterialRef
    thickness: Size = Field(description="mm")
    on: Selector | None = Field(None, description="exterior faces")
    between: tuple[BodyRef, BodyRef] | None = Field(None, description="two bodies that meet")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault for a sheet between a body and itself."""
        if self.between is not None and self.between[0] == self.between[1]:
            yield ("between",), "needs two different bodies"


class Contact(Table):
    """An imperfect joint between two bodies."""

    name: Name
    between: tuple[BodyRef, BodyRef]
    resistance: Resistance = Field(description="m²·K/W")
    uncertainty: Uncertainty | None = Field(None, description="of the resistance, a fraction")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault for a joint of a body with itself."""
        if self.between[0] == self.between[1]:
            yield ("between",), "needs two different bodies"


class Case(Table):
    """A whole case, validated. ``source``, ``raw`` and ``warnings`` are set when it is read."""

    title: Name
    model: ModelTable
    time: TimeTable | None = Field(None, description="a run over time; steady without it")
    spaces: dict[Name, Space] = {}
    materials: dict[Name, Material]
    fluids: dict[Name, Fluid] = {}
    cavities: dict[Name, Cavity] = {}
    body: Annotated[tuple[Body, ...], Some()]
    boundary: Annotated[tuple[Boundary, ...], Some()]
    sheet: tuple[Sheet, ...] = ()
    contact: tuple[Contact, ...] = ()
    probe: tuple[Probe, ...] = ()
    bridge: tuple[Bridge, ...] = ()
    limit: tuple[Limit, ...] = ()
    event: tuple[Event, ...] = ()
    _source: Source | None = PrivateAttr(None)
    _raw: dict[str, Any] = PrivateAttr(default_factory=dict)
    _warnings: tuple[str, ...] = PrivateAttr(())

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Look for what only the whole document shows."""
        return data, document_troubles(data)

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield walls, radiation and sun that do not fit their space, and what does not fit together over time."""
        for name in self.cavities:
            if not any(boundary.cavity == name for boundary in self.boundary):
                yield ("cavities", name), f'no boundary has cavity = "{name}"; give it its walls or take it out'
        for number, boundary in enumerate(self.boundary):
            if boundary.space is None:
                continue
            found = exchange(self.spaces[boundary.space], boundary)
            from_space = boundary.h is None and boundary.convection is None
            if boundary.radiation and from_space and self.spaces[boundary.space].surface_resistance is not None:
                what = f'"{boundary.space}" has a surface resistance, and that has radiation in it; give this boundary'
                yield ("boundary", number, "radiation"), f"{what} a film or a convection of its own"
            elif found.film == math.inf and boundary.sun is not None:
                yield ("boundary", number, "sun"), "has no meaning where the surface has the space's temperature"
        yield from time_troubles(self)

    def model_post_init(self, context: Any) -> None:
        """Tell materials and spaces their names."""
        for key, material in self.materials.items():
            material._name = key
        for key, space in self.spaces.items():
            space._name = key
        self._warnings = unused_materials(self)

    @property
    def source(self) -> Source:
        """The text it was read from, and the lines of its keys."""
        if self._source is None:
            raise ValueError("the case was not read from a file or text")
        return self._source

    @property
    def raw(self) -> dict[str, Any]:
        """The document as typed."""
        return self._raw

    @property
    def warnings(self) -> tuple[str, ...]:
        """What is odd and no fault, one sentence each."""
        return self._warnings
