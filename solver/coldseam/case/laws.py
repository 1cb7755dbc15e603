"""Values that depend on the temperature, as a case file gives them: tables, polynomials, conversions.

Only the data and what can be checked of it stand here; the laws are evaluated in
:mod:`coldseam.physics.laws`. Every law has a range, and nothing is extrapolated beyond it.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, WithJsonSchema

from coldseam.case.tables import Context, Table, Trouble, fail, listing, nearest
from coldseam.case.units import ZERO_CELSIUS
from coldseam.case.values import Amount, Numbers, Temperature, checked

Points = tuple[tuple[float, float], ...]
_TEMPERATURE = Amount("temperature")
_FACTOR = Amount("ratio")
ISO_10456_RANGE = (0.0, 30.0)
"""Mean temperatures that the conversions of ISO 10456 are meant for, °C."""
SAMPLES = 200
TYPICAL_FOAM = 0.025
"""W/(m K)."""
FOAM_RANGE = (-100.0, 80.0)
"""°C, where a foam has no range of its own."""


class _Points:
    """Pairs of a temperature and a value, the temperatures rising; becomes °C and SI."""

    def __init__(self, kind: str):
        self.value = Amount(kind, above=0.0)

    def read(self, value: Any, context: Context) -> Points:
        """Return the pairs; ValueError says which are at fault."""
        if not isinstance(value, (list, tuple)) or any(not isinstance(p, (list, tuple)) or len(p) != 2 for p in value):
            raise ValueError("expected a list of pairs [temperature, value], such as [[-20, 0.021], [20, 0.024]]")
        if len(value) < 2:
            raise ValueError(f"needs at least two points, not {len(value)}; for one value write it as a number")
        troubles: list[Trouble] = []
        points: list[tuple[float, float]] = []
        for row, pair in enumerate(value):
            read = []
            for column, amount in enumerate((_TEMPERATURE, self.value)):
                try:
                    read.append(amount.read(pair[column], context))
                except ValueError as error:
                    troubles.append(((row, column), str(error)))
            if len(read) == 2:
                points.append((read[0], read[1]))
        if troubles:
            raise fail("table", troubles, value)
        for row, (before, after) in enumerate(zip(points, points[1:], strict=False), start=1):
            if after[0] <= before[0]:
                raise ValueError(f"the temperatures must rise from point to point; point {row + 1} does not")
        return tuple(points)

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


class _Coefficients:
    """Plain numbers, c0 first."""

    def read(self, value: Any, context: Context) -> tuple[float, ...]:
        """Return the numbers."""
        if not isinstance(value, (list, tuple)) or not value:
            raise ValueError("expected a list of coefficients, that of the zeroth power first")
        return Numbers(_FACTOR, len(value)).read(value, context)

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


_NUMBER = {"type": ["number", "string"]}
_PAIR = {"type": "array", "minItems": 2, "maxItems": 2, "items": _NUMBER}
_POINTS_SCHEMA = {"type": "array", "minItems": 2, "items": _PAIR}
Coefficients = Annotated[
    tuple[float, ...],
    _Coefficients(),
    WithJsonSchema({"type": "array", "minItems": 1, "items": _NUMBER, "description": "c0, c1, ..."}),
]
Range = Annotated[
    tuple[float, float],
    Numbers(_TEMPERATURE, 2),
    WithJsonSchema(_PAIR | {"description": "lowest and highest temperature that the law holds for"}),
]


class Moisture(Table):
    """Conversion of ISO 10456 for moisture: the factor ``exp(factor * change)``."""

    factor: Annotated[float, Amount("ratio", at_least=0.0)] = Field(description="f_psi or f_u of ISO 10456")
    change: Annotated[float, Amount("ratio")] = Field(description="psi2 - psi1 (m³/m³) or u2 - u1 (kg/kg)")


GASES = (
    "air", "argon", "carbon dioxide", "cyclopentane", "helium", "krypton", "methane", "neon", "nitrogen", "oxygen",
    "xenon",
)  # fmt: skip
"""What a foam's cells can hold."""


