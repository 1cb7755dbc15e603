"""Where in a TOML text every key stands. TOML libraries give values without their places.

The scanner follows what decides where keys are: tables, arrays of tables, dotted and quoted
keys, inline tables, arrays, strings and comments. It expects text that ``tomllib`` has
accepted, and does not check it again.
"""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass, field
from pathlib import Path

KeyPath = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_BLANK = re.compile(r"[ \t]*")
_SKIP = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_ESCAPE = re.compile(r"\\(?:u([0-9A-Fa-f]{4})|U([0-9A-Fa-f]{8})|(.))")
_ESCAPES = {"b": "\b", "t": "\t", "n": "\n", "f": "\f", "r": "\r", '"': '"', "\\": "\\", "e": "\x1b"}
_SCALAR = re.compile(r"[^,\]}#\r\n]*")


@dataclass(frozen=True, kw_only=True)
class Source:
    """The text of a case and the lines of its keys.

    Parameters
    ----------
    file
        As given by the user, None for text.
    folder
        What paths in the case are relative to.
    text
        The whole text.
    sha256
        Digest of the file, or of the text in UTF-8, hexadecimal.
    lines
        Key path -> line, from 1.
    changed
        Keys changed since it was read (see ``read.replace``).
    """

    file: str | None
    folder: Path
    text: str
    sha256: str
    lines: dict[KeyPath, int] = field(repr=False, default_factory=dict)
    changed: tuple[str, ...] = ()

    def line(self, path: KeyPath) -> int | None:
        """Return the line of a key, or of the nearest table around it; None where there is none."""
        for end in range(len(path), 0, -1):
            if tuple(path[:end]) in self.lines:
                return self.lines[tuple(path[:end])]
        return None

    def place(self, path: KeyPath) -> str:
        """Return ``file:line`` of a key, or of the nearest table around it."""
        line = self.line(path)
        name = self.file or "case text"
        return name if line is None else f"{name}:{line}"


def digest(text: str) -> str:
    """Return the SHA-256 of a text."""
    return hashlib.sha256(text.encode("utf-8")).hexdigest()


def scan(text: str) -> dict[KeyPath, int]:
    """Return the line, from 1, of every key and array element of a valid TOML text.

    >>> scan('a = 1\\n[b]\\nc = [2,\\n3]')[("b", "c", 1)]
    4
    """
    return _Scanner(text).run()


class _Scanner:
    """One pass over the text; ``at`` is the position in it."""

    def __init__(self, text: str):
        self.text = text
        self.at = 0
        self.counted = 0
        self.line = 1
        self.lines: dict[KeyPath, int] = {}
        self.arrays: dict[KeyPath, int] = {}

    def run(self) -> dict[KeyPath, int]:
        table: KeyPath = ()
        while True:
            self._skip()
            if self.at >= len(self.text):
                return self.lines
            if self.text.startswith("[[", self.at):
                table = self._header(2)
            elif self.text[self.at] == "[":
                table = self._header(1)
            else:
                self._pair(table)

    def _skip(self) -> None:
        match = _SKIP.match(self.text, self.at)
        assert match is not None
        self.at = match.end()

    def _here(self) -> int:
        # Positions only grow, so lines are counted once.
        self.line += self.text.count("\n", self.counted, self.at)
        self.counted = self.at
        return self.line

    def _header(self, brackets: int) -> KeyPath:
        line = self._here()
        self.at += brackets
        keys = self._keys()
        self.at += brackets
        path: KeyPath = ()
        for key in keys[:-1]:
            path = self._enter((*path, key), line)
        path = (*path, keys[-1])
        self.lines.setdefault(path, line)
        if brackets == 2:
            count = self.arrays.get(path, 0)
            self.arrays[path] = count + 1
            path = (*path, count)
            self.lines[path] = line
        return path

    def _enter(self, path: KeyPath, line: int) -> KeyPath:
        """Note a table that a dotted key names; in an array of tables it means the last one."""
        self.lines.setdefault(path, line)
        return (*path, self.arrays[path] - 1) if path in self.arrays else path

    def _keys(self) -> list[str]:
        keys = []
        while True:
            self._blank()
            keys.append(self._key())
            self._blank()
            if not self.text.startswith(".", self.at):
                return keys
            self.at += 1

    def _blank(self) -> None:
        match = _BLANK.match(self.text, self.at)
        assert match is not None
        self.at = match.end()

    def _key(self) -> str:
        quote = self.text[self.at]
        if quote in "\"'":
            start = self.at + 1
            self._string()
            inner = self.text[start : self.at - 1]
            return _ESCAPE.sub(_unescaped, inner) if quote == '"' else inner
        match = _BARE.match(self.text, self.at)
        if match is None:
            raise ValueError(f"no key at position {self.at}")
        self.at = match.end()
        return match.group()

    def _pair(self, table: KeyPath) -> None:
        line = self._here()
        keys = self._keys()
        self.at += 1  # the equals sign
        path = table
        for key in keys:
            path = (*path, key)
            self.lines.setdefault(path, line)
        self._blank()
        self._value(path)

    def _value(self, path: KeyPath) -> None:
        first = self.text[self.at]
        if first == "[":
            self._array(path)
        elif first == "{":
            self._inline(path)
        elif first in "\"'":
            self._string()
        else:
            match = _SCALAR.match(self.text, self.at)
            assert match is not None
            self.at = match.end()

    def _array(self, path: KeyPath) -> None:
        self.at += 1
        count = 0
        while True:
            self._skip()
            if self.text[self.at] == "]":
                self.at += 1
                return
            if self.text[self.at] == ",":
                self.at += 1
                continue
            self.lines[(*path, count)] = self._here()
            self._value((*path, count))
            count += 1

    def _inline(self, path: KeyPath) -> None:
        self.at += 1
        while True:
            self._skip()
            if self.text[self.at] == "}":
                self.at += 1
                return
            if self.text[self.at] == ",":
                self.at += 1
                continue
            self._pair(path)

    def _string(self) -> None:
        """Step over a string of any of the four kinds."""
        quote = self.text[self.at]
        triple = self.text.startswith(quote * 3, self.at)
        end = quote * 3 if triple else quote
        self.at += len(end)
        while not self.text.startswith(end, self.at):
            self.at += 2 if quote == '"' and self.text[self.at] == "\\" else 1
        self.at += len(end)
        # Up to two quotes may stand right before the closing three and belong to the string.
        while triple and self.text.startswith(quote, self.at):
            self.at += 1


def _unescaped(match: re.Match[str]) -> str:
    code = match.group(1) or match.group(2)
    return chr(int(code, 16)) if code else _ESCAPES[match.group(3)]
