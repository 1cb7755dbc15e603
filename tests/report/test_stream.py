"""The stream function: strips of equal heat, round holes, in the whole turn, and with heat inside."""

import numpy as np
import pytest

from coldseam.report.flow import flow_lines
from coldseam.report.plane import section_of_plane_model
from coldseam.report.stream import stream_function


def test_plane_wall_has_evenly_spread_lines(models):
    """k 0.04, 0.1 m, 8 and 7.7 W/m²K, 45 K: q = 45 / (0.1/0.04 + 1/8 + 1/7.7); 5 m high."""
    wall = models.solved(
        (np.linspace(0, 0.1, 5), np.linspace(0, 5, 9)), [("wool", 0.04, models.everywhere)],
        [("ends", None, 0.0, 0.0, models.everywhere), ("cold", "a", 8.0, -20.0, lambda x: x[:, 0] < 1e-9),
         ("warm", "b", 7.7, 25.0, lambda x: x[:, 0] > 0.0999)], title="wall",
    )  # fmt: skip
    psi = stream_function(section_of_plane_model(wall))
    flow = 45 / (0.1 / 0.04 + 1 / 8 + 1 / 7.7) * 5
    assert np.ptp(psi.values) == pytest.approx(flow, rel=1e-9)
    assert psi.misfit < 1e-9 and psi.generated < 1e-9
    lines = flow_lines(wall, section_of_plane_model(wall))
    heights = np.unique(np.round(lines.segments[:, :, 1], 6))
    assert np.allclose(np.diff(heights), psi.step / flow * 5000)
    assert np.all(lines.direction[:, 0] < -0.999)  # from warm to cold


def test_hole_carries_its_heat_and_lines_join(view):
    shown = view("channel")
    section = section_of_plane_model(shown)
    psi = stream_function(section)
    inner = np.unique(shown.mesh.facets[shown.facet_boundary == 1])
    mesh = shown.mesh
    on = shown.facet_boundary == 1
    length = np.linalg.norm(np.diff(mesh.points[mesh.facets[on]], axis=1)[:, 0], axis=1)
    film = 10.0 * np.sum(length * (-10.0 - shown.temperature[mesh.facets[on]].mean(axis=1)))
    assert len(inner) and psi.periods == pytest.approx([film], rel=1e-9)
    assert abs(psi.periods[0] / psi.step) == pytest.approx(round(abs(psi.periods[0] / psi.step)))
    assert psi.misfit < 0.15 and psi.generated < 1e-9
    # every corner of every cell agrees with its neighbours up to whole periods: no line ends in mid-air
    first = np.full(mesh.n_nodes, np.nan)
    first[section.cells.ravel()] = psi.values.ravel()
    gap = (psi.values - first[section.cells]) / psi.periods[0]
    assert np.allclose(gap, np.round(gap), atol=1e-9) and np.any(np.round(gap) != 0)


def test_whole_turn_counts_all_the_heat(models):
    """A cylinder end to end: pi R² k dT / (L + k/h1 + k/h2)."""

    def error(n):
        rod = models.solved(
            (np.linspace(0, 0.05, n + 1), np.linspace(0, 0.4, n + 1)), [("rod", 2.0, models.everywhere)],
            [("side", None, 0.0, 0.0, models.everywhere), ("a", "a", 50.0, 0.0, lambda x: x[:, 1] < 1e-9),
             ("b", "b", 50.0, 30.0, lambda x: x[:, 1] > 0.3999)], title="rod", axisymmetric=True,
        )  # fmt: skip
        return np.ptp(stream_function(section_of_plane_model(rod), axisymmetric=True).values) / exact - 1

    exact = np.pi * 0.05**2 * 30 / (0.4 / 2.0 + 1 / 50 + 1 / 50)
    assert abs(error(8)) < 0.05
    assert abs(error(24)) < 0.4 * abs(error(8))  # first order in the mesh at least: 1/3 expected


def test_heat_arising_inside_is_not_called_strips(models):
    hot = models.solved(
        (np.linspace(0, 0.1, 13), np.linspace(0, 0.1, 13)), [("block", 1.0, models.everywhere)],
        [("faces", "a", 8.0, 20.0, models.everywhere)], title="block", source=lambda x: np.full(len(x), 1e4),
    )  # fmt: skip
    section = section_of_plane_model(hot)
    assert stream_function(section).generated > 0.5
    lines = flow_lines(hot, section)
    assert lines.strip is None and "direction of the heat flow only" in lines.note
    assert len(lines.segments) > 20


def test_contacts_do_not_tear_the_lines(models, view):
    """With the same heat on both sides of doubled nodes psi must be continuous across them."""
    from dataclasses import replace

    wall = view("tall_panel")
    mesh = wall.mesh
    middle = 0.05
    right = mesh.points[mesh.cells].mean(axis=1)[:, 0] > middle
    on = np.flatnonzero(np.abs(mesh.points[:, 0] - middle) < 1e-9)
    twin = np.arange(mesh.n_nodes)
    twin[on] = mesh.n_nodes + np.arange(len(on))
    cells = np.where(right[:, None], twin[mesh.cells], mesh.cells)
    links = np.stack([np.stack([on[:-1], on[1:]], axis=1), np.stack([twin[on[:-1]], twin[on[1:]]], axis=1)], axis=1)
    torn = replace(mesh, points=np.vstack([mesh.points, mesh.points[on]]), cells=cells, links=links,
                   link_contact=np.zeros(len(links), dtype=int))  # fmt: skip
    temperature = np.append(wall.temperature, wall.temperature[on])
    shown = replace(wall, mesh=torn, temperature=temperature)
    lines = flow_lines(shown, section_of_plane_model(shown))
    whole = flow_lines(wall, section_of_plane_model(wall))
    assert lines.strip == whole.strip
    assert len(lines.segments) == len(whole.segments)
