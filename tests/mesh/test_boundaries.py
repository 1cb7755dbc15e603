"""Selectors and the rule that every exterior facet has exactly one boundary."""

from dataclasses import replace

import numpy as np
import pytest

from coldseam.errors import CaseError
from coldseam.mesh.boundaries import claim_facets, select
from coldseam.mesh.build import build_mesh
from coldseam.mesh.measure import facet_centres, facet_measure, facet_normals
from coldseam.mesh.surface import shell_volumes


@pytest.fixture
def box(grid):
    """A 0.3 x 0.2 x 0.1 m box of foam with a steel half, x > 0.15."""
    return grid(
        np.linspace(0, 0.3, 5),
        np.linspace(0, 0.2, 4),
        np.linspace(0, 0.1, 3),
        body=lambda c: c[:, 0] > 0.15,
        bodies=("foam", "steel/bolt"),
    )


@pytest.fixture
def hollow(grid):
    """A 4 x 4 x 4 cm box with a 2 x 2 x 2 cm hollow."""
    inside = lambda c: np.all((c > 0.01) & (c < 0.03), axis=1)  # noqa: E731
    return grid(*[np.linspace(0, 0.04, 5)] * 3, drop=inside)


def area(mesh, mask):
    return facet_measure(mesh)[mask].sum()


def test_plane_takes_the_whole_side_only(box, picker):
    mask = select(picker(plane={"z": 0.1}), box)
    assert area(box, mask) == pytest.approx(0.06, rel=1e-12)
    assert np.all(facet_normals(box)[mask] == [0, 0, 1])
    assert not select(picker(plane={"z": 0.05}), box).any()
    tolerance = 1e-6 * box.size
    assert select(picker(plane={"z": 0.1 + 0.9 * tolerance}), box).any()
    assert not select(picker(plane={"z": 0.1 + 1.1 * tolerance}), box).any()


def test_facing_and_body_and_both(box, picker):
    assert area(box, select(picker(facing="-y"), box)) == pytest.approx(0.03, rel=1e-12)
    assert area(box, select(picker(body="steel"), box)) == pytest.approx(0.02 + 2 * 0.03 + 2 * 0.015, rel=1e-12)
    both = select(picker(body="steel", facing="-y"), box)
    assert area(box, both) == pytest.approx(0.015, rel=1e-12)
    assert np.all(facet_centres(box)[both, 0] > 0.15)
    assert not select(picker(body="stee"), box).any()


def test_facing_is_for_flat_faces_within_a_milliradian(grid, picker):
    flat = grid([0, 1.0], [0, 1.0])
    points = np.array(flat.points)
    points[:, 1] += 0.9e-3 * points[:, 0]
    nearly = build_mesh(points, flat.cells, flat.cell_body, flat.bodies)
    assert select(picker(facing="+y"), nearly).sum() == 1
    points = points + 0.2e-3 * points[:, :1] * [0, 1]
    turned = build_mesh(points, flat.cells, flat.cell_body, flat.bodies)
    assert select(picker(facing="+y"), turned).sum() == 0


def test_within_takes_no_part_of_a_patch(box, picker):
    low = select(picker(within=((0, 0, 0), (0.15, 0.2, 0.1))), box)
    assert area(box, low) == pytest.approx(0.02 + 2 * 0.03 + 2 * 0.015, rel=1e-12)
    assert not select(picker(within=((0, 0, 0), (0.1, 0.2, 0.05))), box).any()


def test_own_patches_are_selected_facet_by_facet(grid, picker):
    mesh = grid(np.linspace(0, 1, 5), np.linspace(0, 1, 5), patches=None)
    assert area(mesh, select(picker(within=((-1, -1), (0.5, 0.5))), mesh)) == pytest.approx(1.0, rel=1e-12)


def test_shells_of_a_hollow_box(hollow, picker):
    outer, cavity = select(picker(shell="outer"), hollow), select(picker(shell="cavity"), hollow)
    assert area(hollow, outer) == pytest.approx(6 * 0.04**2, rel=1e-12)
    assert area(hollow, cavity) == pytest.approx(6 * 0.02**2, rel=1e-12)
    assert not (outer & cavity).any() and (outer | cavity).all()


def test_shells_far_from_the_origin(hollow, picker):
    moved = build_mesh(hollow.points + 1e4, hollow.cells, hollow.cell_body, hollow.bodies)
    assert area(moved, select(picker(shell="cavity"), moved)) == pytest.approx(6 * 0.02**2, rel=1e-6)


