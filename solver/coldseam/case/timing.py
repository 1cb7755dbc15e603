"""What a case says of time: the run, its events, and spaces whose temperature is an unknown."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, ValidationInfo, WithJsonSchema, WrapValidator

from coldseam.case.schedules import Changing, Schedule
from coldseam.case.tables import Context, Table, Trouble, fail, listing
from coldseam.case.values import Amount, BoundaryRef, Flag, Name, ProbeRef, Some, SpaceRef, Temperature, checked

ScheduledTemperature = Annotated[float | Schedule, Changing(Amount("temperature"))]
ScheduledHeat = Annotated[float | Schedule, Changing(Amount("heat flow"))]
Duration = Annotated[float, Amount("time", above=0.0)]
Mass = Annotated[float, Amount("mass", above=0.0)]
HeatCapacity = Annotated[float, Amount("heat capacity", above=0.0)]


class _Pairs:
    """Rows of a temperature and a heat flow, in ascending order of temperature."""

    def read(self, value: Any, context: Context) -> tuple[tuple[float, float], ...]:
        """Return (°C, W) rows, sorted; a bare amount holds at every temperature."""
        if not isinstance(value, list):
            return ((0.0, Amount("heat flow", at_least=0.0).read(value, context)),)
        rows: list[tuple[float, float]] = []
        troubles: list[Trouble] = []
        for number, row in enumerate(value):
            try:
                if not isinstance(row, list) or len(row) != 2:
                    raise ValueError("expected a temperature of the space and a heat flow, such as [-20, 900]")
                rows.append(
                    (
                        Amount("temperature").read(row[0], context),
                        Amount("heat flow", at_least=0.0).read(row[1], context),
                    )
                )
            except ValueError as error:
                troubles.append(((number,), str(error)))
        if not value:
            troubles.append(((), "needs at least one row"))
        rows.sort()
        if any(one[0] == other[0] for one, other in zip(rows, rows[1:], strict=False)):
            troubles.append(((), "names a temperature twice"))
        if troubles:
            raise fail("capacity", troubles, value)
        return tuple(rows)

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


Curve = Annotated[tuple[tuple[float, float], ...], _Pairs(), WithJsonSchema({"type": ["number", "string", "array"]})]


class Defrost(Table):
    """Regular pauses of a machine, with the heat that melting the frost puts into the space."""

    every: Duration = Field(description="s between the beginnings")
    lasts: Duration = Field(description="s")
    heat: Annotated[float, Amount("heat flow", at_least=0.0)] = Field(0.0, description="W into the space meanwhile")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield a fault for pauses without end."""
        if self.lasts >= self.every:
            yield ("lasts",), "must be shorter than every"


class Cooling(Table):
    """A refrigeration machine and its thermostat."""

    setpoint: ScheduledTemperature = Field(description="°C, the middle of the band")
    band: Annotated[float, Amount("temperature difference", above=0.0)] = Field(
        description="K; on at setpoint + band/2, off at setpoint - band/2"
    )
    capacity: Curve = Field(description="W, or rows of space temperature and W, linear between, held beyond")
    power: Curve | None = Field(None, description="electrical power at full capacity, like capacity")
    ambient: SpaceRef | None = Field(None, description="the space its heat goes to, for ambient_factor")
    ambient_at: Temperature | None = Field(None, description="°C; ambient temperature that capacity and power hold for")
    ambient_factor: Annotated[float, Amount("ratio")] | None = Field(
        None, description="relative change of the capacity per kelvin of ambient temperature, mostly negative"
    )
    control: Literal["on-off", "staged", "modulating"] = "on-off"
    stages: Annotated[int, Field(strict=True, ge=2, le=8)] | None = Field(None, description="equal parts, for staged")
    defrost: Defrost | None = None
    available: Annotated[float | Schedule, Changing(Amount("ratio", at_least=0.0, at_most=1.0))] = Field(
        1.0, description="the part of the capacity that there is; a power cut is a schedule that falls to 0"
    )

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield keys that don't go together."""
        if (self.control == "staged") != (self.stages is not None):
            yield ("stages",), 'goes with control = "staged", and only with it'
        given = [key for key in ("ambient", "ambient_at", "ambient_factor") if getattr(self, key) is not None]
        if given and len(given) < 3:
            yield (given[0],), "ambient, ambient_at and ambient_factor go together"
        if not any(w > 0 for _, w in self.capacity):
            yield ("capacity",), "must be above 0 somewhere"


class AirExchange(Table):
    """Air that goes to and fro between two spaces."""

    partner: SpaceRef = Field(alias="with")
    flow: Annotated[float | Schedule, Changing(Amount("air flow", at_least=0.0))] = Field(
        description="each way; m³/s bare; counted at 1.2 kg/m³. Door openings are a schedule"
    )


class Goods(Table):
    """Contents of one temperature that exchange heat with the air of their space."""

    name: Name
    mass: Mass = Field(description="kg")
    specific_heat: Annotated[float, Amount("specific heat", above=0.0)] = Field(description="J/(kg·K)")
    area: Annotated[float, Amount("area", above=0.0)] = Field(description="m², touched by the air")
    film: Annotated[float, Amount("film", above=0.0)] = Field(description="W/(m²·K)")
    start: Temperature | None = Field(None, description="°C, that of the space if not given")
    heat: ScheduledHeat = Field(0.0, description="W released in them (respiration, a load)")


