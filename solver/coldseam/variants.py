"""Comparing variants: several cases solved and drawn on one scale, or finished runs read from their folders."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from coldseam.case.model import Case
from coldseam.case.read import load
from coldseam.errors import CaseError, Fault
from coldseam.report.comparison import ALONE, Variant, write_comparison
from coldseam.report.files import prepare_folder
from coldseam.report.view import Picture, Table
from coldseam.study import Result, run

NUMBERED = "temperature_section"


@dataclass(frozen=True, kw_only=True, eq=False)
class Compared:
    """Variants that were compared, and the files written."""

    variants: tuple[Variant, ...]
    files: tuple[Path, ...]


def compare(
    given: Sequence[str | Path],
    folder: str | Path,
    *,
    units: str = "metric",
    log: Callable[[str, str], None] | None = None,
) -> Compared:
    """Compare variants and write comparison.html and comparison.csv.

    Parameters
    ----------
    given
        At least two: case files, which are solved, their files going into folders of their own below ``folder``; or
        folders that ``coldseam run`` wrote, which are read.
    folder
        Output folder, made if need be.
    units
        "metric" or "inch".
    log
        Called with a stage and a message.

    Raises
    ------
    ColdseamError
        Fewer than two, a folder without answers, or what :func:`coldseam.study.run` raises.
    """
    if len(given) < 2:
        raise CaseError([Fault(path=(), what="a comparison needs at least two case files or folders of finished runs")])
    folder = prepare_folder(folder)
    log = log or (lambda stage, message: None)
    names = _names([Path(entry) for entry in given])
    done = {k: _finished(Path(entry), names[k]) for k, entry in enumerate(given) if Path(entry).is_dir()}
    cases: dict[int, Case] = {k: load(entry) for k, entry in enumerate(given) if k not in done}
    results: dict[int, Result] = {}
    for k, case in cases.items():
        log("compare", f"solving {names[k]}")
        results[k] = run(case, log)
    ends = [(float(r.temperature.min()), float(r.temperature.max())) for r in results.values()]
    scale = (min(low for low, _ in ends), max(high for _, high in ends)) if ends else None
    files: list[Path] = []
    for k, result in results.items():
        files += result.write(folder / names[k], log=log, units=units, scale=scale)
        done[k] = _finished(folder / names[k], names[k])
    variants = tuple(done[k] for k in range(len(given)))
    return Compared(
        variants=variants,
        files=(*files, *write_comparison(variants, folder, units, one_scale=len(results) == len(given))),
    )


def _names(paths: Sequence[Path]) -> list[str]:
    """Return a name for each, unlike all others, that can be a folder's."""
    stems = [path.resolve().stem if not path.is_dir() else path.resolve().name for path in paths]
    return [stem if stems.count(stem) == 1 else f"{stem}-{k + 1}" for k, stem in enumerate(stems)]


def _finished(folder: Path, name: str) -> Variant:
    """Return a finished run from its folder."""
    file = folder / "answers.json"
    try:
        answers = json.loads(file.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        what = f"{folder} holds no answers.json that can be read; give a case file, or the folder of a finished run"
        raise CaseError([Fault(path=(), what=what)]) from error
    pictures = []
    for entry in answers.get("pictures") or ():
        stem = Path(entry["file"]).stem
        if (stem in ALONE or stem.startswith(NUMBERED)) and (folder / entry["file"]).exists():
            vector = entry.get("vector")
            pictures.append(Picture(
                file=entry["file"], title=entry["title"], alt=entry["alt"], table=Table(columns=(), rows=()),
                vector=vector if vector and (folder / vector).exists() else None,
            ))  # fmt: skip
    return Variant(name=name, answers=answers, folder=folder, pictures=tuple(pictures))
