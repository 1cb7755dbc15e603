"""Thermal bridges: linear ones over their flanking walls, point ones by leaving bodies out.

    psi = L2D - sum of U_j l_j,        chi = (L with the bodies - L without them) / count

(ISO 10211, from memory). Both are small differences of large numbers, so the bounds of the coupling
coefficients are carried into them: psi_low = L_low - sum U l, chi_low = (L_low - L'_high) / count. Where chi
is not known well enough, the model with and the model without are refined together, with one field of element sizes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from coldseam.answers.pairs import Comparison, compare
from coldseam.answers.walls import Wall, flanking_walls, require_fitting, wall_faults, wall_warnings
from coldseam.errors import CaseError, Fault
from coldseam.solution.readings import Interval, coupling, nodes_of_a_space
from coldseam.solution.rounds import Solution
from coldseam.solution.steady import Steady

if TYPE_CHECKING:
    from coldseam.case.model import Bridge, Case

Log = Callable[[str, str], None]
WIDEST = 0.10
"""Width of chi's interval, as a part of chi, that is good enough."""


@dataclass(frozen=True, kw_only=True)
class BridgeAnswers:
    """The bridges of a case by name, and what to know beside them."""

    entries: dict[str, dict[str, Any]] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()


def require_bridges(case: Case) -> None:
    """Check what can be checked of the bridges before anything is solved.

    Raises
    ------
    CaseError
        All faults at once.
    """
    faults = []
    for number, bridge in enumerate(case.bridge):
        faults += wall_faults(case, number) if bridge.kind == "linear" else _point_faults(case, number)
    if faults:
        raise CaseError(faults)


def _point_faults(case: Case, number: int) -> list[Fault]:
    bridge = case.bridge[number]
    faults = []
    if case.model.mesh is not None:
        what = (
            "a point bridge is found by leaving bodies out and letting others fill their place, which a given mesh "
            "can't do; draw the bodies in the case"
        )
        faults.append(Fault(path=("bridge", number, "without"), what=what))
    if case.model.dimensions == 2 and not case.model.axisymmetric:
        what = (
            "a point bridge needs dimensions = 3 or an axisymmetric section; in a plane cross-section every body is a "
            "bar without end"
        )
        faults.append(Fault(path=("bridge", number, "kind"), what=what))
    left = [body for body in case.body if body.name not in (bridge.without or ())]
    if all(body.void for body in left):
        faults.append(Fault(path=("bridge", number, "without"), what="leaves nothing of the model"))
    if len(case.spaces) > 2 and bridge.between is None:
        faults.append(Fault(path=("bridge", number), what=_which_two(list(case.spaces))))
    return faults


def _which_two(names: list[str]) -> str:
    listed = ", ".join(names)
    return f"the case has {len(names)} outside points ({listed}); name the two that chi is meant for: between = [...]"


def solve_bridges(solution: Solution, mesher, log: Log) -> BridgeAnswers:
    """Return psi and chi of every bridge of a solved case.

    Parameters
    ----------
    solution
        The solved case.
    mesher
        The open geometry of the case, to refine it with.
    log
        Called with a stage and a message.

    Raises
    ------
    ColdseamError
        Flanking lengths that don't fit, or a model that can't be without the bodies.
    """
    entries, warnings = {}, []
    for number, bridge in enumerate(solution.steady.case.bridge):
        if bridge.kind == "linear":
            entry, found = _linear(solution.steady, number)
        else:
            entry, found = _point(solution.steady, number, mesher, log)
        entries[bridge.name] = entry
        warnings += found
    return BridgeAnswers(entries=entries, warnings=tuple(warnings))


def _coupling(steady: Steady, pair: tuple[str, str], number: int) -> Interval:
    table = coupling(steady)
    if pair[0] not in table or pair[1] not in table[pair[0]]:
        what = f'"{pair[0]}" and "{pair[1]}" are not two separate outside points: their fixed surfaces touch'
        raise CaseError([Fault(path=("bridge", number), what=what)])
    return table[pair[0]][pair[1]]


def _linear(steady: Steady, number: int) -> tuple[dict[str, Any], list[str]]:
    bridge = steady.case.bridge[number]
    walls = flanking_walls(steady, bridge)
    require_fitting(steady, number, walls)
    pair = bridge.flanking[0].between
    whole = _coupling(steady, pair, number)
    found: dict[str, Any] = {
        "kind": "linear",
        "basis": bridge.basis,
        "between": list(pair),
        "coupling": whole.value,
        "coupling_low": whole.low,
        "coupling_high": whole.high,
        "interval": whole.kind,
        "interval_reason": whole.reason,
        "flanking": walls,
    }
    bases = ("internal", "external") if bridge.basis == "both" else (bridge.basis,)
    for basis in bases:
        found |= _psi(whole, walls, basis, "psi" if basis == bases[0] else "psi_external")
    plain = found["psi_whole"]["U_plain"]
    found["wall"] = _wall(bridge, plain, linear=found["psi"])
    return found, [*wall_warnings(steady, bridge, walls), *_linear_warnings(steady.case, bridge, found)]


