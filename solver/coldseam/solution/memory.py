"""How much memory a mesh will need, told before it is made."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

from coldseam.errors import SolveError

if TYPE_CHECKING:
    from coldseam.case.model import Case

BYTES_PER_CELL = {2: 2500, 3: 1500}
"""Peak of the run and its mesher together, meshing to answers. 3D by ``scripts/benchmark million``: 1 330 a
tetrahedron grow with the mesh, with a margin for more terminals. 2D is not measured."""
REGULAR_CELL = {2: 3.0**0.5 / 4.0, 3: 2.0**0.5 / 12.0}  # volume of a regular simplex of edge 1


def available() -> float:
    """Return the free memory of this computer, bytes; inf where the system does not say."""
    try:
        with open("/proc/meminfo", encoding="ascii") as lines:
            for line in lines:
                if line.startswith("MemAvailable:"):
                    return float(line.split()[1]) * 1024.0
    except OSError:
        pass
    try:
        return float(os.sysconf("SC_AVPHYS_PAGES") * os.sysconf("SC_PAGE_SIZE"))
    except (ValueError, OSError, AttributeError):
        return float("inf")


def room_for(n_cells: float, dim: int = 3) -> bool:
    """Return whether a mesh of that many cells fits."""
    return n_cells * BYTES_PER_CELL[dim] <= 0.9 * available()


def require_room(case: Case, mesher) -> None:
    """Refuse an element size that makes a mesh too large, and name the size that would fit.

    Raises
    ------
    SolveError
        With the size that fits.
    """
    volumes = getattr(mesher, "cad_volume", None)
    if case.model.size is None or not volumes:
        return
    dim = case.model.dimensions
    volume = sum(volumes.values())
    cells = volume / (REGULAR_CELL[dim] * case.model.size**dim)
    if not room_for(cells, dim):
        fits = (volume / (REGULAR_CELL[dim] * 0.9 * available() / BYTES_PER_CELL[dim])) ** (1.0 / dim)
        raise SolveError(
            f"elements of {case.model.size * 1e3:.3g} mm make some {cells:.2g} cells, which need "
            f"{cells * BYTES_PER_CELL[dim] / 2**30:.0f} GiB of memory; a size of {fits * 1e3:.2g} mm would fit"
        )
