"""Numbers as a reader wants them: in metric or in inch units, with the digits that their error allows.

Answers are in one set of units (W, °C, mm, m²); what a report shows is converted here and nowhere else. Factors are
the exact definitions of :mod:`coldseam.case.units`.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, TypeVar

import numpy as np

from coldseam.case.units import BTU, FAHRENHEIT, FOOT, HOUR, INCH
from coldseam.errors import ColdseamError
from coldseam.report.digits import number, with_error

Number = TypeVar("Number", float, "np.ndarray[Any, Any]")
_PER_HOUR = HOUR / BTU  # W -> Btu/h
_PER_KELVIN = FAHRENHEIT


@dataclass(frozen=True, kw_only=True)
class Measure:
    """How a quantity is shown: shown = factor * value + offset, in ``unit``."""

    unit: str
    factor: float = 1.0
    offset: float = 0.0


_METRIC = {
    "length": Measure(unit="mm"),
    "temperature": Measure(unit="°C"),
    "difference": Measure(unit="K"),
    "area": Measure(unit="m²"),
    "area_per_m": Measure(unit="m²/m"),
    "volume": Measure(unit="m³"),
    "volume_per_m": Measure(unit="m³/m"),
    "flow": Measure(unit="W"),
    "flow_per_m": Measure(unit="W/m"),
    "flux": Measure(unit="W/m²"),
    "film": Measure(unit="W/(m²·K)"),
    "conductivity": Measure(unit="W/(m·K)"),
    "coupling": Measure(unit="W/K"),
    "psi": Measure(unit="W/(m·K)"),
    "resistance": Measure(unit="m²·K/W"),
    "density": Measure(unit="kg/m³"),
    "specific_heat": Measure(unit="J/(kg·K)"),
}
_FT2 = FOOT**2
_INCH = {
    "length": Measure(unit="in", factor=1e-3 / INCH),
    "temperature": Measure(unit="°F", factor=1.8, offset=32.0),
    "difference": Measure(unit="°F", factor=1.8),
    "area": Measure(unit="ft²", factor=1 / _FT2),
    "area_per_m": Measure(unit="ft²/ft", factor=1 / FOOT),
    "volume": Measure(unit="ft³", factor=1 / FOOT**3),
    "volume_per_m": Measure(unit="ft³/ft", factor=1 / _FT2),
    "flow": Measure(unit="Btu/h", factor=_PER_HOUR),
    "flow_per_m": Measure(unit="Btu/(h·ft)", factor=_PER_HOUR * FOOT),
    "flux": Measure(unit="Btu/(h·ft²)", factor=_PER_HOUR * _FT2),
    "film": Measure(unit="Btu/(h·ft²·°F)", factor=_PER_HOUR * _FT2 * _PER_KELVIN),
    "conductivity": Measure(unit="Btu/(h·ft·°F)", factor=_PER_HOUR * FOOT * _PER_KELVIN),
    "coupling": Measure(unit="Btu/(h·°F)", factor=_PER_HOUR * _PER_KELVIN),
    "psi": Measure(unit="Btu/(h·ft·°F)", factor=_PER_HOUR * FOOT * _PER_KELVIN),
    "resistance": Measure(unit="h·ft²·°F/Btu", factor=1 / (_PER_HOUR * _FT2 * _PER_KELVIN)),
    "density": Measure(unit="lb/ft³", factor=FOOT**3 / 0.45359237),
    "specific_heat": Measure(unit="Btu/(lb·°F)", factor=0.45359237 * FAHRENHEIT / BTU),
}
SYSTEMS: Mapping[str, Mapping[str, Measure]] = MappingProxyType({"metric": _METRIC, "inch": _INCH})
_QUANTITY = {"°C": "temperature", "W/m²": "flux", "W/(m²·K)": "film"}
_MEASURED = re.compile(rf"(-?\d+(?:\.\d+)?(?:e[+-]?\d+)?) ({'|'.join(map(re.escape, _QUANTITY))})")
PER_METRE = {"flow": "flow_per_m", "area": "area_per_m", "volume": "volume_per_m", "coupling": "psi"}


@dataclass(frozen=True, kw_only=True)
class Shown:
    """How one report shows its numbers.

    Parameters
    ----------
    system
        "metric" or "inch".
    flat
        A plane cross-section: flows, areas and volumes are per length of depth.
    """

    system: str = "metric"
    flat: bool = False

    def __post_init__(self):
        if self.system not in SYSTEMS:
            raise ColdseamError(f"units {self.system!r}: accepted are {' and '.join(SYSTEMS)}")

    def measure(self, quantity: str) -> Measure:
        """Return how a quantity (a key of the systems) is shown."""
        key = PER_METRE.get(quantity, quantity) if self.flat else quantity
        return SYSTEMS[self.system][key]

    def unit(self, quantity: str) -> str:
        """Return the unit of a quantity."""
        return self.measure(quantity).unit

    def value(self, quantity: str, value: Number) -> Number:
        """Return a value of the answers, or an array of them, in the unit shown."""
        measure = self.measure(quantity)
        return measure.factor * value + measure.offset

    def amount(self, quantity: str, value: float | None, digits: int = 4) -> str:
        """Return a value with so many significant digits and its unit; nothing where there is none."""
        if value is None:
            return ""
        return f"{number(self.value(quantity, value), digits)} {self.unit(quantity)}"

    def bounded(self, quantity: str, value: float | None, low: float | None, high: float | None) -> str:
        """Return a value with its error (see :func:`coldseam.report.summary.with_error`)."""
        if value is None:
            return ""
        ends = [None if end is None else self.value(quantity, end) for end in (low, high)]
        return with_error(self.value(quantity, value), ends[0], ends[1], self.unit(quantity))

    def temperature(self, value: float | None) -> str:
        """Return a temperature (°C) to the tenth of a degree.

        >>> Shown(system="inch").temperature(-20.0), Shown().temperature(-0.04)
        ('-4.0 °F', '0.0 °C')
        """
        if value is None or not math.isfinite(value):
            return ""
        return f"{round(self.value('temperature', value), 1) + 0.0:.1f} {self.unit('temperature')}"

    def difference(self, kelvin: float) -> str:
        """Return a difference of temperatures (K) to the tenth."""
        return f"{round(self.value('difference', kelvin), 1) + 0.0:.1f} {self.unit('difference')}"

    def difference_fine(self, kelvin: float) -> str:
        """Return a difference of temperatures (K) with two significant digits."""
        return f"{self.value('difference', kelvin):.2g} {self.unit('difference')}"

    def sentence(self, text: str) -> str:
        """Return a sentence of the program's own, which quotes no name, with its numbers in the units shown.

        >>> Shown(system="inch").sentence("Above this side's median of 9.46 W/m².")
        "Above this side's median of 3.00 Btu/(h·ft²)."
        """
        if self.system == "metric":
            return text

        def converted(found: re.Match[str]) -> str:
            quantity = _QUANTITY[found[2]]
            value = self.value(quantity, float(found[1]))
            return (
                self.temperature(float(found[1]))
                if quantity == "temperature"
                else f"{number(value, 3)} {self.unit(quantity)}"
            )

        return _MEASURED.sub(converted, text)

    def watched(self, event: Mapping[str, Any]) -> str:
        """Return what an event of the answers watches, its level in the unit shown and the names as typed."""
        words, level = str(event.get("watched") or ""), event.get("level")
        given = "" if level is None else f"{level:g} °C"
        if self.system == "metric" or not given or not words.endswith(given):
            return words
        return f"{words.removesuffix(given)}{self.value('temperature', level):.4g} {self.unit('temperature')}"

    def place(self, at: Sequence[float] | None) -> str:
        """Return a position (mm).

        >>> Shown().place([150, 150.04]), Shown(system="inch").place([25.4, 0])
        ('(150, 150) mm', '(1, 0) in')
        """
        if not at:
            return ""
        digits = 1 if self.system == "metric" else 2
        shown = ", ".join(
            f"{round(self.value('length', x), digits) + 0.0:.{digits}f}".rstrip("0").rstrip(".") for x in at
        )
        return f"({shown}) {self.unit('length')}"
