"""Warnings that stand beside the numbers."""

from __future__ import annotations

import meshio
import numpy as np

from coldseam.case import read
from coldseam.study import run

COARSE = """
title = "a plug of one cell"
[model]
dimensions = 2
mesh = "plug.msh"
accuracy = "1 %"
max_nodes = 10
[spaces.cold]
temperature = 0
film = 8
[spaces.warm]
temperature = 20
film = 8
[materials.foam]
conductivity = 0.03
[materials.steel]
conductivity = 50
[[body]]
name = "foam"
material = "foam"
group = "foam"
[[body]]
name = "plug"
material = "PLUG"
group = "plug"
[[boundary]]
name = "cold"
on = { plane = { y = 0 } }
space = "cold"
[[boundary]]
name = "warm"
on = { plane = { y = 100 } }
space = "warm"
[[boundary]]
name = "sides"
on = "rest"
adiabatic = true
"""


def solved(folder, material: str):
    points = np.array([[0, 0, 0], [100, 0, 0], [100, 100, 0], [0, 100, 0], [50, 50, 0]], dtype=float)
    cells = np.array([[0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]])
    tags = [np.array([1, 2, 1, 1])]
    meshio.write(
        folder / "plug.msh",
        meshio.Mesh(
            points,
            [("triangle", cells)],
            cell_data={"gmsh:physical": tags, "gmsh:geometrical": tags},
            field_data={"foam": np.array([1, 2]), "plug": np.array([2, 2])},
        ),
        file_format="gmsh22",
    )
    return run(read.loads(COARSE.replace("PLUG", material), folder=folder)).answers


def test_a_body_of_one_cell_is_told(tmp_path):
    answers = solved(tmp_path, "steel")
    assert answers.mesh["nodes"] == 5  # the budget of nodes left it so
    assert any("one cell" in warning and '"plug"' in warning for warning in answers.warnings)
    # Steel in place of foam can only let more heat through (Rayleigh's monotonicity), and high bounds that from above.
    assert answers.spaces["warm"].heat_flow_high > 0.1 * 20 / (0.25 + 0.1 / 0.03)


def test_one_cell_is_enough_for_a_linear_field(tmp_path):
    """The plain wall: exact on any mesh, so nothing is to be told."""
    answers = solved(tmp_path, "foam")
    assert not any("one cell" in warning for warning in answers.warnings)
    assert abs(answers.spaces["warm"].heat_flow - 0.1 * 20 / (0.25 + 0.1 / 0.03)) < 1e-9
