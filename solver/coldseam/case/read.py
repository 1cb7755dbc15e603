"""Reading case files: TOML text in, a validated :class:`Case` or all of its faults out."""

from __future__ import annotations

import copy
import hashlib
import re
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from coldseam.case.crosscheck import context_from
from coldseam.case.model import Case
from coldseam.case.source import Source, digest, scan
from coldseam.case.tables import listing, nearest, troubles_of
from coldseam.case.write import to_toml
from coldseam.errors import CaseError, Fault, KeyPath

_AT_LINE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")


def load(path: str | Path) -> Case:
    """Return the case in a file.

    Raises
    ------
    CaseError
        The file can't be read, or with every fault of the case, each as ``file:line: key: what``.
    """
    path = Path(path)
    name = str(path)
    try:
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise _unreadable(name, "there is no such file") from error
    except IsADirectoryError as error:
        raise _unreadable(name, "is a folder; a case is one TOML file") from error
    except (OSError, ValueError) as error:
        raise _unreadable(name, f"can't be read: {getattr(error, 'strerror', None) or error}") from error
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise _unreadable(f"{name}:{line}", "is not UTF-8 text, which a case file must be") from error
    return _read(text, name, path.parent, hashlib.sha256(data).hexdigest())


def loads(text: str, folder: str | Path = Path(".")) -> Case:
    """Return the case in a text; paths in it are relative to ``folder``.

    Raises
    ------
    CaseError
        With every fault of the case.
    """
    return _read(text, None, Path(folder), digest(text))


def replace(case: Case, key: str | Sequence[str | int], value: Any) -> Case:
    """Return the case with one value changed, validated again.

    Parameters
    ----------
    case
        A case that was read.
    key
        As in the file: ``"spaces.bay.temperature"``. An entry of an array of tables by its name,
        ``"body[bolts].cylinder.diameter"``, or by its number counted from 1, ``"body[2]..."`` or
        ``"body.2..."``; numbers in lists likewise, ``"body[panel].box.to.3"``. Names with dots go
        in quotes, or pass the key as a sequence.
    value
        As in the file, a bare number in the documented unit; None takes the key out.

    Raises
    ------
    CaseError
        There is no such place, or the changed case is at fault.

    Examples
    --------
    >>> warmer = replace(case, "spaces.bay.temperature", "86 degF")  # doctest: +SKIP
    """
    parts = _split_key(key) if isinstance(key, str) else list(key)
    document = copy.deepcopy(case.raw)
    path = _set(document, parts, _as_typed(value))
    text = to_toml(document)
    source = Source(
        file=case.source.file,
        folder=case.source.folder,
        text=text,
        sha256=digest(text),
        lines=case.source.lines,
        changed=(*case.source.changed, key if isinstance(key, str) else ".".join(map(str, path))),
    )
    return _validated(document, source)


def _unreadable(place: str, what: str) -> CaseError:
    return CaseError([Fault(path=(), what=what)], lambda path: place)


def _read(text: str, file: str | None, folder: Path, sha256: str) -> Case:
    text = text.replace("\r\n", "\n")  # as tomllib does
    try:
        document = tomllib.loads(text)
        lines = scan(text)
    except tomllib.TOMLDecodeError as error:
        raise _not_toml(error, text, file or "case text") from error
    except RecursionError as error:
        raise _unreadable(file or "case text", "is nested too deeply") from error
    return _validated(document, Source(file=file, folder=folder, text=text, sha256=sha256, lines=lines))


def _not_toml(error: tomllib.TOMLDecodeError, text: str, name: str) -> CaseError:
    """Return a TOML error with its line in front and without Python's ending."""
    message = str(error)
    match = _AT_LINE.search(message)
    line = int(match.group(1)) if match and match.group(1) else text.rstrip("\n").count("\n") + 1
    what = _AT_LINE.sub("", message)
    column = f" (column {match.group(2)})" if match and match.group(2) else ""
    return _unreadable(f"{name}:{line}", f"is not valid TOML: {what[:1].lower()}{what[1:]}{column}")


def _validated(document: dict[str, Any], source: Source) -> Case:
    context = context_from(document, source.folder)
    try:
        case = Case.model_validate(document, context=context)
    except ValidationError as error:
        faults = [Fault(path=_real(loc, document), what=what) for loc, what in troubles_of(error)]
        faults.sort(key=lambda fault: source.line(fault.path) or 0)
        raise CaseError(faults, source.place) from None
    case._source = source
    case._raw = document
    return case


def _real(loc: KeyPath, document: Any) -> KeyPath:
    """Return a path without what pydantic adds to it (``[key]`` after a bad key of a table)."""
    return tuple(part for part in loc if part != "[key]")


_PART = re.compile(r"""\.?(?:"([^"]*)"|'([^']*)'|\[([^\]]*)\]|([^.\["']+))""")


def _split_key(key: str) -> list[str]:
    parts, at = [], 0
    while at < len(key):
        match = _PART.match(key, at)
        if match is None:
            raise CaseError([Fault(path=(key,), what="can't be read as a key, such as body[bolts].cylinder.diameter")])
        parts.append(next(group for group in match.groups() if group is not None))
        at = match.end()
    return parts


def _as_typed(value: Any) -> Any:
    """Return a value as TOML would have given it: arrays and tuples as lists, numpy's numbers as Python's."""
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return [_as_typed(item) for item in value]
    if isinstance(value, dict):
        return {str(key): _as_typed(item) for key, item in value.items()}
    return str(value) if isinstance(value, Path) else value


def _set(document: dict[str, Any], parts: list[Any], value: Any) -> KeyPath:
    """Change one value in place; return the path with positions in place of names."""
    path: list[str | int] = []
    here: Any = document
    for depth, part in enumerate(parts):
        last = depth == len(parts) - 1
        step = _step(here, part, path, last)
        path.append(step)
        if not last:
            here = here[step]
        elif value is None and isinstance(here, dict):
            here.pop(step, None)
        elif value is None:
            del here[step]
        else:
            here[step] = value
    if not path:
        raise CaseError([Fault(path=(), what="the key is empty")])
    return tuple(path)


def _step(here: Any, part: Any, path: list[str | int], last: bool) -> str | int:
    """Return the key or position that a part of a key means."""
    if isinstance(here, dict):
        if isinstance(part, str) and (part in here or last):
            return part
        choices = [str(name) for name in here]
    elif isinstance(here, list):
        choices = [str(item["name"]) for item in here if isinstance(item, dict) and "name" in item]
        if part in choices:
            return next(n for n, item in enumerate(here) if isinstance(item, dict) and item.get("name") == part)
        if str(part).isdecimal() and 1 <= int(part) <= len(here):
            return int(part) - 1
        choices = choices or [f"1 to {len(here)}"]
    else:
        raise CaseError([Fault(path=tuple(path), what=f'is a single value and has no "{part}"')])
    there = nearest(str(part), choices) or f"; there is {listing(choices)}"
    raise CaseError([Fault(path=tuple(path), what=f'has no "{part}"{there}')])
