"""Drawing in child processes, so that a crash of a graphics library can't take the answers along."""

from __future__ import annotations

import json
import os
import pickle
import subprocess
import sys
import tempfile
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

from coldseam.report import render_probe
from coldseam.report.draw import GROUPS, VIEW
from coldseam.report.view import Drawings, Picture, Table, View, model_view, without_fields

TIME_OUT = 600.0
"""Seconds that drawing may take before it is given up."""
RETRIES = 2
"""Processes started one after another for what is left where one has crashed."""

Log = Callable[[str, str], None] | None


def draw_all(view: View, folder: str | Path, log: Log = None, artists: Artists | None = None) -> Drawings:
    """Draw every picture of a result into a folder.

    Parameters
    ----------
    view
        The result.
    folder
        Existing output folder.
    log
        ``log(stage, message)`` or None.
    artists
        Who draws; None starts them now.

    Returns
    -------
    Drawings
        The pictures made, and a sentence for what could not be. Faults of drawing never raise.
    """
    if artists is not None:
        return artists.draw(view, Path(folder), log)
    with Artists(view.mesh.dim) as own:
        return own.draw(view, Path(folder), log)


def draw_model(case, mesh, facet_boundary, folder: str | Path, log: Log = None) -> Drawings:
    """Draw the bodies and boundaries of a model that was not solved, with names and areas (``coldseam check``)."""
    view = without_fields(model_view(case, mesh, facet_boundary))
    return draw_all(view, folder, log)


class Artists:
    """Processes that draw, started before there is anything to draw: they load their libraries while the solver works.

    Parameters
    ----------
    dimensions
        2 or 3, of the model that will be drawn; in 3D it is first found out whether this machine can draw in space.

    Each takes the next picture that nobody has taken, so that they end together, and one that crashes costs the picture
    it was at. They end with the ``with`` block.
    """

    def __init__(self, dimensions: int):
        self._pool = ThreadPoolExecutor(1)
        self._closed = False
        self._window: str | None = None
        self._started = self._pool.submit(self._start, dimensions)

    def __enter__(self) -> Artists:
        return self

    def __exit__(self, *fault: object) -> None:
        self._closed = True
        self._pool.shutdown()
        for child in [] if self._started.exception() else self._started.result()[0]:
            _end(child)

    def draw(self, view: View, folder: Path, log: Log = None) -> Drawings:
        """Draw every picture of a result into an existing folder, as :func:`draw_all`; once only."""
        say = log or (lambda stage, message: None)
        if not folder.is_dir():
            return Drawings(pictures=(), warnings=(f"No pictures: there is no folder {folder}.",))
        with tempfile.TemporaryDirectory(prefix="coldseam-") as scratch:
            try:
                (Path(scratch) / VIEW).write_bytes(pickle.dumps(view, protocol=pickle.HIGHEST_PROTOCOL))
            except OSError as fault:
                return Drawings(pictures=(), warnings=(f"No pictures: no room for scratch data ({fault.strerror}).",))
            say("pictures", "drawing")
            drawings = self._drawn(Path(scratch), folder)
        for warning in drawings.warnings:
            say("pictures", warning)
        return drawings

    def _start(self, dimensions: int) -> tuple[list[subprocess.Popen[str]], str]:
        """Return the processes, and why no views in space can be had (nothing where they can)."""
        window, why_not = None, ""
        if dimensions == 3:
            verdict = render_probe.rendering()
            window, why_not = verdict.window, "" if verdict.able else _missing(verdict.why_not)
        orders = (("flat", "space"), ("space", "flat")) if window else (("flat",), ("flat",))
        self._window = window
        return [] if self._closed else [_process(groups, window) for groups in orders[: _processors()]], why_not

    def _drawn(self, scratch: Path, folder: Path) -> Drawings:
        try:
            children, why_not = self._started.result()
        except OSError as fault:
            return Drawings(
                pictures=(), warnings=(f"No pictures: no child process could be started ({fault.strerror}).",)
            )
        with ThreadPoolExecutor(len(children)) as pool:
            ends = list(pool.map(lambda child: _ask(child, scratch, folder), children))
        last = ends
        for _ in range(RETRIES):  # one that crashed may have left pictures that nobody has taken
            if not any(trouble for _, trouble in last):
                break
            with _process(GROUPS if self._window else GROUPS[:1], self._window) as child:
                last = [_ask(child, scratch, folder)]
            ends += last
        made, wrong = _outcome(scratch, dict(ends))
        return Drawings(pictures=tuple(made), warnings=(*([why_not] if why_not else []), *wrong))


def _processors() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _process(groups: tuple[str, ...], window: str | None) -> subprocess.Popen[str]:
    """Start a process that will draw groups of pictures in this order."""
    pipe = subprocess.PIPE
    return subprocess.Popen(
        [sys.executable, "-m", "coldseam.report.draw", *groups], env=render_probe.child_environment(window),
        stdin=pipe, stdout=subprocess.DEVNULL, stderr=pipe, text=True,
    )  # fmt: skip


def _ask(child: subprocess.Popen[str], scratch: Path, folder: Path) -> tuple[int, str]:
    """Have a process draw and return its number and how it ended in words, "" for well."""
    try:
        _, errors = child.communicate(json.dumps([str(scratch), str(folder)]), timeout=TIME_OUT)
    except subprocess.TimeoutExpired:
        child.kill()
        child.communicate()
        return child.pid, f"drawing took more than {TIME_OUT:g} s"
    if child.returncode < 0:
        return child.pid, f"drawing crashed (signal {-child.returncode})"
    tail = errors.strip().splitlines()
    return (
        child.pid,
        "" if child.returncode == 0 else f"drawing stopped ({tail[-1][:200] if tail else child.returncode})",
    )


def _end(child: subprocess.Popen[str]) -> None:
    child.kill()
    child.wait()
    for pipe in (child.stdin, child.stderr):
        if pipe is not None:
            pipe.close()


def _outcome(scratch: Path, ends: dict[int, str]) -> tuple[list[Picture], list[str]]:
    """Return the pictures in order, and a sentence for each that could not be drawn.

    ``ends`` says of every process, by number, how it ended, "" for well.
    """
    done: list[dict[str, Any]] = []
    wrong: list[str] = []
    for number, trouble in ends.items():
        listing = scratch / f"{number}.list"
        lines = [json.loads(line) for line in listing.read_text().splitlines()] if listing.exists() else []
        finished = [entry for entry in lines if "picture" in entry or "fault" in entry]
        done += finished
        if trouble and len(lines) > 2 * len(finished):
            done.append(lines[-1] | {"fault": trouble})
        elif trouble:
            wrong.append(f"Pictures may be missing: {trouble}.")
    done.sort(key=lambda entry: entry["order"])
    wrong += [f"The picture {e['name']} could not be drawn: {e['fault']}." for e in done if "fault" in e]
    return [_picture(entry["picture"]) for entry in done if entry.get("picture")], list(dict.fromkeys(wrong))


def _picture(entry: dict[str, Any]) -> Picture:
    table = Table(columns=tuple(entry["table"]["columns"]), rows=tuple(map(tuple, entry["table"]["rows"])))
    return Picture(**{**entry, "table": table})


def _missing(why: str) -> str:
    return (
        "The 3D pictures (the model with its boundaries and the surface temperatures seen from outside and from each "
        f"space) are missing: this machine can't draw in space ({why}). On Debian install {render_probe.PACKAGES}; "
        "answers, tables, field files and sections are complete without them."
    )
