"""Foreign meshes: every kind of cell, names, units, and all that is wrong with files.

The meshes are written by meshio from arrays made here; the cases are read by coldseam itself.
"""

import meshio
import numpy as np
import pytest

from coldseam.case.read import loads
from coldseam.errors import CaseError
from coldseam.mesh.boundaries import claim_facets, select
from coldseam.mesh.build import number_facets
from coldseam.mesh.foreign import open_foreign
from coldseam.mesh.measure import cell_measure, facet_measure
from coldseam.mesh.types import SizeField

HEAD = """
title = "a mesh from outside"
[model]
dimensions = {dim}
mesh = "{mesh}"
{more}
[spaces.room]
temperature = 20
film = 8
[materials.foam]
conductivity = 0.03
source = "made up"
[materials.steel]
conductivity = 15
source = "made up"
"""
SHELL = '[[boundary]]\nname = "all"\non = {{ shell = "outer" }}\n{what}\n'


def case_for(folder, mesh, *, dim=3, more="", bodies=(("foam", "foam"),), boundaries=None, void=()):
    """A case for a mesh file; ``bodies`` are (name and material, group)."""
    text = HEAD.format(dim=dim, mesh=mesh, more=more)
    for name, group in bodies:
        made = "void = true" if name in void else f'material = "{name.split()[0]}"'
        text += f'[[body]]\nname = "{name}"\n{made}\ngroup = "{group}"\n'
    if not any(name.startswith("steel") for name, _ in bodies):
        text = text.replace('[materials.steel]\nconductivity = 15\nsource = "made up"\n', "")
    text += boundaries or '[[boundary]]\nname = "all"\non = "rest"\nspace = "room"\n'
    return loads(text, folder)


def write(folder, name, points, cells, tags=None, names=None, **options):
    """Write a mesh file; ``tags`` per block, ``names`` {name: (tag, dim)}."""
    data = {}
    if tags is not None:
        data = {"gmsh:physical": [np.array(t) for t in tags], "gmsh:geometrical": [np.array(t) for t in tags]}
    field = {key: np.array(value) for key, value in (names or {}).items()}
    mesh = meshio.Mesh(np.asarray(points, dtype=float), cells, cell_data=data, field_data=field)
    meshio.write(folder / name, mesh, **options)
    return name


def write_gmsh(folder, points, cells, tags, names, name="part.msh"):
    return write(folder, name, points, cells, tags, names, file_format="gmsh22", binary=False)


def opened(case, log=None):
    with open_foreign(case, log) as mesher:
        return mesher.mesh()


def assert_closed(mesh):
    """Each inner facet shared by two cells, and the surface encloses the volume of the cells."""
    cell_facets, _ = number_facets(mesh.cells)
    count = np.bincount(cell_facets.ravel())
    assert count.max() <= 2 and np.count_nonzero(count == 1) == len(mesh.facets)


MIXED_POINTS = [
    [0, 0, 0], [10, 0, 0], [10, 10, 0], [0, 10, 0], [0, 0, 10], [10, 0, 10], [10, 10, 10], [0, 10, 10],
    [20, 0, 0], [20, 0, 10], [5, 5, 20], [20, 10, 5],
]  # fmt: skip
MIXED = [
    ("hexahedron", np.array([[0, 1, 2, 3, 4, 5, 6, 7]])),
    ("wedge", np.array([[1, 8, 2, 5, 9, 6]])),
    ("pyramid", np.array([[4, 5, 6, 7, 10], [8, 2, 6, 9, 11]])),
    ("tetra", np.array([[5, 9, 6, 10]])),
]


def volume_by_corners():
    """Volumes (mm³) from textbook formulas for these shapes, not by splitting."""
    p = np.array(MIXED_POINTS, dtype=float)

    def pyramid(base, apex):  # third of base area times height, base a plane parallelogram or its vector area
        b = p[list(base)]
        area = 0.5 * np.cross(b[2] - b[0], b[3] - b[1])
        return abs(area @ (p[apex] - b[0])) / 3

    tetra = abs(np.linalg.det(p[[9, 6, 10]] - p[5])) / 6
    return 1000 + 500 + pyramid((4, 5, 6, 7), 10) + pyramid((8, 2, 6, 9), 11) + tetra


