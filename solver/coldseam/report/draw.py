"""All pictures of a result or a model, drawn in child processes so that a crash can't take the answers along.

``python -m coldseam.report.draw`` is that child: it reads a pickled view from a file, draws one
group of pictures, and writes a line to a list after each, so that what was drawn before a crash
counts.
"""

from __future__ import annotations

import json
import pickle
import subprocess
import sys
import tempfile
import traceback
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict
from pathlib import Path

from coldseam.errors import OutputError
from coldseam.report import render_probe
from coldseam.report.view import Drawings, Picture, Table, View, model_view, without_fields

TIME_OUT = 600.0
"""Seconds a group of pictures may take before it is given up."""

Log = Callable[[str, str], None] | None


def draw_all(view: View, folder: str | Path, log: Log = None) -> Drawings:
    """Draw every picture of a result into a folder.

    Parameters
    ----------
    view
        The result.
    folder
        Existing output folder.
    log
        ``log(stage, message)`` or None.

    Returns
    -------
    Drawings
        The pictures made, and a sentence for each group that could not be. Faults of drawing never raise.
    """
    return _draw(view, Path(folder), ("flat", "space") if view.mesh.dim == 3 else ("flat",), log)


def draw_model(case, mesh, facet_boundary, folder: str | Path, log: Log = None) -> Drawings:
    """Draw the bodies and boundaries of a model that was not solved, with names and areas (``coldseam check``)."""
    view = without_fields(model_view(case, mesh, facet_boundary))
    return draw_all(view, folder, log)


def jobs(view: View, group: str) -> Iterator[tuple[str, Callable[[Path, str], Picture | None]]]:
    """Yield name and drawing function of every picture of a group: "flat" (no VTK) or "space"."""
    if group == "space":
        yield from _space_jobs(view)
    else:
        yield from _plane_jobs(view) if view.mesh.dim == 2 else _section_jobs(view)
        if view.history is not None:
            from coldseam.report import history

            yield "history_temperature", lambda folder, name: history.draw_temperatures(view, folder, name)
            yield "history_heat_flow", lambda folder, name: history.draw_flows(view, folder, name)


def _plane_jobs(view: View):
    from coldseam.report import pictures2d, profiles
    from coldseam.report.plane import section_of_plane_model

    section = section_of_plane_model(view)
    yield "model", lambda folder, name: pictures2d.draw_model(view, section, folder, name)
    if view.temperature is None:
        return
    yield "temperature", lambda folder, name: pictures2d.draw_temperature(view, section, folder, name)
    if view.cell_flux is not None:
        yield "heat_flow", lambda folder, name: pictures2d.draw_heat_flow(view, section, folder, name)
    for k, space in enumerate(view.spaces):
        yield f"surface_{k + 1}", lambda folder, name, space=space: profiles.draw_surface(view, space, folder, name)
    for field in view.maps:
        name = f"{field.key}_{view.spaces.index(field.space) + 1}"
        yield name, lambda folder, name, m=field: profiles.draw_map(view, m, folder, name)


def _section_jobs(view: View):
    from coldseam.report import pictures2d, pictures3d

    for k, (spot, section) in enumerate(pictures3d.sections(view)):
        middle = spot.why == "through the middle"
        if middle:
            yield f"model_section_{k + 1}", lambda folder, name, s=section: pictures2d.draw_model(view, s, folder, name)
        if view.temperature is None:
            continue
        title = "Temperature" if middle else "Temperature through the coldest point of the warm side"
        yield (
            f"temperature_section_{k + 1}",
            lambda folder, name, s=section, t=title: pictures2d.draw_temperature(view, s, folder, name, t),
        )
        if view.cell_flux is not None and middle and section.out_of_plane < 0.7:
            yield (
                f"heat_flow_section_{k + 1}",
                lambda folder, name, s=section: pictures2d.draw_heat_flow(view, s, folder, name),
            )


def _space_jobs(view: View):
    from coldseam.report import pictures3d

    for behind in (False, True):
        tail = "_behind" if behind else ""
        yield f"model{tail}", lambda f, n, b=behind: pictures3d.draw_boundaries(view, f, n, behind=b)
        if view.temperature is not None:
            yield f"surface{tail}", lambda f, n, b=behind: pictures3d.draw_surface(view, f, n, behind=b)
    if view.temperature is not None:
        for k, space in enumerate(view.spaces):
            yield f"surface_{k + 1}", lambda f, n, s=space: pictures3d.draw_surface(view, f, n, space=s)
            yield (
                f"surface_{k + 1}_close",
                lambda f, n, s=space: pictures3d.draw_surface(view, f, n, space=s, close=True),
            )
    for field in view.maps:
        name = f"{field.key}_{view.spaces.index(field.space) + 1}"
        yield name, lambda f, n, m=field: pictures3d.draw_map(view, m, f, n)
        yield f"{name}_close", lambda f, n, m=field: pictures3d.draw_map(view, m, f, n, close=True)


