"""Bodies and the materials they are made of."""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, ClassVar

from pydantic import Field, PrivateAttr

from coldseam.case.conducting import Conductivity, HeatOrLaw, MaterialAxes, Row
from coldseam.case.gaps import Gap
from coldseam.case.laws import ConductivityLaw, SpecificHeatLaw
from coldseam.case.shapes import Box, Cone, Cylinder, Disc, Enclosure, Polygon, Repeat, Ring, Sphere, Tube
from coldseam.case.tables import Context, Table, Trouble, listing
from coldseam.case.values import (
    SOLIDS,
    Attached,
    Density,
    Emissivity,
    Flag,
    HeatDensity,
    HeatFlow,
    LatentHeat,
    MaterialRef,
    Name,
    SpecificHeat,
    Temperature,
    Uncertainty,
)

if TYPE_CHECKING:
    import numpy as np


class Melting(Table):
    """How a material melts and freezes; its specific heat is that of the solid, or a law that goes through both."""

    ONE_OF: ClassVar = (("at", "between"),)
    at: Temperature | None = Field(None, description="°C, a single melting point")
    between: tuple[Temperature, Temperature] | None = Field(None, description="°C, the range from frozen to liquid")
    latent_heat: LatentHeat = Field(description="J/kg")
    specific_heat_liquid: SpecificHeat | None = Field(None, description="J/(kg·K), that of the solid if not given")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a range that is none."""
        if self.between is not None and self.between[1] <= self.between[0]:
            yield ("between",), "needs the lower temperature first"

    @property
    def range(self) -> tuple[float, float]:
        """Beginning and end of melting, °C."""
        return self.between if self.between is not None else (self.at, self.at)  # type: ignore[return-value]


class Material(Table):
    """A material. Values of the named entry of the library hold where the file gives none of its own."""

    LATER: ClassVar = {"air_gap": "stands in the [[body]] that the air is in, not in its material"}
    ANY_OF: ClassVar = (("conductivity", "library"),)
    library: str | None = Field(None, description="name of an entry of the built-in library")
    conductivity: Conductivity = Field()
    axes: MaterialAxes | None = None
    density: Density | None = Field(None, description="kg/m³")
    specific_heat: HeatOrLaw | None = Field(None, description="J/(kg·K), or a law over temperature")
    melting: Melting | None = Field(None, description="latent heat, over time")
    emissivity: Emissivity | None = None
    uncertainty: Uncertainty | None = Field(None, description="of the conductivity, a fraction")
    source: str = Field("", description="where the values come from")
    _name: str = PrivateAttr("")

    @property
    def name(self) -> str:
        """The key of the material in the case."""
        return self._name

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Fill in the values of the library entry."""
        if "library" not in data:
            needs: list[Trouble] = [] if "conductivity" in data else [
                (("conductivity",), "is required and missing (a value, or library = the name of an entry)")
            ]  # fmt: skip
            return data, needs
        entry, wrong = library_entry(data["library"])
        if wrong:
            # The conductivity is only missing because the entry is: one fault, not two.
            return {"conductivity": 1.0} | data, [(("library",), wrong)]
        own = [key for key in entry if key in data]
        if own and "source" not in data:
            entry["source"] = f"{entry['source']}; {listing(own)} as given in the case"
        return {key: value for key, value in entry.items() if value is not None} | data, []

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield axes that don't fit the conductivity, and two specific heats for one liquid."""
        if self.heat_law is not None and self.melting is not None and self.melting.specific_heat_liquid is not None:
            what = "has no meaning where specific_heat is a law over temperature: the law holds for the liquid too"
            yield ("melting", "specific_heat_liquid"), what
        if self.axes is None:
            return
        if isinstance(self.conductivity, (float, ConductivityLaw)):
            yield ("axes",), "has no meaning with a single conductivity; give [kx, ky, kz]"
        elif len(self.axes) != len(self.conductivity):
            yield ("axes",), f"needs {len(self.conductivity)} rows, as many as conductivity has"

    @property
    def law(self) -> ConductivityLaw | None:
        """The law over temperature that the conductivity follows; None where it is constant."""
        return self.conductivity if isinstance(self.conductivity, ConductivityLaw) else None

    @property
    def laws(self) -> tuple[ConductivityLaw, ...]:
        """All laws over temperature that the conductivity follows, in any direction."""
        values = self.conductivity if isinstance(self.conductivity, tuple) else (self.conductivity,)
        return tuple(value for value in values if isinstance(value, ConductivityLaw))

    @property
    def directional(self) -> bool:
        """Whether the conductivity follows a law in some direction, and not one law in all."""
        return self.law is None and bool(self.laws)

    def directions(self, dim: int) -> list[tuple[float | ConductivityLaw, np.ndarray]]:
        """Return each axis's conductivity, W/(m K) or a law, and its direction in the model, (dim,)."""
        import numpy as np

        values = self.conductivity if isinstance(self.conductivity, tuple) else (self.conductivity,) * 3
        turn = np.eye(len(values)) if self.axes is None else _orthogonal(self.axes)
        return [(value, axis[:dim]) for value, axis in zip(values, turn, strict=True) if not isinstance(value, tuple)]

    @property
    def heat_law(self) -> SpecificHeatLaw | None:
        """The law over temperature that the specific heat follows; None where it is constant or not given."""
        return self.specific_heat if isinstance(self.specific_heat, SpecificHeatLaw) else None

    def heat_at(self, celsius: float) -> float:
        """Return the specific heat at a temperature (°C), J/(kg K); NaN where it is not given."""
        if isinstance(self.specific_heat, SpecificHeatLaw):
            return self.specific_heat.held(celsius)
        return math.nan if self.specific_heat is None else self.specific_heat

    def tensor(self, dim: int) -> float | np.ndarray:
        """Return the conductivity in global axes, W/(m K); of a law over temperature its typical value.

        A number where the material conducts alike in all directions, else a symmetric array of
        shape (dim, dim); in a cross-section the part in its plane.
        """
        import numpy as np

        if self.law is not None:
            return self.law.typical
        if isinstance(self.conductivity, float):
            return self.conductivity
        typical = [k.typical if isinstance(k, ConductivityLaw) else k for k in self.conductivity]
        own = np.array(typical, dtype=float)
        own = np.diag(own) if own.ndim == 1 else 0.5 * (own + own.T)
        if self.axes is not None:
            turn = _orthogonal(self.axes)
            own = turn.T @ own @ turn
        if len(own) < dim:
            raise ValueError(f"the conductivity of {self.name} is two-dimensional")
        tensor: np.ndarray = 0.5 * (own + own.T)[:dim, :dim]
        return tensor


