"""The page that sets variants side by side: answers, differences to the first, limits, and pictures on one scale."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from coldseam.report.chapters import in_unit
from coldseam.report.document import page
from coldseam.report.files import csv_text, write_files
from coldseam.report.markup import Markup, joined, name, table, tag
from coldseam.report.shown import Shown
from coldseam.report.stills import figure
from coldseam.report.view import Picture

ALONE = ("model", "temperature", "surface", "surface_behind")
"""Pictures (without number) that are set side by side."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Variant:
    """One of the things compared.

    Parameters
    ----------
    name
        As shown: the case file's or the folder's name.
    answers
        The content of answers.json.
    folder
        Where its pictures lie.
    pictures
        Those that were drawn.
    """

    name: str
    answers: Mapping[str, Any]
    folder: Path
    pictures: tuple[Picture, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Row:
    """One quantity of all variants: values in the answers' units, None where a variant lacks it, and how to write one."""

    chapter: str
    what: str
    values: tuple[float | None, ...]
    write: Callable[[int], str]
    difference: Callable[[float], str]


def write_comparison(variants: Sequence[Variant], folder: Path, system: str, *, one_scale: bool) -> list[Path]:
    """Write comparison.html and comparison.csv into a folder.

    Parameters
    ----------
    variants
        At least two; differences are to the first.
    folder
        Existing output folder.
    system
        Units, "metric" or "inch".
    one_scale
        Whether the pictures' colours mean the same temperatures everywhere.

    Raises
    ------
    OutputError
        They could not be written.
    """
    flat = {v.answers.get("dimensions") == 2 and not v.answers.get("axisymmetric") for v in variants}
    shown = Shown(system=system, flat=flat == {True})
    rows = all_rows(variants, shown)
    heads = [f"{letter(k)}" for k in range(len(variants))]
    parts = [("variants", "What is compared", _variants(variants))]
    if len(flat) > 1:
        warning = (
            "Plane cross-sections (W per metre of depth) stand beside other models (W): do not compare their flows."
        )
        parts.append(("mixed", "Caution", tag("p", warning)))
    parts.append(("limits", "Limits", _limits(variants, shown)))
    for chapter in dict.fromkeys(row.chapter for row in rows):
        body = [_cells(row, len(variants)) for row in rows if row.chapter == chapter]
        columns = ["what", *heads, *(f"{head} − A" for head in heads[1:])]
        parts.append((chapter.lower().replace(" ", "-"), chapter,
                      table(f"{chapter}, and differences to A", columns, body, range(1, len(columns)))))  # fmt: skip
    parts.append(("pictures", "Pictures", _pictures(variants, one_scale)))
    made = page(f"Comparison: {' / '.join(v.name for v in variants)}", tag("p", _sentence(variants, shown), {"class": "answer"}),
                [part for part in parts if part[2]], scripts=False, kind="Variants side by side")  # fmt: skip
    lines = [[row.chapter, row.what, *row.values] for row in rows]
    listed = csv_text(["chapter", "what", *(f"{letter(k)} {v.name}" for k, v in enumerate(variants))], lines)
    return write_files(folder, {"comparison.html": made.encode(), "comparison.csv": listed.encode()})


def letter(position: int) -> str:
    """Return A, B, ... Z, A2, B2, ... for the position of a variant.

    >>> letter(0), letter(27)
    ('A', 'B2')
    """
    turn, place = divmod(position, 26)
    return chr(ord("A") + place) + (str(turn + 1) if turn else "")


def all_rows(variants: Sequence[Variant], shown: Shown) -> list[Row]:
    """Return every quantity that at least one variant has, matched by name."""
    rows: list[Row] = []

    def add(chapter: str, table_key: str, read: Callable[[Any], tuple | None], quantity: str, says: str = "") -> None:
        tables = [v.answers.get(table_key) or {} for v in variants]
        for key in dict.fromkeys(key for found in tables for key in found):
            values = [read(found[key]) if key in found else None for found in tables]
            if any(value is not None and value[0] is not None for value in values):
                rows.append(_row(chapter, f"{says}{key}", values, quantity, shown))

    add("Heat flows", "spaces", _bounds("heat_flow"), "flow", "space ")
    add(
        "Heat flows",
        "boundaries",
        lambda e: None if e.get("kind") == "adiabatic" else _bounds("heat_flow")(e),
        "flow",
        "boundary ",
    )
    add("Bridges and enclosures", "bridges", _bounds("psi"), "psi", "ψ of ")
    add("Bridges and enclosures", "bridges", _bounds("chi"), "chi", "χ of ")
    add("Bridges and enclosures", "enclosures", _bounds("K"), "film", "K of ")
    add("Temperatures", "boundaries", lambda e: _end(e, "min"), "temperature", "coldest place of ")
    add("Temperatures", "boundaries", lambda e: _end(e, "max"), "temperature", "warmest place of ")
    add("Temperatures", "probes", lambda e: (e.get("temperature"), None, None), "temperature", "probe ")
    add("Moisture", "surfaces", lambda e: ((e.get("f_Rsi") or {}).get("value"), None, None), "number", "f_Rsi of ")
    add("Moisture", "surfaces", lambda e: ((e.get("moisture") or {}).get("margin_condensation_kelvin"), None, None),
        "difference", "margin to dew or frost of ")  # fmt: skip
    return rows


def _bounds(key: str) -> Callable[[Mapping[str, Any]], tuple]:
    return lambda entry: (entry.get(key), entry.get(f"{key}_low"), entry.get(f"{key}_high"))


def _end(entry: Mapping[str, Any], end: str) -> tuple | None:
    found = entry.get("temperature") or {}
    return None if entry.get("kind") == "adiabatic" or end not in found else (found[end], None, None)


def _row(chapter: str, what: str, values: Sequence[tuple | None], quantity: str, shown: Shown) -> Row:
    known = [value or (None, None, None) for value in values]
    of_piece = Shown(system=shown.system)

    def write(position: int) -> str:
        value, low, high = known[position]
        if value is None:
            return ""
        if quantity == "number":
            return f"{value:.3f}"
        if quantity == "temperature":
            return shown.temperature(value)
        if quantity == "difference":
            return shown.difference(value)
        return (
            of_piece.bounded("coupling", value, low, high)
            if quantity == "chi"
            else shown.bounded(quantity, value, low, high)
        )

    def difference(value: float) -> str:
        if quantity == "number":
            return f"{value:+.3f}"
        if quantity in ("temperature", "difference"):
            return _signed(shown.difference(value), value)
        kind, units = ("coupling", of_piece) if quantity == "chi" else (quantity, shown)
        return _signed(units.amount(kind, value, 3), value)

    return Row(
        chapter=chapter, what=what, values=tuple(value[0] for value in known), write=write, difference=difference
    )


def _signed(words: str, value: float) -> str:
    return f"+{words}" if value > 0 else words


def _cells(row: Row, count: int) -> list[object]:
    first = row.values[0]
    differences = ["" if first is None or value is None else row.difference(value - first) for value in row.values[1:]]
    return [name(row.what), *(row.write(k) for k in range(count)), *differences]


def _variants(variants: Sequence[Variant]) -> Markup:
    rows = []
    for k, variant in enumerate(variants):
        limits = variant.answers.get("limits") or {}
        missed = [key for key, entry in limits.items() if not entry["met"]]
        verdict = (
            joined(["not met: ", joined([name(key) for key in missed], ", ")])
            if missed
            else "all met"
            if limits
            else "none set"
        )
        mesh = variant.answers.get("mesh") or {}
        rows.append((letter(k), name(variant.name), name(variant.answers.get("title") or ""), verdict,
                     f"{mesh.get('nodes', '')} nodes", tag("code", (variant.answers.get("case_sha256") or "")[:16])))  # fmt: skip
    columns = ("", "variant", "title", "limits", "mesh", "case file's SHA-256 begins")
    return table("Variants; differences are to A", columns, rows)


def _limits(variants: Sequence[Variant], shown: Shown) -> Markup:
    """Return every limit's value and verdict in each variant."""
    tables = [variant.answers.get("limits") or {} for variant in variants]
    rows = []
    for key in dict.fromkeys(key for found in tables for key in found):
        entries = [found.get(key) for found in tables]
        cells = [
            "" if e is None else f"{in_unit(e['value'], e.get('unit'), shown)}, {'met' if e['met'] else 'not met'}"
            for e in entries
        ]
        rows.append((name(key), *cells))
    return table("Limits", ("limit", *(letter(k) for k in range(len(variants)))), rows)


def _sentence(variants: Sequence[Variant], shown: Shown) -> Markup:
    """Return how the largest heat flow of the first variant changes."""
    spaces = variants[0].answers.get("spaces") or {}
    flows = {key: abs(entry["heat_flow"]) for key, entry in spaces.items() if entry.get("heat_flow")}
    if not flows:
        return Markup("")
    key = max(flows, key=lambda one: flows[one])
    told = [joined(["Heat flow of space ", name(key), ": ", shown.amount("flow", flows[key]), " in A"])]
    for k, variant in enumerate(variants[1:], 1):
        entry = (variant.answers.get("spaces") or {}).get(key)
        if entry and entry.get("heat_flow"):
            size = abs(entry["heat_flow"])
            told.append(f"{shown.amount('flow', size)} in {letter(k)} ({100 * (size / flows[key] - 1):+.3g} %)")
    return joined([joined(told, ", "), "."])


def _pictures(variants: Sequence[Variant], one_scale: bool) -> Markup:
    """Return the pictures that the variants have in common, the same kind side by side."""
    kinds = dict.fromkeys(_kind(picture) for variant in variants for picture in variant.pictures)
    rows = []
    for kind in kinds:
        found = [(k, variant, p) for k, variant in enumerate(variants) for p in variant.pictures if _kind(p) == kind]
        cells = [
            tag("div", [tag("p", [letter(k), ": ", name(variant.name)]), figure(p, variant.folder)])
            for k, variant, p in found
        ]
        rows.append(tag("div", cells, {"class": "beside"}))
    told = (
        "All temperatures are drawn on one scale."
        if one_scale
        else "Every picture has a scale of its own: compare the numbers, not the colours."
    )
    return joined([tag("p", told), *rows]) if rows else Markup("")


def _kind(picture: Picture) -> str:
    return Path(picture.file).stem