def test_all_solid_kinds_in_one_mesh(tmp_path):
    name = write_gmsh(tmp_path, MIXED_POINTS, MIXED, [[1], [1], [1, 2], [2]], {"foam": (1, 3), "rib": (2, 3)})
    mesh = opened(case_for(tmp_path, name, bodies=[("foam", "foam"), ("steel rib", "rib")]))
    assert_closed(mesh)
    assert cell_measure(mesh).sum() == pytest.approx(volume_by_corners() * 1e-9, rel=1e-12)
    of_foam = cell_measure(mesh)[mesh.cell_body == 0].sum()
    assert of_foam == pytest.approx((1000 + 500 + 1000 / 3) * 1e-9, rel=1e-12)
    assert [body.name for body in mesh.bodies] == ["foam", "steel rib"]
    assert [body.material for body in mesh.bodies] == ["foam", "steel"]
    # Outside lie: 4 quads of the hexahedron, a triangle and a quad of the wedge, 3 triangles of the upper
    # pyramid and 4 of the other, 2 of the tetrahedron.
    assert len(mesh.facets) == 4 * 2 + 1 + 2 + 3 + 4 + 2


def test_integer_tags_without_names_and_other_units(tmp_path):
    name = write_gmsh(tmp_path, MIXED_POINTS, MIXED, [[1], [1], [1, 2], [2]], {})
    case = case_for(tmp_path, name, more='mesh_unit = "m"', bodies=[("foam", "1"), ("steel", "2")])
    assert cell_measure(opened(case)).sum() == pytest.approx(volume_by_corners(), rel=1e-12)


def grid_file(folder, blocks, kind="hexahedron", name="grid.msh", steps=(2, 2, 2), sides=True):
    """A 40 mm cube of hexahedra or tetrahedra, the half x > 20 tagged 2, the sides z = 0 and z = 40 named."""
    axes = [np.linspace(0, 40, n + 1) for n in steps]
    points = blocks.points(*axes)
    cells = blocks.cells(*steps) if kind == "hexahedron" else blocks.simplices(*steps)
    tags = np.where(points[cells].mean(axis=1)[:, 0] > 20, 2, 1)
    if not sides:
        return write_gmsh(folder, points, [(kind, cells)], [tags], {"foam": (1, 3), "steel": (2, 3)}, name)
    hexa = blocks.cells(*steps)
    floor, lid = (hexa[:, side] for side in ([0, 3, 2, 1], [4, 5, 6, 7]))
    floor, lid = floor[np.all(points[floor][:, :, 2] == 0, axis=1)], lid[np.all(points[lid][:, :, 2] == 40, axis=1)]
    faces = np.vstack([floor, lid])
    names = {"foam": (1, 3), "steel": (2, 3), "floor": (1, 2), "lid": (2, 2)}
    side_tags = np.repeat([1, 2], [len(floor), len(lid)])
    return write_gmsh(folder, points, [(kind, cells), ("quad", faces)], [tags, side_tags], names, name)


BOTH = (("foam", "foam"), ("steel", "steel"))


def test_groups_of_faces_survive_splitting_and_refining(tmp_path, blocks, picker):
    case = case_for(
        tmp_path,
        grid_file(tmp_path, blocks),
        bodies=BOTH,
        boundaries='[[boundary]]\nname = "up"\non = { group = "lid" }\nspace = "room"\n'
        '[[boundary]]\nname = "down"\non = { group = "floor", body = "steel" }\ntemperature = 0\n'
        '[[boundary]]\nname = "sides"\non = "rest"\nadiabatic = true\n',
    )
    with open_foreign(case) as mesher:
        assert not mesher.remeshable
        mesh = mesher.mesh()
        fine = mesher.mesh(SizeField(mesh=mesh, size=np.full(mesh.n_nodes, 0.006)))
        held = mesher.mesh(SizeField(mesh=fine, size=np.full(fine.n_nodes, 0.001)), target_cells=8000)
    assert_closed(mesh)
    assert len(mesh.facets) == 2 * 6 * 4
    for each in (mesh, fine, held):
        claimed = claim_facets(case, each)
        area = np.bincount(claimed, weights=facet_measure(each))
        assert area == pytest.approx([1.6e-3, 0.8e-3, 5 * 1.6e-3 - 0.8e-3], rel=1e-12)
        assert cell_measure(each)[each.cell_body == 1].sum() == pytest.approx(32e-6, rel=1e-12)
    assert fine.n_cells > 8 * mesh.n_cells and 4000 < held.n_cells < 16000
    assert select(picker(group="lid"), mesh).sum() == 8


