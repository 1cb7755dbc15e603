"""What the viewer in a report is given: the whole mesh with its field, packed small.

A header (JSON) names the arrays in one deflated block. Every array holds whole numbers, written as the difference
to the one before (modulo its width) and in byte planes, all lowest bytes first: neighbours in a mesh are alike, so most bytes
are near 0 and deflate well. Nodes are sorted along a space-filling curve, cells by their first node.

Positions have 24 bits over the longest side of the model: 0.7 µm on a model of 12 m, so that skins of 0.5 mm keep
their thickness to 0.2 %. Temperatures have 16 bits over their range: 1 mK on 65 K. Flux has 4096 steps of equal ratio over
six decades, 0.34 % each. A facet is its cell times the corners of a cell plus the corner it does not touch.
"""

from __future__ import annotations

import base64
import json
import zlib
from typing import Any

import numpy as np

from coldseam.report import style
from coldseam.report.shown import Shown
from coldseam.report.thinning import Thinned, thinned
from coldseam.report.view import View

POSITION_BITS = 24
FLUX_STEPS, FLUX_DECADES = 4095, 6.0
COLOURS = 32


def packed(view: View, shown: Shown) -> tuple[str, str]:
    """Return the header (JSON) and the block (base64) of a solved model.

    Parameters
    ----------
    view
        With temperature; the choice of flux is left out where there is none.
    shown
        Units that the viewer shows.
    """
    thin = thinned(view)
    order = _along_a_curve(thin.points)
    place = np.empty_like(order)
    place[order] = np.arange(len(order))
    cells, corner_of = _sorted_cells(place[thin.cells])
    points, fields = thin.points[order], _node_fields(view, thin, order, shown)
    low = points.min(axis=0)
    size = float(np.ptp(points, axis=0).max()) or 1.0
    grid = np.rint((points - low) / size * (2**POSITION_BITS - 1)).astype(np.int64)
    block = _Block()
    for axis in range(points.shape[1]):
        block.add(f"position{axis}", grid[:, axis], 3)
    for column in range(cells.shape[1]):
        block.add(f"cell{column}", cells[:, column] if column == 0 else cells[:, column] - cells[:, column - 1], 4,
                  delta=column == 0)  # fmt: skip
    body, flux, flux_range = thin.body[corner_of], thin.flux[corner_of], _flux_range(thin.flux)
    block.add("body", body, 2)
    block.add("flux", _flux_steps(flux, flux_range), 2, delta=False)
    facets, boundary = _facets(view, thin, place, cells, corner_of)
    block.add("facet", facets, 4)
    block.add("boundary", boundary, 2)
    for key, steps, _ in fields:
        block.add(key, steps, 2, delta=key == "temperature")
    header = _header(view, thin, shown, low, size, block.entries, [entry for *_, entry in fields], flux_range)
    return json.dumps(header, ensure_ascii=True).replace("<", "\\u003c"), block.text()


class _Block:
    """Arrays of whole numbers, collected into one block."""

    def __init__(self):
        self.parts: list[bytes] = []
        self.entries: dict[str, dict[str, int]] = {}

    def add(self, key: str, values: np.ndarray, width: int, *, delta: bool = True) -> None:
        """Append an array as byte planes of its differences."""
        values = np.asarray(values, dtype=np.int64)
        steps = np.diff(values, prepend=0) if delta else values
        planes = (steps % 256**width).astype("<u4").view(np.uint8).reshape(-1, 4)[:, :width]
        self.entries[key] = {"count": len(values), "width": width, "delta": int(delta)}
        self.parts.append(np.ascontiguousarray(planes.T).tobytes())

    def text(self) -> str:
        """Return the block, deflated, in base64."""
        return base64.b64encode(zlib.compress(b"".join(self.parts), 9)).decode()


def _along_a_curve(points: np.ndarray) -> np.ndarray:
    """Return the order of points, shape (n, dim), along the curve that interleaves the bits of their coordinates."""
    span = np.ptp(points, axis=0)
    whole = ((points - points.min(axis=0)) / np.where(span > 0, span, 1.0) * 1023).astype(np.int64)
    code = np.zeros(len(points), dtype=np.int64)
    for bit in range(10):
        for axis in range(points.shape[1]):
            code |= ((whole[:, axis] >> bit) & 1) << (bit * points.shape[1] + axis)
    return np.argsort(code, kind="stable")