class FoamLaw(Table):
    """A closed-cell foam by its make-up, from which its conductivity over temperature and ageing follows."""

    density: Annotated[float, Amount("density", above=0.0)] = Field(description="of the foam, kg/m³")
    cell_size: Annotated[float, Amount("length", above=0.0)] = Field(description="diameter of the cells, mm")
    gas: dict[str, Annotated[float, Amount("pressure", at_least=0.0)]] = Field(
        description=f"partial pressures at 20 °C, bar, by name: {listing(GASES)}"
    )
    solid_density: Annotated[float, Amount("density", above=0.0)] = Field(1240.0, description="of the polymer, kg/m³")
    solid_conductivity: Annotated[float, Amount("conductivity", above=0.0)] = Field(0.26, description="W/(m·K)")
    strut_fraction: Annotated[float, Amount("ratio", at_least=0.0, at_most=1.0)] = Field(
        0.8, description="part of the polymer in the struts, the rest in the walls"
    )
    wall_extinction: Annotated[float, Amount("ratio", above=0.0)] = Field(6e4, description="of the polymer, 1/m")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield gases that are not known, and a foam heavier than its polymer."""
        for name in self.gas:
            if name not in GASES:
                yield ("gas", name), f"is not a gas here{nearest(name, GASES) or f'; there are {listing(GASES)}'}"
        if not sum(self.gas.values()) > 0.0:
            yield ("gas",), "needs at least one gas with a pressure above 0"
        if self.density >= self.solid_density:
            yield ("density",), "must be less than that of the polymer"


class Law(Table):
    """A value over temperature, the base of :class:`ConductivityLaw` and :class:`SpecificHeatLaw`.

    ``table`` is interpolated without overshoot; ``polynomial`` is ``sum c_i T^i`` and ``log_polynomial`` is
    ``log10 y = sum c_i (log10 T)^i`` (always in kelvin: the form of the NIST cryogenic fits).
    """

    ONE_OF: ClassVar[tuple[tuple[str, ...], ...]] = (("table", "polynomial", "log_polynomial"),)
    polynomial: Coefficients | None = Field(
        None, description="coefficients over the temperature in °C, or see argument"
    )
    log_polynomial: Coefficients | None = Field(None, description="coefficients of log10 over log10 of kelvin")
    argument: Literal["°C", "K"] = Field("°C", description="what polynomial is a polynomial of")
    range: Range | None = None
    table: Any = None

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield keys that don't go together, a range that is missing, and values that are not positive."""
        if all(getattr(self, key) is None for key in self.ONE_OF[0]):
            return  # told already
        fit = self.polynomial is not None or self.log_polynomial is not None
        if fit and self.range is None:
            yield ("range",), "is required: the lowest and highest temperature that the coefficients hold for"
            return
        if self.table is not None and self.range is not None:
            yield ("range",), "goes with coefficients; a table holds from its first to its last point"
        if "argument" in self.model_fields_set and self.polynomial is None:
            yield ("argument",), "goes with polynomial"
        if self.range is not None and self.range[0] >= self.range[1]:
            yield ("range",), "the second temperature must be the higher one"
            return
        yield from self._positive()

    def _positive(self) -> Iterator[Trouble]:
        """Yield a fault where a fit is not positive over its range."""
        low, high = self.limits
        if self.log_polynomial is not None and low <= -ZERO_CELSIUS:
            yield ("range",), "must begin above absolute zero"
            return
        for number in range(SAMPLES + 1):
            at = low + (high - low) * number / SAMPLES
            if not 0.0 < self.scalar(at) < math.inf:
                key = "polynomial" if self.polynomial is not None else "log_polynomial"
                yield (key,), f"must be above 0 over its range; at {at:.4g} °C it is {self.scalar(at):.4g}"
                return

    @property
    def limits(self) -> tuple[float, float]:
        """Lowest and highest temperature that the law holds for, °C."""
        if self.table is not None:
            return self.table[0][0], self.table[-1][0]
        return self.range if self.range is not None else ISO_10456_RANGE

    @property
    def typical(self) -> float:
        """The value in the middle of the range, for starts and overviews, SI."""
        return self.scalar(0.5 * sum(self.limits))

    def held(self, celsius: float) -> float:
        """Return the value at one temperature (°C), beyond the range that at its end, SI."""
        low, high = self.limits
        return self.scalar(min(max(celsius, low), high))

    def scalar(self, celsius: float) -> float:
        """Return the value at one temperature (°C) in SI units; tables are joined by straight lines here."""
        if self.table is not None:
            for (cold, first), (warm, second) in zip(self.table, self.table[1:], strict=False):
                if celsius <= warm:
                    part = max(celsius - cold, 0.0) / (warm - cold)
                    return float(first + part * (second - first))
            return float(self.table[-1][1])
        if self.polynomial is not None:
            x = celsius + (ZERO_CELSIUS if self.argument == "K" else 0.0)
            return math.fsum(c * x**power for power, c in enumerate(self.polynomial))
        x = math.log10(celsius + ZERO_CELSIUS)
        power = math.fsum(c * x**n for n, c in enumerate(self.log_polynomial or ()))
        return 10.0**power if power < 300.0 else math.inf


