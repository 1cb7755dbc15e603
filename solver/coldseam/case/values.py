"""The kinds of value that keys take: amounts with units, vectors, names, references, files."""

from __future__ import annotations

import unicodedata
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler, StrictBool, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from coldseam.case.tables import Context, Trouble, context_of, fail, listing, nearest
from coldseam.case.units import QUANTITIES, parse

JsonSchema = dict[str, Any]
Check = Callable[[Any, Context], Any]


@dataclass(frozen=True)
class Amount:
    """A physical amount: a number in the documented unit, or text with a unit; becomes SI.

    Parameters
    ----------
    kind
        A quantity of :data:`coldseam.case.units.QUANTITIES`, or ``"heat flow"``, which is per
        metre of depth in a plane cross-section and in W elsewhere.
    above, at_least, below, at_most
        Bounds in SI units.
    """

    kind: str
    above: float | None = None
    at_least: float | None = None
    below: float | None = None
    at_most: float | None = None
    hint: str = ""

    def read(self, value: Any, context: Context) -> float:
        """Return the value in SI units; ValueError says what would be accepted."""
        if isinstance(value, dict):
            raise ValueError(
                f"takes one number, or text with its unit; a table of keys is not accepted here{self.hint}"
            )
        number = parse(self.quantity(context), value)
        wrong = (
            f"must be above {self.above:g}" if self.above is not None and number <= self.above
            else f"must be {self.at_least:g} or more" if self.at_least is not None and number < self.at_least
            else f"must be below {self.below:g}" if self.below is not None and number >= self.below
            else f"must be {self.at_most:g} or less" if self.at_most is not None and number > self.at_most
            else ""
        )  # fmt: skip
        if wrong:
            shown = f'"{value}"' if isinstance(value, str) else value
            raise ValueError(f"{wrong}, not {shown}{self.hint}")
        return number

    def quantity(self, context: Context) -> str:
        """Return the quantity in the table of units."""
        if self.kind == "heat flow":
            return "power per depth" if context.section else "power"
        return self.kind

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        if self.kind == "heat flow":
            unit, title = "W (in a plane cross-section W/m)", "heat flow"
        elif self.kind == "ratio":
            unit, title = "1 (a fraction)", "ratio"
        else:
            unit, title = QUANTITIES[self.kind].bare, QUANTITIES[self.kind].title
        number: JsonSchema = {"type": "number"}
        factor = 1e-3 if self.kind == "length" else 1.0
        for key, bound in (
            ("exclusiveMinimum", self.above),
            ("minimum", self.at_least),
            ("exclusiveMaximum", self.below),
            ("maximum", self.at_most),
        ):
            if bound is not None:
                number[key] = bound / factor
        text = {"type": "string", "pattern": "^[\\s+\\-\\u2212\\u2013]*\\.?[0-9]"}
        return {"anyOf": [number, text], "description": f"{title}: a number in {unit}, or text with a unit"}


def checked(check: Check) -> CoreSchema:
    """Return the pydantic schema of a value that ``check(value, context)`` reads or refuses."""

    def validate(value: Any, info: ValidationInfo) -> Any:
        return check(value, context_of(info))

    return core_schema.with_info_plain_validator_function(validate)


@dataclass(frozen=True)
class Numbers:
    """A list of amounts; ``count`` 0 means as many as the case has dimensions."""

    amount: Amount
    count: int = 0

    def read(self, value: Any, context: Context) -> tuple[float, ...]:
        """Return the numbers in SI units, every faulty one reported at its place."""
        count = self.count or context.dim
        wanted = f"expected a list of {count or 'two or three'} numbers"
        if not isinstance(value, (list, tuple)):
            raise ValueError(f"{wanted}, such as [{', '.join(['0'] * (count or 3))}]")
        if (count and len(value) != count) or (not count and len(value) not in (2, 3)):
            why = f" (the case has dimensions = {context.dim})" if not self.count and context.dim else ""
            raise ValueError(f"{wanted}{why}, not {len(value)}")
        numbers: list[float] = []
        troubles: list[Trouble] = []
        for position, item in enumerate(value):
            try:
                numbers.append(self.amount.read(item, context))
            except ValueError as error:
                troubles.append(((position,), str(error)))
        if troubles:
            raise fail("vector", troubles, value)
        return tuple(numbers)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        items = self.amount.__get_pydantic_json_schema__(schema, handler)
        least, most = (self.count, self.count) if self.count else (2, 3)
        return {"type": "array", "items": items, "minItems": least, "maxItems": most}


BREAKING = ("Cc", "Zl", "Zp")
"""Unicode's categories of control characters and of what breaks a line or paragraph."""


@dataclass(frozen=True)
class Called:
    """A name: text that is not empty, without line breaks or control characters."""

    def read(self, value: Any, context: Context) -> str:
        """Return the name."""
        if not isinstance(value, str) or not value.strip():
            raise ValueError("expected a name: text that is not empty")
        if value != value.strip() or any(unicodedata.category(c) in BREAKING for c in value):
            raise ValueError("a name must not begin or end with blanks or hold line breaks or control characters")
        return value

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        return {"type": "string", "minLength": 1}