def test_shells_in_the_plane_and_about_the_axis(grid, picker):
    hole = lambda c: (c[:, 0] < 0.5) & (c[:, 1] > 0.25) & (c[:, 1] < 0.75)  # noqa: E731
    axis = np.linspace(0, 1, 5)
    ring = grid(axis, axis, drop=lambda c: np.all((c > 0.25) & (c < 0.75), axis=1))
    assert area(ring, select(picker(shell="cavity"), ring)) == pytest.approx(2.0, rel=1e-12)
    turned = grid(axis, axis, drop=hole, axisymmetric=True)
    cavity = select(picker(shell="cavity"), turned)
    assert area(turned, cavity) == pytest.approx(2 * np.pi * 0.25 + np.pi * 0.5, rel=1e-12)
    outer = select(picker(shell="outer"), turned)
    assert area(turned, outer) == pytest.approx(2 * np.pi + 2 * np.pi, rel=1e-12)
    flat = grid(axis, axis, drop=hole)
    assert not select(picker(shell="cavity"), flat).any(), "in the plane the notch is open"


def test_a_slender_hollow_on_the_axis_is_a_cavity(grid, picker):
    """Its open curve closes along r = 0 only: measured from elsewhere it would seem to hold material."""
    hole = lambda c: (c[:, 0] < 0.125) & (c[:, 1] > 0.25) & (c[:, 1] < 0.75)  # noqa: E731
    axis = np.linspace(0, 1, 9)
    mesh = grid(axis, axis, drop=hole, axisymmetric=True)
    cavity = select(picker(shell="cavity"), mesh)
    assert area(mesh, cavity) == pytest.approx(2 * np.pi * 0.125 * 0.5 + 2 * np.pi * 0.125**2, rel=1e-12)


def test_two_bodies_apart_are_both_outer(grid, picker):
    mesh = grid(np.linspace(0, 3, 4), [0, 1.0], [0, 1.0], drop=lambda c: (c[:, 0] > 1) & (c[:, 0] < 2))
    assert select(picker(shell="outer"), mesh).all()


def test_groups_of_patches(grid, picker):
    plain = grid([0, 1.0], [0, 1.0], [0, 1.0])
    groups = tuple(frozenset({"lid"} if patch == plain.facet_patch.max() else ()) for patch in range(6))
    mesh = build_mesh(
        plain.points,
        plain.cells,
        plain.cell_body,
        plain.bodies,
        patch_facets=plain.facets,
        patch_of=plain.facet_patch,
        patch_groups=groups,
    )
    assert np.array_equal(select(picker(group="lid"), mesh), mesh.facet_patch == 5)
    assert not select(picker(group="floor"), mesh).any()


def test_every_facet_gets_its_boundary(box, bounded):
    case = bounded(warm={"plane": {"z": 0.1}}, cut="rest", cold={"plane": {"z": 0.0}})
    claimed = claim_facets(case, box)
    normal = facet_normals(box)[:, 2]
    assert np.array_equal(claimed, np.where(normal == 1, 0, np.where(normal == -1, 2, 1)))


def faults(case, mesh):
    with pytest.raises(CaseError) as caught:
        claim_facets(case, mesh)
    return caught.value.faults


def test_unclaimed_faces_are_named_with_place_area_and_selectors(box, bounded):
    case = bounded(warm={"plane": {"z": 0.1}}, cold={"plane": {"z": 0.0}}, ends={"facing": "-x"}, y={"facing": "-y"})
    found = faults(case, box)
    assert len(found) == 3
    text = [fault.what for fault in found]
    end = next(line for line in text if "x = 300" in line)
    assert "area 0.02 m²" in end and 'of body "steel/bolt"' in end and "facing +x" in end
    assert "y 0 to 200, z 0 to 100 mm" in end
    assert "plane = { x = 300 }" in end and 'facing = "+x"' in end and 'body = "steel/bolt"' in end
    assert sum("plane = { y = 200 }" in line for line in text) == 2, "the foam's and the steel's half"


def test_what_an_unclaimed_face_suggests_claims_it(box, bounded, picker):
    claimed = select(picker(plane={"x": 0.3}), box) & select(picker(facing="+x"), box)
    case = bounded(a={"plane": {"x": 0.3}}, b="rest")
    assert np.array_equal(claim_facets(case, box) == 0, claimed)


def test_doubly_claimed_faces_name_both_boundaries(box, bounded):
    found = faults(bounded(top={"plane": {"z": 0.1}}, left={"body": "foam"}, other="rest"), box)
    assert len(found) == 1
    assert found[0].path == ("boundary", 1, "on")
    assert '"top" and "left"' in found[0].what and "z = 100" in found[0].what
    assert "area 0.03 m²" in found[0].what


def test_many_faces_are_cut_short(grid, bounded):
    squares = lambda c: (np.floor(c[:, 0]).astype(int) + np.floor(c[:, 1]).astype(int)) % 2 == 1  # noqa: E731
    mesh = grid(np.arange(7.0), np.arange(7.0), drop=squares, patches=None)
    found = faults(bounded(left={"plane": {"x": 0.0}}), mesh)
    assert len(found) == 9
    n_faces = 4 * 18 - 3
    assert found[-1].what == f"and {n_faces - 8} more faces in no boundary"


