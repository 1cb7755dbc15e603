"""Units: closed tables per quantity, and the reading of values with and without a unit.

A bare number is in the unit that the case file's documentation states; a text carries its own
unit. Every quantity knows only its own units, so that a length can't be given in kilograms, and
a temperature (253.15 K is -20 °C) is not a temperature difference (10 K is 10 K).

Factors are built from the exact definitions: inch 25.4 mm, pound 0.45359237 kg, international
table Btu 1055.05585262 J, °F = 5/9 K, thermochemical values aside (NIST SP 811, appendix B; from memory).
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

INCH = 0.0254
FOOT = 0.3048
POUND = 0.45359237
BTU = 1055.05585262
KCAL = 4186.8
FAHRENHEIT = 5.0 / 9.0
HOUR = 3600.0
ZERO_CELSIUS = 273.15
ABSOLUTE_ZERO = -ZERO_CELSIUS
"""Absolute zero, °C."""


@dataclass(frozen=True, kw_only=True)
class Unit:
    """One unit of a quantity: SI value = (number + before) * factor + after."""

    factor: float
    before: float = 0.0
    after: float = 0.0


@dataclass(frozen=True, kw_only=True)
class Quantity:
    """A quantity with its closed table of units.

    Parameters
    ----------
    title
        The quantity as named to the user.
    bare
        The unit of a bare number (a key of ``units``).
    units
        Unit as written in messages -> conversion to SI (temperatures to °C).
    also
        Other spellings -> the unit in ``units``.
    """

    title: str
    bare: str
    units: Mapping[str, Unit]
    also: Mapping[str, str]


def _quantity(title: str, bare: str, units: dict[str, float | Unit], also: dict[str, str] | None = None) -> Quantity:
    table = {name: unit if isinstance(unit, Unit) else Unit(factor=unit) for name, unit in units.items()}
    return Quantity(title=title, bare=bare, units=MappingProxyType(table), also=MappingProxyType(also or {}))


_CONDUCTIVITY: dict[str, float | Unit] = {
    "W/(m·K)": 1.0,
    "mW/(m·K)": 1e-3,
    "kW/(m·K)": 1e3,
    "W/(cm·K)": 100.0,
    "W/(mm·K)": 1e3,
    "BTU/(h·ft·°F)": BTU / HOUR / FOOT / FAHRENHEIT,
    "BTU·in/(h·ft²·°F)": BTU * INCH / HOUR / FOOT**2 / FAHRENHEIT,
    "kcal/(h·m·°C)": KCAL / HOUR,
}
_CONDUCTIVITY_ALSO = {
    "W/m/K": "W/(m·K)",
    "W m-1 K-1": "W/(m·K)",
    "W/(K·m)": "W/(m·K)",
    "W/(m·°C)": "W/(m·K)",
    "mW/m/K": "mW/(m·K)",
    "mW m-1 K-1": "mW/(m·K)",
    "mW/(K·m)": "mW/(m·K)",
    "BTU/(ft·h·°F)": "BTU/(h·ft·°F)",
    "BTU·ft/(h·ft²·°F)": "BTU/(h·ft·°F)",
    "BTU in/(ft² h °F)": "BTU·in/(h·ft²·°F)",
    "kcal/(m·h·°C)": "kcal/(h·m·°C)",
    "kcal/(m·h·K)": "kcal/(h·m·°C)",
    "kcal/(h·m·K)": "kcal/(h·m·°C)",
}
_LENGTH: dict[str, float | Unit] = {
    "mm": 1e-3,
    "cm": 1e-2,
    "m": 1.0,
    "µm": 1e-6,
    "km": 1e3,
    "in": INCH,
    "ft": FOOT,
    "yd": 3 * FOOT,
    "mil": INCH / 1000,
}
_LENGTH_ALSO = {
    '"': "in",
    "″": "in",
    "''": "in",
    "in.": "in",
    "inch": "in",
    "inches": "in",
    "'": "ft",
    "′": "ft",
    "ft.": "ft",
    "foot": "ft",
    "feet": "ft",
    "um": "µm",
    "micron": "µm",
}
_POWER: dict[str, float | Unit] = {
    "W": 1.0,
    "mW": 1e-3,
    "kW": 1e3,
    "MW": 1e6,
    "BTU/h": BTU / HOUR,
    "kcal/h": KCAL / HOUR,
}

QUANTITIES: Mapping[str, Quantity] = MappingProxyType(
    {
        "length": _quantity("length", "mm", _LENGTH, _LENGTH_ALSO),
        "temperature": _quantity(
            "temperature",
            "°C",
            {
                "°C": 1.0,
                "K": Unit(factor=1.0, after=-ZERO_CELSIUS),
                "°F": Unit(factor=FAHRENHEIT, before=-32.0),
                "°R": Unit(factor=FAHRENHEIT, after=-ZERO_CELSIUS),
            },
            {"kelvin": "K", "celsius": "°C", "fahrenheit": "°F", "Celsius": "°C", "Fahrenheit": "°F"},
        ),
        "temperature difference": _quantity(
            "temperature difference", "K", {"K": 1.0, "mK": 1e-3, "°C": 1.0, "°F": FAHRENHEIT}, {"°R": "°F"}
        ),
        "conductivity": _quantity("conductivity", "W/(m·K)", _CONDUCTIVITY, _CONDUCTIVITY_ALSO),
        "linear transmittance": _quantity(
            "linear transmittance",
            "W/(m·K)",
            {name: _CONDUCTIVITY[name] for name in ("W/(m·K)", "mW/(m·K)", "BTU/(h·ft·°F)")},
            {"W/m/K": "W/(m·K)", "W/(m·°C)": "W/(m·K)"},
        ),
        "point transmittance": _quantity(
            "point transmittance", "W/K", {"W/K": 1.0, "mW/K": 1e-3, "BTU/(h·°F)": BTU / HOUR / FAHRENHEIT}
        ),
        "per area": _quantity(
            "number or length per area",
            "1/m²",
            {"1/m²": 1.0, "1/ft²": FOOT**-2, "m/m²": 1.0, "ft/ft²": 1.0 / FOOT},
            {"1/m": "m/m²", "/m²": "1/m²", "/ft²": "1/ft²"},
        ),
        "density": _quantity(
            "density",
            "kg/m³",
            {"kg/m³": 1.0, "g/cm³": 1e3, "kg/L": 1e3, "g/L": 1.0, "t/m³": 1e3, "lb/ft³": POUND / FOOT**3},
            {
                "lbm/ft³": "lb/ft³",
                "pcf": "lb/ft³",
                "lb/cu ft": "lb/ft³",
                "g/cc": "g/cm³",
                "g/ml": "g/cm³",
                "g/mL": "g/cm³",
                "kg/l": "kg/L",
                "g/l": "g/L",
                "kg/dm³": "kg/L",
            },
        ),
        "specific heat": _quantity(
            "specific heat",
            "J/(kg·K)",
            {
                "J/(kg·K)": 1.0,
                "kJ/(kg·K)": 1e3,
                "J/(g·K)": 1e3,
                "Wh/(kg·K)": HOUR,
                "BTU/(lb·°F)": BTU / POUND / FAHRENHEIT,
                "kcal/(kg·°C)": KCAL,
            },
            {
                "J/kg/K": "J/(kg·K)",
                "kJ/kg/K": "kJ/(kg·K)",
                "J/(kg·°C)": "J/(kg·K)",
                "kJ/(kg·°C)": "kJ/(kg·K)",
                "kcal/(kg·K)": "kcal/(kg·°C)",
                "BTU/(lbm·°F)": "BTU/(lb·°F)",
            },
        ),
        "film": _quantity(
            "film coefficient",
            "W/(m²·K)",
            {
                "W/(m²·K)": 1.0,
                "kW/(m²·K)": 1e3,
                "mW/(m²·K)": 1e-3,
                "W/(cm²·K)": 1e4,
                "BTU/(h·ft²·°F)": BTU / HOUR / FOOT**2 / FAHRENHEIT,
                "kcal/(h·m²·°C)": KCAL / HOUR,
            },
            {
                "W/m²/K": "W/(m²·K)",
                "W m-2 K-1": "W/(m²·K)",
                "W/(K·m²)": "W/(m²·K)",
                "W/(m²·°C)": "W/(m²·K)",
                "BTU/(ft²·h·°F)": "BTU/(h·ft²·°F)",
                "kcal/(m²·h·°C)": "kcal/(h·m²·°C)",
                "kcal/(h·m²·K)": "kcal/(h·m²·°C)",
            },
        ),
        "resistance": _quantity(
            "thermal resistance of an area",
            "m²·K/W",
            {"m²·K/W": 1.0, "cm²·K/W": 1e-4, "mm²·K/W": 1e-6, "h·ft²·°F/BTU": HOUR * FOOT**2 * FAHRENHEIT / BTU},
            {
                "K·m²/W": "m²·K/W",
                "m²·°C/W": "m²·K/W",
                "ft²·°F·h/BTU": "h·ft²·°F/BTU",
                "ft²·h·°F/BTU": "h·ft²·°F/BTU",
                "°F·ft²·h/BTU": "h·ft²·°F/BTU",
                "°F·h·ft²/BTU": "h·ft²·°F/BTU",
            },
        ),
        "flux": _quantity(
            "heat flux",
            "W/m²",
            {"W/m²": 1.0, "mW/m²": 1e-3, "kW/m²": 1e3, "W/cm²": 1e4, "BTU/(h·ft²)": BTU / HOUR / FOOT**2},
            {"BTU/(ft²·h)": "BTU/(h·ft²)"},
        ),
        "power": _quantity("heat flow", "W", _POWER),
        "power per depth": _quantity(
            "heat flow per metre of depth",
            "W/m",
            {"W/m": 1.0, "mW/m": 1e-3, "kW/m": 1e3, "BTU/(h·ft)": BTU / HOUR / FOOT},
            {"BTU/(ft·h)": "BTU/(h·ft)"},
        ),
        "heat_density": _quantity(
            "heat source per volume",
            "W/m³",
            {"W/m³": 1.0, "kW/m³": 1e3, "MW/m³": 1e6, "W/L": 1e3, "W/cm³": 1e6, "BTU/(h·ft³)": BTU / HOUR / FOOT**3},
            {"W/l": "W/L", "BTU/(ft³·h)": "BTU/(h·ft³)"},
        ),
        "heat capacity": _quantity(
            "heat capacity",
            "J/K",
            {"J/K": 1.0, "kJ/K": 1e3, "MJ/K": 1e6, "Wh/K": HOUR, "kWh/K": 1e3 * HOUR, "BTU/°F": BTU / FAHRENHEIT},
            {"J/°C": "J/K", "kJ/°C": "kJ/K", "MJ/°C": "MJ/K"},
        ),
        "time": _quantity(
            "time",
            "s",
            {"s": 1.0, "ms": 1e-3, "min": 60.0, "h": HOUR, "d": 24 * HOUR, "week": 168 * HOUR, "year": 8760 * HOUR},
            {
                "sec": "s",
                "second": "s",
                "seconds": "s",
                "minute": "min",
                "minutes": "min",
                "hr": "h",
                "hour": "h",
                "hours": "h",
                "day": "d",
                "days": "d",
                "weeks": "week",
                "years": "year",
            },
        ),
        "air flow": _quantity(
            "flow of air",
            "m³/s",
            {"m³/s": 1.0, "m³/h": 1 / HOUR, "m³/min": 1 / 60, "L/s": 1e-3, "L/min": 1e-3 / 60, "cfm": FOOT**3 / 60},
            {"l/s": "L/s", "l/min": "L/min", "ft³/min": "cfm", "CFM": "cfm"},
        ),
        "speed": _quantity(
            "speed",
            "m/s",
            {"m/s": 1.0, "km/h": 1.0 / 3.6, "cm/s": 0.01, "ft/min": FOOT / 60, "ft/s": FOOT, "mph": 5280 * FOOT / HOUR},
            {"kmh": "km/h", "fpm": "ft/min"},
        ),
        "pressure": _quantity(
            "pressure",
            "bar",
            {"bar": 1e5, "mbar": 100.0, "Pa": 1.0, "hPa": 100.0, "kPa": 1e3, "atm": 101325.0, "psi": 6894.757293168361},
        ),
        "viscosity": _quantity(
            "dynamic viscosity", "Pa·s", {"Pa·s": 1.0, "mPa·s": 1e-3, "µPa·s": 1e-6, "cP": 1e-3}, {"kg/(m·s)": "Pa·s"}
        ),
        "angle": _quantity("angle", "°", {"°": 1.0}, {"deg": "°", "degree": "°", "degrees": "°"}),
        "mass": _quantity("mass", "kg", {"kg": 1.0, "g": 1e-3, "t": 1e3, "lb": POUND}),
        "area": _quantity("area", "m²", {"m²": 1.0, "cm²": 1e-4, "mm²": 1e-6, "ft²": FOOT**2}, {"sq ft": "ft²"}),
        "latent heat": _quantity(
            "latent heat", "J/kg", {"J/kg": 1.0, "kJ/kg": 1e3, "MJ/kg": 1e6, "J/g": 1e3, "BTU/lb": BTU / POUND}
        ),
        "length per depth": _quantity(
            "area per metre of depth", "m²/m", {"m²/m": 1.0, "mm²/mm": 1e-3, "ft²/ft": FOOT, "m": 1.0, "mm": 1e-3}
        ),
        "ratio": _quantity("ratio", "", {"": 1.0, "%": 0.01, "‰": 0.001}, {"percent": "%", "per cent": "%"}),
    }
)
"""Every quantity by the name that :func:`parse` takes."""

_NUMBER = re.compile(r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?")
_FRACTION = re.compile(r"[+-]?(?:\d+[ -])?\d+/\d+\s*(?:[a-zA-Z\"'].*)?$")
_SAME = {
    "²": "2",
    "³": "3",
    "⁻": "-",
    "¹": "1",
    "º": "°",
    "˚": "°",
    "℃": "°C",
    "℉": "°F",
    "\u212a": "K",
    "μ": "µ",
    "“": '"',
    "”": '"',
    "’": "'",
    "−": "-",
    "–": "-",
    "∙": "·",
    "⋅": "·",
    "•": "·",
    "*": "·",
    "\u00a0": " ",
    "\u202f": " ",
    "\u2009": " ",
    "\u2007": " ",
}
_CHARACTERS = str.maketrans(_SAME)


def _canonical(unit: str) -> str:
    """Return a spelling of a unit in which the usual ways of writing it agree."""
    text = unit.strip().translate(_CHARACTERS)
    text = re.sub(r"(?i)\bbtu", "BTU", text)
    text = re.sub(r"(?i)deg(?:rees?)?\.?\s*(?=[CFRK]\b)", "°", text)
    text = re.sub(r"\bsq\.?\s*(ft|in|m)\b", r"\g<1>2", text)
    text = re.sub(r"\bhrs?\b", "h", text) if len(text) > 3 else text
    text = re.sub(r"(?<=[A-Za-z2])-(?=[A-Za-z°])", "", text)
    text = re.sub(r"°(?=[CFK])", "", text)
    return re.sub(r"[\s()·^]", "", text)


def _lookup(quantity: Quantity) -> dict[str, Unit]:
    table = {_canonical(name): unit for name, unit in quantity.units.items()}
    return table | {_canonical(other): quantity.units[name] for other, name in quantity.also.items()}


_LOOKUP: Mapping[str, Mapping[str, Unit]] = MappingProxyType({name: _lookup(q) for name, q in QUANTITIES.items()})


def accepted(quantity: str) -> str:
    """Return what is accepted for a quantity, as a phrase for a message.

    >>> accepted("flux")
    'a number in W/m² or text with one of W/m², mW/m², kW/m², W/cm², BTU/(h·ft²)'
    """
    table = QUANTITIES[quantity]
    if quantity == "ratio":
        return 'a fraction such as 0.05 or text such as "5 %"'
    return f"a number in {table.bare} or text with one of {', '.join(table.units)}"


def parse(quantity: str, value: object) -> float:
    """Return a value in SI units (temperatures in °C).

    Parameters
    ----------
    quantity
        A key of :data:`QUANTITIES`.
    value
        A number in the quantity's documented unit, or text: a number and a unit.

    Raises
    ------
    ValueError
        The value is no finite number, or has no unit of this quantity; the message says what
        would be accepted.

    Examples
    --------
    >>> parse("length", 300)
    0.3
    >>> parse("conductivity", "22 mW/mK")
    0.022
    """
    if isinstance(value, bool) or not isinstance(value, (int, float, str)):
        raise ValueError(f"{_shown(value)} is not a {QUANTITIES[quantity].title}; accepted is {accepted(quantity)}")
    if isinstance(value, str):
        number, unit = _split(quantity, value)
    else:
        unit = QUANTITIES[quantity].units[QUANTITIES[quantity].bare]
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
    result = _apply(number, unit)
    if not math.isfinite(result):
        raise ValueError(f"{_shown(value)} is not a finite number; accepted is {accepted(quantity)}")
    if quantity == "temperature" and result < ABSOLUTE_ZERO - 1e-9:
        raise ValueError(f"{_shown(value)} is below absolute zero (-273.15 °C)")
    return result


def _apply(number: float, unit: Unit) -> float:
    # 1e-3 and the like are inexact in binary: dividing by the exact reciprocal makes 300 mm the float 0.3.
    inverse = 1.0 / unit.factor
    scaled = number + unit.before
    whole = unit.factor < 1.0 and round(inverse) >= 1 and unit.factor == 1.0 / round(inverse)
    return (scaled / round(inverse) if whole else scaled * unit.factor) + unit.after


def _split(quantity: str, text: str) -> tuple[float, Unit]:
    """Return the number of a text and its unit."""
    clean = text.strip().translate(_CHARACTERS)
    match = _NUMBER.match(clean)
    if "," in clean:
        raise ValueError(f"{_shown(text)} has a comma; write decimals with a point and no thousands separators")
    if _FRACTION.match(clean):
        raise ValueError(f'{_shown(text)} is a fraction; write it as a decimal, such as "0.5 in"')
    if match is None:
        raise ValueError(f"{_shown(text)} does not begin with a number; accepted is {accepted(quantity)}")
    spelled = clean[match.end() :].strip()
    unit = _LOOKUP[quantity].get(_canonical(spelled))
    if unit is None and not spelled:
        raise ValueError(f"{_shown(text)} has no unit; accepted is {accepted(quantity)}")
    if unit is None:
        raise ValueError(f"{_shown(spelled)} is not a unit of {QUANTITIES[quantity].title}{_belongs(spelled)}; "
                         f"accepted is {accepted(quantity)}")  # fmt: skip
    return float(match.group()), unit


def _belongs(spelled: str) -> str:
    """Return which quantity a unit belongs to, in brackets, or nothing."""
    key = _canonical(spelled)
    owners = [QUANTITIES[name].title for name, table in _LOOKUP.items() if key and key in table]
    return f" (it is one of {' or '.join(owners)})" if owners else ""


def _shown(value: object) -> str:
    text = f'"{value}"' if isinstance(value, str) else {True: "true", False: "false"}.get(value, repr(value)) \
        if isinstance(value, bool) else repr(value)  # fmt: skip
    return text if len(text) <= 60 else f"{text[:57]}..."