@dataclass(frozen=True)
class Ref:
    """A reference to something else in the case by its name.

    ``kind`` is ``"material"``, ``"space"``, ``"body"``, ``"boundary"``, ``"probe"`` or ``"bridge"``.
    Parts of enclosures and files are bodies too, called ``body/part``.
    """

    kind: str

    def read(self, value: Any, context: Context) -> str:
        """Return the name; ValueError lists what there is."""
        if not isinstance(value, str):
            raise ValueError(f"expected the name of a {self.kind}")
        names = context.names.get(self.kind)
        if names is None or value in names:
            return value
        if self.kind == "body" and "/" in value and value.rsplit("/", 1)[0] in context.composite:
            return value
        there = f"there is {listing(names)}" if names else f"the case has no {self.kind}"
        raise ValueError(f'no {self.kind} is called "{value}"{nearest(value, names) or f"; {there}"}')

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        return {"type": "string", "minLength": 1, "description": f"name of a {self.kind} of this case"}


SCRIPTS = (".geo", ".geo_unrolled", ".geo_opt", ".opt", ".pro", ".py")
SOLIDS = (".step", ".stp", ".brep", ".iges", ".igs")


@dataclass(frozen=True)
class Attached:
    """A file beside the case file; ``suffixes`` empty means any but gmsh scripts."""

    suffixes: tuple[str, ...] = ()

    def read(self, value: Any, context: Context) -> Path:
        """Return the path against the case file's folder."""
        if isinstance(value, Path):
            return value
        if not isinstance(value, str) or not value.strip() or "\0" in value:
            raise ValueError("expected the path of a file as text")
        suffix = Path(value).suffix.lower()
        if suffix in SCRIPTS and not context.trust_scripts:
            raise ValueError(f'"{value}" is a gmsh script, and scripts can run commands on this machine; set '
                             "trust_scripts = true in [model] if you trust it")  # fmt: skip
        if self.suffixes and suffix not in self.suffixes + SCRIPTS:
            raise ValueError(f'"{value}" is not of a kind that can be read: {listing(self.suffixes, last="or")}')
        path = Path(value) if context.folder is None else context.folder / value
        if context.folder is not None:
            _readable(path, value)
        return path

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        return {"type": "string", "minLength": 1, "description": "a file, relative to the folder of the case file"}


def _readable(path: Path, typed: str) -> None:
    try:
        if path.is_dir():
            raise ValueError(f'"{typed}" is a folder, not a file')
        if not path.is_file():
            raise ValueError(f'there is no file "{typed}" (looked for beside the case file)')
        if path.stat().st_size == 0:
            raise ValueError(f'the file "{typed}" is empty')
    except OSError as error:
        raise ValueError(f'the file "{typed}" can\'t be looked at: {error.strerror}') from error


@dataclass(frozen=True)
class Some:
    """Marks a list that must not be empty.

    pydantic's own least length counts only the valid entries, and so complains twice.
    """

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_before_validator_function(_some, handler(source))

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        return {**handler(schema), "minItems": 1}


def _some(value: Any) -> Any:
    if isinstance(value, (list, tuple)) and not value:
        raise ValueError("needs at least one entry")
    return value


Flag = StrictBool
Name = Annotated[str, Called()]
MaterialRef = Annotated[str, Ref("material")]
SpaceRef = Annotated[str, Ref("space")]
BodyRef = Annotated[str, Ref("body")]
BoundaryRef = Annotated[str, Ref("boundary")]
ProbeRef = Annotated[str, Ref("probe")]
BridgeRef = Annotated[str, Ref("bridge")]
Length = Annotated[float, Amount("length")]
Size = Annotated[float, Amount("length", above=0.0)]
SizeOrZero = Annotated[float, Amount("length", at_least=0.0)]
Temperature = Annotated[float, Amount("temperature")]
Film = Annotated[float, Amount("film", above=0.0)]
Resistance = Annotated[float, Amount("resistance", above=0.0)]
ResistanceOrZero = Annotated[float, Amount("resistance", at_least=0.0)]
Density = Annotated[float, Amount("density", above=0.0)]
LatentHeat = Annotated[float, Amount("latent heat", above=0.0)]
SpecificHeat = Annotated[float, Amount("specific heat", above=0.0)]
HeatFlow = Annotated[float, Amount("heat flow")]
HeatFlux = Annotated[float, Amount("flux")]
HeatDensity = Annotated[float, Amount("heat_density")]
Emissivity = Annotated[float, Amount("ratio", at_least=0.0, at_most=1.0)]
Humidity = Annotated[
    float,
    Amount("ratio", at_least=0.0, at_most=1.0, hint=' (a fraction, 1 = 100 %; write 60 % as "60 %" or 0.6)'),
]
PerArea = Annotated[float, Amount("per area", above=0.0)]
Uncertainty = Annotated[float, Amount("ratio", at_least=0.0, below=1.0)]
Vector = Annotated[tuple[float, ...], Numbers(Amount("length"))]
Pair = Annotated[tuple[float, float], Numbers(Amount("length"), 2)]
