"""The CSV tables beside answers.json: one row per name, units in the headings."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

from coldseam.report.files import answers_text, csv_text, write_files
from coldseam.report.history import history_csv
from coldseam.report.view import View

_BODY_UNITS = {
    "volume": ("volume_m3", "area_m2"),
    "mean_temperature": ("mean_temperature_degC",) * 2,
    "min_temperature": ("min_temperature_degC",) * 2,
    "max_temperature": ("max_temperature_degC",) * 2,
    "heat_source": ("heat_source_W", "heat_source_W_per_m"),
    "energy_share": ("energy_share",) * 2,
}


def write_answers(folder: str | Path, view: View) -> list[Path]:
    """Write answers.json and the CSV tables into a folder, all or none.

    Raises
    ------
    OutputError
        They could not be written.
    """
    contents: dict[str, bytes | Iterable[bytes]] = {"answers.json": answers_text(view.answers).encode()}
    if view.history is not None:
        contents["history.csv"] = history_csv(view.history)
    contents.update({name: text.encode() for name, text in tables(view).items()})
    return write_files(folder, contents)


def tables(view: View) -> dict[str, str]:
    """Return file name -> CSV text of every table that the answers hold, but for the history."""
    flat = view.mesh.dim == 2 and not view.mesh.axisymmetric
    axes = ("r", "z") if view.mesh.axisymmetric else "xyz"[: view.mesh.dim]
    return {
        "boundaries.csv": _boundaries(view, axes, flat),
        "spaces.csv": _spaces(view.answers, flat),
        "coupling.csv": _coupling(view.answers, flat),
        "probes.csv": _probes(view.answers, axes),
        "bodies.csv": _bodies(view, flat),
    }


def _flow(flat: bool) -> str:
    return "W_per_m" if flat else "W"


def _place(at, axes) -> list:
    return list(at) if at is not None else [None] * len(axes)


def _boundaries(view: View, axes, flat: bool) -> str:
    unit = _flow(flat)
    columns = ["boundary", "kind", "space", f"heat_flow_{unit}", f"heat_flow_low_{unit}", f"heat_flow_high_{unit}"]
    columns += ["interval", "area_m2_per_m" if flat else "area_m2", "temperature_mean_degC"]
    for end in ("min", "max"):
        columns += [f"temperature_{end}_degC", *(f"{end}_at_{axis}_mm" for axis in axes)]
    known = {
        name: (kind, space)
        for name, kind, space in zip(view.boundary_names, view.boundary_kind, view.boundary_space, strict=True)
    }
    rows = []
    for name, entry in view.answers.get("boundaries", {}).items():
        kind, space = known.get(name, (None, None))
        surface = entry.get("temperature") or {}
        row = [name, kind, space, *(entry.get(key) for key in ("heat_flow", "heat_flow_low", "heat_flow_high"))]
        row += [entry.get("interval"), entry.get("area"), surface.get("mean")]
        for end in ("min", "max"):
            row += [surface.get(end), *_place(surface.get(f"{end}_at"), axes)]
        rows.append(row)
    return csv_text(columns, rows)


def _spaces(answers: dict, flat: bool) -> str:
    unit = _flow(flat)
    columns = ["space", f"heat_flow_{unit}", f"heat_flow_low_{unit}", f"heat_flow_high_{unit}", "temperature_degC"]
    keys = ("heat_flow", "heat_flow_low", "heat_flow_high", "temperature")
    return csv_text(columns, [[name, *map(entry.get, keys)] for name, entry in answers.get("spaces", {}).items()])


def _coupling(answers: dict, flat: bool) -> str:
    columns = ["space", "other_space", "coupling_W_per_mK" if flat else "coupling_W_per_K"]
    table = answers.get("coupling") or {}
    return csv_text(columns, [[name, other, value] for name, row in table.items() for other, value in row.items()])


def _probes(answers: dict, axes) -> str:
    columns = ["probe", "temperature_degC", *(f"{axis}_mm" for axis in axes)]
    rows = [[n, e.get("temperature"), *_place(e.get("at"), axes)] for n, e in answers.get("probes", {}).items()]
    return csv_text(columns, rows)


def _bodies(view: View, flat: bool) -> str:
    entries = view.answers.get("bodies", {})
    keys = list(dict.fromkeys(key for entry in entries.values() for key in entry if not _nested(entry[key])))
    materials = {body.name: body.material for body in view.mesh.bodies}
    columns = ["body"] + (["material"] if "material" not in keys else [])
    columns += [_BODY_UNITS.get(key, (key, key))[int(flat)] for key in keys]
    rows = []
    for name, entry in entries.items():
        lead = [name] if "material" in keys else [name, materials.get(name)]
        rows.append(lead + [entry.get(key) for key in keys])
    return csv_text(columns, rows)


def _nested(value) -> bool:
    return isinstance(value, (dict, list, tuple))
