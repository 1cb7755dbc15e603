"""The chapters of a report that tell the model as it was given, and how it was computed."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from typing import Any

from coldseam.case.model import Case
from coldseam.case.write import to_toml
from coldseam.mesh.types import Mesh
from coldseam.report.markup import Markup, joined, name, table, tag
from coldseam.report.shown import Shown

Answers = Mapping[str, Any]
SPACE_COLUMNS = {"temperature", "film", "surface_resistance", "relative_humidity"}
DIRECT = {"name", "material"}
"""Keys of a [[body]] that have a column of their own."""
_COMMENT = re.compile(r"^\s*#\s?(.*)$")


def bodies(case: Case, answers: Answers, shown: Shown) -> Markup:
    """Return the bodies as typed, and what the mesh made of them."""
    typed = [
        (name(entry.get("name", "")), name(entry.get("material", "void" if entry.get("void") else "")),
         _typed({key: value for key, value in entry.items() if key not in DIRECT}))
        for entry in case.raw.get("body", ())
    ]  # fmt: skip
    made = [
        (name(key), name(entry.get("material", "")), shown.amount("volume", entry.get("volume")),
         shown.temperature(entry.get("min_temperature")), shown.temperature(entry.get("mean_temperature")),
         shown.temperature(entry.get("max_temperature")),
         shown.amount("flow", entry["heat_source"]) if entry.get("heat_source") else "")
        for key, entry in (answers.get("bodies") or {}).items()
    ]  # fmt: skip
    columns = ("body", "material", "volume", "coldest", "mean", "warmest", "heat released")
    return joined([
        table("Bodies as typed in the case file (lengths in mm where no unit stands; later bodies displace earlier ones)",
              ("body", "material", "shape and other keys"), typed),
        table("Bodies as they were solved", columns, made, (2, 3, 4, 5, 6)),
    ])  # fmt: skip


def _typed(entry: Mapping[str, Any], *, bare: bool = False) -> Markup:
    """Return keys as they stand in the case file, a line each; ``bare``: the value of the only one, without its key."""
    if not entry:
        return Markup("")
    header, _, keys = to_toml({"as-typed": [dict(entry)]}).partition("\n")  # one entry of an array: a key a line
    return tag("code", keys.strip().partition(" = ")[2] if bare else keys.strip())


def materials(case: Case, shown: Shown) -> Markup:
    """Return the materials with the values used, their uncertainty and their source."""
    rows = []
    for key, material in case.materials.items():
        k = getattr(material, "conductivity", None)
        value = shown.amount("conductivity", k) if isinstance(k, float) else _several(k, shown)
        if material.uncertainty is not None:
            value += f" ± {100 * material.uncertainty:.3g} %"
        heat = getattr(material, "specific_heat", None)
        others = [
            shown.amount("density", getattr(material, "density", None)),
            shown.amount("specific_heat", heat)
            if isinstance(heat, float) or heat is None
            else "specific heat by a law",
        ]
        emissivity = f"emissivity {material.emissivity:g}" if material.emissivity is not None else ""
        source = joined([f"library: {material.library}. " if material.library else "", material.source])
        rows.append(
            (name(key), value, ", ".join(filter(None, (*others, emissivity))), tag("bdi", source or "none given"))
        )
    return table("Materials", ("material", "conductivity", "other values", "source"), rows)


def _several(value: Any, shown: Shown) -> str:
    """Return a conductivity by direction or by temperature, as it was given, in the unit shown."""
    if isinstance(value, (list, tuple)) and all(isinstance(entry, (int, float)) for entry in value):
        return " / ".join(shown.amount("conductivity", entry) for entry in value) + " along the axes"
    return "see the case file" if value is not None else ""


def outside(case: Case, shown: Shown) -> Markup:
    """Return the spaces with their films and humidity, the boundaries, sheets and contacts."""
    spaces = [
        (name(key), _or_typed(typed.get("temperature"), space.temperature, shown.temperature),
         _or_typed(typed.get("film", typed.get("surface_resistance")), _coefficient(space), lambda h: _film(h, shown)),
         _or_typed(typed.get("relative_humidity"), space.relative_humidity, lambda part: f"{100 * part:.3g} %"),
         _typed({key: value for key, value in typed.items() if key not in SPACE_COLUMNS}))
        for key, space in case.spaces.items()
        for typed in [case.raw.get("spaces", {}).get(key, {})]
    ]  # fmt: skip
    boundaries = [(name(entry.get("name", "")), _typed({key: value for key, value in entry.items() if key != "name"}))
                  for entry in case.raw.get("boundary", ())]  # fmt: skip
    thin = [
        (name(entry.get("name", "")), kind, _typed({key: value for key, value in entry.items() if key != "name"}))
        for kind in ("sheet", "contact")
        for entry in case.raw.get(kind, ())
    ]
    return joined([
        table("Spaces", ("space", "temperature", "film coefficient (surface resistance)", "humidity", "other keys as typed"),
              spaces),
        table("Boundaries as typed", ("boundary", "what holds where"), boundaries),
        table("Sheets and contacts as typed", ("name", "kind", "keys"), thin),
    ])  # fmt: skip


def _or_typed(typed: Any, value: Any, write: Callable[[float], str]) -> Markup | str:
    """Return a number as shown; a law or a schedule as it stands in the case file."""
    if isinstance(value, int | float) and not isinstance(value, bool):
        return write(float(value))
    return "" if typed is None else _typed({"": typed}, bare=True)


def _coefficient(space: Any) -> Any:
    """Return a space's film coefficient, W/(m²·K), where it is a number; None for a law."""
    film, resistance = getattr(space, "film", None), getattr(space, "surface_resistance", None)
    numbers = [value for value in (film, resistance) if value is not None]
    return space.h if numbers and all(isinstance(value, int | float) for value in numbers) else None