def _one_or_more(value: Any) -> Any:
    return [value] if isinstance(value, dict) else value


class Floating(Table):
    """A space whose temperature follows from its heat balance."""

    start: Temperature | None = Field(None, description="°C at the start; that of [time] if not given")
    heat_capacity: HeatCapacity | None = Field(None, description="J/K of air and fittings; needed in a run over time")
    gain: ScheduledHeat = Field(0.0, description="W into the space: lights, people, fans, a load")
    cooling: Cooling | None = None
    air_exchange: Annotated[
        tuple[AirExchange, ...],
        WrapValidator(lambda value, handler, info: handler(_one_or_more(value))),
    ] = Field((), description="one table, or a list of them")
    goods: tuple[Goods, ...] = ()


class When(Table):
    """What an event waits for."""

    ONE_OF: ClassVar = (("space", "probe", "boundary"), ("falls_below", "rises_above"))
    space: SpaceRef | None = None
    probe: ProbeRef | None = None
    boundary: BoundaryRef | None = None
    temperature: Literal["min", "max", "mean"] | None = Field(None, description="of a boundary")
    falls_below: Temperature | None = Field(None, description="°C")
    rises_above: Temperature | None = Field(None, description="°C")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield an extreme that is missing, or that goes with nothing."""
        if (self.boundary is None) != (self.temperature is None):
            yield ("temperature",), 'is "min", "max" or "mean" of a boundary, needed there and only there'

    @property
    def level(self) -> float:
        """The temperature that is crossed, °C."""
        return self.falls_below if self.falls_below is not None else self.rises_above  # type: ignore[return-value]

    @property
    def direction(self) -> int:
        """-1 for falling, 1 for rising."""
        return -1 if self.falls_below is not None else 1


class Event(Table):
    """A moment that is wanted: the first time a temperature crosses a level."""

    name: Name
    when: When
    stop: Flag = Field(False, description="the run ends there")


class _Start:
    """What the run starts from."""

    def read(self, value: Any, context: Context) -> float | str | dict[str, float] | Path:
        """Return a temperature, ``"steady"``, temperatures by body, or the folder of an earlier run."""
        if value == "steady" or isinstance(value, Path):
            return value
        if not isinstance(value, dict):
            return Amount("temperature").read(value, context)
        if set(value) == {"run"}:
            return _folder(value["run"], context)
        names = context.names.get("body", ())
        accepted = (*names, "rest")
        troubles: list[Trouble] = []
        found = {}
        for name, entry in value.items():
            try:
                found[name] = Amount("temperature").read(entry, context)
            except ValueError as error:
                troubles.append(((name,), str(error)))
            if name not in accepted and name.rsplit("/", 1)[0] not in context.composite:
                troubles.append(((name,), f"is no body of the case; accepted are {listing(accepted)}"))
        if "rest" not in found:
            missing = [name for name in names if name not in found]
            troubles += (
                [((), f"no temperature for {listing(missing)}; add it, or rest = the others' temperature")]
                if missing
                else []
            )
        if troubles:
            raise fail("start", troubles, value)
        return found

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


def _folder(value: Any, context: Context) -> Path:
    if not isinstance(value, str):
        raise fail("start", [(("run",), "expected the folder of an earlier run, as text")], value)
    path = Path(value) if context.folder is None else context.folder / value
    if not (path / "final_state.npz").is_file():
        raise fail("start", [(("run",), f'"{value}" holds no final_state.npz of an earlier run')], value)
    return path


Start = Annotated[
    float | str | dict[str, float] | Path, _Start(), WithJsonSchema({"type": ["number", "string", "object"]})
]


def _times(value: Any, handler: Any, info: ValidationInfo) -> Any:
    return handler(value if isinstance(value, (list, tuple)) else [value])


class TimeTable(Table):
    """A run over time."""

    duration: Duration = Field(description="s")
    start: Start = Field(
        description='°C, "steady", temperatures by body { panel = 20, rest = 5 }, or { run = "folder" }'
    )
    record_every: Duration | None = Field(
        None, description="s between rows of the history; 1/200 of the run if not given"
    )
    tolerance: Annotated[float, Amount("temperature difference", above=0.0)] | None = Field(
        None, description="K that one step may be off; from accuracy if not given"
    )
    fields: Annotated[tuple[Duration, ...], WrapValidator(_times), Some()] | None = Field(
        None, description="times at which the whole field is written"
    )
    fields_every: Duration | None = Field(None, description="s between whole fields")
    longest_step: Duration | None = Field(None, description="s; normally left to the program")

    @property
    def record(self) -> float:
        """Seconds between the rows of the history."""
        return self.record_every if self.record_every is not None else self.duration / 200.0

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield times beyond the end."""
        for key in ("record_every", "fields_every"):
            value = getattr(self, key)
            if value is not None and value > self.duration * (1 + 1e-12):
                yield (key,), f"is longer than the run of {self.duration:g} s"
        if self.record_every is not None and self.duration / self.record_every > 1e6:
            yield ("record_every",), "would make more than a million rows"
        for number, time in enumerate(self.fields or ()):
            if time > self.duration * (1 + 1e-12):
                yield ("fields", number), f"is beyond the end of the run at {self.duration:g} s"
