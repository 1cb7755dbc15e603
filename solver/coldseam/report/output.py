"""Everything a run leaves in its folder, the answers first: drawing can fail, answers must not be lost."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from coldseam.report.draw import draw_all
from coldseam.report.files import prepare_folder
from coldseam.report.tables import write_answers
from coldseam.report.view import View
from coldseam.report.vtu import write_field


def write_all(view: View, folder: Path, *, pictures: bool, log: Callable[[str, str], None]) -> list[Path]:
    """Write answers.json, tables, fields and pictures and return their paths.

    Parameters
    ----------
    view
        The result; its ``answers`` are written.
    folder
        Made if need be.
    pictures
        Whether to draw.
    log
        Called with a stage and a message.

    Raises
    ------
    OutputError
        A file could not be written; nothing half-written is left.
    """
    folder = prepare_folder(folder)
    log("write", str(folder))
    written = [*write_answers(folder, view), *write_field(folder, view)]
    if not pictures:
        return written
    drawings = draw_all(view, folder, log)
    for picture in drawings.pictures:
        written += [folder / name for name in (picture.file, picture.vector) if name]
    listed = [{"file": p.file, "vector": p.vector, "title": p.title, "alt": p.alt} for p in drawings.pictures]
    answers = view.answers | {
        "pictures": listed,
        "warnings": [*view.answers.get("warnings", []), *drawings.warnings],
    }
    write_answers(folder, replace(view, answers=answers))
    return written
