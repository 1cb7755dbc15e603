"""Sections, outlines, ordered paths and lines of equal value."""

import numpy as np
import pytest

from coldseam.report.plane import chains, cut, isolines, outline_edges, paths, section_of_plane_model, thicknesses


def area(section):
    a, b, c = (section.points[section.cells[:, k]] for k in range(3))
    return 0.5 * ((b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0])


@pytest.mark.parametrize("at", [0.15, 0.1501, 0.0371])
def test_a_cut_has_the_area_of_the_plane_and_its_bodies(view, at):
    """Also where the plane runs through nodes (0.15)."""
    section = cut(view("bolted_panel"), 0, at)
    assert np.all(area(section) > 0)
    assert area(section).sum() == pytest.approx(0.3 * 0.1, rel=1e-9)
    bolt = area(section)[section.cell_body == 1].sum()
    assert bolt == pytest.approx(0.012 * 0.1 if abs(at - 0.15) < 0.006 else 0.0, abs=1e-12)
    assert section.axes == ("y", "z")


def test_a_linear_field_is_cut_exactly(view):
    from dataclasses import replace

    shown = view("box_corner")
    linear = shown.mesh.points @ np.array([3.0, -2.0, 5.0]) + 1.0
    section = cut(replace(shown, temperature=linear), 2, 0.2)
    expected = section.points @ np.array([3.0, -2.0]) + 5.0 * 0.2 + 1.0
    assert np.allclose(section.temperature, expected, atol=1e-12)


def test_a_plane_beside_the_model_cuts_nothing(view):
    assert cut(view("bolted_panel"), 2, 0.2) is None


def test_outlines_close_and_bound_the_bodies(view):
    section = section_of_plane_model(view("channel"))
    edges, _ = outline_edges(section.cells, section.cell_body)
    loops = paths(edges)
    assert [loop[0] == loop[-1] for loop in loops] == [True, True]
    signed = []
    for loop in loops:
        x, y = section.points[loop].T
        signed.append(0.5 * np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]))
    assert sorted(signed) == pytest.approx([-0.16, 0.64])


def test_chains_keep_every_edge_once_and_in_order():
    rng = np.random.default_rng(3)
    ring = np.stack([np.arange(50), np.roll(np.arange(50), -1)], axis=1)
    line = np.stack([np.arange(60, 90), np.arange(61, 91)], axis=1)
    eight = np.array([[100, 101], [101, 102], [102, 100], [100, 103], [103, 104], [104, 100]])  # a pinched node
    edges = np.concatenate([ring, line, eight])
    edges = edges[rng.permutation(len(edges))]
    found = chains(edges)
    assert sorted(np.concatenate(found).tolist()) == list(range(len(edges)))
    for part in found:
        assert np.array_equal(edges[part[1:], 0], edges[part[:-1], 1])
    assert len(found[0]) == 50 and edges[found[1], 0].tolist() == list(range(60, 90))


def test_isolines_lie_on_their_value(view):
    section = section_of_plane_model(view("square"))
    values = section.points @ np.array([1.0, 2.0])
    segments, _ = isolines(section.points, section.cells, values, 0.5)
    assert np.allclose(segments @ np.array([1.0, 2.0]), 0.5)
    length = np.linalg.norm(np.diff(segments, axis=1)[:, 0], axis=1).sum()
    assert length == pytest.approx(np.hypot(0.4, 0.2))  # from (0.1, 0.2)... across the square: x 0..0.4, y 0.25..0.05


def test_thickness_of_a_skin(view):
    found = thicknesses(section_of_plane_model(view("panel2d")), 4)
    assert found[2] == pytest.approx(0.0005, rel=1e-3)
