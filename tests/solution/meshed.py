"""Solving a case on one mesh of its geometry."""

from coldseam.geometry.mesher import open_geometry
from coldseam.solution.steady import solve_on

MOST_STEPS = 12
"""Issue 5: the whole test set converges within so many steps."""


def on_mesh(case, cells=None):
    """Return the solution of a case on a mesh of about so many cells."""
    with open_geometry(case) as mesher:
        return solve_on(case, mesher.mesh(None, cells))
