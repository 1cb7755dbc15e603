"""The base of every table of the case file: all its faults are gathered, none hides another.

pydantic stops checking a table's rules as soon as one of its keys is wrong. Here a wrapping
validator looks for unknown keys and for violated alternatives first, adds pydantic's own
findings in plain English, and then the rules of the table; references to other tables are
checked key by key with the names in a :class:`Context`.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from itertools import combinations
from pathlib import Path
from typing import Any, ClassVar

from pydantic import (
    BaseModel,
    ConfigDict,
    GetJsonSchemaHandler,
    ModelWrapValidatorHandler,
    ValidationError,
    ValidationInfo,
    model_validator,
)
from pydantic_core import CoreSchema, InitErrorDetails, PydanticCustomError

Trouble = tuple[tuple[str | int, ...], str]
"""A key path relative to the table, and what is wrong there."""


@dataclass(frozen=True, kw_only=True)
class Context:
    """What a key must know of the rest of the document; None where it is not known."""

    dim: int | None = None
    axisymmetric: bool = False
    foreign: bool | None = None
    trust_scripts: bool = False
    folder: Path | None = None
    names: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    composite: frozenset[str] = frozenset()

    @property
    def section(self) -> bool:
        """True for a plane cross-section, where heat flows are per metre of depth."""
        return self.dim == 2 and not self.axisymmetric


def context_of(info: ValidationInfo) -> Context:
    """Return the context of a validation, an empty one when there is none."""
    return info.context if isinstance(info.context, Context) else Context()


def nearest_of(name: str, choices: Iterable[str]) -> str | None:
    """Return the nearest of the choices, None where none is near."""
    folded = {choice.lower(): choice for choice in choices}
    close = difflib.get_close_matches(name.lower(), folded, n=1, cutoff=0.6)
    return folded[close[0]] if close else None


def nearest(name: str, choices: Iterable[str]) -> str:
    """Return ``; did you mean "..."?`` for the nearest of the choices, or nothing."""
    close = nearest_of(name, choices)
    return f'; did you mean "{close}"?' if close is not None else ""


def listing(names: Iterable[str], *, last: str = "and", most: int = 12) -> str:
    """Return names as a phrase, ``a, b and c``; long lists are cut and say so."""
    names = list(names)
    if len(names) > most:
        return f"{', '.join(names[:most])} ... ({len(names)} in all)"
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} {last} {names[-1]}" if names else "none"


def fail(title: str, troubles: Iterable[Trouble], value: Any = None) -> ValidationError:
    """Return a pydantic error that carries several faults at their places."""
    return ValidationError.from_exception_data(
        title,
        [
            # The text goes in as a value, for pydantic fills in braces that it finds in a template.
            InitErrorDetails(type=PydanticCustomError("fault", "{what}", {"what": what}), loc=tuple(loc), input=value)
            for loc, what in troubles
        ],
    )


def troubles_of(error: ValidationError) -> list[Trouble]:
    """Return the faults of a pydantic error in plain English."""
    return [(item["loc"], plain(item)) for item in error.errors(include_url=False)]


_EXPECTED = {
    "bool_type": "expected true or false",
    "int_type": "expected a whole number",
    "int_from_float": "expected a whole number",
    "string_type": "expected text",
    "tuple_type": "expected a list in [ ]",
    "list_type": "expected a list in [ ]",
    "dict_type": "expected a table",
    "model_type": "expected a table",
}
REQUIRED = "is required"
MISSING = f"{REQUIRED} and missing"


def plain(item: Mapping[str, Any]) -> str:
    """Return what one pydantic error says, in words a user of a case file understands."""
    kind = item["type"]
    if kind == "fault":
        return str(item["ctx"]["what"])
    if kind == "missing":
        return MISSING
    shown = "" if isinstance(item["input"], (dict, list)) else f", not {_typed(item['input'])}"
    if kind in _EXPECTED:
        return _EXPECTED[kind] + shown
    if item["loc"][-1:] == ("[key]",) and kind == "literal_error":
        return f"is not a key here; accepted are {item['ctx']['expected'].replace(chr(39), '')}"
    if kind == "greater_than_equal":
        return f"must be {item['ctx']['ge']} or more{shown}"
    if kind == "literal_error":
        return f"expected {item['ctx']['expected'].replace(chr(39), chr(34))}{shown}"
    if kind == "value_error":
        return str(item["ctx"]["error"])
    if kind == "too_short":
        return f"needs at least {item['ctx']['min_length']} entries, not {item['ctx']['actual_length']}"
    if kind == "too_long":
        return f"takes at most {item['ctx']['max_length']} entries, not {item['ctx']['actual_length']}"
    text = str(item["msg"])
    return text[:1].lower() + text[1:] + shown


def _typed(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    return f'"{value}"' if isinstance(value, str) else str(value)


class Table(BaseModel):
    """A table of the case file: frozen, unknown keys refused, every fault reported."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    ONE_OF: ClassVar[tuple[tuple[str, ...], ...]] = ()
    """Groups of keys of which exactly one must be there."""
    AT_MOST_ONE: ClassVar[tuple[tuple[str, ...], ...]] = ()
    """Groups of keys that exclude each other."""
    ANY_OF: ClassVar[tuple[tuple[str, ...], ...]] = ()
    """Groups of keys of which at least one must be there; only the JSON Schema makes use of it."""
    LATER: ClassVar[Mapping[str, str]] = {}
    """Keys of the design that this version refuses, and what it says to them."""

    @classmethod
    def keys(cls) -> tuple[str, ...]:
        """Return the keys of the table as the file spells them."""
        return tuple(info.alias or name for name, info in cls.model_fields.items())

    @classmethod
    def prepare(cls, data: dict[str, Any], context: Context) -> tuple[dict[str, Any], list[Trouble]]:
        """Return the table with what must be filled in or left out, and faults seen on the way."""
        return data, []

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield the faults of a table whose keys are each valid."""
        yield from ()

    @classmethod
    def __get_pydantic_json_schema__(cls, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        """Add the alternatives to the JSON Schema."""
        result = handler(schema)
        table = handler.resolve_ref_schema(result)
        rules: list[dict[str, Any]] = [{"oneOf": [{"required": [key]} for key in group]} for group in cls.ONE_OF]
        rules += [{"anyOf": [{"required": [key]} for key in group]} for group in cls.ANY_OF]
        rules += [{"not": {"required": list(pair)}} for group in cls.AT_MOST_ONE for pair in combinations(group, 2)]
        if rules:
            table["allOf"] = rules
        spelled = {key for group in cls.ANY_OF for key in group}
        if spelled & set(table.get("required", ())):
            table["required"] = [key for key in table["required"] if key not in spelled]
        return result

    @model_validator(mode="wrap")
    @classmethod
    def _gather(cls, data: Any, handler: ModelWrapValidatorHandler[Any], info: ValidationInfo) -> Any:
        if isinstance(data, cls):
            return data
        if not isinstance(data, dict):
            raise fail(cls.__name__, [((), f"expected a table with {listing(cls.keys())}")], data)
        context = context_of(info)
        misspelled = cls._misspelled(data)
        troubles = list(cls._structure(data, misspelled))
        prepared, more = cls.prepare(dict(data), context)
        troubles += more
        model = None
        try:
            model = handler({key: value for key, value in prepared.items() if key in cls.keys()})
        except ValidationError as error:
            # A key that is already complained of (missing, say) needs no second complaint.
            seen = {loc for loc, _ in troubles}
            troubles += [trouble for trouble in troubles_of(error) if trouble[0] not in seen]
        if model is not None:
            troubles += model.check(context)
        # Where a key is misspelled, or of a later version, that the right one is missing is no news.
        excused = any(key in cls.LATER for key in data)
        troubles = [
            (loc, what)
            for loc, what in troubles
            if not (what.startswith(REQUIRED) and len(loc) == 1 and (excused or loc in misspelled))
        ]
        if troubles:
            raise fail(cls.__name__, dict.fromkeys(troubles))
        return model

    @classmethod
    def _misspelled(cls, data: dict[str, Any]) -> set[tuple[str]]:
        """Return the right spelling of keys that are nearly right."""
        keys = cls.keys()
        strange = [key for key in data if key not in keys and key not in cls.LATER]
        found = {nearest_of(key, keys) for key in strange} - set(data)
        return {(key,) for key in found if key is not None}

    @classmethod
    def _structure(cls, data: dict[str, Any], misspelled: set[tuple[str]]) -> Iterator[Trouble]:
        """Yield unknown keys and violated alternatives."""
        keys = cls.keys()
        for key in data:
            if key in cls.LATER:
                yield (key,), cls.LATER[key]
            elif key not in keys:
                yield (key,), f"is not a key here{nearest(key, keys) or f'; accepted are {listing(keys, most=30)}'}"
        for group in cls.ONE_OF:
            given = [key for key in group if key in data]
            excused = any(key in cls.LATER for key in data) or any((key,) in misspelled for key in group)
            if not given and not excused:
                yield (), f"needs exactly one of {listing(group, last='or', most=20)}"
            if len(given) > 1:
                yield (given[1],), f"exactly one of {listing(given)} may be given"
        for group in cls.AT_MOST_ONE:
            given = [key for key in group if key in data]
            if len(given) > 1:
                yield (given[1],), f"only one of {listing(given)} may be given"
