"""A result as a pyvista grid, for those who go on in Python."""

from __future__ import annotations

import numpy as np

from coldseam.report.view import View


def grid(view: View):
    """Return the result as a ``pyvista.UnstructuredGrid``.

    Points in metres; ``point_data["temperature_degC"]``; ``cell_data["heat_flux_W_m2"]`` (three
    components) and ``cell_data["body"]``, an index into ``field_data["body_names"]``. Needs no
    graphics libraries unless it is plotted.
    """
    import pyvista

    mesh = view.mesh
    points = np.pad(mesh.points, ((0, 0), (0, 3 - mesh.dim)))
    kind = pyvista.CellType.TRIANGLE if mesh.dim == 2 else pyvista.CellType.TETRA
    made = pyvista.UnstructuredGrid({kind: np.array(mesh.cells)}, points)
    if view.temperature is not None:
        made.point_data["temperature_degC"] = np.array(view.temperature)
    if view.cell_flux is not None:
        made.cell_data["heat_flux_W_m2"] = np.pad(view.cell_flux, ((0, 0), (0, 3 - mesh.dim)))
    made.cell_data["body"] = np.array(mesh.cell_body)
    made.field_data["body_names"] = [body.name for body in mesh.bodies]
    made.field_data["boundary_names"] = list(view.boundary_names)
    return made
