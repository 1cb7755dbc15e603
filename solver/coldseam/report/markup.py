"""HTML from text: everything that is not :class:`Markup` already is escaped, so no name can become a tag.

Names and titles come from a case file and may hold anything: tags, quotes, control letters, text that runs from right
to left. ``name`` isolates them (``<bdi>``), so that they can't turn the words around them.
"""

from __future__ import annotations

import html
from collections.abc import Iterable, Mapping, Sequence

VOID = frozenset({"img", "meta", "input", "br", "link"})


class Markup(str):
    """Text that is HTML already."""


def text(value: object) -> Markup:
    """Return a value as HTML text; letters that HTML forbids become the replacement sign.

    >>> text('<b> & "c"')
    '&lt;b&gt; &amp; &quot;c&quot;'
    """
    if isinstance(value, Markup):
        return value
    return Markup(html.escape("".join(letter if _allowed(letter) else "\ufffd" for letter in str(value))))


def _allowed(letter: str) -> bool:
    code = ord(letter)
    if code in (0x09, 0x0A):
        return True
    return 0x20 <= code < 0x7F or (code >= 0xA0 and not 0xD800 <= code < 0xE000 and code & 0xFFFE != 0xFFFE
                                   and not 0xFDD0 <= code <= 0xFDEF)  # fmt: skip


def tag(element: str, content: object = "", attributes: Mapping[str, object] | None = None) -> Markup:
    """Return an element; content that is a list is joined, attributes that are None or False are left out.

    >>> tag("p", ["a < b ", tag("b", "c")], {"class": "note", "hidden": True})
    '<p class="note" hidden>a &lt; b <b>c</b></p>'
    """
    given = "".join(
        f" {key}" if value is True else f' {key}="{text(value)}"'
        for key, value in (attributes or {}).items()
        if value is not None and value is not False
    )
    if element in VOID:
        return Markup(f"<{element}{given}>")
    return Markup(f"<{element}{given}>{joined(content)}</{element}>")


def joined(content: object, between: str = "") -> Markup:
    """Return text, markup or any iterable of them as one piece of HTML."""
    if isinstance(content, str) or not isinstance(content, Iterable):
        return text(content)
    return Markup(between.join(text(part) for part in content))


LONGEST_NAME = 300
"""Letters of a name that are shown; the whole of a longer one stands in the case file."""


def name(value: object) -> Markup:
    """Return a user's name for something, kept from turning the text around it; of a very long one the beginning."""
    if isinstance(value, str) and not isinstance(value, Markup) and len(value) > LONGEST_NAME:
        value = f"{value[:LONGEST_NAME]} …"
    return tag("bdi", value)


def table(
    caption: object,
    columns: Sequence[object],
    rows: Sequence[Sequence[object]],
    numbers: Sequence[int] = (),
) -> Markup:
    """Return a table whose first column heads its rows; on a narrow page every row becomes a card.

    Parameters
    ----------
    caption
        What the table shows.
    columns
        Headings.
    rows
        Cells, one row each; empty cells are marked so that cards leave them out.
    numbers
        Columns whose cells stand to the right.
    """
    if not rows:
        return Markup("")
    head = tag(
        "tr", [tag("th", column, {"scope": "col", "class": _side(k, numbers)}) for k, column in enumerate(columns)]
    )
    body = [tag("tr", [_cell(k, cell, columns, numbers) for k, cell in enumerate(row)]) for row in rows]
    inner = [tag("caption", caption), tag("thead", head), tag("tbody", joined(body, "\n"))]
    return tag("table", inner)


def _cell(position: int, cell: object, columns: Sequence[object], numbers: Sequence[int]) -> Markup:
    kind = " ".join(filter(None, (_side(position, numbers), "" if str(cell) else "none"))) or None
    if position == 0:
        return tag("th", cell, {"scope": "row", "class": kind})
    label = tag("span", columns[position], {"class": "label", "aria-hidden": "true"})
    return tag("td", [label, tag("span", cell)], {"class": kind})


def _side(position: int, numbers: Sequence[int]) -> str | None:
    return "number" if position in numbers else None
