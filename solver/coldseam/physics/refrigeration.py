"""Refrigeration machines: how much heat they take at a space temperature, and their thermostats.

Stage ``i`` of ``n`` (counted from 1) switches on when the space rises above
``setpoint + band (i/n - 1/2)`` and off when it falls below ``setpoint + band ((i - 1)/n - 1/2)``; a plain on-off
machine is the case n = 1. A modulating machine gives the part ``(T - setpoint)/band + 1/2`` of its capacity,
held between 0 and 1.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.schedules import value_at

if TYPE_CHECKING:
    from coldseam.case.timing import Cooling


@dataclass(frozen=True, kw_only=True)
class Threshold:
    """A temperature at which a machine switches.

    Parameters
    ----------
    level
        °C.
    direction
        1 when it acts on a rising temperature, -1 on a falling one.
    stages
        Stages that run afterwards.
    """

    level: float
    direction: int
    stages: int


def curve_at(curve: tuple[tuple[float, float], ...], temperature: float) -> tuple[float, float]:
    """Return value (W) and slope (W/K) of a table over temperature (°C), held constant beyond its ends.

    >>> curve_at(((-20.0, 900.0), (25.0, 1800.0)), 2.5)
    (1350.0, 20.0)
    """
    at, watts = (np.array(column) for column in zip(*curve, strict=True))
    value = float(np.interp(temperature, at, watts))
    if len(at) == 1 or not at[0] < temperature < at[-1]:
        return value, 0.0
    n = int(np.searchsorted(at, temperature, side="right"))
    return value, float((watts[n] - watts[n - 1]) / (at[n] - at[n - 1]))


@dataclass(frozen=True, kw_only=True)
class Machine:
    """One machine in one space.

    Parameters
    ----------
    cooling
        What the case says of it.
    """

    cooling: Cooling

    @property
    def stages(self) -> int:
        """Number of its switched parts; 0 when it modulates."""
        if self.cooling.control == "modulating":
            return 0
        return self.cooling.stages or 1

    def full(self, temperature: float, ambient: float, time: float, *, before: bool = False) -> tuple[float, float]:
        """Return the heat it takes at full output (W) and that heat's slope over the space temperature (W/K)."""
        value, slope = curve_at(self.cooling.capacity, temperature)
        factor = self._ambient_factor(ambient) * value_at(self.cooling.available, time, before=before)
        if self.defrosting(time, before=before):
            factor = 0.0
        return value * factor, slope * factor

    def power(self, temperature: float, ambient: float, share: float) -> float:
        """Return the electrical power (W) at a share of its output; 0 where the case gives none."""
        if self.cooling.power is None or share <= 0.0:
            return 0.0
        return curve_at(self.cooling.power, temperature)[0] * share

    def share(self, temperature: float, running: int, time: float, *, before: bool = False) -> tuple[float, float]:
        """Return the share of its output and its slope (1/K), for ``running`` stages or by modulation."""
        if self.stages:
            return running / self.stages, 0.0
        part = (temperature - value_at(self.cooling.setpoint, time, before=before)) / self.cooling.band + 0.5
        if part <= 0.0:
            return 0.0, 0.0
        return (1.0, 0.0) if part >= 1.0 else (part, 1.0 / self.cooling.band)

    def thresholds(self, running: int, time: float) -> list[Threshold]:
        """Return the temperatures at which a machine with ``running`` stages switches."""
        n, middle, band = self.stages, value_at(self.cooling.setpoint, time), self.cooling.band
        found = []
        if running < n:
            found.append(Threshold(level=middle + band * ((running + 1) / n - 0.5), direction=1, stages=running + 1))
        if 0 < running <= n:
            found.append(Threshold(level=middle + band * ((running - 1) / n - 0.5), direction=-1, stages=running - 1))
        return found

    def settle(self, temperature: float, running: int, time: float) -> int:
        """Return how many stages run once all thresholds already passed have acted."""
        changed = True
        while changed:
            changed = False
            for threshold in self.thresholds(running, time):
                if threshold.direction * (temperature - threshold.level) >= 0.0:
                    running, changed = threshold.stages, True
                    break
        return running

    def defrosting(self, time: float, *, before: bool = False) -> bool:
        """Whether it pauses to melt its frost."""
        defrost = self.cooling.defrost
        if defrost is None or time < 0.5 * defrost.every:
            return False
        rest = time % defrost.every
        near = 1e-9 * defrost.every
        if before:
            return near < rest <= defrost.lasts + near and time >= defrost.every
        return time >= defrost.every - near and (rest < defrost.lasts - near or defrost.every - rest < near)

    def corners(self, start: float, end: float) -> list[float]:
        """Return the times (s) between start and end at which a defrost begins or ends."""
        defrost = self.cooling.defrost
        if defrost is None:
            return []
        count = int(end / defrost.every) + 1
        found = [n * defrost.every + offset for n in range(1, count + 1) for offset in (0.0, defrost.lasts)]
        return [time for time in found if start < time < end]

    def _ambient_factor(self, ambient: float) -> float:
        if self.cooling.ambient_factor is None:
            return 1.0
        return max(1.0 + self.cooling.ambient_factor * (ambient - self.cooling.ambient_at), 0.0)


AmbientOf = Callable[[str, float, bool], float]