def test_void_groups_are_cut_out(tmp_path, blocks):
    case = case_for(tmp_path, grid_file(tmp_path, blocks), bodies=BOTH, void=("foam",))
    mesh = opened(case)
    assert [body.name for body in mesh.bodies] == ["steel"] and mesh.bodies[0].source == 1
    assert cell_measure(mesh).sum() == pytest.approx(32e-6, rel=1e-12)
    assert facet_measure(mesh).sum() == pytest.approx(2 * 1.6e-3 + 4 * 0.8e-3, rel=1e-12)


@pytest.mark.parametrize("suffix", [".vtu", ".inp", ".mesh"])
def test_other_files_and_cell_sets(tmp_path, blocks, suffix):
    points, cells = blocks.points(*[np.linspace(0, 40, 3)] * 3), blocks.simplices(2, 2, 2)
    right = points[cells].mean(axis=1)[:, 0] > 20
    mesh = meshio.Mesh(points, [("tetra", cells)])
    if suffix == ".inp":
        mesh.cell_sets = {"foam": [np.flatnonzero(~right)], "steel": [np.flatnonzero(right)]}
        bodies = BOTH
    else:
        mesh.cell_data = {"region": [np.where(right, 7, 3).astype(np.int32)]}
        bodies = (("foam", "3"), ("steel", "7"))
    if suffix == ".mesh":
        mesh.cell_data = {"medit:ref": mesh.cell_data["region"]}
    meshio.write(tmp_path / f"part{suffix}", mesh)
    read = opened(case_for(tmp_path, f"part{suffix}", bodies=bodies))
    assert cell_measure(read)[read.cell_body == 1].sum() == pytest.approx(32e-6, rel=1e-12)


def test_second_order_is_reduced_and_said(tmp_path):
    corner = np.array([[0, 0, 0], [10, 0, 0], [0, 10, 0], [0, 0, 10.0]])
    pairs = [(0, 1), (1, 2), (2, 0), (0, 3), (2, 3), (1, 3)]
    points = np.vstack([corner, [corner[list(p)].mean(axis=0) for p in pairs]])
    name = write_gmsh(tmp_path, points, [("tetra10", np.arange(10)[None])], [[1]], {"foam": (1, 3)})
    told = []
    mesh = opened(case_for(tmp_path, name), lambda stage, message: told.append(message))
    assert mesh.n_nodes == 4 and cell_measure(mesh).sum() == pytest.approx(1e-6 / 6)
    assert any("second-order" in line and "1 tetra10" in line for line in told)
    assert any("6 points" in line for line in told)


def test_cross_section_of_quads_and_triangles(tmp_path):
    points = [[0, 0, 0], [10, 0, 0], [10, 10, 0], [0, 10, 0], [20, 0, 0], [20, 10, 0], [99, 99, 0]]
    cells = [
        ("quad", np.array([[0, 1, 2, 3]])),
        ("triangle", np.array([[1, 4, 5], [1, 5, 2]])),
        ("line", np.array([[0, 3], [4, 5], [1, 2]])),
    ]
    names = {"foam": (1, 2), "left": (1, 1), "inside": (3, 1)}
    name = write_gmsh(tmp_path, points, cells, [[1], [1, 1], [1, 2, 3]], names)
    mesh = opened(case_for(tmp_path, name, dim=2))
    assert mesh.dim == 2 and mesh.n_nodes == 6
    assert cell_measure(mesh).sum() == pytest.approx(2e-4, rel=1e-12)
    left = np.array(["left" in mesh.patch_groups[p] for p in mesh.facet_patch])
    assert np.all(mesh.points[mesh.facets[left]][:, :, 0] == 0) and left.sum() == 1
    turned = opened(case_for(tmp_path, name, dim=2, more="axisymmetric = true"))
    assert cell_measure(turned).sum() == pytest.approx(np.pi * 0.02**2 * 0.01, rel=1e-12)
    assert len(turned.facets) == len(mesh.facets) - 1


