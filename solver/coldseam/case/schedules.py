"""Values that change with time: tables (linear between), CSV files and sines.

A table may name a time twice: the value jumps there. At a jump the later value holds; whoever ends a step
there asks for the value ``before`` it. ``corners`` are the times at which a time step must end.
"""

from __future__ import annotations

import csv
import math
from bisect import bisect_left, bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema

from coldseam.case.tables import Context, Trouble, fail, listing, nearest
from coldseam.case.units import parse
from coldseam.case.values import Amount, Attached, JsonSchema, checked

CORNERS_OF_A_SINE = 8
"""Forced step ends per period of a sine, so that no step can miss a half wave."""


@dataclass(frozen=True, kw_only=True)
class Schedule:
    """A value over time.

    Parameters
    ----------
    times, values
        Corners of a table, s and SI units of the value (°C), linear between.
    period
        Of a sine or a repeated table, s; 0 where nothing repeats.
    mean, amplitude, delay
        Of a sine, ``mean + amplitude sin(2 pi (t - delay) / period)``; unused for a table.
    """

    times: tuple[float, ...] = ()
    values: tuple[float, ...] = ()
    period: float = 0.0
    mean: float = 0.0
    amplitude: float = 0.0
    delay: float = 0.0

    def at(self, time: float, *, before: bool = False) -> float:
        """Return the value at a time (s); at a jump that after it, or ``before`` it.

        >>> door = Schedule(times=(0.0, 10.0, 10.0, 20.0), values=(0.0, 0.0, 5.0, 5.0))
        >>> door.at(10.0), door.at(10.0, before=True)
        (5.0, 0.0)
        """
        if not self.times:
            return self.mean + self.amplitude * math.sin(2.0 * math.pi * (time - self.delay) / self.period)
        if self.period:
            laps = math.floor(time / self.period)
            rest = time - laps * self.period
            if before and rest <= 1e-9 * self.period:
                rest = self.period
            time = rest
        times, values = self.times, self.values
        right = bisect_left(times, time) if before else bisect_right(times, time)
        if right == 0:
            return values[0]
        if right == len(times):
            return values[-1]
        left = right - 1
        share = (time - times[left]) / (times[right] - times[left])
        return values[left] + share * (values[right] - values[left])

    def corners(self, start: float, end: float) -> list[float]:
        """Return the times (s) strictly between start and end at which a step must end."""
        if not self.times:
            step = self.period / CORNERS_OF_A_SINE
            first = math.ceil((start - self.delay) / step)
            found = [self.delay + n * step for n in range(first, math.floor((end - self.delay) / step) + 1)]
        elif self.period:
            laps = range(math.floor(start / self.period), math.floor(end / self.period) + 1)
            found = [lap * self.period + time for lap in laps for time in self.times]
        else:
            found = list(self.times)
        return sorted({time for time in found if start < time < end})

    @property
    def end(self) -> float:
        """The last time (s) for which it says something; inf where it repeats."""
        return self.times[-1] if self.times and not self.period else math.inf

    @property
    def span(self) -> tuple[float, float]:
        """Lowest and highest value."""
        if not self.times:
            return self.mean - abs(self.amplitude), self.mean + abs(self.amplitude)
        return min(self.values), max(self.values)


def value_at(value: float | Schedule, time: float, *, before: bool = False) -> float:
    """Return a constant, or the value of a schedule at a time (s)."""
    return value.at(time, before=before) if isinstance(value, Schedule) else value


def constant(value: float | Schedule) -> float:
    """Return a value of a case that is held at a moment, where no schedules are left."""
    assert not isinstance(value, Schedule)
    return value


def span_of(value: float | Schedule) -> tuple[float, float]:
    """Return lowest and highest value of a constant or a schedule."""
    return value.span if isinstance(value, Schedule) else (value, value)


