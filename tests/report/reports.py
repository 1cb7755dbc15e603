"""Reports of the hand-built models, made without the solver (not a test module)."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np

from coldseam.answers.surfacemap import SurfaceMap
from coldseam.case.read import loads
from coldseam.report.document import write_report
from coldseam.report.files import answers_text
from coldseam.report.shown import Shown
from coldseam.report.view import Drawings, Picture, Table

CASE = """\
# Caution: the bolt sweats first.
title = {title}
[model]
dimensions = 3
[spaces.bay]
temperature = 25
film = 7.7
[materials.{key}]
conductivity = 0.025
source = {source}
[[body]]
name = {title}
material = {key}
box = {{ from = [0, 0, 0], to = [300, 300, 100] }}
[[boundary]]
name = "all"
on = "rest"
space = "bay"
"""


def quoted(text: str) -> str:
    """Return a text as a TOML string."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007F")


def case(title: str = "A wall"):
    """Return a case whose title, body, material and source are one text (case files refuse what can't be printed)."""
    title = "".join(letter if letter.isprintable() or letter == "\u202e" else " " for letter in title).strip()
    return loads(CASE.format(title=quoted(title), key=quoted(title), source=quoted(title)))


def picture(folder: Path, stem: str, title: str) -> Picture:
    """Return a small picture that was written into a folder."""
    from PIL import Image

    Image.new("RGB", (600, 300), (200, 210, 220)).save(folder / f"{stem}.png")
    table = Table(columns=("boundary", "lowest, °C"), rows=((title, -3.25),))
    return Picture(file=f"{stem}.png", title=title, alt=f"{title}: a test picture", table=table)


def answers(view, title: str) -> dict:
    """Return the model's answers with what chapters read beside."""
    found = json.loads(answers_text(view.answers))
    found["title"] = title
    found["limits"] = {title: {"value": 1.3, "unit": "W", "at_most": 1.0, "met": False}}
    found["warnings"] = [title]
    found["coldseam"], found["case_sha256"] = "0.0", "0" * 64
    return found


def report(view, folder: Path, *, title: str = "A wall", system: str = "metric", history: dict | None = None) -> Path:
    """Return the path of a report of a model, everything in it named by one text."""
    folder.mkdir(parents=True, exist_ok=True)
    mesh = view.mesh
    side = view.faces_space(view.spaces[0])
    values = np.full(mesh.n_nodes, np.nan)
    values[mesh.facets[side]] = 10.0 + mesh.points[mesh.facets[side]][..., 0]
    excess = SurfaceMap(
        key="excess_flux", space=view.spaces[0], values=values, title="Excess heat flux", unit="W/m²", note=""
    )
    told = answers(view, title) | ({"history": history} if history is not None else {})
    bodies = tuple(replace(body, name=f"{title} {k}") for k, body in enumerate(mesh.bodies))
    view = replace(view, title=title, answers=told, maps=(excess,), mesh=replace(mesh, bodies=bodies))
    stem = "surface" if mesh.dim == 3 else "temperature"
    drawings = Drawings(pictures=(picture(folder, stem, title), picture(folder, "model", title)))
    shown = Shown(system=system, flat=mesh.dim == 2 and not mesh.axisymmetric)
    return write_report(view, case(title), drawings, folder, shown)