def test_inside_out_cells_are_turned_round_and_counted(tmp_path, blocks):
    points, cells = blocks.points(*[np.linspace(0, 40, 3)] * 3), blocks.cells(2, 2, 2)
    turned = cells[:, [4, 5, 6, 7, 0, 1, 2, 3]]
    turned[0] = cells[0]
    name = write_gmsh(tmp_path, points, [("hexahedron", turned)], [np.ones(8, int)], {"foam": (1, 3)})
    told = []
    mesh = opened(case_for(tmp_path, name), lambda stage, message: told.append(message))
    assert cell_measure(mesh).min() > 0 and cell_measure(mesh).sum() == pytest.approx(64e-6, rel=1e-12)
    assert any("inside out" in line for line in told)


# --- what is wrong with files -------------------------------------------------------------------


def refusal(case):
    with pytest.raises(CaseError) as caught:
        open_foreign(case)
    return caught.value


@pytest.mark.parametrize(
    ("name", "content", "words"),
    [
        ("none.msh", None, 'there is no file "none.msh"'),
        ("empty.msh", b"", '"empty.msh" is empty'),
        ("noise.msh", bytes(range(256)) * 9, "can't be read"),
        ("text.vtu", b"<VTKFile></VTKFile>", "can't be read"),
        ("torn.vtu", b"<VTKFile type='Unstr", "can't be read"),
        ("torn.msh", b"$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n4\n1 0 0 0\n", "can't be read"),
        ("short.inp", b"*NODE\n1, 0, 0\n*ELEMENT, TYPE=C3D4\n1, 1, 2", "inp"),
        ("garbage.vtk", b"# vtk DataFile Version 3.0\nx\nASCII\nDATASET NOTHING\n", "can't be read"),
        ("script.geo", b"Printf('x');", "is a script"),
        ("part.xyz", b"x", "of a kind that is not known"),
        ("hollow.vtu", b"<VTKFile type='UnstructuredGrid' version='0.1'><UnstructuredGrid/></VTKFile>", "No Piece"),
    ],
)  # fmt: skip
def test_bad_files_are_refused_in_a_sentence(tmp_path, capfd, name, content, words):
    (tmp_path / name).write_bytes(b"something, for reading the case looks whether the file is there")
    case = case_for(tmp_path, name, more="trust_scripts = true")
    (tmp_path / name).unlink()
    if content is not None:
        (tmp_path / name).write_bytes(content)
    error = refusal(case)
    assert error.faults[0].path == ("model", "mesh") and words in str(error)
    assert str(tmp_path) not in str(error), "no machine paths in messages"
    assert capfd.readouterr() == ("", ""), "nothing is printed by a library"


def simple(folder, points, cells, dim=3, kind=None, **options):
    kind = kind or {3: "tetra", 2: "triangle"}[dim]
    cells = np.array(cells)
    name = write_gmsh(folder, points, [(kind, cells)], [np.ones(len(cells), int)], {"foam": (1, dim)})
    return str(refusal(case_for(folder, name, dim=dim, **options)))


TETS = [[0, 0, 0], [10, 0, 0], [0, 10, 0], [0, 0, 10], [10, 10, 10]]


def test_flat_cells(tmp_path):
    text = simple(tmp_path, [*TETS, [5, 5, 0]], [[0, 1, 2, 3], [0, 1, 2, 5]])
    assert "1 cells have no volume, the first at (3.75, 3.75, 0) mm" in text


def test_doubled_cells(tmp_path):
    assert "1 cells are there twice" in simple(tmp_path, TETS, [[0, 1, 2, 3], [4, 1, 2, 3], [1, 2, 0, 3]])


def test_folded_cells(tmp_path):
    # Node 5 and node 0 lie on the same side of the face 1-2-3.
    assert "on the same side of the face" in simple(tmp_path, [*TETS, [1, 1, 1]], [[0, 1, 2, 3], [5, 1, 2, 3]])


def test_facets_of_three_cells(tmp_path):
    text = simple(tmp_path, [*TETS, [20, 20, 20]], [[0, 1, 2, 3], [4, 1, 2, 3], [5, 1, 2, 3]])
    assert "more than two cells" in text