_KINDS = {
    "table": ("table", "repeat"),
    "csv": ("csv", "time_unit", "column", "repeat"),
    "sine": ("sine",),
}
_SINE = ("mean", "amplitude", "period", "delay")
_TIME = Amount("time")


@dataclass(frozen=True)
class Changing:
    """A physical amount that may change with time: a constant as :class:`Amount` reads it, or a schedule."""

    amount: Amount

    def read(self, value: Any, context: Context) -> float | Schedule:
        """Return the constant or the schedule in SI units."""
        if isinstance(value, Schedule):
            return value
        if not isinstance(value, dict):
            return self.amount.read(value, context)
        kinds = [kind for kind in _KINDS if kind in value]
        if len(kinds) != 1:
            strange = "".join(nearest(key, _KINDS) for key in value)
            raise ValueError(f"a value that changes is a table with exactly one of table, csv and sine{strange}")
        accepted = _KINDS[kinds[0]]
        troubles: list[Trouble] = [
            ((key,), f"is not a key here; accepted are {listing(accepted)}") for key in value if key not in accepted
        ]
        if troubles:
            raise fail("schedule", troubles, value)
        if kinds[0] == "sine":
            return self._sine(value["sine"], context)
        rows = self._rows(value["table"], context) if kinds[0] == "table" else self._file(value, context)
        return _table(rows, value.get("repeat", False), kinds[0])

    def _sine(self, value: Any, context: Context) -> Schedule:
        if not isinstance(value, dict):
            raise fail("sine", [(("sine",), f"expected a table with {listing(_SINE)}")], value)
        troubles: list[Trouble] = []
        found: dict[str, float] = {}
        spread = Amount("temperature difference") if self.amount.kind == "temperature" else self.amount
        amounts = {"mean": self.amount, "amplitude": spread, "period": Amount("time", above=0.0), "delay": _TIME}
        for key in value:
            if key not in _SINE:
                troubles.append((("sine", key), f"is not a key here; accepted are {listing(_SINE)}"))
        for key, amount in amounts.items():
            if key not in value:
                if key != "delay":
                    troubles.append((("sine", key), "is required and missing"))
                continue
            try:
                found[key] = amount.read(value[key], context)
            except ValueError as error:
                troubles.append((("sine", key), str(error)))
        if troubles:
            raise fail("sine", troubles, value)
        schedule = Schedule(**found)
        for bound in schedule.span:
            _within(self.amount, bound, ("sine", "amplitude"))
        return schedule

    def _rows(self, value: Any, context: Context) -> list[tuple[float, float]]:
        if not isinstance(value, list) or not value:
            raise fail(
                "table",
                [(("table",), 'expected rows of a time and a value, such as [["0 h", 20], ["1 h", 30]]')],
                value,
            )
        rows, troubles = [], []
        for number, row in enumerate(value):
            if not isinstance(row, (list, tuple)) or len(row) != 2:
                troubles.append((("table", number), "expected a time and a value"))
                continue
            try:
                rows.append((_TIME.read(row[0], context), self.amount.read(row[1], context)))
            except ValueError as error:
                troubles.append((("table", number), str(error)))
        if troubles:
            raise fail("table", troubles, value)
        return rows

    def _file(self, value: dict[str, Any], context: Context) -> list[tuple[float, float]]:
        try:
            path = Attached((".csv", ".txt")).read(value["csv"], context)
        except ValueError as error:
            raise fail("csv", [(("csv",), str(error))], value) from error
        unit = value.get("time_unit", "s")
        try:
            scale = parse("time", f"1 {unit}")
        except ValueError as error:
            raise fail(
                "csv", [(("time_unit",), f'"{unit}" is not a unit of time such as "s", "min", "h"')], value
            ) from error
        try:
            return self._lines(path, value.get("column", 2), scale, context)
        except ValueError as error:
            raise fail("csv", [(("csv",), str(error))], value) from error

    def _lines(self, path: Path, column: Any, scale: float, context: Context) -> list[tuple[float, float]]:
        """Return the rows of a CSV file: time first, the value in the column of that number or heading."""
        try:
            with path.open(newline="", encoding="utf-8-sig") as file:
                lines = [
                    (n, line) for n, line in enumerate(csv.reader(file), 1) if line and any(s.strip() for s in line)
                ]
        except (OSError, UnicodeDecodeError, csv.Error) as error:
            raise ValueError(f'"{path.name}" can\'t be read as CSV ({error})') from error
        if not lines:
            raise ValueError(f'"{path.name}" holds no rows')
        position = _column(lines[0][1], column, path.name)
        if not _is_number(lines[0][1][0]):
            lines = lines[1:]  # headings
        rows = []
        for number, line in lines:
            if len(line) <= position:
                raise ValueError(f'line {number} of "{path.name}" has no column {position + 1}')
            try:
                time = float(line[0]) * scale if _is_number(line[0]) else _TIME.read(line[0], context)
                cell = line[position].strip()
                rows.append((time, self.amount.read(float(cell) if _is_number(cell) else cell, context)))
            except ValueError as error:
                raise ValueError(f'line {number} of "{path.name}": {error}') from error
        if not rows:
            raise ValueError(f'"{path.name}" holds headings but no rows')
        return rows

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return checked(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchema:
        constant = self.amount.__get_pydantic_json_schema__(schema, handler)
        time = _TIME.__get_pydantic_json_schema__(schema, handler)
        pair = {"type": "array", "prefixItems": [time, constant], "minItems": 2, "maxItems": 2}
        repeat = {"type": "boolean"}
        tables = [
            {"table": {"type": "array", "items": pair, "minItems": 1}, "repeat": repeat},
            {"csv": {"type": "string"}, "time_unit": {"type": "string"}, "column": {}, "repeat": repeat},
            {"sine": {"type": "object", "required": ["mean", "amplitude", "period"]}},
        ]
        kinds = [
            {"type": "object", "properties": table, "required": [next(iter(table))], "additionalProperties": False}
            for table in tables
        ]
        return {
            "anyOf": [*constant["anyOf"], *kinds],
            "description": constant["description"] + "; or a schedule over time",
        }


def _within(amount: Amount, value: float, place: tuple[str, ...]) -> None:
    """Raise a fault for a bound of the amount that a sine breaks."""
    if (amount.at_least is not None and value < amount.at_least) or (
        amount.above is not None and value <= amount.above
    ):
        raise fail("sine", [(place, f"the sine falls to {value:g}, below what is possible here")], value)


def _table(rows: Sequence[tuple[float, float]], repeat: Any, key: str) -> Schedule:
    if not isinstance(repeat, bool):
        raise fail("schedule", [(("repeat",), "expected true or false")], repeat)
    times = tuple(time for time, _ in rows)
    for number, (one, other) in enumerate(zip(times, times[1:], strict=False)):
        if other < one:
            what = f"the times are not in order: {other:g} s comes after {one:g} s"
            raise fail("schedule", [((key, number + 1) if key == "table" else (key,), what)], rows)
    if times[0] > 0.0:
        raise fail("schedule", [((key,), f"begins at {times[0]:g} s; it must begin at 0 s or before")], rows)
    if repeat and times[-1] <= 0.0:
        raise fail("schedule", [(("repeat",), "needs a last time above 0, which is the period")], rows)
    return Schedule(times=times, values=tuple(value for _, value in rows), period=times[-1] if repeat else 0.0)


def _column(headings: Sequence[str], column: Any, name: str) -> int:
    if isinstance(column, int) and not isinstance(column, bool) and column >= 2:
        return column - 1
    found = [text.strip() for text in headings]
    if isinstance(column, str) and column in found:
        return found.index(column)
    raise ValueError(
        f'"{name}" has no column {column!r}; give a number from 2 or one of {listing(found[1:], last="or")}'
    )


def _is_number(text: str) -> bool:
    try:
        return math.isfinite(float(text))
    except ValueError:
        return False
