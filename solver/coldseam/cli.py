"""The command line: parse, call, print.

Nothing heavy is imported at the top, so that ``coldseam --help`` answers at once. Standard output gets the
answer and nothing else; progress and errors go to standard error.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from coldseam._version import __version__
from coldseam.errors import ColdseamError
from coldseam.progress import Log, printable

if TYPE_CHECKING:
    from coldseam.case.library import Entry

LIMIT_NOT_MET = 6
INTERRUPTED = 130

EXIT_CODES = """\
exit codes:
  0    done, and every limit of the case is met
  1    any other error
  2    the command line or the case file is at fault
  3    the geometry or the mesh could not be built
  4    no answer that can be trusted (no convergence, no closed balance, too little memory)
  5    the output could not be written
  6    done and written, but a limit of the case is not met
  130  interrupted
"""


def parser() -> argparse.ArgumentParser:
    """Return the parser of the whole command line."""
    top = argparse.ArgumentParser(
        prog="coldseam",
        description="Heat leaks, thermal bridges and surface temperatures of insulated enclosures, with their errors.",
        epilog=EXIT_CODES,
        formatter_class=lambda prog: argparse.RawDescriptionHelpFormatter(prog, max_help_position=14),
    )
    top.add_argument("--version", action="version", version=f"coldseam {__version__}")
    top.add_argument("--debug", action="store_true", help="show where in the program an error arose")
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")

    run = commands.add_parser("run", help="solve a case and write its answers")
    run.add_argument("case", metavar="CASE", help="the case file (TOML)")
    run.add_argument("--out", metavar="DIR", required=True, help="folder for the answers; made if need be")
    run.add_argument("--verbose", action="store_true", help="keep every step of the run as a line, rounds included")
    run.add_argument("--no-pictures", action="store_true", help="write the answers without drawing")
    _add_units(run)
    run.add_argument(
        "--resume", action="store_true", help="go on with a run over time that was stopped, from its checkpoint in DIR"
    )
    run.set_defaults(do=_run)

    compare = commands.add_parser("compare", help="set variants side by side: answers, differences, limits, pictures")
    compare.add_argument("variants", metavar="CASE", nargs="+", help="case files, or folders that 'run' wrote")
    compare.add_argument("--out", metavar="DIR", required=True, help="folder for the comparison; made if need be")
    compare.add_argument("--verbose", action="store_true", help="keep every step of the runs as a line")
    _add_units(compare)
    compare.set_defaults(do=_compare)

    at = commands.add_parser(
        "at", help="solve a case once and give its answers at other temperatures of its spaces, superposed"
    )
    at.add_argument("case", metavar="CASE", help="the case file (TOML)")
    at.add_argument("temperatures", metavar="SPACE=TEMP", nargs="+", help='such as hall=30 or "hall=86 degF"')
    at.add_argument("--out", metavar="DIR", help="folder for the answers; made if need be")
    at.add_argument("--verbose", action="store_true", help="keep every step of the run as a line, rounds included")
    _add_units(at)
    at.set_defaults(do=_at)

    check = commands.add_parser("check", help="read a case and build its geometry, but solve nothing")
    check.add_argument("case", metavar="CASE", help="the case file (TOML)")
    check.add_argument("--out", metavar="DIR", help="folder for pictures of the bodies and boundaries")
    check.add_argument("--verbose", action="store_true", help="keep every step as a line")
    check.set_defaults(do=_check)

    materials = commands.add_parser("materials", help="search the materials library")
    materials.add_argument("text", metavar="TEXT", nargs="*", help="words that the name or the notes must hold")
    materials.add_argument("--show", metavar="NAME", help="one material with all its values and their source")
    materials.set_defaults(do=_materials)

    examples = commands.add_parser("examples", help="copy the shipped cases and the files they need")
    examples.add_argument("folder", metavar="DIR", help="where to; files that differ are never overwritten")
    examples.set_defaults(do=_examples)

    schema = commands.add_parser("schema", help="print the JSON Schema of case files, for editors")
    schema.set_defaults(do=_schema)
    return top


def _add_units(command: argparse.ArgumentParser) -> None:
    words = "of report.html (inch: in, °F, Btu); files for machines stay metric"
    command.add_argument("--units", choices=("metric", "inch"), default="metric", help=words)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    options = parser().parse_args(arguments)
    try:
        code: int = options.do(options)
        return code
    except ColdseamError as error:
        return _fail(str(error), error.exit_code, options.debug)
    except KeyboardInterrupt:
        return _fail("interrupted", INTERRUPTED, options.debug)
    except MemoryError:
        return _fail("out of memory", 4, options.debug)
    except OSError as error:
        named = f"{error.filename}: " if error.filename else ""
        return _fail(f"{named}{error.strerror or error}", 5, options.debug)
    except Exception as error:  # the last line of defence: a user gets a sentence, --debug the traceback
        return _fail(
            f"internal error: {type(error).__name__}: {error}\n"
            "This is a fault of coldseam, not of your case. Please report it with the case file and what"
            " 'coldseam --debug ...' prints.",
            1,
            options.debug,
        )


def _fail(text: str, code: int, debug: bool) -> int:
    if debug:
        import traceback

        traceback.print_exc(file=sys.stderr)
    _say(f"coldseam: {text}", sys.stderr)
    return code


def _say(text: str, stream: TextIO | None = None) -> None:
    """Print text; a reader that has gone away (``| head``) is not an error."""
    stream = stream or sys.stdout
    try:
        stream.write(printable(text).rstrip("\n") + "\n")
        stream.flush()
    except BrokenPipeError:
        # What is still buffered must not raise again when Python closes the stream.
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _log(options: argparse.Namespace) -> Log:
    return Log(sys.stderr, live=sys.stderr.isatty(), verbose=options.verbose)


def _run(options: argparse.Namespace) -> int:
    import json

    from coldseam.case.read import load
    from coldseam.report.files import prepare_folder

    case = load(options.case)
    folder = prepare_folder(options.out)  # before the work, not after it
    with _log(options) as log:
        log("starting", "loading the numerics")
        from coldseam.report.artists import Artists
        from coldseam.report.summary import summary
        from coldseam.study import run

        with nullcontext() if options.no_pictures else Artists(case.model.dimensions) as artists:
            result = run(case, log, folder=folder, resume=options.resume)
            drawn = not options.no_pictures
            written = result.write(folder, pictures=drawn, log=log, units=options.units, artists=artists)
    # As written: drawing adds to the warnings what could not be drawn.
    answers = json.loads((folder / "answers.json").read_text(encoding="utf-8"))
    _say(summary(answers, [str(path) for path in written]))
    met = all(limit["met"] for limit in answers["limits"].values())
    return 0 if met else LIMIT_NOT_MET


def _at(options: argparse.Namespace) -> int:
    from coldseam.answers.superpose import at_temperatures
    from coldseam.case.read import load
    from coldseam.errors import CaseError, Fault
    from coldseam.report.files import prepare_folder

    case = load(options.case)
    pairs = [text.rpartition("=") for text in options.temperatures]
    wrong = [text for text, (name, _, value) in zip(options.temperatures, pairs, strict=True) if not name or not value]
    if wrong:
        raise CaseError([Fault(path=(), what=f"{text!r} is not of the form SPACE=TEMPERATURE") for text in wrong])
    temperatures = {name.strip(): _number(value.strip()) for name, _, value in pairs}
    if case.time is not None:
        raise CaseError([Fault(path=("time",), what="answers are superposed for steady cases only")], case.source.place)
    at_temperatures(case, temperatures)  # before the work, not after it
    folder = None if options.out is None else prepare_folder(options.out)
    with _log(options) as log:
        log("starting", "loading the numerics")
        from coldseam.report.summary import summary
        from coldseam.study import run

        result = run(case, log).at(temperatures)
        written = [] if folder is None else result.write(folder, pictures=False, log=log, units=options.units)
    answers = result.answers.as_dict()
    _say(summary(answers, [str(path) for path in written]))
    return 0 if all(limit["met"] for limit in answers["limits"].values()) else LIMIT_NOT_MET


def _compare(options: argparse.Namespace) -> int:
    from coldseam.report.files import prepare_folder

    folder = prepare_folder(options.out)  # before the work, not after it
    with _log(options) as log:
        log("starting", "loading the numerics")
        from coldseam.variants import compare

        compared = compare(options.variants, folder, units=options.units, log=log)
    _say("\n".join(str(path) for path in compared.files[-2:]))
    met = all(limit["met"] for v in compared.variants for limit in (v.answers.get("limits") or {}).values())
    return 0 if met else LIMIT_NOT_MET


def _number(text: str) -> float | str:
    """Return a bare number as one, other text (a number with its unit) as it is."""
    try:
        return float(text)
    except ValueError:
        return text


def _check(options: argparse.Namespace) -> int:
    from coldseam.case.read import load
    from coldseam.report.files import prepare_folder

    case = load(options.case)
    folder = None if options.out is None else prepare_folder(options.out)
    with _log(options) as log:
        log("starting", "loading the numerics")
        from coldseam.report.artists import draw_all
        from coldseam.report.summary import model_summary
        from coldseam.report.view import Drawings
        from coldseam.study import check

        view = check(case, log).view
        drawn = Drawings(pictures=()) if folder is None else draw_all(view, folder, log)
    files = [] if folder is None else [str(folder / picture.file) for picture in drawn.pictures]
    _say(model_summary(view, files, [*case.warnings, *drawn.warnings]))
    return 0


def _materials(options: argparse.Namespace) -> int:
    from coldseam.case import library

    if options.show is not None:
        _say(material_card(library.lookup(options.show)))
        return 0
    text = " ".join(options.text)
    found = library.search(text)
    if not found:
        raise ColdseamError(f"no material of the library matches {text!r}; 'coldseam materials' lists them all")
    width = max(len(entry.name) for entry in found)
    rows = [f"{entry.name:<{width}}  {entry.conductivity:>8g} W/(m·K)  {entry.holds_for}" for entry in found]
    _say("\n".join([*rows, "", "coldseam materials --show NAME tells all values of one, and their source."]))
    return 0


def material_card(entry: Entry) -> str:
    """Return one material of the library as text: every value with its unit, and the source."""
    rows = [
        ("", entry.name),
        ("kind", entry.category),
        ("conductivity", f"{entry.conductivity:g} W/(m·K)" + (" at 20 °C; follows a law" if entry.law else "")),
        ("density", f"{entry.density:g} kg/m³"),
        (
            "specific heat",
            f"{entry.specific_heat:g} J/(kg·K)" + (" at 20 °C; follows a law" if entry.heat_law else ""),
        ),
        ("emissivity", "not known" if entry.emissivity is None else f"{entry.emissivity:g}"),
        ("holds for", entry.holds_for),
        ("source", entry.source),
        ("note", entry.note),
        ("also found as", "; ".join(entry.aliases)),
    ]
    return "\n".join(f"{label + ':':<15}{value}" if label else value for label, value in rows if value)


def _examples(options: argparse.Namespace) -> int:
    from coldseam.shipped import copy_cases

    copied = copy_cases(Path(options.folder))
    cases = [path for path in copied if path.suffix == ".toml"]
    _say("\n".join(str(path) for path in copied))
    if cases:
        _say(f"\nTry: coldseam run {cases[0]} --out out")
    return 0


def _schema(options: argparse.Namespace) -> int:
    import json

    from coldseam.case.schema import json_schema

    _say(json.dumps(json_schema(), indent=2, ensure_ascii=False))
    return 0