def test_cracks_of_doubled_nodes(tmp_path, blocks):
    points, cells = blocks.points(*[np.linspace(0, 40, 3)] * 3), blocks.cells(2, 2, 2)
    right = points[cells].mean(axis=1)[:, 0] > 20
    twin = np.arange(27)
    cut = np.flatnonzero(points[:, 0] == 20)
    twin[cut] = 27 + np.arange(9)
    cells[right] = twin[cells[right]]
    text = simple(tmp_path, np.vstack([points, points[cut]]), cells, kind="hexahedron")
    assert "9 pairs of nodes lie on top of each other" in text and "x" not in text.split("mm")[0].split("(")[-1]


def test_solids_that_share_no_face(tmp_path):
    """Two tetrahedra against a hexahedron's face, cut by the other diagonal than the hexahedron's."""
    points = MIXED_POINTS[:8] + [[20, 5, 5]]
    hexa = ("hexahedron", np.array([[0, 1, 2, 3, 4, 5, 6, 7]]))
    names = {"foam": (1, 3)}
    for diagonal, fits in (([[1, 2, 6, 8], [1, 6, 5, 8]], True), ([[1, 2, 5, 8], [2, 6, 5, 8]], False)):
        name = write_gmsh(tmp_path, points, [hexa, ("tetra", np.array(diagonal))], [[1], [1, 1]], names)
        case = case_for(tmp_path, name)
        if fits:
            assert_closed(opened(case))
        else:
            assert "share no face" in str(refusal(case))


def test_slit_in_the_plane_is_found_by_its_nodes(tmp_path):
    points = [[0, 0, 0], [10, 0, 0], [10, 10, 0], [0, 10, 0], [0, 0, 0]]
    assert "1 pairs of nodes lie on top" in simple(tmp_path, points, [[0, 1, 2], [4, 2, 3]], dim=2)


def test_cross_section_off_its_plane(tmp_path):
    points = [[0, 0, 5], [10, 0, 5], [0, 10, 5]]
    assert "must lie in the plane z = 0" in simple(tmp_path, points, [[0, 1, 2]], dim=2)


def test_left_of_the_axis(tmp_path):
    points = [[-5, 0, 0], [10, 0, 0], [0, 10, 0]]
    assert "no point may have x below 0" in simple(tmp_path, points, [[0, 1, 2]], dim=2, more="axisymmetric = true")


def test_dimensions_must_fit(tmp_path):
    name = write_gmsh(tmp_path, TETS, [("tetra", np.array([[0, 1, 2, 3]]))], [[1]], {"foam": (1, 3)})
    assert "has solid cells" in str(refusal(case_for(tmp_path, name, dim=2)))
    name = write_gmsh(tmp_path, TETS, [("triangle", np.array([[0, 1, 2]]))], [[1]], {"foam": (1, 2)}, "flat.msh")
    assert "no solid cells" in str(refusal(case_for(tmp_path, name, dim=3)))


def test_points_that_are_not_numbers(tmp_path):
    points = [*TETS[:3], [np.nan, 0, 0]]
    assert "not numbers" in simple(tmp_path, points, [[0, 1, 2, 3]])


def test_groups_must_exist_cover_and_not_overlap(tmp_path, blocks):
    name = grid_file(tmp_path, blocks)
    error = refusal(case_for(tmp_path, name, bodies=[("foam", "foam"), ("steel", "stele")]))
    assert error.faults[0].path == ("body", 1, "group")
    assert 'no cell of the mesh is in "stele"; groups of cells in the mesh: "foam", "steel"' in str(error)
    error = refusal(case_for(tmp_path, name, bodies=[("foam", "foam"), ("steel", "lid")]))
    assert "only faces or lines carry it" in str(error)
    error = refusal(case_for(tmp_path, name))
    assert '4 cells of the mesh belong to no body; groups without a body: "steel"' in str(error)
    error = refusal(case_for(tmp_path, name, bodies=[*BOTH, ("foam again", "foam")]))
    assert '4 cells are also in body "foam"' in str(error) and error.faults[0].path == ("body", 2, "group")
    error = refusal(case_for(tmp_path, name, bodies=BOTH, void=("foam", "steel")))
    assert "all cells of the mesh are void" in str(error)
