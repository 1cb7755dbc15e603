"""Heat leaks, thermal bridges and surface temperatures of insulated enclosures, with their errors.

The front door: load a case, change a value, solve, read the answers.

    import coldseam

    case = coldseam.load("cases/freezer-panel.toml")
    warmer = coldseam.replace(case, "spaces.bay.temperature", 30)
    result = coldseam.run(warmer)

Everything here is imported when it is first used, so that ``import coldseam`` costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from coldseam._version import __version__

if TYPE_CHECKING:
    from coldseam.case.model import Case as Case
    from coldseam.case.read import load as load
    from coldseam.case.read import loads as loads
    from coldseam.case.read import replace as replace
    from coldseam.errors import CaseError as CaseError
    from coldseam.errors import ColdseamError as ColdseamError
    from coldseam.errors import GeometryError as GeometryError
    from coldseam.errors import OutputError as OutputError
    from coldseam.errors import SolveError as SolveError
    from coldseam.study import Result as Result
    from coldseam.study import check as check
    from coldseam.study import run as run

_HOME = {
    "load": "coldseam.case.read",
    "loads": "coldseam.case.read",
    "replace": "coldseam.case.read",
    "Case": "coldseam.case.model",
    "run": "coldseam.study",
    "check": "coldseam.study",
    "Result": "coldseam.study",
    "ColdseamError": "coldseam.errors",
    "CaseError": "coldseam.errors",
    "GeometryError": "coldseam.errors",
    "SolveError": "coldseam.errors",
    "OutputError": "coldseam.errors",
}
"""Where each public name is defined."""

__all__ = ["__version__", *sorted(_HOME)]


def __getattr__(name: str) -> object:
    """Return a public name, importing its module on first use."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(_HOME[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
