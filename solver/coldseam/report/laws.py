"""What the printed summary tells of films and air gaps that followed from the answer."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

Answers = Mapping[str, Any]


def film_rows(answers: Answers) -> list[tuple[str, str, str]]:
    """Return boundary or body, coefficient and what made it, of all that depends on the answer.

    >>> film_rows({"bodies": {"gap": {"air_gap": {"conductivity": 0.11, "method": "ISO 6946, air layer", "along": 0.02}}}})
    [('gap', '0.110 W/(m·K)', 'ISO 6946, air layer, 20 mm')]
    """
    rows = []
    for name, entry in answers.get("boundaries", {}).items():
        used = entry.get("film_used")
        if used:
            rows.append((name, f"{used['film']:.3g} W/(m²·K)", _exchange(used)))
    for name, entry in answers.get("bodies", {}).items():
        gap = entry.get("air_gap")
        if gap:
            rows.append((name, f"{gap['conductivity']:.3f} W/(m·K)", f"{gap['method']}, {1e3 * gap['along']:.3g} mm"))
    return rows


def _exchange(used: Answers) -> str:
    """Return in words what a film is made of."""
    found, parts = used["convection"], []
    if found["film"] > 0:
        number = next((key for key in ("Ra", "Re") if key in found), None)
        source = found.get("correlation", "given").split(":")[0].split(",")[0]
        beside = "" if number is None else f", {number} {found[number]:.2g}"
        parts.append(f"convection {found['film']:.3g} ({source}{beside})")
    if "radiation" in used:
        radiation = used["radiation"]
        to = f"in cavity {used['cavity']}" if "cavity" in used else f"to {radiation['temperature']:.1f} °C"
        parts.append(f"radiation {to}" + (f" {radiation['film']:.3g}" if "film" in radiation else ""))
    if "sun" in used:
        parts.append(f"sun {used['sun']['absorbed']:.0f} W/m²")
    return "; ".join(parts)
