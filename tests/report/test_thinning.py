"""Thinned meshes keep every part's shape and every boundary's area, and tell by how much their temperatures differ."""

from __future__ import annotations

import numpy as np
import pytest

from coldseam.report.thinning import thinned


def volumes(points, cells):
    edge = points[cells][:, 1:] - points[cells][:, :1]
    return np.linalg.det(edge) / 6


def areas(points, facets):
    corner = points[facets]
    return np.linalg.norm(np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]), axis=1) / 2


@pytest.mark.parametrize(("name", "most"), [("bolted_panel", 6000), ("box_corner", 4000)])
def test_parts_and_boundaries_keep_their_size(view, name, most):
    model = view(name)
    mesh, thin = model.mesh, thinned(model, most)
    assert len(thin.cells) <= 1.1 * most < mesh.n_cells == thin.whole
    assert volumes(thin.points, thin.cells).min() > 0
    bodies = [np.bincount(b, np.abs(volumes(p, c))) for p, c, b in
              ((mesh.points, mesh.cells, mesh.cell_body), (thin.points, thin.cells, thin.body))]  # fmt: skip
    assert bodies[1] == pytest.approx(bodies[0], rel=1e-9)
    sides = [np.bincount(b, areas(p, f)) for p, f, b in
             ((mesh.points, mesh.facets, model.facet_boundary), (thin.points, thin.facets, thin.facet_boundary))]  # fmt: skip
    assert sides[1] == pytest.approx(sides[0], rel=1e-9)
    assert all(np.isin(facet, thin.cells[cell]).all() for facet, cell in zip(thin.facets, thin.facet_cell, strict=True))
    assert np.array_equal(thin.points, mesh.points[thin.node])


def test_the_difference_told_is_the_largest(view):
    model = view("bolted_panel")
    thin = thinned(model, 6000)
    # Every tenth node left out, found by trying all cells of the thinned mesh.
    out = np.setdiff1d(np.arange(model.mesh.n_nodes), thin.node)[::10]
    corner = thin.points[thin.cells]
    matrix = np.linalg.inv(np.swapaxes(corner[:, 1:] - corner[:, :1], 1, 2))
    found = []
    for node in out:
        inner = np.einsum("kij,kj->ki", matrix, model.mesh.points[node] - corner[:, 0])
        weight = np.column_stack([1 - inner.sum(axis=1), inner])
        best = weight.min(axis=1).argmax()
        assert weight[best].min() > -1e-6
        found.append(abs(weight[best] @ model.temperature[thin.node][thin.cells[best]] - model.temperature[node]))
    assert 0 < max(found) <= thin.error + 1e-9
    assert thin.error < 0.2 * np.ptp(model.temperature)


def test_small_meshes_stay_whole(view):
    thin = thinned(view("bolted_panel"))
    assert len(thin.cells) == thin.whole and thin.error == 0
