"""Laws used beyond what they hold for: warnings that name body or boundary, and films that can't be made at all."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from coldseam.errors import SolveError
from coldseam.mesh.types import Mesh
from coldseam.physics import laws
from coldseam.solution.coefficients import Coefficients, exchanges, fluid_range

if TYPE_CHECKING:
    from coldseam.case.laws import Law
    from coldseam.case.model import Case


def law_remarks(case: Case, mesh: Mesh, coldest: np.ndarray, warmest: np.ndarray) -> tuple[str, ...]:
    """Return a warning for every body whose temperatures left the range of a law of its material.

    Parameters
    ----------
    case, mesh
        The case and its mesh.
    coldest, warmest
        What nodes reached, °C, (n_nodes,); in a steady state twice the same.
    """
    told = []
    for number, body in enumerate(mesh.bodies):
        cells = mesh.cells[mesh.cell_body == number]
        if not len(cells):
            continue
        material = case.materials[body.material]
        reached = np.array([coldest[cells].min(), warmest[cells].max()])
        found: list[tuple[str, Law]] = [("conductivity", law) for law in material.laws]
        if case.time is not None and material.heat_law is not None:
            found.append(("specific heat", material.heat_law))
        for what, law in found:
            if laws.beyond(law, reached) is not None:
                told.append(
                    f'body "{body.name}": its temperatures of {reached[0]:.1f} to {reached[1]:.1f} °C leave the range '
                    f'of the {what} of "{body.material}", {law.limits[0]:.1f} to {law.limits[1]:.1f} °C; beyond it '
                    "the value at the end of the range was taken"
                )
    return tuple(dict.fromkeys(told))


def film_remark(name: str, used: dict[str, Any]) -> str:
    """Return a warning for a boundary whose film was made beyond its correlation's range; nothing where it was not."""
    found = used["convection"]
    if found.get("in_range", True):
        return ""
    symbol = "Ra" if "Ra" in found else "Re"
    low, high = found["valid"]
    return (
        f'boundary "{name}": {symbol} = {found[symbol]:.3g} or a part of the film is outside the range of '
        f'"{found["correlation"]}", {low:.3g} to {high:.3g}; the film coefficient of {found["film"]:.3g} '
        "W/(m²·K) is an extrapolation"
    )


def require_fluids(case: Case, found: Coefficients) -> None:
    """Raise a SolveError where a film was made from properties beyond what they hold for."""
    for boundary, outside in exchanges(case):
        law = outside.convection
        if law is None or law.kind == "standard" or boundary.name not in found.films:
            continue
        at = found.films[boundary.name]["convection"]["property_temperature"]
        low, high = fluid_range(case, law)
        if not low <= at <= high:
            fluid = "air" if law.fluid is None else f'the fluid "{law.fluid}"'
            raise SolveError(
                f'boundary "{boundary.name}": its film is at {at:.1f} °C, and the properties of {fluid} hold for '
                f"{low:g} to {high:g} °C. Give it a film coefficient, or a fluid that covers it (a table in "
                "[fluids.NAME])"
            )
