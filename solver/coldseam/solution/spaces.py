"""Floating spaces and the goods in them: the few unknowns outside the mesh, with their own heat balances.

For the temperature y of a space or of goods in it

    C dy/dt = gain(t) - cooling(y, t) + sum rho c_p V (y_other - y) + latent + sum h A (y_goods - y) + films of the mesh

All but the last is here, as heat flows by name (:data:`CHANNELS`) and the dense Jacobian of their sum; the few
unknowns are solved by Newton's method while the mesh is eliminated (see ``stage.py``).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from coldseam.case.schedules import span_of, value_at
from coldseam.physics.humidity import saturation_pressure
from coldseam.physics.refrigeration import Machine

if TYPE_CHECKING:
    from coldseam.case.model import Case

AIR_DENSITY = 1.2  # kg/m³, at which flows of air are counted; dry air at 20 °C and 101 325 Pa
AIR_HEAT = 1006.0  # J/(kg K)
PRESSURE = 101_325.0  # Pa
EVAPORATION, SUBLIMATION = 2.501e6, 2.834e6  # J/kg at 0 °C; ASHRAE Fundamentals ch. 1 (from memory)
CHANNELS = ("gain", "cooling", "air_exchange", "latent", "from_goods")
"""Heat flows into a space besides those through its surfaces, W."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Spaces:
    """The unknowns outside the mesh: spaces first, then goods.

    Parameters
    ----------
    case
        The case.
    names
        Floating spaces, in the case's order.
    goods
        Space number and position of every lump of goods.
    capacity
        J/K, (n,); NaN where a steady case gives none.
    machines
        One per space, None where it has none.
    """

    case: Case
    names: tuple[str, ...]
    goods: tuple[tuple[int, int], ...]
    capacity: np.ndarray
    machines: tuple[Machine | None, ...]

    @property
    def n(self) -> int:
        """Number of unknowns."""
        return len(self.names) + len(self.goods)

    def labels(self) -> list[str]:
        """Return the names of the unknowns; goods are called ``space/goods``."""
        lumps = [f"{self.names[s]}/{self.floating(s).goods[g].name}" for s, g in self.goods]
        return [*self.names, *lumps]

    def floating(self, number: int):
        """Return what the case says of a floating space."""
        return self.case.spaces[self.names[number]].floating

    def outside(self, name: str, time: float, *, before: bool = False) -> float:
        """Return the temperature (°C) of a space that does not float."""
        return value_at(self.case.spaces[name].temperature, time, before=before)

    def temperature_of(self, name: str, y: np.ndarray, time: float, *, before: bool = False) -> float:
        """Return the temperature (°C) of any space, that of a floating one from y, (n,)."""
        return float(y[self.names.index(name)]) if name in self.names else self.outside(name, time, before=before)

    def flows(
        self, y: np.ndarray, running: np.ndarray, time: float, *, before: bool = False, machines: bool = True
    ) -> tuple[np.ndarray, np.ndarray]:
        """Return the heat flows into every space by channel, and the Jacobian of each unknown's sum.

        Parameters
        ----------
        y
            °C, (n,).
        running
            Stages that run, (n_spaces,).
        time, before
            s; whether the moment before a jump is meant.
        machines
            False leaves them out.

        Returns
        -------
        flows
            W, (n_spaces, 5), columns as :data:`CHANNELS`; cooling is negative.
        jacobian
            W/K, (n, n).
        """
        flows, slope = np.zeros((len(self.names), len(CHANNELS))), np.zeros((self.n, self.n))
        for s in range(len(self.names)):
            floating = self.floating(s)
            flows[s, 0] = value_at(floating.gain, time, before=before) + self._defrost_heat(s, time, before)
            if machines and self.machines[s] is not None:
                heat, slope_s, _ = self.machine_heat(s, y, running, time, before=before)
                flows[s, 1] = -heat
                slope[s, s] -= slope_s
            for exchange in floating.air_exchange:
                self._exchange(s, exchange, y, time, before, flows, slope)
        for number, (s, g) in enumerate(self.goods, start=len(self.names)):
            film = self.floating(s).goods[g].film * self.floating(s).goods[g].area
            flows[s, 4] += film * (y[number] - y[s])
            slope[s, s] -= film
            slope[number, number] -= film
            slope[s, number] += film
            slope[number, s] += film
        return flows, slope

    def heat(self, flows: np.ndarray, y: np.ndarray, time: float, *, before: bool = False) -> np.ndarray:
        """Return the heat into every unknown without that through surfaces, W, (n,).

        The partner of an air exchange that floats too gets the opposite of what goes into the first space.
        """
        total = np.zeros(self.n)
        total[: len(self.names)] = flows.sum(axis=1)
        for s in range(len(self.names)):
            for exchange in self.floating(s).air_exchange:
                if exchange.partner in self.names:
                    p = self.names.index(exchange.partner)
                    total[p] -= self._conductance(exchange, time, before) * (y[p] - y[s])
        for number, (s, g) in enumerate(self.goods, start=len(self.names)):
            lump = self.floating(s).goods[g]
            total[number] = lump.film * lump.area * (y[s] - y[number]) + value_at(lump.heat, time, before=before)
        return total

    def goods_heat(self, time: float, *, before: bool = False) -> float:
        """Return the heat released in all goods, W."""
        return sum(value_at(self.floating(s).goods[g].heat, time, before=before) for s, g in self.goods)

    def outside_heat(self, flows: np.ndarray, y: np.ndarray, time: float, *, before: bool = False) -> float:
        """Return the heat into spaces and goods from outside the model, surfaces left out, W; arguments as in :meth:`heat`.

        ``flows`` is of shape (n_spaces, 5), y of shape (n,).
        """
        inside = 0.0
        for s in range(len(self.names)):
            for exchange in self.floating(s).air_exchange:
                if exchange.partner in self.names:
                    p = self.names.index(exchange.partner)
                    inside += self._conductance(exchange, time, before) * (y[p] - y[s])
        return float(flows[:, :4].sum()) - inside + self.goods_heat(time, before=before)

    def machine_heat(
        self, s: int, y: np.ndarray, running, time: float, *, before: bool = False
    ) -> tuple[float, float, float]:
        """Return what a space's machine takes at y, (n,): heat (W), its slope (W/K) and the share of its output."""
        machine = self.machines[s]
        full, full_slope = machine.full(float(y[s]), self.ambient(s, y, time, before=before), time, before=before)
        share, share_slope = machine.share(float(y[s]), int(running[s]), time, before=before)
        return full * share, full_slope * share + full * share_slope, share if full > 0.0 else 0.0

    def ambient(self, s: int, y: np.ndarray, time: float, *, before: bool = False) -> float:
        """Return the temperature of the space that a machine gives its heat to at y, (n,), °C; 0 where none is named."""
        name = self.machines[s].cooling.ambient
        return 0.0 if name is None else self.temperature_of(name, y, time, before=before)

    def corners(self, start: float, end: float) -> list[float]:
        """Return the times (s) at which a defrost begins or ends."""
        return [time for machine in self.machines if machine is not None for time in machine.corners(start, end)]

    def _defrost_heat(self, s: int, time: float, before: bool) -> float:
        machine = self.machines[s]
        return machine.cooling.defrost.heat if machine is not None and machine.defrosting(time, before=before) else 0.0

    def _conductance(self, exchange, time: float, before: bool) -> float:
        return AIR_DENSITY * AIR_HEAT * value_at(exchange.flow, time, before=before)

    def _exchange(
        self, s: int, exchange, y: np.ndarray, time: float, before: bool, flows: np.ndarray, slope: np.ndarray
    ) -> None:
        conductance = self._conductance(exchange, time, before)
        other = self.temperature_of(exchange.partner, y, time, before=before)
        flows[s, 2] += conductance * (other - y[s])
        slope[s, s] -= conductance
        if exchange.partner in self.names:
            p = self.names.index(exchange.partner)
            slope[p, p] -= conductance
            slope[s, p] += conductance
            slope[p, s] += conductance
        flows[s, 3] += self._latent(s, exchange, other, float(y[s]), conductance / AIR_HEAT)

    def _latent(self, s: int, exchange, other: float, own: float, mass_flow: float) -> float:
        """Return the heat of water vapour that stays in the space (W): condensed, below 0 °C frozen."""
        outside, inside = (
            self.case.spaces[exchange.partner].relative_humidity,
            self.case.spaces[self.names[s]].relative_humidity,
        )
        if outside is None or inside is None or mass_flow == 0.0:
            return 0.0
        gained = humidity_ratio(other, outside) - humidity_ratio(own, inside)
        return mass_flow * max(gained, 0.0) * (SUBLIMATION if own < 0.0 else EVAPORATION)


