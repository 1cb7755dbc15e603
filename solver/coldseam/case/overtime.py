"""What of a case must fit together over time, and a case held at one moment."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from typing import TYPE_CHECKING, Any

from coldseam.case.schedules import Schedule
from coldseam.case.tables import Trouble

if TYPE_CHECKING:
    from coldseam.case.films import Radiation
    from coldseam.case.model import Case

Place = tuple[str | int, ...]


def schedules(case: Case) -> Iterator[tuple[Place, Schedule]]:
    """Yield every schedule of the case with its place."""
    for place, value in _changeable(case):
        if isinstance(value, Schedule):
            yield place, value


def _changeable(case: Case) -> Iterator[tuple[Place, Any]]:
    for name, space in case.spaces.items():
        here: Place = ("spaces", name)
        yield (*here, "temperature"), space.temperature
        yield from _radiant(here, space.radiation)
        if space.floating is None:
            continue
        here = (*here, "floating")
        yield (*here, "gain"), space.floating.gain
        for number, exchange in enumerate(space.floating.air_exchange):
            yield (*here, "air_exchange", number, "flow"), exchange.flow
        for number, goods in enumerate(space.floating.goods):
            yield (*here, "goods", number, "heat"), goods.heat
        if space.floating.cooling is not None:
            yield (*here, "cooling", "setpoint"), space.floating.cooling.setpoint
            yield (*here, "cooling", "available"), space.floating.cooling.available
    for number, boundary in enumerate(case.boundary):
        here = ("boundary", number)
        yield (*here, "temperature"), boundary.temperature
        yield from _radiant(here, boundary.radiation)
        if boundary.sun is not None:
            yield (*here, "sun", "irradiance"), boundary.sun.irradiance
    for name, cavity in case.cavities.items():
        yield ("cavities", name, "surroundings"), cavity.surroundings


def _radiant(here: Place, radiation: Radiation | None) -> Iterator[tuple[Place, Any]]:
    if radiation is not None:
        yield (*here, "radiation", "surroundings"), radiation.surroundings
        if radiation.sky is not None:
            yield (*here, "radiation", "sky", "temperature"), radiation.sky.temperature


def time_troubles(case: Case) -> Iterator[Trouble]:
    """Yield what a run over time lacks, and what only a run over time can have."""
    yield from _spaces(case)
    if case.time is None:
        for place, _ in schedules(case):
            yield place, "a value that changes needs a [time] table with a duration"
        for number, event in enumerate(case.event):
            yield ("event", number), f'the event "{event.name}" needs a [time] table with a duration'
        return
    for place, schedule in schedules(case):
        if schedule.end < case.time.duration * (1 - 1e-12):
            yield (
                place,
                (
                    f"ends at {schedule.end:g} s, before the run does at {case.time.duration:g} s; give it a last row "
                    "there, or repeat = true"
                ),
            )
    yield from _capacities(case)


def _spaces(case: Case) -> Iterator[Trouble]:
    for name, space in case.spaces.items():
        if space.floating is None:
            continue
        here: Place = ("spaces", name, "floating")
        if case.time is not None and space.floating.heat_capacity is None:
            yield (*here, "heat_capacity"), "is needed in a run over time, and missing"
        if case.time is not None and space.floating.start is None and not isinstance(case.time.start, (float, str)):
            yield (*here, "start"), "is needed unless [time] starts from one temperature or the steady state"
        for number, exchange in enumerate(space.floating.air_exchange):
            if exchange.partner == name:
                yield (*here, "air_exchange", number, "with"), "needs another space"
        if math.isinf(space.h):
            yield ("spaces", name, "surface_resistance"), "a floating space needs a film or a resistance above 0"
    for number, boundary in enumerate(case.boundary):
        floating = boundary.space in case.spaces and case.spaces[boundary.space].floating is not None
        if floating and boundary.h is not None and math.isinf(boundary.h):
            yield ("boundary", number, "surface_resistance"), "a floating space needs a film or a resistance above 0"


def _capacities(case: Case) -> Iterator[Trouble]:
    """Yield materials of bodies that lack density or specific heat; sheets too, for they store heat."""
    for name in materials_of_bodies(case):
        material = case.materials.get(name)
        if material is None:
            continue
        lacking = [key for key in ("density", "specific_heat") if getattr(material, key) is None]
        if lacking:
            yield ("materials", name), f"a run over time needs {' and '.join(lacking)} of every body's material"


def materials_of_bodies(case: Case) -> list[str]:
    """Return the names of the materials that bodies and sheets are made of."""
    used: dict[str, None] = {}
    for body in case.body:
        if body.material is not None:
            used[body.material] = None
        used.update(dict.fromkeys((body.materials or {}).values()))
        if body.enclosure is not None:
            for layers in (body.enclosure.layers, *body.enclosure.faces.values()):
                used.update(dict.fromkeys(layer.material for layer in layers))
    used.update(dict.fromkeys(sheet.material for sheet in case.sheet))
    return list(used)


def held(case: Case, spaces: Mapping[str, float], boundaries: Mapping[int, float]) -> Case:
    """Return the case with constant temperatures in place of schedules and floating spaces: a steady case.

    Parameters
    ----------
    case
        Any case.
    spaces
        °C by name, for every space.
    boundaries
        °C by position, for boundaries with a scheduled temperature.
    """
    fixed = {
        name: space.model_copy(update={"temperature": spaces[name], "floating": None})
        for name, space in case.spaces.items()
    }
    for name, space in fixed.items():
        space._name = name
    surfaces = tuple(
        boundary.model_copy(update={"temperature": boundaries[n]}) if n in boundaries else boundary
        for n, boundary in enumerate(case.boundary)
    )
    return case.model_copy(update={"spaces": fixed, "boundary": surfaces, "time": None, "event": ()})


def radiant_schedules(case: Case) -> list[Schedule]:
    """Return the schedules of what surfaces radiate to: surroundings and sky, °C."""
    return [schedule for place, schedule in schedules(case) if "surroundings" in place or "sky" in place]


def held_radiation(
    case: Case, temperature: Callable[[Schedule], float], irradiance: Callable[[Schedule], float]
) -> Case:
    """Return the case with numbers in place of the schedules of irradiances, surroundings and skies.

    Parameters
    ----------
    case
        Any case.
    temperature, irradiance
        Make a number of a schedule, °C and W/m².
    """

    def picked(table: Any, key: str, pick: Callable[[Schedule], float]) -> Any:
        value = getattr(table, key)
        return table.model_copy(update={key: pick(value)}) if isinstance(value, Schedule) else table

    def radiation(table: Radiation) -> Radiation:
        sky = None if table.sky is None else picked(table.sky, "temperature", temperature)
        table = picked(table, "surroundings", temperature)
        return table if sky is table.sky else table.model_copy(update={"sky": sky})

    def outside(table: Any) -> Any:
        changes = {} if table.radiation is None else {"radiation": radiation(table.radiation)}
        if getattr(table, "sun", None) is not None:
            changes["sun"] = picked(table.sun, "irradiance", irradiance)
        return table.model_copy(update=changes) if changes else table

    spaces = {name: outside(space) for name, space in case.spaces.items()}
    for name, space in spaces.items():
        space._name = name
    cavities = {name: picked(cavity, "surroundings", temperature) for name, cavity in case.cavities.items()}
    surfaces = tuple(outside(boundary) for boundary in case.boundary)
    return case.model_copy(update={"spaces": spaces, "boundary": surfaces, "cavities": cavities})


def at_moment(case: Case, time: float) -> Case:
    """Return the case with irradiances, surroundings and skies as they are at a time (s)."""
    return held_radiation(case, lambda schedule: schedule.at(time), lambda schedule: schedule.at(time))
