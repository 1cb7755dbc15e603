"""The errors that reach a user: one clear message each, never a traceback.

Every error that the program foresees derives from :class:`ColdseamError`; the command line
prints its text and exits with its ``exit_code``.
"""

from __future__ import annotations

from dataclasses import dataclass

KeyPath = tuple[str | int, ...]
"""Where in a case file: table and key names, and positions in arrays of tables from 0."""


class ColdseamError(Exception):
    """Base of all foreseen errors; ``str(error)`` is what the user reads."""

    exit_code = 1


@dataclass(frozen=True, kw_only=True)
class Fault:
    """One fault of a case file.

    Parameters
    ----------
    path
        The key at fault, for example ``("boundary", 2, "on", "plane")``.
    what
        What is wrong and what would be accepted, without place or key.
    """

    path: KeyPath
    what: str


class CaseError(ColdseamError):
    """The case file can't be used as it is; carries every fault found, not only the first.

    ``place`` turns a key path into ``file:line``; where it is None the key alone is named.
    """

    exit_code = 2

    def __init__(self, faults: list[Fault], place=None):
        self.faults = list(faults)
        self.place = place
        super().__init__(self.text())

    def located(self, place) -> CaseError:
        """Return the same error with a locator (``place(path) -> "file:line"``)."""
        return self if self.place is not None else CaseError(self.faults, place)

    def text(self) -> str:
        """Return one line per fault: ``file:line: key: what``."""
        return "\n".join(self._line(fault) for fault in self.faults)

    def _line(self, fault: Fault) -> str:
        where = f"{self.place(fault.path)}: " if self.place is not None else ""
        key = key_text(fault.path)
        return f"{where}{key}: {fault.what}" if key else f"{where}{fault.what}"


class GeometryError(ColdseamError):
    """The geometry or the mesh could not be built."""

    exit_code = 3


class SolveError(ColdseamError):
    """No answer that can be trusted: no convergence, no closed balance, or too little memory."""

    exit_code = 4


class OutputError(ColdseamError):
    """The answers could not be written."""

    exit_code = 5


def key_text(path: KeyPath) -> str:
    """Return a key path as a person writes it, arrays of tables counted from 1.

    >>> key_text(("boundary", 0, "on", "plane"))
    'boundary[1].on.plane'
    """
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            text += f".{part}" if text else part
    return text
