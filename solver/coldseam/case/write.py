"""Writing a document back as TOML, for cases changed in Python."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from typing import Any

_BARE = re.compile(r"[A-Za-z0-9_-]+")


def to_toml(document: Mapping[str, Any]) -> str:
    """Return a document as TOML text that ``tomllib`` reads back to the same document.

    Tables and arrays of tables stand under headers, everything below them inline.
    """
    lines = [f"{_key(key)} = {_value(value)}" for key, value in document.items() if not _headed(value)]
    for key, value in document.items():
        if _tables(value):
            for entry in value:
                lines += ["", f"[[{_key(key)}]]", *_pairs(entry)]
        elif isinstance(value, dict):
            lines += _table(key, value)
    return "\n".join(lines).strip("\n") + "\n"


def _table(key: str, table: Mapping[str, Any]) -> list[str]:
    nested = [name for name, value in table.items() if isinstance(value, dict)]
    if nested and len(nested) == len(table):
        return [line for name in nested for line in ("", f"[{_key(key)}.{_key(name)}]", *_pairs(table[name]))]
    return ["", f"[{_key(key)}]", *_pairs(table)]


def _headed(value: Any) -> bool:
    return isinstance(value, dict) or _tables(value)


def _tables(value: Any) -> bool:
    return isinstance(value, list) and bool(value) and all(isinstance(entry, dict) for entry in value)


def _pairs(table: Mapping[str, Any]) -> list[str]:
    return [f"{_key(key)} = {_value(value)}" for key, value in table.items()]


def _key(key: str) -> str:
    return key if _BARE.fullmatch(key) else _text(key)


def _text(text: str) -> str:
    # JSON's escapes are TOML's, but for DEL, which TOML wants escaped and JSON does not.
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007F")


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, (list, tuple)):
        return f"[{', '.join(_value(item) for item in value)}]"
    if isinstance(value, dict):
        return f"{{ {', '.join(_pairs(value))} }}" if value else "{}"
    if isinstance(value, (int, float)):
        return repr(value)
    return str(value.isoformat()) if hasattr(value, "isoformat") else _text(str(value))
