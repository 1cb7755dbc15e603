"""``report.html``: one file that opens from a disk without a network, and says everything a reviewer asks for.

The order is that of the questions: the answer and the limits, the flows and their errors, where the watts go, the
coldest places, histories, pictures, the model as given, how it was computed, the case file, cautions. Scripts and styles
are inline and allowed by their digest alone; the page asks for nothing from outside.
"""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Sequence
from importlib.resources import files
from pathlib import Path

from coldseam.case.model import Case
from coldseam.report import chapters, given
from coldseam.report.files import write_files
from coldseam.report.histories import histories
from coldseam.report.markup import Markup, joined, name, tag
from coldseam.report.shown import Shown
from coldseam.report.stills import stills
from coldseam.report.timed import event_lines
from coldseam.report.view import Drawings, View

LONGEST_HEADING = 300
"""Letters of a title that are shown as heading; the whole stands in the case file below."""
NOT_COVERED = (
    "The model is the case file: what it leaves out (workmanship, wet or aged insulation, gaps, leaking air, "
    "sun, heat given off inside a space) is not in the numbers.",
    "Errors stated are those of the numerical solution, and of inputs whose uncertainty the case states. Wrong inputs "
    "give exact answers to another question.",
    "Temperatures of surfaces rest on the film coefficients given; behind furniture, goods and shelves they are colder.",
    "Moisture is judged at the surface and at a steady state. Condensation inside a construction is not computed.",
    "Nothing here is a judgement on structural strength, fire, food safety, pressure or electrical safety: those belong to "
    "local codes and to people licensed to make it.",
)


def write_report(view: View, case: Case, drawings: Drawings, folder: Path, shown: Shown, viewer: bool = True) -> Path:
    """Write report.html into a folder.

    Parameters
    ----------
    view
        The result; ``answers`` as written to answers.json.
    case
        The case it came from.
    drawings
        The pictures that were written into the folder.
    folder
        Where the pictures are and the report goes.
    shown
        Units.
    viewer
        Whether to embed the view that can be turned and cut.

    Raises
    ------
    OutputError
        It could not be written.
    """
    page = document(view, case, drawings, folder, shown, viewer=viewer)
    return write_files(folder, {"report.html": page.encode()})[0]


def document(view: View, case: Case, drawings: Drawings, folder: Path, shown: Shown, *, viewer: bool = True) -> str:
    """Return the whole report as HTML."""
    answers = view.answers
    title = view.title or "Untitled case"
    parts: list[tuple[str, str, Markup]] = [
        ("limits", "Limits", chapters.limits_table(answers, shown)),
        ("warnings", "Warnings of the run", chapters.warnings(answers)),
        ("flows", "Heat flows", chapters.flows(answers, shown)),
        ("losses", "Where the heat goes", chapters.losses(answers, shown)),
        ("surfaces", "Coldest places and moisture", chapters.coldest(answers, shown)),
        ("histories", "Histories and events", histories(answers, folder, shown)),
        ("pictures", "Pictures", stills(view, drawings, folder, shown, viewer=viewer)),
        ("model", "The model as given", joined([given.bodies(case, answers, shown), given.materials(case, shown),
                                                given.outside(case, shown)])),
        ("computed", "How it was computed", given.computed(case, answers, view.mesh, shown)),
        ("case", "The case file", given.case_file(case)),
        ("cautions", "Cautions, and what this does not cover", cautions(case)),
    ]  # fmt: skip
    wet = chapters.moisture_sentence(answers, shown)
    summary = joined([
        *(tag("p", line, {"class": "answer"}) for line in event_lines(answers, shown)),
        tag("p", chapters.answer_sentence(answers, shown), {"class": "answer"}),
        tag("p", wet, {"class": "answer"}) if wet else "",
        tag("p", chapters.limits_sentence(answers), {"class": "verdict"}),
    ])  # fmt: skip
    return page(title, summary, [part for part in parts if part[2]], scripts=viewer)


def page(
    title: str,
    summary: Markup,
    parts: Sequence[tuple[str, str, Markup]],
    *,
    scripts: bool,
    kind: str = "Heat flow report",
) -> str:
    """Return a page of chapters.

    Parameters
    ----------
    title
        As typed.
    summary
        What stands above the chapters.
    parts
        Identifier, heading and content of each chapter.
    scripts
        Whether the viewer's script is embedded.
    kind
        What kind of page it is, above its title.
    """
    style, script = resource("report.css"), resource("viewer.js") if scripts else ""
    policy = f"default-src 'none'; img-src data:; style-src '{digest(style)}'"
    policy += f"; script-src '{digest(script)}'" if script else ""
    policy += "; base-uri 'none'; form-action 'none'"
    short = title if len(title) <= LONGEST_HEADING else f"{title[:LONGEST_HEADING]} …"
    contents = tag("nav", tag("ol", [tag("li", tag("a", heading, {"href": f"#{key}"})) for key, heading, _ in parts]),
                   {"aria-label": "Contents"})  # fmt: skip
    sections = [
        tag("section", [tag("h2", heading, {"id": f"{key}-heading"}), content],
            {"id": key, "aria-labelledby": f"{key}-heading"})
        for key, heading, content in parts
    ]  # fmt: skip
    head = [
        tag("meta", "", {"charset": "utf-8"}),
        tag("meta", "", {"http-equiv": "Content-Security-Policy", "content": policy}),
        tag("meta", "", {"name": "viewport", "content": "width=device-width, initial-scale=1"}),
        tag("meta", "", {"name": "referrer", "content": "no-referrer"}),
        tag("title", short),
        Markup(f"<style>{style}</style>"),
    ]
    header = tag("header", [tag("p", kind, {"class": "kind"}), tag("h1", name(short)), summary])
    body = [
        header,
        contents,
        tag("main", joined(sections, "\n")),
        Markup(f"<script>{script}</script>" if script else ""),
    ]
    top, rest = tag("head", joined(head, chr(10))), tag("body", joined(body, chr(10)))
    return f'<!DOCTYPE html>\n<html lang="en">\n{top}\n{rest}\n</html>\n'


def resource(file: str) -> str:
    """Return a text that ships with the package."""
    return files("coldseam.report").joinpath(file).read_text(encoding="utf-8")


def digest(content: str) -> str:
    """Return the source expression that allows an inline style or script with this very content."""
    return "sha256-" + base64.b64encode(hashlib.sha256(content.encode()).digest()).decode()


def cautions(case: Case) -> Markup:
    """Return the cautions that the case file itself gives, and what no such computation covers."""
    own = given.cautions_of(case)
    told = (
        joined([tag("h3", "From the case file"), tag("ul", [tag("li", tag("bdi", each)) for each in own])])
        if own
        else ""
    )
    general = [tag("h3", "Of this kind of computation"), tag("ul", [tag("li", each) for each in NOT_COVERED])]
    return joined([told, *general])
