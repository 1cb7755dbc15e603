"""The field files read back, by VTK's own reader, as what was written."""

import numpy as np
import pytest
import pyvista

from coldseam.report.grid import grid
from coldseam.report.vtu import write_field


@pytest.mark.parametrize("name", ["square", "pipe", "bolted_panel"])
def test_field_reads_back(view, name, tmp_path):
    shown = view(name)
    mesh = shown.mesh
    write_field(tmp_path, shown)
    read = pyvista.read(tmp_path / "field.vtu")
    assert np.array_equal(read.points[:, : mesh.dim], mesh.points)
    assert np.array_equal(read.cells.reshape(-1, mesh.dim + 2)[:, 1:], mesh.cells)
    assert np.array_equal(read.point_data["temperature_degC"], shown.temperature)
    assert np.array_equal(read.cell_data["heat_flux_W_m2"][:, : mesh.dim], shown.cell_flux)
    assert list(read.field_data["body_names"]) == [body.name for body in mesh.bodies]
    assert list(read.field_data["length_unit"]) == ["m"]


def test_surface_reads_back_with_names(view, tmp_path):
    shown = view("bolted_panel")
    write_field(tmp_path, shown)
    read = pyvista.read(tmp_path / "surface.vtu")
    assert list(read.field_data["boundary_names"]) == list(shown.boundary_names)
    areas = read.compute_cell_sizes().cell_data["Area"]
    warm = shown.boundary_names.index("warm face")
    assert areas[read.cell_data["boundary"] == warm].sum() == pytest.approx(0.09, rel=1e-9)  # 0.3 m square


def test_many_blocks_survive(view, tmp_path, monkeypatch):
    from coldseam.report import vtu

    monkeypatch.setattr(vtu, "_BLOCK", 1000)  # several blocks, the last one part full
    write_field(tmp_path, view("square"))
    read = pyvista.read(tmp_path / "field.vtu")
    assert np.array_equal(read.point_data["temperature_degC"], view("square").temperature)


def test_grid_is_the_result(view):
    shown = view("bolted_panel")
    made = grid(shown)
    assert made.volume == pytest.approx(0.3 * 0.3 * 0.1)
    assert np.array_equal(made.point_data["temperature_degC"], shown.temperature)
    made.point_data["temperature_degC"][0] = 0.0  # a copy: the result stays as it was
    assert shown.temperature[0] != 0.0