class SpecificHeatLaw(Law):
    """A specific heat over temperature, J/(kg K)."""

    table: Annotated[Points, _Points("specific heat"), WithJsonSchema(_POINTS_SCHEMA)] | None = Field(
        None, description="pairs of °C and J/(kg·K)"
    )


class ConductivityLaw(Law):
    """A conductivity over temperature, W/(m K).

    Beside the forms of :class:`Law`, ``value`` at the temperature ``at`` is converted by
    ``exp(per_kelvin (T - at))`` (ISO 10456), and ``foam`` makes it from the foam's make-up.
    """

    ONE_OF: ClassVar = (("table", "polynomial", "log_polynomial", "value", "foam"),)
    table: Annotated[Points, _Points("conductivity"), WithJsonSchema(_POINTS_SCHEMA)] | None = Field(
        None, description="pairs of °C and W/(m·K)"
    )
    value: Annotated[float, Amount("conductivity", above=0.0)] | None = Field(None, description="W/(m·K)")
    at: Temperature = Field(10.0, description="°C, the temperature that value holds for")
    per_kelvin: Annotated[float, Amount("ratio")] | None = Field(None, description="f_T of ISO 10456, 1/K")
    moisture: Moisture | None = None
    foam: FoamLaw | None = Field(None, description="a closed-cell foam by its make-up")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield what is wrong with the conversion of a value, then as every law."""
        if self.value is not None and self.per_kelvin is None:
            yield ("per_kelvin",), "is required with value: the conversion factor f_T of ISO 10456, 1/K"
            return
        if self.value is None and self.per_kelvin is not None:
            yield ("per_kelvin",), "goes with value"
        yield from super().check(context)

    @property
    def limits(self) -> tuple[float, float]:
        """Lowest and highest temperature that the law holds for, °C."""
        return FOAM_RANGE if self.foam is not None and self.range is None else super().limits

    def scalar(self, celsius: float) -> float:
        """Return the conductivity at one temperature (°C), W/(m K); of a foam no more than a value to start from."""
        if self.foam is not None:
            return TYPICAL_FOAM
        if self.value is not None:
            return float(self.value * math.exp((self.per_kelvin or 0.0) * (celsius - self.at))) * self.wet
        return super().scalar(celsius) * self.wet

    @property
    def wet(self) -> float:
        """The factor for moisture."""
        return 1.0 if self.moisture is None else math.exp(self.moisture.factor * self.moisture.change)
