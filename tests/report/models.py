"""Small models with solved fields for the report's tests (not a test module).

The fields come from a plain linear-element solve written out here, so that the report is tested
without the solver it reports on.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.linalg import spsolve

from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import MeshBody
from coldseam.report.view import View, boundary_areas


def lattice(*axes):
    """Return points and simplices of a rectilinear lattice (2 triangles or 6 tetrahedra a box)."""
    dim = len(axes)
    shape = tuple(len(axis) for axis in axes)
    points = np.stack([g.ravel() for g in np.meshgrid(*axes, indexing="ij")], axis=1)
    number = np.arange(len(points)).reshape(shape)
    if dim == 2:
        a, b, c, d = number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]
        cells = np.stack([np.stack([a, b, c], -1), np.stack([a, c, d], -1)], axis=2)
        return points, cells.reshape(-1, 3)
    corner = {
        (i, j, k): number[i : shape[0] - 1 + i, j : shape[1] - 1 + j, k : shape[2] - 1 + k]
        for i in (0, 1)
        for j in (0, 1)
        for k in (0, 1)
    }
    tets = []
    for order in ((0, 1, 2), (0, 2, 1), (1, 0, 2), (1, 2, 0), (2, 0, 1), (2, 1, 0)):
        at, path = [0, 0, 0], [corner[0, 0, 0]]
        for axis in order:
            at[axis] = 1
            path.append(corner[tuple(at)])
        tets.append(np.stack(path, axis=-1))
    return points, np.stack(tets, axis=3).reshape(-1, 4)


def solved(axes, bodies, boundaries, *, title, remove=None, axisymmetric=False, probes=None, source=None):
    """Return a View of a lattice model with its field.

    bodies: (name, k, where(centres) -> bool), later ones displace earlier ones.
    boundaries: (name, space or None, h, space temperature, where(facet centres) -> bool), the last that claims wins.
    """
    points, cells = lattice(*axes)
    centre = points[cells].mean(axis=1)
    if remove is not None:
        cells = cells[~remove(centre)]
        used, cells = np.unique(cells, return_inverse=True)
        points, cells = points[used], cells.reshape(-1, len(axes) + 1)
        centre = points[cells].mean(axis=1)
    body = np.zeros(len(cells), dtype=int)
    for k, (_, _, where) in enumerate(bodies):
        body[where(centre)] = k
    names = tuple(MeshBody(name=name, material=name, source=k) for k, (name, _, _) in enumerate(bodies))
    mesh = build_mesh(points, cells, body, names, axisymmetric=axisymmetric)
    middle = mesh.points[mesh.facets].mean(axis=1)
    claim = np.zeros(len(mesh.facets), dtype=int)
    for k, entry in enumerate(boundaries):
        claim[entry[4](middle)] = k
    conductivity = np.array([k for _, k, _ in bodies])[body]
    temperature, flux = _field(mesh, conductivity, claim, boundaries, source)
    view = View(
        mesh=mesh,
        facet_boundary=claim,
        boundary_names=tuple(b[0] for b in boundaries),
        boundary_space=tuple(b[1] for b in boundaries),
        boundary_kind=tuple("space" if b[1] else "adiabatic" for b in boundaries),
        temperature=temperature,
        cell_flux=flux,
        title=title,
        probes=probes or {},
        answers={},
    )
    view.answers.update(_answers(view, boundaries))
    return view


def _field(mesh, conductivity, claim, boundaries, source):
    dim, n = mesh.dim, mesh.n_nodes
    corner = mesh.points[mesh.cells]
    jacobian = np.swapaxes(corner[:, 1:] - corner[:, :1], 1, 2)
    inverse = np.linalg.inv(jacobian)
    gradient = np.concatenate([-inverse.sum(axis=1, keepdims=True), inverse], axis=1)
    volume = np.abs(np.linalg.det(jacobian)) / (2 if dim == 2 else 6)
    if mesh.axisymmetric:
        volume = volume * 2 * np.pi * corner[:, :, 0].mean(axis=1)
    local = np.einsum("m,mki,mli->mkl", volume * conductivity, gradient, gradient)
    cells = mesh.cells
    rows, columns = np.repeat(cells, dim + 1, axis=1).ravel(), np.tile(cells, (1, dim + 1)).ravel()
    facet = mesh.points[mesh.facets]
    if dim == 2:
        area = np.linalg.norm(facet[:, 1] - facet[:, 0], axis=1)
        area = area * 2 * np.pi * facet[:, :, 0].mean(axis=1) if mesh.axisymmetric else area
    else:
        area = 0.5 * np.linalg.norm(np.cross(facet[:, 1] - facet[:, 0], facet[:, 2] - facet[:, 0]), axis=1)
    film = np.array([b[2] for b in boundaries], dtype=float)[claim] * area / dim
    air = np.array([b[3] for b in boundaries], dtype=float)[claim]
    diagonal = np.bincount(mesh.facets.ravel(), weights=np.repeat(film, dim), minlength=n)
    load = np.bincount(mesh.facets.ravel(), weights=np.repeat(film * air, dim), minlength=n)
    if source is not None:
        density = source(corner.mean(axis=1)) * volume / (dim + 1)
        load += np.bincount(cells.ravel(), weights=np.repeat(density, dim + 1), minlength=n)
    rows, columns = np.append(rows, np.arange(n)), np.append(columns, np.arange(n))
    matrix = coo_matrix((np.append(local.ravel(), diagonal), (rows, columns)), shape=(n, n)).tocsc()
    temperature = spsolve(matrix, load)
    return temperature, -conductivity[:, None] * np.einsum("mki,mk->mi", gradient, temperature[cells])


def _answers(view, boundaries):
    areas = boundary_areas(view)
    table = {}
    for k, name in enumerate(view.boundary_names):
        nodes = np.unique(view.mesh.facets[view.facet_boundary == k])
        values = view.temperature[nodes]
        table[name] = {
            "heat_flow": 1.25 * k,
            "heat_flow_low": 1.2 * k,
            "heat_flow_high": 1.3 * k,
            "interval": "estimate",
            "area": float(areas[k]),
            "temperature": {
                "min": float(values.min()),
                "min_at": (view.mesh.points[nodes[values.argmin()]] * 1e3).tolist(),
                "max": float(values.max()),
                "max_at": (view.mesh.points[nodes[values.argmax()]] * 1e3).tolist(),
                "mean": float(values.mean()),
            },
        }
    air = {b[1]: b[3] for b in boundaries if b[1]}
    return {
        "title": view.title,
        "dimensions": view.mesh.dim,
        "boundaries": table,
        "warnings": [],
        "spaces": {
            s: {"heat_flow": 1.0, "heat_flow_low": 0.9, "heat_flow_high": 1.1, "temperature": t} for s, t in air.items()
        },
        "coupling": {"bay": {"freezer": 0.25}},
        "bodies": {b.name: {"volume": 0.5, "mean_temperature": 3.0} for b in view.mesh.bodies},
        "probes": {n: {"temperature": 1.5, "at": (np.asarray(p) * 1e3).tolist()} for n, p in view.probes.items()},
    }


def everywhere(x):
    return np.ones(len(x), dtype=bool)


def _near(axis, value):
    return lambda x: np.abs(x[:, axis] - value) < 1e-9


def square(n=24):
    """A square column of foam with a steel bar; warm below, cold elsewhere."""
    axis = np.linspace(0, 0.4, n + 1)
    bar = lambda x: (np.abs(x[:, 0] - 0.2) < 0.034) & (x[:, 1] < 0.3)  # noqa: E731
    return solved(
        (axis, axis),
        [("insulating foam", 0.025, everywhere), ("steel bar", 20.0, bar)],
        [
            ("cold faces", "freezer", 8.0, -20.0, everywhere),
            ("warm face", "bay", 7.7, 25.0, _near(1, 0.0)),
            ("symmetry", None, 0.0, 0.0, _near(0, 0.0)),
        ],
        title="Square column with a bar",
        probes={"bar head": (0.2, 0.0), "mid": (0.2, 0.2)},
    )


def panel2d(length=4.0, skin=0.0005, n=120):
    """A long thin panel with steel skins and a joint profile: 1:40."""
    across = np.concatenate(
        [[0, skin / 2, skin], np.linspace(skin, 0.1 - skin, 14)[1:-1], [0.1 - skin, 0.1 - skin / 2, 0.1]]
    )
    along = np.unique(
        np.concatenate([np.linspace(0, length, n), length / 2 + np.array([-0.002, -0.001, 0, 0.001, 0.002])])
    )
    rib = lambda x: np.abs(x[:, 0] - length / 2) < 0.0011  # noqa: E731
    return solved(
        (along, across),
        [
            ("PIR foam", 0.025, everywhere),
            ("joint profile, steel", 50.0, rib),
            ("skin, cold side", 50.0, lambda x: x[:, 1] < skin),
            ("skin, warm side", 50.0, lambda x: x[:, 1] > 0.1 - skin),
        ],
        [
            ("ends", None, 0.0, 0.0, everywhere),
            ("cold face", "freezer", 8.0, -20.0, _near(1, 0.0)),
            ("warm face", "bay", 7.7, 25.0, _near(1, 0.1)),
        ],
        title="Panel 4 m long with 0.5 mm skins and a through joint",
    )


def tall_panel(n=80):
    """The same kind of panel, upright, 50:1."""
    up = np.linspace(0, 5.0, n)
    return solved(
        (np.linspace(0, 0.1, 9), up),
        [("wool", 0.04, everywhere), ("rail", 15.0, lambda x: np.abs(x[:, 1] - 2.5) < 0.1)],
        [
            ("top and bottom", None, 0.0, 0.0, everywhere),
            ("cold face", "freezer", 8.0, -20.0, _near(0, 0.0)),
            ("warm face", "bay", 7.7, 25.0, _near(0, 0.1)),
        ],
        title="Upright wall 5 m high",
    )


def channel(n=32):
    """A square channel: one hole, heat from inside to outside."""
    axis = np.linspace(0, 0.8, n + 1)
    inside = lambda x: np.all(np.abs(x - 0.4) < 0.2 + 1e-6, axis=1)  # noqa: E731
    return solved(
        (axis, axis),
        [("foam", 0.03, everywhere)],
        [("outer faces", "hall", 8.0, 20.0, everywhere), ("inner faces", "duct", 10.0, -10.0, inside)],
        title="Square channel",
        remove=inside,
    )


def pipe(n=20):
    """An axisymmetric pipe penetration through a wall."""
    r = np.concatenate([np.linspace(0, 0.03, 7), np.linspace(0.03, 0.5, 22)[1:]])
    z = np.linspace(-0.1, 0.3, 41)
    wall = lambda x: (x[:, 1] > 0) & (x[:, 1] < 0.2)  # noqa: E731
    return solved(
        (r, z),
        [("wall foam", 0.03, everywhere), ("pipe", 15.0, lambda x: x[:, 0] < 0.03)],
        [
            ("rim", None, 0.0, 0.0, everywhere),
            ("cold side", "freezer", 8.0, -20.0, lambda x: (x[:, 1] < 0.1) & (x[:, 0] < 0.499)),
            ("warm side", "bay", 7.7, 25.0, lambda x: (x[:, 1] > 0.1) & (x[:, 0] < 0.499)),
        ],
        title="Pipe penetration",
        remove=lambda x: ~wall(x) & (x[:, 0] > 0.03),
        axisymmetric=True,
        probes={"pipe end": (0.0, 0.3)},
    )


def bolted_panel(n=16):
    """A 3D freezer panel with a bolt (square here) through it."""
    side = np.unique(np.concatenate([np.linspace(0, 0.3, n + 1), 0.15 + np.array([-0.012, -0.006, 0.006, 0.012])]))
    z = np.linspace(0, 0.1, 9)
    bolt = lambda x: np.all(np.abs(x[:, :2] - 0.15) < 0.0061, axis=1)  # noqa: E731
    return solved(
        (side, side, z),
        [("panel", 0.025, everywhere), ("bolt", 17.0, bolt)],
        [
            ("cut planes", None, 0.0, 0.0, everywhere),
            ("warm face", "bay", 7.7, 25.0, _near(2, 0.1)),
            ("cold face", "freezer", 8.0, -20.0, _near(2, 0.0)),
        ],
        title="Freezer wall panel with through-bolt",
        probes={"bolt head": (0.15, 0.15, 0.1)},
    )


def box_corner(n=14):
    """An eighth of a box: three walls meet; the cavity is the freezer."""
    axis = np.linspace(0, 0.5, n + 1)
    wall = 0.5 * 3 / n
    inner = lambda x: np.all(x > wall + 1e-9, axis=1)  # noqa: E731
    facing_in = lambda x: np.all(x > wall - 1e-9, axis=1) & np.any(np.abs(x - wall) < 1e-9, axis=1)  # noqa: E731
    return solved(
        (axis, axis, axis),
        [("foam", 0.03, everywhere), ("edge frame", 2.0, lambda x: (x[:, 0] < wall) & (x[:, 1] < wall))],
        [
            ("symmetry planes", None, 0.0, 0.0, everywhere),
            ("outer faces", "hall", 8.0, 20.0, lambda x: np.any(x < 1e-9, axis=1)),
            ("inner faces", "freezer", 8.0, -20.0, facing_in),
        ],
        title="Corner of a box with an edge frame",
        remove=inner,
    )
