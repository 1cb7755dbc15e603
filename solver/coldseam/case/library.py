"""The materials library: named entries, each with its source and the temperature it holds for.

The values live in ``library/*.toml`` beside this file and travel in the wheel; they are read once,
when first asked for. A case takes an entry by ``library = "PIR foam, aged"``.
"""

from __future__ import annotations

import difflib
import functools
import tomllib
from dataclasses import dataclass
from importlib import resources
from typing import Any

from coldseam.errors import ColdseamError


@dataclass(frozen=True, kw_only=True)
class Entry:
    """One material of the library.

    Parameters
    ----------
    name
        Its name, as a case file quotes it.
    category
        What kind of material it is, one word or two ("foam", "metal", "ice and snow", ...).
    conductivity
        Thermal conductivity, W/(m K), one number: it holds where `holds_for` says.
    density
        kg/m3.
    specific_heat
        J/(kg K).
    emissivity
        Of the surface named in `source`, 0 to 1; None where no source is at hand.
    holds_for
        The temperature or range, and the condition, that the values hold for.
    source
        Where the values come from; "from memory" marks what no stored copy confirms.
    note
        What a user has to know before using the values; "" when there is nothing.
    aliases
        Other names that find the entry.
    law, heat_law
        Conductivity and specific heat over temperature, in the form of a case file's keys; None where it is one number.
    """

    name: str
    category: str
    conductivity: float
    density: float
    specific_heat: float
    emissivity: float | None
    holds_for: str
    source: str
    note: str = ""
    aliases: tuple[str, ...] = ()
    law: dict[str, Any] | None = None
    heat_law: dict[str, Any] | None = None


class LibraryError(ColdseamError, LookupError):
    """The library holds no material of that name; ``nearest`` lists the names closest to it."""

    exit_code = 2

    def __init__(self, name: str, nearest: tuple[str, ...]):
        self.name = name
        self.nearest = nearest
        hint = f"; nearest: {', '.join(map(repr, nearest))}" if nearest else ""
        super().__init__(f"no material {name!r} in the library{hint}")


def names() -> tuple[str, ...]:
    """Return the names of all entries, in alphabetical order.

    >>> "PIR foam, aged" in names()
    True
    """
    return tuple(sorted((entry.name for entry in _entries()), key=_key))


def lookup(name: str) -> Entry:
    """Return the entry of that name or alias; capitals and spacing don't matter.

    Raises
    ------
    LibraryError
        If no entry has the name; the message suggests the nearest names.

    >>> lookup("pir foam, AGED").conductivity
    0.027
    """
    try:
        return _index()[_key(name)]
    except KeyError:
        raise LibraryError(name, _nearest(name)) from None


def search(text: str) -> list[Entry]:
    """Return the entries in which every word of `text` occurs, those with a hit in the name first.

    Names, aliases, category, note and source are searched; an empty text finds everything.

    >>> [entry.name for entry in search("ice -10")]
    ['Ice, -10 °C']
    """
    words = _key(text).split()
    ranked = []
    for entry in _entries():
        titles = _key(" ".join((entry.name, *entry.aliases)))
        rest = _key(" ".join((entry.category, entry.note, entry.source)))
        if all(word in titles for word in words):
            ranked.append((0, entry))
        elif all(word in titles or word in rest for word in words):
            ranked.append((1, entry))
    return [entry for _, entry in sorted(ranked, key=lambda pair: (pair[0], _key(pair[1].name)))]


def as_material_keys(entry: Entry) -> dict[str, Any]:
    """Return the keys that the entry fills in a case file's ``[materials.<name>]`` table.

    Keys: conductivity W/(m K) (a table where it follows a law over temperature), density kg/m3,
    specific_heat J/(kg K) (a table likewise), emissivity (None where unknown)
    and source, in which the entry's name and the temperature it holds for are said too.
    """
    return {
        "conductivity": entry.law or entry.conductivity,
        "density": entry.density,
        "specific_heat": entry.heat_law or entry.specific_heat,
        "emissivity": entry.emissivity,
        "source": f"library entry {entry.name!r} ({entry.holds_for}): {entry.source}",
    }


def _key(text: str) -> str:
    """Return `text` as names are compared: without regard to capitals and to runs of spaces."""
    return " ".join(text.casefold().split())


def _nearest(name: str, count: int = 4) -> tuple[str, ...]:
    """Return up to `count` names of entries like `name`: by its spelling, then by a shared word."""
    index = _index()
    key = _key(name)
    keys = difflib.get_close_matches(key, list(index), n=count, cutoff=0.6)
    words = [word for word in key.replace(",", " ").split() if len(word) > 2]
    shared = {other: sum(word in other for word in words) for other in index}
    keys += sorted((other for other in index if shared[other]), key=lambda other: (-shared[other], other))
    found = dict.fromkeys(index[other].name for other in keys)
    return tuple(found)[:count]


@functools.cache
def _index() -> dict[str, Entry]:
    """Return every entry under its name and its aliases, as `_key` writes them."""
    index: dict[str, Entry] = {}
    for entry in _entries():
        for name in (entry.name, *entry.aliases):
            if _key(name) in index:
                raise ValueError(f"{name!r} names two entries: {index[_key(name)].name!r} and {entry.name!r}")
            index[_key(name)] = entry
    return index


@functools.cache
def _entries() -> tuple[Entry, ...]:
    """Return all entries in the order of the files."""
    folder = resources.files("coldseam.case").joinpath("library")
    files = sorted((file for file in folder.iterdir() if file.name.endswith(".toml")), key=lambda file: file.name)
    tables = [tomllib.loads(file.read_text(encoding="utf-8")) for file in files]
    sources = {key: text for table in tables for key, text in table.get("sources", {}).items()}
    return tuple(_entry(row, sources) for table in tables for row in table.get("material", ()))


def _entry(row: dict[str, Any], sources: dict[str, str]) -> Entry:
    """Return one row as an entry, its sources spelt out; an emissivity must come with its own source."""
    row = dict(row)
    surface = row.pop("emissivity_source", None)
    if (surface is None) != (row.get("emissivity") is None):
        raise ValueError(f"{row['name']}: emissivity and emissivity_source go together")
    source = row.pop("source") + (f"; emissivity: {surface}" if surface else "")
    for key in ("conductivity", "density", "specific_heat"):
        row[key] = float(row[key])
    row.setdefault("emissivity", None)
    row["law"], row["heat_law"] = row.pop("conductivity_law", None), row.pop("specific_heat_law", None)
    row["aliases"] = tuple(row.get("aliases", ()))
    return Entry(**row, source=source.format_map(sources))
