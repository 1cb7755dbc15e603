"""The answers of a case as frozen dataclasses; ``as_dict`` is the content of answers.json.

Heat flows in W, in a cross-section W per metre of depth; positive into the solid. Temperatures °C,
places mm, areas m² (cross-section m² per metre).
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

MM = 1e3


@dataclass(frozen=True, kw_only=True)
class Extremes:
    """Lowest, highest and area-mean temperature of a surface, °C, and where, mm."""

    min: float
    min_at: tuple[float, ...]
    max: float
    max_at: tuple[float, ...]
    mean: float


@dataclass(frozen=True, kw_only=True)
class BoundaryAnswer:
    """One boundary: its heat flow with interval, area and surface temperatures.

    ``film`` is its film coefficient, W/(m² K), where it varies the mean; ``film_used`` tells what made it, where laws
    did: correlation, Ra or Re, Nu, range of validity, the parts of convection, radiation and sun.
    """

    kind: str
    space: str | None
    heat_flow: float
    heat_flow_low: float | None
    heat_flow_high: float | None
    interval: str
    interval_reason: str
    area: float
    heat_flux_mean: float
    film: float | None
    temperature: Extremes
    film_used: dict[str, Any] | None = None


@dataclass(frozen=True, kw_only=True)
class SpaceAnswer:
    """One space: the heat it loses into the solid, with interval, and its temperature."""

    heat_flow: float
    heat_flow_low: float | None
    heat_flow_high: float | None
    interval: str
    interval_reason: str
    temperature: float


@dataclass(frozen=True, kw_only=True)
class ProbeAnswer:
    """Temperature (°C) at a probe."""

    temperature: float
    at: tuple[float, ...]


@dataclass(frozen=True, kw_only=True)
class BodyAnswer:
    """One body: volume (m³; m²/m), temperatures (°C), heat released in it (W), and its part of the loss.

    ``loss_share`` is the body's part of ``sum k |grad T|²``, which for a linear case without sources is
    d ln Q / d ln k. ``air_gap`` tells how the equivalent conductivity of a body of air was found.
    """

    material: str
    volume: float
    mean_temperature: float
    min_temperature: float
    max_temperature: float
    heat_source: float
    loss_share: float
    air_gap: dict[str, Any] | None = None


@dataclass(frozen=True, kw_only=True)
class Answers:
    """Everything a run answers; see :meth:`as_dict`."""

    title: str
    dimensions: int
    axisymmetric: bool
    coldseam: str
    case_sha256: str
    units: dict[str, str]
    mesh: dict[str, Any]
    accuracy: dict[str, Any]
    balance: dict[str, float]
    boundaries: dict[str, BoundaryAnswer]
    spaces: dict[str, SpaceAnswer]
    coupling: dict[str, dict[str, float]]
    coupling_intervals: dict[str, dict[str, tuple[float | None, float | None]]]
    probes: dict[str, ProbeAnswer]
    bodies: dict[str, BodyAnswer]
    bridges: dict[str, Any] = field(default_factory=dict)
    surfaces: dict[str, Any] = field(default_factory=dict)
    weighting: dict[str, Any] = field(default_factory=dict)
    losses: dict[str, Any] = field(default_factory=dict)
    sensitivities: dict[str, Any] = field(default_factory=dict)
    enclosures: dict[str, Any] = field(default_factory=dict)
    limits: dict[str, Any] = field(default_factory=dict)
    solver: dict[str, Any] = field(default_factory=dict)
    history: dict[str, Any] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()

    def as_dict(self) -> dict[str, Any]:
        """Return plain dicts, lists and numbers, as written to answers.json."""
        return plain(self)


def place(point: Sequence[float]) -> tuple[float, ...]:
    """Return a position (m) in mm for the answers."""
    return tuple(round(float(x) * MM, 6) + 0.0 for x in point)


def plain(value: Any) -> Any:
    """Return a dataclass, dict or sequence as plain dicts, lists, numbers and text."""
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, dict):
        return {str(key): plain(entry) for key, entry in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(entry) for entry in value]
    if hasattr(value, "item") and getattr(value, "ndim", 0) == 0:
        return value.item()
    return value