@pytest.mark.parametrize(
    ("parts", "hint"),
    [
        ({"plane": {"z": 0.07}}, "no face lies at z = 70; faces lie at z = 0, 100"),
        ({"body": "bolts"}, 'there is no body "bolts"; bodies with faces on the outside: "foam", "steel/bolt"'),
        ({"facing": "+x", "body": "foam"}, "faces for each of body and facing, but none for all"),
        ({"shell": "cavity"}, "encloses no hollow"),
        ({"group": "lid"}, "there are no groups"),
        ({"within": ((1, 1, 1), (2, 2, 2))}, "the nearest face is at"),
        ({"within": ((-1, -1, -1), (0.08, 1, 0.05))}, "part"),
    ],
)
def test_a_boundary_that_selects_nothing_says_why(box, bounded, parts, hint):
    found = faults(bounded(other="rest", odd=parts), box)
    assert [fault.path for fault in found] == [("boundary", 1, "on")]
    assert hint in found[0].what


def test_facing_hint_lists_directions(grid, bounded):
    flat = grid([0, 1.0], [0, 1.0])
    (fault,) = faults(bounded(top={"facing": "+z"}, other="rest"), flat)
    assert "a cross-section has only x and y" in fault.what


def test_part_of_a_face_in_the_box_is_said(box, bounded):
    case = bounded(low={"within": ((-1, -1, -1), (1, 1, 0.05))}, sides={"body": "foam"})
    text = [fault.what for fault in faults(case, box)]
    assert any('"low" takes in only part of it' in line for line in text)


def test_inner_body_without_faces(grid, bounded):
    core = lambda c: np.all((c > 1) & (c < 2), axis=1)  # noqa: E731
    mesh = grid(*[np.arange(4.0)] * 3, body=core, bodies=("foam", "core"))
    (fault,) = faults(bounded(inner={"body": "core"}, other="rest"), mesh)
    assert 'body "core" has no face on the outside; "foam" have' in fault.what


def test_second_rest_and_empty_rest(box, bounded):
    assert any('only one boundary can take "rest"' in fault.what for fault in faults(bounded(a="rest", b="rest"), box))
    (fault,) = faults(bounded(all={"shell": "outer"}, left="rest"), box)
    assert fault.path == ("boundary", 1, "on") and "no face is left" in fault.what


def test_whole_turn_areas(grid):
    mesh = grid(np.linspace(0.1, 0.3, 3), np.linspace(0, 0.5, 3), axisymmetric=True)
    expected = 2 * np.pi * (0.1 + 0.3) * 0.5 + 2 * np.pi * (0.3**2 - 0.1**2)
    assert facet_measure(mesh).sum() == pytest.approx(expected, rel=1e-12)


def test_closed_surface_vectors_sum_to_nothing(hollow):
    vectors = facet_normals(hollow) * facet_measure(hollow)[:, None]
    assert np.abs(vectors.sum(axis=0)).max() < 1e-15
    flux = np.einsum("ij,ij->", vectors, facet_centres(hollow)) / 3
    assert flux == pytest.approx(0.04**3 - 0.02**3, rel=1e-12), "outward: the divergence theorem gives the volume"


def test_contact_doubled_nodes_leave_one_shell(grid, picker):
    """Two halves of a hollow box linked by a contact are still one outer shell and one cavity."""
    whole = grid(*[np.linspace(0, 0.04, 5)] * 3, drop=lambda c: np.all((c > 0.01) & (c < 0.03), axis=1))
    right = whole.points[whole.cells].mean(axis=1)[:, 0] > 0.02
    on_cut = np.flatnonzero(np.abs(whole.points[:, 0] - 0.02) < 1e-12)
    twin = np.arange(whole.n_nodes)
    twin[on_cut] = whole.n_nodes + np.arange(len(on_cut))
    cells = np.array(whole.cells)
    cells[right] = twin[cells[right]]
    points = np.vstack([whole.points, whole.points[on_cut]])
    split = build_mesh(points, cells, right.astype(int), whole.bodies * 2)
    cut = np.all(np.abs(split.points[split.facets][:, :, 0] - 0.02) < 1e-12, axis=1)
    left_side = split.facets[cut & (split.facet_cell < 0) | (cut & ~right[split.facet_cell])]
    linked = replace(
        split,
        facets=np.array(split.facets[~cut]),
        facet_cell=np.array(split.facet_cell[~cut]),
        facet_patch=np.array(split.facet_patch[~cut]),
        links=np.stack([left_side, twin[left_side]], axis=1),
        link_contact=np.zeros(len(left_side), dtype=int),
    )
    assert shell_volumes(linked)[1] == pytest.approx([0.04**3, -(0.02**3)], rel=1e-12)
    assert area(linked, select(picker(shell="cavity"), linked)) == pytest.approx(6 * 0.02**2, rel=1e-12)
