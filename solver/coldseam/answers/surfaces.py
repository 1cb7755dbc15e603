"""Surfaces that a space's air touches: temperature factor, dew and frost, humidity at the surface, and how much of it.

The humidity in a space is read by ISO 13788's convention: over water from 0 °C up, over ice below. Where a
surface is below 0 °C its relative humidity is given over ice (what forms there is frost) and over water
(what instruments show). The critical 80 % stand for the mean of a month, not for an hour.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.answers.types import place
from coldseam.mesh.measure import facet_measure
from coldseam.physics import humidity
from coldseam.solution.steady import Steady

if TYPE_CHECKING:
    from coldseam.case.model import Case


@dataclass(frozen=True, kw_only=True)
class Factor:
    """The temperature factor f_Rsi = (t_s - t_e) / (t_i - t_e) of a surface, at the place where it is lowest.

    Parameters
    ----------
    value
        None where it has no meaning; ``remark`` says why.
    at
        Where, mm.
    inside, outside
        The surface's own space (i) and the other (e).
    remark
        What to know about it.
    """

    value: float | None
    at: tuple[float, ...] | None = None
    inside: str = ""
    outside: str = ""
    remark: str = ""


@dataclass(frozen=True, kw_only=True)
class Moisture:
    """What a surface does with the humidity of its space, at its coldest place; humidities are fractions.

    Parameters
    ----------
    space_humidity, vapour_pressure
        Of the air; the pressure in Pa.
    dew_point, frost_point
        Of the air, over water and over ice, °C; the frost point None where it would be above 0 °C.
    saturation
        The one of the two that a cooling surface meets first, °C, and ``saturation_over`` its name.
    surface_humidity
        At the coldest place, over ``surface_over``.
    surface_humidity_over_water
        The other convention: differs below 0 °C.
    margin_condensation, margin_mould
        Up to 100 % and 80 %; negative is trouble. ``..._kelvin``: as temperature of the coldest place.
    humidity_for_condensation, humidity_for_mould
        Of the space, at which trouble begins; None where no humidity up to 100 % brings it.
    share_condensation, share_mould
        Part of the surface's area beyond 100 % and 80 %.
    """

    space_humidity: float
    vapour_pressure: float
    dew_point: float | None
    frost_point: float | None
    saturation: float | None
    saturation_over: str
    surface_humidity: float
    surface_over: str
    surface_humidity_over_water: float
    margin_condensation: float
    margin_mould: float
    margin_condensation_kelvin: float | None
    margin_mould_kelvin: float | None
    humidity_for_condensation: float | None
    humidity_for_mould: float | None
    share_condensation: float
    share_mould: float


def surfaces(steady: Steady) -> dict[str, dict[str, Any]]:
    """Return temperature factor and moisture of every boundary that faces a space, by its name."""
    found = {}
    for number, boundary in enumerate(steady.case.boundary):
        if boundary.space is None:
            continue
        mask = steady.facet_boundary == number
        nodes = np.unique(steady.mesh.facets[mask])
        values = steady.read_temperature[nodes]
        low, high = int(np.argmin(values)), int(np.argmax(values))
        found[boundary.name] = {
            "space": boundary.space,
            "lowest": float(values[low]),
            "lowest_at": place(steady.mesh.points[nodes[low]]),
            "highest": float(values[high]),
            "highest_at": place(steady.mesh.points[nodes[high]]),
            "f_Rsi": temperature_factor(steady, boundary.space, nodes),
            "moisture": moisture(steady, boundary.space, mask, float(values[low])),
        }
    return found


def temperature_factor(steady: Steady, space: str, nodes: np.ndarray) -> Factor:
    """Return the lowest temperature factor among surface nodes (numbers, (n,)) that face a space."""
    if steady.response.network.has_load:
        remark = "heat is released in the model, so a surface's temperature is not a factor of the spaces' alone"
        return Factor(value=None, inside=space, remark=remark)
    outside = _outside_temperatures(steady)
    inside = steady.case.spaces[space].temperature
    other = max((name for name in outside if name != space), key=lambda name: abs(outside[name] - inside), default=None)
    if other is None or outside[other] == inside:
        return Factor(value=None, inside=space, remark="no other space has another temperature")
    factors = (steady.read_temperature[nodes] - outside[other]) / (inside - outside[other])
    worst = int(np.argmin(factors))
    remark = ""
    if len(outside) > 2:
        remark = (
            f"of {len(outside)} outside points the one farthest in temperature was taken; it holds for these "
            "temperatures only"
        )
    at = place(steady.mesh.points[nodes[worst]])
    return Factor(value=float(factors[worst]), at=at, inside=space, outside=other, remark=remark)


def _outside_temperatures(steady: Steady) -> dict[str, float]:
    found = {}
    for terminal in steady.given.terminals:
        for number in terminal.boundaries:
            boundary = steady.case.boundary[number]
            if boundary.cavity is not None:
                continue
            own = terminal.temperature if boundary.space is None else steady.case.spaces[boundary.space].temperature
            found[boundary.space or boundary.name] = own
    return found


def moisture(steady: Steady, space: str, mask: np.ndarray, coldest: float) -> Moisture | None:
    """Return what the humidity of a space does on the facets of a mask (n_facets,); None where it is not given.

    Parameters
    ----------
    coldest
        Lowest temperature of these facets, °C.
    """
    air = steady.case.spaces[space]
    if air.relative_humidity is None:
        return None
    pressure = float(humidity.vapour_pressure(air.temperature, air.relative_humidity))
    at_surface = float(humidity.surface_humidity(pressure, coldest))
    dew, frost, first, over = _saturation(pressure)
    trouble = {name: _critical(pressure, limit) for name, limit in _LIMITS.items()}
    begins = {
        name: float(humidity.critical_humidity(air.temperature, coldest, limit)) for name, limit in _LIMITS.items()
    }
    shares = {name: 0.0 if t is None else area_below(steady, mask, t) for name, t in trouble.items()}
    return Moisture(
        space_humidity=air.relative_humidity,
        vapour_pressure=pressure,
        dew_point=dew,
        frost_point=frost,
        saturation=first,
        saturation_over=over,
        surface_humidity=at_surface,
        surface_over="ice" if coldest < 0.0 else "water",
        surface_humidity_over_water=float(humidity.surface_humidity(pressure, coldest, "water")),
        margin_condensation=humidity.CONDENSATION - at_surface,
        margin_mould=humidity.MOULD - at_surface,
        margin_condensation_kelvin=None if first is None else coldest - first,
        margin_mould_kelvin=None if trouble["mould"] is None else coldest - trouble["mould"],
        humidity_for_condensation=begins["condensation"] if begins["condensation"] <= 1.0 else None,
        humidity_for_mould=begins["mould"] if begins["mould"] <= 1.0 else None,
        share_condensation=shares["condensation"],
        share_mould=shares["mould"],
    )


_LIMITS = {"condensation": humidity.CONDENSATION, "mould": humidity.MOULD}


def _critical(pressure: float, limit: float) -> float | None:
    return float(humidity.critical_temperature(pressure, limit)) if pressure > 0.0 else None


def _saturation(pressure: float) -> tuple[float | None, float | None, float | None, str]:
    """Return dew point, frost point, the one met first (°C) and its surface; no vapour has none."""
    if pressure <= 0.0:
        return None, None, None, ""
    dew = float(humidity.saturation_temperature(pressure, "water"))
    if pressure >= humidity.TRIPLE:
        return dew, None, dew, "water"
    frost = float(humidity.saturation_temperature(pressure, "ice"))
    return dew, frost, frost, "ice"


def area_below(steady: Steady, mask: np.ndarray, level: float) -> float:
    """Return the part of the facets in a mask (n_facets,) that is colder than ``level`` (°C).

    Exact for the linear field on each facet (of an axisymmetric section: with the facet's mean radius).
    """
    chosen = np.flatnonzero(mask)
    area = facet_measure(steady.mesh)[chosen]
    below = fraction_below(steady.read_temperature[steady.mesh.facets[chosen]], level)
    return float(area @ below / area.sum())


def fraction_below(values: np.ndarray, level: float) -> np.ndarray:
    """Return the part of each segment (n, 2) or triangle (n, 3) where its linear field is below ``level``, (n,).

    Values and level in one unit, such as °C.

    Examples
    --------
    >>> fraction_below(np.array([[0.0, 1.0, 1.0], [0.0, 0.0, 1.0]]), 0.5).tolist()
    [0.25, 0.75]
    >>> fraction_below(np.array([[0.0, 4.0], [5.0, 5.0]]), 1.0).tolist()
    [0.25, 0.0]
    """
    v = np.sort(values, axis=1)
    low, high = v[:, 0], v[:, -1]
    with np.errstate(divide="ignore", invalid="ignore"):
        if v.shape[1] == 2:
            part = (level - low) / (high - low)
        else:
            middle = v[:, 1]
            part = np.where(
                level <= middle,
                (level - low) ** 2 / ((middle - low) * (high - low)),
                1.0 - (high - level) ** 2 / ((high - middle) * (high - low)),
            )
    return np.where(level <= low, 0.0, np.where(level >= high, 1.0, part))


def humidity_map(steady: Steady) -> np.ndarray:
    """Return the relative humidity at the corners of every exterior facet, (n_facets, dim), a fraction.

    By the standard's convention; nan where the facet faces no space or its space has no humidity.
    """
    found = np.full(steady.mesh.facets.shape, np.nan)
    for number, boundary in enumerate(steady.case.boundary):
        air = None if boundary.space is None else steady.case.spaces[boundary.space]
        if air is None or air.relative_humidity is None:
            continue
        mask = steady.facet_boundary == number
        pressure = humidity.vapour_pressure(air.temperature, air.relative_humidity)
        found[mask] = humidity.surface_humidity(pressure, steady.read_temperature[steady.mesh.facets[mask]])
    return found


def space_humidity_needed(case: Case, boundary: str) -> str:
    """Return what a case lacks for moisture answers on a boundary; empty when it lacks nothing."""
    space = next(b.space for b in case.boundary if b.name == boundary)
    if space is None:
        return f'"{boundary}" faces no space'
    return "" if case.spaces[space].relative_humidity is not None else f'space "{space}" has no relative_humidity'