def _film(h: float | None, shown: Shown) -> str:
    if h is None:
        return ""
    if math.isinf(h):
        return "none: the surface has the space's temperature"
    return f"{shown.amount('film', h)} ({shown.amount('resistance', 1 / h)})"


def computed(case: Case, answers: Answers, mesh: Mesh, shown: Shown) -> Markup:
    """Return mesh, rounds, accuracy, solver, versions and the digest of the case file."""
    found, accuracy, solver = (answers.get(key) or {} for key in ("mesh", "accuracy", "solver"))
    kind = "axisymmetric section" if mesh.axisymmetric else "cross-section" if mesh.dim == 2 else "solid"
    facts: list[tuple[str, object]] = [("model", f"{kind}, {len(mesh.bodies)} bodies")]
    if found:
        cells = "triangles" if mesh.dim == 2 else "tetrahedra"
        facts.append(("mesh", f"{found['nodes']} nodes, {found['cells']} {cells}, after {found['rounds']} rounds"))
    quality = found.get("quality") or {}
    if quality.get("min_angle") is not None:
        facts.append(("mesh quality", f"smallest angle {quality['min_angle']:.3g}°, worst radius ratio "
                                      f"{quality.get('worst_radius_ratio', math.nan):.2g} (1 is perfect)"))  # fmt: skip
    if accuracy:
        reached = accuracy.get("reached")
        which = "steady heat flow" if "over_time" in accuracy else "heat flow"
        facts.append(("accuracy", f"{100 * accuracy['asked']:.3g} % of every {which} asked, "
                                  + ("error not known" if reached is None else f"{100 * reached:.2g} % reached")))  # fmt: skip
    if solver:
        iterations = solver.get("iterations") or ()
        each = (iterations,) if isinstance(iterations, int) else iterations
        facts.append(("equations", f"{solver.get('method', '')}; iterations {', '.join(map(str, each)) or 'none'}"))
        facts += _stepped(solver, shown)
    facts.append(("units", "metric" if shown.system == "metric" else "inch, °F, Btu; the case file as typed"))
    digest = answers.get("case_sha256", "")
    facts.append(("SHA-256 of the case file", tag("code", digest)))
    facts.append(("coldseam version", tag("span", answers.get("coldseam", ""), {"id": "version"})))
    rounds = accuracy.get("rounds") or ()
    rows = [
        (number, entry.get("nodes", ""), entry.get("cells", ""),
         "" if entry.get("reached") is None else f"{100 * entry['reached']:.2g} %",
         "" if entry.get("temperatures_moved") is None else f"{100 * entry['temperatures_moved']:.2g} % of their range",
         tag("span", f"{entry['seconds']:.3g} s", {"class": "time"}) if entry.get("seconds") is not None else "")
        for number, entry in enumerate(rounds, 1)
    ]  # fmt: skip
    columns = ("round", "nodes", "cells", "error of heat flows", "temperatures moved by", "time")
    return joined([
        table("How it was computed", ("what", "value"), facts),
        table("Rounds of refinement", columns, rows, (1, 2, 3, 4, 5)),
    ])  # fmt: skip


def _stepped(solver: Mapping[str, Any], shown: Shown) -> list[tuple[str, object]]:
    """Return how a run over time was stepped: in a reduced model, with its checked error, or over all nodes, and why."""
    reduced = solver.get("reduced")
    if not isinstance(reduced, Mapping):
        return []
    if not reduced.get("used"):
        return [("time steps", f"over all nodes, without a reduced model: {reduced.get('why', '')}")]
    error, allowed = (shown.difference_fine(reduced[key]) for key in ("checked_error", "allowed_error"))
    return [("time steps", f"in a reduced model of {reduced['vectors']} unknowns, whose temperatures are within {error} of "
                           f"stepping all nodes by the check against these ({allowed} allowed)")]  # fmt: skip


def case_file(case: Case) -> Markup:
    """Return the text of the case as typed."""
    source = case.source
    changed = f"Changed after it was read: {', '.join(source.changed)}." if source.changed else ""
    return joined([tag("p", changed) if changed else "", tag("pre", tag("code", source.text), {"tabindex": "0", "dir": "ltr",
                   "aria-label": "the case file"})])  # fmt: skip


def cautions_of(case: Case) -> list[str]:
    """Return the comments of the case file that begin with ``Caution:``, each as one sentence or more.

    A paragraph of comment lines counts up to the next line that is empty or no comment.
    """
    found: list[str] = []
    open_one = False
    for line in case.source.text.splitlines():
        match = _COMMENT.match(line)
        words = match.group(1).strip() if match else ""
        if words.lower().startswith("caution:"):
            found.append(words[len("caution:") :].strip())
            open_one = True
        elif open_one and words:
            found[-1] += f" {words}"
        else:
            open_one = False
    return found
