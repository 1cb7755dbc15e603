"""Finding when something happens inside a step, on the method's own dense output."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

SAMPLES = 8
"""Places inside a step that are looked at: a space could come and go between the ends."""
TIME_ERROR = 1e-3  # s, to which a crossing is located


@dataclass(frozen=True, kw_only=True)
class Happened:
    """What became of an event.

    Parameters
    ----------
    name
        Of the event.
    time
        When it happened, s; None where it did not.
    error
        How uncertain that is, s: the step's tolerance over the slope there.
    closest, closest_at
        The temperature nearest to the level (°C) and when (s).
    level
        The level that had to be crossed, °C.
    """

    name: str
    time: float | None
    error: float | None
    closest: float
    closest_at: float
    level: float


def first_crossing(
    value: Callable[[float], float], level: float, direction: int, h: float, samples: int = SAMPLES
) -> float | None:
    """Return the first fraction of a step at which a value has reached a level; None where it does not.

    Parameters
    ----------
    value
        Of the fraction, 0 to 1.
    level, direction
        Reached means ``direction (value - level) >= 0``.
    h
        Length of the step, s: the crossing is located to :data:`TIME_ERROR`.
    samples
        Places that are looked at.

    Examples
    --------
    >>> round(first_crossing(lambda s: 10 * s, 2.5, 1, 100.0), 5)
    0.25
    """
    low = 0.0
    for high in np.linspace(0.0, 1.0, samples + 1)[1:]:
        if direction * (value(high) - level) >= 0.0:
            break
        low = float(high)
    else:
        return None
    high = float(high)
    while (high - low) * h > TIME_ERROR and high - low > 1e-14:
        middle = 0.5 * (low + high)
        if direction * (value(middle) - level) >= 0.0:
            high = middle
        else:
            low = middle
    return high


class Watch:
    """Follows one event through a run.

    Parameters
    ----------
    name, level, direction
        Of the event; °C; 1 rising, -1 falling.
    reading
        Temperature (°C) of a state.
    """

    def __init__(self, name: str, level: float, direction: int, reading):
        self.name, self.level, self.direction, self.reading = name, level, direction, reading
        self.happened: Happened | None = None
        self.closest, self.closest_at = np.nan, 0.0

    def begin(self, state) -> None:
        """Look at the state the run starts from."""
        self._near(self.reading(state), state.time)
        if self.direction * (self.closest - self.level) >= 0.0:
            self._found(state.time, None)

    def look(
        self, state_at: Callable[[float], object], start: float, h: float, end: float, tolerance: float
    ) -> float | None:
        """Look into a step up to its fraction ``end``; return the time (s) of the event if it happens there."""
        if self.happened is not None:
            return None
        values: dict[float, float] = {}

        def value(s: float) -> float:
            if s not in values:
                values[s] = self.reading(state_at(s * end))
            return values[s]

        found = first_crossing(value, self.level, self.direction, h * end, samples=2)
        for s, reading in values.items():
            self._near(reading, start + s * end * h)
        if found is None:
            return None
        near = max(found - 0.05, 0.0)
        slope = abs(value(min(near + 0.05, 1.0)) - value(near)) / (0.05 * end * h)
        self._found(start + found * end * h, max(tolerance / slope if slope > 0.0 else np.inf, TIME_ERROR))
        return self.happened.time

    def result(self) -> Happened:
        """Return what became of it."""
        return self.happened or Happened(
            name=self.name, time=None, error=None, closest=self.closest, closest_at=self.closest_at, level=self.level
        )

    def _near(self, reading: float, time: float) -> None:
        if np.isnan(self.closest) or self.direction * (reading - self.closest) > 0.0:
            self.closest, self.closest_at = float(reading), float(time)

    def _found(self, time: float, error: float | None) -> None:
        self.happened = Happened(
            name=self.name, time=time, error=error, closest=self.level, closest_at=time, level=self.level
        )