def humidity_ratio(temperature: float, humidity: float) -> float:
    """Return kg of water per kg of dry air at a temperature (°C) and relative humidity, 101 325 Pa."""
    vapour = humidity * float(saturation_pressure(min(temperature, 90.0)))
    return 0.622 * vapour / (PRESSURE - vapour)


def floating_spaces(case: Case) -> Spaces:
    """Return the unknowns outside the mesh of a case."""
    names = tuple(name for name, space in case.spaces.items() if space.floating is not None)
    capacity, goods, machines = [], [], []
    for s, name in enumerate(names):
        floating = case.spaces[name].floating
        capacity.append(np.nan if floating.heat_capacity is None else floating.heat_capacity)
        goods += [(s, g) for g in range(len(floating.goods))]
        machines.append(None if floating.cooling is None else Machine(cooling=floating.cooling))
    for s, g in goods:
        lump = case.spaces[names[s]].floating.goods[g]
        capacity.append(lump.mass * lump.specific_heat)
    return Spaces(
        case=case, names=names, goods=tuple(goods), capacity=np.array(capacity, dtype=float), machines=tuple(machines)
    )


def outside_range(case: Case) -> tuple[float, float]:
    """Return the lowest and highest temperature that the case names for spaces and surfaces, °C."""
    found = [span_of(space.temperature) for space in case.spaces.values() if space.temperature is not None]
    found += [span_of(boundary.temperature) for boundary in case.boundary if boundary.temperature is not None]
    for space in case.spaces.values():
        if space.floating is not None:
            found += [(space.floating.start,) * 2] if space.floating.start is not None else []
            found += [span_of(space.floating.cooling.setpoint)] if space.floating.cooling is not None else []
            found += [(goods.start,) * 2 for goods in space.floating.goods if goods.start is not None]
    if case.time is not None and isinstance(case.time.start, float):
        found.append((case.time.start, case.time.start))
    if case.time is not None and isinstance(case.time.start, dict):
        found += [(value, value) for value in case.time.start.values()]
    return min(low for low, _ in found), max(high for _, high in found)
