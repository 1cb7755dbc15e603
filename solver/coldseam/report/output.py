"""Everything a run leaves in its folder, the answers first: drawing can fail, answers must not be lost."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from coldseam.case.model import Case
from coldseam.report.artists import Artists, draw_all
from coldseam.report.document import write_report
from coldseam.report.files import prepare_folder
from coldseam.report.shown import Shown
from coldseam.report.tables import write_answers
from coldseam.report.view import Drawings, View
from coldseam.report.vtu import write_field


def write_all(
    view: View,
    case: Case,
    folder: Path,
    shown: Shown,
    *,
    pictures: bool,
    log: Callable[[str, str], None],
    artists: Artists | None = None,
) -> list[Path]:
    """Write answers.json, tables, fields, pictures and report.html and return their paths.

    Parameters
    ----------
    view
        The result; its ``answers`` are written.
    case
        The case it came from.
    folder
        Made if need be.
    shown
        Units of the report.
    pictures
        Whether to draw.
    log
        Called with a stage and a message.
    artists
        Who draws; None starts them when they are needed.

    Raises
    ------
    OutputError
        A file could not be written; nothing half-written is left.
    """
    folder = prepare_folder(folder)
    log("write", str(folder))
    written = [*write_answers(folder, view), *write_field(folder, view)]
    if not pictures:
        return [*written, write_report(view, case, Drawings(pictures=()), folder, shown, viewer=False)]
    drawings = draw_all(replace(view, shown=shown), folder, log, artists)
    for picture in drawings.pictures:
        written += [folder / name for name in (picture.file, picture.vector) if name]
    listed = [{"file": p.file, "vector": p.vector, "title": p.title, "alt": p.alt} for p in drawings.pictures]
    answers = view.answers | {
        "pictures": listed,
        "warnings": [*view.answers.get("warnings", []), *drawings.warnings],
    }
    view = replace(view, answers=answers)
    write_answers(folder, view)
    log("report", "writing report.html")
    return [*written, write_report(view, case, drawings, folder, shown)]
