"""All pictures of a result or a model, and the child process that draws them.

``python -m coldseam.report.draw GROUP ...`` is that child (see :mod:`coldseam.report.artists`): it loads what drawing
needs, waits until it is told where the view lies, and draws one picture after the other of those that no other
child has taken. A line in its list before and after each tells what was drawn, and what a crash cost.
"""

from __future__ import annotations

import json
import os
import pickle
import sys
import traceback
from collections.abc import Callable, Iterator
from dataclasses import asdict
from functools import cache, partial
from pathlib import Path

from coldseam.errors import OutputError
from coldseam.report.view import Picture, View, in_drawing_units

GROUPS = ("flat", "space")
"""Sections and charts, which need no VTK; views in space."""
VIEW = "view"
"""File of the pickled view in the scratch folder."""
MOST_OUT_OF_PLANE = 0.7
"""Share of the heat flux through a section from which lines of heat flow in it would mislead."""

Job = Callable[[Path, str], Picture | None]


def jobs(view: View, group: str) -> Iterator[tuple[str, Job]]:
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


def _section_jobs(view: View) -> Iterator[tuple[str, Job]]:
    from coldseam.report import pictures2d, pictures3d
    from coldseam.report.plane import Section, cut

    @cache
    def section(spot: pictures3d.Spot) -> Section | None:  # cut only by those who draw it
        return cut(view, spot.axis, spot.at)

    def model(folder: Path, name: str, spot: pictures3d.Spot) -> Picture | None:
        found = section(spot)
        return pictures2d.draw_model(view, found, folder, name) if found else None

    def temperature(folder: Path, name: str, spot: pictures3d.Spot) -> Picture | None:
        found, where = (
            section(spot),
            "" if spot.why == pictures3d.MIDDLE else " through the coldest point of the warm side",
        )
        return pictures2d.draw_temperature(view, found, folder, name, f"Temperature{where}") if found else None

    def heat_flow(folder: Path, name: str, spot: pictures3d.Spot) -> Picture | None:
        found = section(spot)
        in_plane = found is not None and found.out_of_plane < MOST_OUT_OF_PLANE
        return pictures2d.draw_heat_flow(view, found, folder, name) if found and in_plane else None

    for k, spot in enumerate(pictures3d.section_spots(view)):
        if spot.why == pictures3d.MIDDLE:
            yield f"model_section_{k + 1}", partial(model, spot=spot)
        if view.temperature is not None:
            yield f"temperature_section_{k + 1}", partial(temperature, spot=spot)
        if view.cell_flux is not None and spot.why == pictures3d.MIDDLE:
            yield f"heat_flow_section_{k + 1}", partial(heat_flow, spot=spot)


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


# ---------------------------------------------------------------------------------------- child


def warm(groups: tuple[str, ...]) -> None:
    """Load what drawing groups of pictures needs: the libraries, the font, and for views in space a first window."""
    from matplotlib.backends import backend_agg, backend_svg  # noqa: F401
    from scipy import spatial  # noqa: F401

    from coldseam.report import flow, history, labels, pictures2d, pictures3d, profiles, style  # noqa: F401

    style.text_width("x", style.TEXT)
    if "space" in groups:
        import pyvista

        plotter = pyvista.Plotter(off_screen=True, window_size=(64, 64))
        plotter.show(auto_close=False)
        plotter.close()


def draw_group(view: View, folder: Path, group: str, scratch: Path, listing: Path) -> int:
    """Draw the pictures of a group that nobody has taken yet; return how many failed.

    Parameters
    ----------
    view, folder, group
        What is drawn, and where to.
    scratch
        Folder in which a picture is taken by making a file of its name.
    listing
        Gets a line of JSON before each picture and one after it.
    """
    failed = 0
    with listing.open("a") as stream:
        for order, (name, make) in enumerate(jobs(view, group)):
            if not _taken(scratch / f"{name}.taken"):
                continue
            place = {"name": name, "order": [GROUPS.index(group), order]}
            stream.write(json.dumps(place) + "\n")
            stream.flush()
            try:
                picture = make(folder, name)
                place["picture"] = None if picture is None else asdict(picture)
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
                place["fault"] = f"{fault or type(fault).__name__}"
                failed += 1
            stream.write(json.dumps(place) + "\n")
            stream.flush()
    return failed


def _taken(file: Path) -> bool:
    """Return whether this process is the first to make a file."""
    try:
        os.close(os.open(file, os.O_CREAT | os.O_EXCL))
    except FileExistsError:
        return False
    return True


def main(groups: list[str]) -> int:
    """Entry point of the child: groups in the order to draw them; scratch and output folder come as JSON on its input."""
    warm(tuple(groups))
    told = sys.stdin.read()
    if not told:  # nothing to draw after all
        return 0
    scratch, folder = map(Path, json.loads(told))
    with (scratch / VIEW).open("rb") as stream:
        view = in_drawing_units(pickle.load(stream))
    for group in groups:
        draw_group(view, folder, group, scratch, scratch / f"{os.getpid()}.list")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