def _orthogonal(axes: tuple[Row, ...]) -> np.ndarray:
    """Return the nearest exactly orthogonal matrix, for axes are typed with few digits."""
    import numpy as np

    left, _, right = np.linalg.svd(np.array(axes, dtype=float))
    turn: np.ndarray = left @ right
    return turn


def library_entry(name: Any) -> tuple[dict[str, Any], str]:
    """Return the keys that a library entry fills in, in SI, or what is wrong with its name."""
    from coldseam.case import library

    if not isinstance(name, str):
        return {}, "expected the name of an entry of the library"
    try:
        return dict(library.as_material_keys(library.lookup(name))), ""
    except library.LibraryError as error:
        return {}, str(error)


FLAT_SHAPES = ("box", "disc", "ring", "polygon")
SOLID_SHAPES = ("box", "cylinder", "sphere", "cone", "tube", "polygon", "enclosure", "file")
SHAPES = ("box", "cylinder", "sphere", "cone", "tube", "polygon", "disc", "ring", "enclosure", "file", "group")


class Body(Table):
    """A body; later bodies displace earlier ones where they overlap."""

    ONE_OF: ClassVar = (SHAPES,)
    AT_MOST_ONE: ClassVar = (("heat_source", "heat_density"), ("material", "void"))
    ANY_OF: ClassVar = (("material", "void", "enclosure", "file"),)
    name: Name
    material: MaterialRef | None = None
    void: Flag = Field(False, description="true cuts the body out")
    air_gap: Gap | None = Field(None, description="true, or a table: closed air, by its equivalent conductivity")
    heat_source: HeatFlow | None = Field(None, description="W in the whole body (W/m in a plane cross-section)")
    heat_density: HeatDensity | None = Field(None, description="W/m³")
    uncertainty: Uncertainty | None = Field(None, description="of the heat source, a fraction")
    box: Box | None = None
    cylinder: Cylinder | None = None
    sphere: Sphere | None = None
    cone: Cone | None = None
    tube: Tube | None = None
    polygon: Polygon | None = None
    disc: Disc | None = None
    ring: Ring | None = None
    enclosure: Enclosure | None = None
    file: Annotated[Path, Attached(SOLIDS)] | None = Field(None, description="STEP, BREP or IGES file")
    group: Name | None = Field(None, description="name of a part of the foreign mesh")
    materials: dict[str, MaterialRef] | None = Field(None, description="for file: name of a solid -> material")
    repeat: Repeat | None = None

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Set aside shapes that the case can't take, and see to what the body is made of."""
        troubles = list(_material_faults(data))
        given = [key for key in SHAPES if key in data]
        for key in given:
            wrong = _shape_fault(key, context)
            if wrong:
                troubles.append(((key,), wrong))
                data = {other: value for other, value in data.items() if other != key}
        if "uncertainty" in data and not {"heat_source", "heat_density"} & set(data):
            what = "goes with heat_source or heat_density; that of a conductivity stands with the material"
            troubles.append((("uncertainty",), what))
        if "materials" in data and "file" not in given:
            troubles.append((("materials",), "goes with file only"))
        for key in ("void", "repeat", "enclosure", "file", "heat_source", "heat_density"):
            if "air_gap" in data and key in data:
                troubles.append(
                    (("air_gap",), f"can't go with {key}; make each gap a body with a shape and a material")
                )
        if "repeat" in data and "group" in given:
            troubles.append((("repeat",), "can't repeat a part of a foreign mesh"))
        return data, troubles

    @property
    def kind(self) -> str:
        """The key of the body's shape, for example ``"cylinder"``."""
        return next(key for key in SHAPES if getattr(self, key) is not None)

    @property
    def shape(self) -> Any:
        """The shape itself: one of the classes of :mod:`coldseam.case.shapes`, a path, or a group's name."""
        return getattr(self, self.kind)


