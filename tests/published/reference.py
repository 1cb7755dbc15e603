"""One published or exact value, and how far coldseam may be from it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class Reference:
    """One value of a source and how far coldseam may be from it.

    Parameters
    ----------
    title
        What is compared, as the README's table says it; values with the same title make one row there.
    case
        Stem of the case file beside this module.
    quantity
        Path of the value in the answers; compared is ``scale * answer + offset``.
    value, unit, tolerance
        The reference, its unit and the allowed difference in it.
    reason
        Why this tolerance.
    source
        Author, year, page or table.
    allowance
        By how much the interval of a heat flow is widened, in ``unit``: the rounding of the published value, or
        a difference between its model and ours that ``reason`` explains.
    change
        Keys of the case file to replace before running, with their values.
    slow
        Takes more than half a minute: run with the slow tests only.
    """

    title: str
    case: str
    quantity: tuple[str | int, ...]
    value: float
    unit: str
    tolerance: float
    reason: str
    source: str
    scale: float = 1.0
    offset: float = 0.0
    allowance: float = 0.0
    change: tuple[tuple[str, object], ...] = ()
    slow: bool = False

    @property
    def is_flow(self) -> bool:
        """Whether the answers hold an interval for it."""
        return self.quantity[-1] == "heat_flow"

    @property
    def label(self) -> str:
        """Identity for the test's name."""
        variant = ",".join(str(value) for _, value in self.change)
        return "-".join((self.case, *map(str, self.quantity), variant)).replace(" ", "_").rstrip("-")

    def of(self, answers: dict) -> float:
        """Return the compared quantity of a run's answers, in ``unit``."""
        return self.scale * _look_up(answers, self.quantity) + self.offset

    def interval(self, answers: dict) -> tuple[float, float] | None:
        """Return (low, high) in ``unit``, or None where the answers have none."""
        if not self.is_flow:
            return None
        parent = _look_up(answers, self.quantity[:-1])
        if parent.get("heat_flow_low") is None or parent.get("heat_flow_high") is None:
            return None
        ends = [self.scale * parent[key] + self.offset for key in ("heat_flow_low", "heat_flow_high")]
        return min(ends), max(ends)


def _look_up(answers: dict, path: tuple[str | int, ...]):
    for key in path:
        answers = answers[key]
    return answers