def _sorted_cells(cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return cells with ascending corners, ordered by them, and which cell each was."""
    cells = np.sort(cells, axis=1)
    order = np.lexsort(cells.T[::-1])
    return cells[order], order


def _facets(view: View, thin: Thinned, place, cells, corner_of) -> tuple[np.ndarray, np.ndarray]:
    """Return the facets as cell and missing corner, ascending, and their boundaries; all cells of a plane model."""
    if view.mesh.dim == 2:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
    new = np.empty_like(corner_of)
    new[corner_of] = np.arange(len(corner_of))
    owner = new[thin.facet_cell]
    touched = (cells[owner][:, :, None] == place[thin.facets][:, None, :]).any(axis=2)
    code = owner * cells.shape[1] + np.argmin(touched, axis=1)
    order = np.argsort(code, kind="stable")
    return code[order], thin.facet_boundary[order]


def _flux_range(flux: np.ndarray) -> tuple[float, float]:
    high = float(flux.max()) if len(flux) and flux.max() > 0 else 1.0
    least = flux[flux > 0]
    return max(float(least.min()) if len(least) else high, high * 10**-FLUX_DECADES), high


def _flux_steps(flux: np.ndarray, ends: tuple[float, float]) -> np.ndarray:
    low, high = ends
    span = np.log(high / low) or 1.0
    return np.rint(np.log(np.clip(flux, low, high) / low) / span * FLUX_STEPS).astype(np.int64)


def _node_fields(
    view: View, thin: Thinned, order: np.ndarray, shown: Shown
) -> list[tuple[str, np.ndarray, dict[str, Any]]]:
    """Return key, 16-bit steps and description of every field at the nodes; 0 is no value except for temperature."""
    kept = thin.node[order]
    temperature = np.asarray(view.temperature, dtype=float)[kept]
    found = [_steps("temperature", temperature, "Temperature", "temperature", shown, "")]
    for key in dict.fromkeys(field.key for field in view.maps):
        fields = [field for field in view.maps if field.key == key]
        values = np.full(view.mesh.n_nodes, np.nan)
        for field in fields:
            values = np.where(np.isfinite(values), values, field.values)
        note = " ".join(dict.fromkeys(f"{field.space}: {shown.sentence(field.note)}" for field in fields))
        quantity = "flux" if fields[0].unit == "W/m²" else None
        found.append(_steps(key, values[kept], fields[0].title, quantity, shown, note, fields[0].unit))
    return found


def _steps(key: str, values: np.ndarray, title: str, quantity: str | None, shown: Shown, note: str, unit: str = ""):
    """Return a field in 65535 steps (from 1 where it has gaps) between its ends, which the entry tells in units shown."""
    known = np.isfinite(values)
    low, high = (float(values[known].min()), float(values[known].max())) if known.any() else (0.0, 0.0)
    first = 0 if known.all() else 1
    span = (high - low) or 1.0
    scaled = np.where(known, (np.nan_to_num(values) - low) / span, 0.0)
    steps = np.where(known, np.rint(first + scaled * (65535 - first)), 0).astype(np.int64)
    ends = [shown.value(quantity, end) if quantity else end for end in (low, low + span)]
    reach = abs(ends[1] - ends[0])
    entry = {
        "key": key,
        "title": title,
        "unit": shown.unit(quantity) if quantity else unit,
        "first": first,
        "low": ends[0],
        "high": ends[1],
        "shown_high": ends[1] if high > low else ends[0],
        "line": style.round_step(reach / 9),
        "note": note,
    }
    return key, steps, entry


def _header(view, thin: Thinned, shown: Shown, low, size: float, entries, fields, flux_range) -> dict[str, Any]:
    from matplotlib import colormaps

    factor = shown.measure("length").factor * 1e3
    ramp = (colormaps[style.COLOUR_MAP](np.linspace(0, 1, COLOURS))[:, :3] * 255).round().astype(int)
    return {
        "dim": view.mesh.dim,
        "axes": ["r", "z"] if view.mesh.axisymmetric else list("xyz"[: view.mesh.dim]),
        "arrays": entries,
        "origin": [float(x) * factor for x in low],
        "size": size * factor,
        "steps": 2**POSITION_BITS - 1,
        "length": {"unit": shown.unit("length"), "digits": 1 if shown.system == "metric" else 2},
        "bodies": [body.name for body in view.mesh.bodies],
        "materials": [body.material for body in view.mesh.bodies],
        "boundaries": list(view.boundary_names),
        "fields": fields,
        "has_flux": view.cell_flux is not None,
        "flux": {"title": "Heat flux", "unit": shown.unit("flux"), "steps": FLUX_STEPS,
                 "low": shown.value("flux", flux_range[0]), "high": shown.value("flux", flux_range[1])},
        "colours": ramp.ravel().tolist(),
        "tints": [[int(tint[k : k + 2], 16) for k in (1, 3, 5)] for tint in style.FACES],
        "cells": {"whole": thin.whole, "shown": len(thin.cells), "error": thin.error},
    }  # fmt: skip
