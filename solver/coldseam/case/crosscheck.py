"""What only the whole document shows: names, references and things that nothing uses.

These look at the document as typed and put up with wrong types, so that they are reported
together with the faults of single keys.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from coldseam.case.tables import Context, Trouble, nearest_of

if TYPE_CHECKING:
    from coldseam.case.model import Case

ARRAYS = ("body", "boundary", "sheet", "contact", "probe", "bridge", "limit", "event")


def entries(document: Mapping[str, Any], key: str) -> Iterator[tuple[int, dict[str, Any]]]:
    """Yield position and table of the entries of an array of tables, whatever else is there left out."""
    array = document.get(key)
    for position, entry in enumerate(array if isinstance(array, list) else ()):
        if isinstance(entry, dict):
            yield position, entry


def names(document: Mapping[str, Any], key: str) -> tuple[str, ...]:
    """Return the names in an array of tables."""
    return tuple(entry["name"] for _, entry in entries(document, key) if isinstance(entry.get("name"), str))


def _keys(document: Mapping[str, Any], key: str) -> tuple[str, ...]:
    table = document.get(key)
    return tuple(table) if isinstance(table, dict) else ()


def context_from(document: Mapping[str, Any], folder: Path | None) -> Context:
    """Return what single keys must know of the document."""
    model = document.get("model")
    model = model if isinstance(model, dict) else {}
    dim = model.get("dimensions")
    known = {
        "material": _keys(document, "materials"),
        "space": _keys(document, "spaces"),
        "fluid": _keys(document, "fluids"),
    }
    known["cavity"] = _keys(document, "cavities")
    known |= {key: names(document, key) for key in ("body", "boundary", "probe", "bridge")}
    composite = (entry.get("name") for _, entry in entries(document, "body") if "enclosure" in entry or "file" in entry)
    return Context(
        dim=dim if dim in (2, 3) and not isinstance(dim, bool) else None,
        axisymmetric=model.get("axisymmetric") is True,
        foreign="mesh" in model,
        trust_scripts=model.get("trust_scripts") is True,
        folder=folder,
        names=known,
        composite=frozenset(name for name in composite if isinstance(name, str)),
    )


def document_troubles(document: Mapping[str, Any]) -> list[Trouble]:
    """Return double names, spaces that nobody touches, two rests and the lack of any temperature."""
    return [*_doubles(document), *_untouched(document), *_rests(document), *_temperatures(document)]


def _doubles(document: Mapping[str, Any]) -> Iterator[Trouble]:
    for key in ARRAYS:
        first: dict[str, int] = {}
        for position, entry in entries(document, key):
            name = entry.get("name")
            if isinstance(name, str) and first.setdefault(name, position) != position:
                yield (key, position, "name"), f'"{name}" is the name of {key}[{first[name] + 1}] already'


def _untouched(document: Mapping[str, Any]) -> Iterator[Trouble]:
    spaces = _keys(document, "spaces")
    touched: set[str | None] = set()
    for _, entry in entries(document, "boundary"):
        space = entry.get("space")
        if isinstance(space, str):
            # A misspelled reference is a fault of its own, and the space it means is touched.
            touched.add(space if space in spaces else nearest_of(space, spaces))
    touched |= set(_exchanged(document))
    for name in spaces:
        if name not in touched:
            yield ("spaces", name), f'no boundary has space = "{name}"; give it one or take the space out'


def _exchanged(document: Mapping[str, Any]) -> Iterator[str]:
    """Yield the spaces that floating ones exchange air with, or whose air their machines use."""
    spaces = document.get("spaces")
    for space in (spaces if isinstance(spaces, dict) else {}).values():
        floating = space.get("floating") if isinstance(space, dict) else None
        if not isinstance(floating, dict):
            continue
        exchange, cooling = floating.get("air_exchange"), floating.get("cooling")
        for entry in exchange if isinstance(exchange, list) else [exchange]:
            if isinstance(entry, dict) and isinstance(entry.get("with"), str):
                yield entry["with"]
        if isinstance(cooling, dict) and isinstance(cooling.get("ambient"), str):
            yield cooling["ambient"]


def _rests(document: Mapping[str, Any]) -> Iterator[Trouble]:
    rests = [position for position, entry in entries(document, "boundary") if entry.get("on") == "rest"]
    for position in rests[1:]:
        yield ("boundary", position, "on"), f'boundary[{rests[0] + 1}] has the "rest" already'


def _temperatures(document: Mapping[str, Any]) -> Iterator[Trouble]:
    found = list(entries(document, "boundary"))
    if found and not any("space" in entry or "temperature" in entry for _, entry in found):
        yield ("boundary",), "none has a space or a temperature, so no temperature can be computed"


def unused_materials(case: Case) -> tuple[str, ...]:
    """Return a warning for every material that nothing is made of."""
    used: set[str | None] = {body.material for body in case.body} | {sheet.material for sheet in case.sheet}
    for body in case.body:
        used |= set((body.materials or {}).values())
        if body.enclosure is not None:
            for layers in (body.enclosure.layers, *body.enclosure.faces.values()):
                used |= {layer.material for layer in layers}
    for bridge in case.bridge:
        used |= {layer.material for wall in bridge.flanking or () for layer in wall.layers}
    return tuple(f'material "{name}" is used nowhere' for name in case.materials if name not in used)