def _material_faults(data: dict[str, Any]) -> Iterator[Trouble]:
    if "enclosure" in data:
        for key in ("material", "void"):
            if key in data:
                yield (key,), "an enclosure has its materials in its layers"
    elif "void" not in data and "material" not in data:
        if "file" not in data:
            yield (), "needs a material, or void = true"
        elif "materials" not in data:
            yield (), "needs a material, or materials by the names of its solids"
    if data.get("void") is False:
        yield ("void",), "can only be true; leave it out for a body with a material"
    for key in ("heat_source", "heat_density"):
        if key in data and data.get("void") is True:
            yield (key,), "a void can't give off heat"


def _shape_fault(key: str, context: Context) -> str:
    """Return why a shape does not fit the case, or nothing."""
    if context.foreign and key != "group":
        return "the model is a foreign mesh; its bodies are given by group"
    if context.foreign is False and key == "group":
        return "group names a part of a foreign mesh, and [model] has no mesh"
    if context.dim == 2 and key not in (*FLAT_SHAPES, "group"):
        return f"is a shape of three dimensions; the case has dimensions = 2, which takes {listing(FLAT_SHAPES)}"
    if context.dim == 3 and key not in (*SOLID_SHAPES, "group"):
        return f"is a shape of two dimensions; the case has dimensions = 3, which takes {listing(SOLID_SHAPES)}"
    return ""