def _linear_warnings(case: Case, bridge: Bridge, found: dict[str, Any]) -> list[str]:
    """Return a warning where psi is vague, or where another linear bridge of the same model is counted in it."""
    told = []
    if found["psi_low"] is None:
        told.append(f'bridge "{bridge.name}": psi has no proven interval')
    elif found["psi_high"] - found["psi_low"] > WIDEST * abs(found["psi"]):
        told.append(
            f'bridge "{bridge.name}": psi lies between {found["psi_low"]:.4g} and {found["psi_high"]:.4g} W/(m·K), '
            f"more than {WIDEST:.0%} of it apart; ask for a better accuracy"
        )
    pairs = [frozenset(b.flanking[0].between) for b in case.bridge if b.kind == "linear"]
    if pairs.count(frozenset(bridge.flanking[0].between)) > 1:
        told.append(
            f'bridge "{bridge.name}": its psi is all that its own flanking walls do not lose, the other linear bridges '
            "between these spaces included; model each bridge by itself to tell them apart"
        )
    return told


def _psi(whole: Interval, walls: list[Wall], basis: str, key: str) -> dict[str, Any]:
    lengths = [wall.length_external if basis == "external" else wall.length for wall in walls]
    plain = sum(wall.transmittance * length for wall, length in zip(walls, lengths, strict=True))
    return {
        key: whole.value - plain,
        f"{key}_low": None if whole.low is None else whole.low - plain,
        f"{key}_high": None if whole.high is None else whole.high - plain,
        f"{key}_basis": basis,
        f"{key}_plain": plain,
        f"{key}_whole": {"U_plain": plain / sum(lengths), "U_with_bridge": whole.value / sum(lengths)},
    }


def _point(steady: Steady, number: int, mesher, log: Log) -> tuple[dict[str, Any], list[str]]:
    bridge = steady.case.bridge[number]
    pair = bridge.between or tuple(nodes_of_a_space(steady))
    if len(pair) != 2:
        raise CaseError([Fault(path=("bridge", number), what=_which_two(list(pair)))])
    _coupling(steady, pair, number)
    result = compare(steady, number, pair, mesher, WIDEST, log)
    return _point_entry(bridge, pair, result), _point_warnings(bridge, result)


def _point_entry(bridge: Bridge, pair: tuple[str, str], result: Comparison) -> dict[str, Any]:
    n = bridge.pieces
    chi = result.difference
    return {
        "kind": "point",
        "between": list(pair),
        "count": n,
        "without": list(bridge.without),
        "chi": chi.value / n,
        "chi_low": None if chi.low is None else chi.low / n,
        "chi_high": None if chi.high is None else chi.high / n,
        "interval": chi.kind,
        "interval_reason": chi.reason,
        # Bodies like what they displace have a chi of 0, which no interval is small against.
        "relative_width": result.relative_width if chi.value else None,
        "coupling_with": _bounds(result.present),
        "coupling_without": _bounds(result.absent),
        "nodes_with": result.nodes[0],
        "nodes_without": result.nodes[1],
        "rounds": result.rounds,
        "whole": result.whole,
        "wall": _wall(bridge, None if result.whole is None else result.whole["U_plain"], point=chi.value / n),
    }


def _wall(
    bridge: Bridge, plain: float | None, linear: float = 0.0, point: float = 0.0
) -> dict[str, float | None] | None:
    """Return what so many of a bridge per area make of U, W/(m²·K); None where the case names no number."""
    if bridge.per_area is None:
        return None
    added = whole_transmittance(0.0, linear=[(linear, bridge.per_area)], point=[(point, bridge.per_area)])
    with_bridge = None if plain is None else plain + added
    return {"per_area": bridge.per_area, "U_plain": plain, "U_added": added, "U_with_bridge": with_bridge}


def _bounds(interval: Interval) -> dict[str, float | None]:
    return {"value": interval.value, "low": interval.low, "high": interval.high}


def _point_warnings(bridge: Bridge, result: Comparison) -> list[str]:
    found = list(result.remarks)
    if result.relative_width is None:
        found.append(f'bridge "{bridge.name}": chi has no proven interval')
    elif result.difference.value == 0.0:
        found.append(f'bridge "{bridge.name}": chi is 0 within its interval')
    elif result.relative_width > WIDEST:
        found.append(
            f'bridge "{bridge.name}": chi is known within an interval {result.relative_width:.0%} as wide as itself, '
            f"more than {WIDEST:.0%}: {result.stopped}"
        )
    return found


def whole_transmittance(plain: float, linear=(), point=()) -> float:
    """Return U of a wall with its bridges, W/(m²·K).

    Parameters
    ----------
    plain
        U of the plain wall, W/(m²·K).
    linear
        Pairs of psi, W/(m·K), and length per area, m/m².
    point
        Pairs of chi, W/K, and number per area, 1/m².

    Examples
    --------
    >>> round(whole_transmittance(0.25, linear=[(0.05, 0.8)], point=[(0.004, 5)]), 4)
    0.31
    """
    return plain + sum(psi * length for psi, length in linear) + sum(chi * number for chi, number in point)