# ---------------------------------------------------------------------------------------- parent


def _draw(view: View, folder: Path, groups: tuple[str, ...], log: Log) -> Drawings:
    say = log or (lambda stage, message: None)
    pictures: list[Picture] = []
    warnings: list[str] = []
    if not folder.is_dir():
        return Drawings(pictures=(), warnings=(f"No pictures: there is no folder {folder}.",))
    with tempfile.TemporaryDirectory(prefix="coldseam-") as scratch:
        packed = Path(scratch) / "view"
        try:
            packed.write_bytes(pickle.dumps(view, protocol=pickle.HIGHEST_PROTOCOL))
        except OSError as fault:
            return Drawings(pictures=(), warnings=(f"No pictures: no room for scratch data ({fault.strerror}).",))
        say("pictures", "drawing")
        with ThreadPoolExecutor(len(groups)) as pool:  # each draws in a process of its own
            for made, wrong in pool.map(lambda group: _group(packed, folder, group, Path(scratch)), groups):
                pictures += made
                warnings += wrong
    for warning in warnings:
        say("pictures", warning)
    return Drawings(pictures=tuple(pictures), warnings=tuple(warnings))


def _group(packed: Path, folder: Path, group: str, scratch: Path) -> tuple[list[Picture], list[str]]:
    """Draw one group and return its pictures, and a sentence for what could not be."""
    window = None
    if group == "space":
        verdict = render_probe.rendering()
        if not verdict.able:
            return [], [_missing(verdict.why_not)]
        window = verdict.window
    return _child(packed, folder, group, scratch / f"{group}.list", window)


def _missing(why: str) -> str:
    return (
        "The 3D pictures (the model with its boundaries and the surface temperatures seen from outside and from each "
        f"space) are missing: this machine can't draw in space ({why}). On Debian install {render_probe.PACKAGES}; "
        "answers, tables, field files and sections are complete without them."
    )


def _child(
    packed: Path, folder: Path, group: str, listing: Path, window: str | None
) -> tuple[list[Picture], list[str]]:
    command = [sys.executable, "-m", "coldseam.report.draw", str(packed), str(folder), group, str(listing)]
    what = {"flat": "sections and charts", "space": "views in space"}[group]
    trouble = ""
    try:
        done = subprocess.run(
            command,
            env=render_probe.child_environment(window),
            timeout=TIME_OUT,
            capture_output=True,
            text=True,
            stdin=subprocess.DEVNULL,
            check=False,
        )
        if done.returncode < 0:
            trouble = f"drawing crashed (signal {-done.returncode})"
        elif done.returncode > 0:
            tail = done.stderr.strip().splitlines()
            trouble = f"drawing stopped ({tail[-1][:200] if tail else f'code {done.returncode}'})"
    except subprocess.TimeoutExpired:
        trouble = f"drawing took more than {TIME_OUT:g} s"
    except OSError as fault:
        trouble = f"no child process could be started ({fault.strerror})"
    made, wrong = _read_list(listing)
    if trouble:
        wrong.append(f"Pictures, {what}: {trouble}; {len(made)} were finished before.")
    return made, wrong


def _read_list(listing: Path) -> tuple[list[Picture], list[str]]:
    pictures, wrong = [], []
    for line in listing.read_text().splitlines() if listing.exists() else []:
        entry = json.loads(line)
        if "fault" in entry:
            wrong.append(f"The picture {entry['name']} could not be drawn: {entry['fault']}.")
            continue
        table = Table(columns=tuple(entry["table"]["columns"]), rows=tuple(map(tuple, entry["table"]["rows"])))
        pictures.append(Picture(**{**entry, "table": table}))
    return pictures, wrong


# ---------------------------------------------------------------------------------------- child


def draw_group(view: View, folder: Path, group: str, listing: Path) -> int:
    """Draw one group and list what came of it; return how many pictures failed (the child's work)."""
    failed = 0
    with listing.open("a") as stream:
        for name, make in jobs(view, group):
            try:
                picture = make(folder, name)
                entry = None if picture is None else asdict(picture)
            except (
                OutputError,
                ValueError,
                RuntimeError,
                ArithmeticError,
                LookupError,
                TypeError,
                MemoryError,
            ) as fault:
                traceback.print_exc()
                entry = {"name": name, "fault": f"{fault or type(fault).__name__}"}
                failed += 1
            if entry is not None:
                stream.write(json.dumps(entry) + "\n")
                stream.flush()
    return failed


def main(arguments: list[str]) -> int:
    """Entry point of the child: VIEW FOLDER GROUP LIST."""
    packed, folder, group, listing = arguments
    with open(packed, "rb") as stream:
        view = pickle.load(stream)
    draw_group(view, Path(folder), group, Path(listing))
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
