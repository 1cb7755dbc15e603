"""Tensor-grid meshes and small cases over time, so that the stepper's tests need no mesher."""

from __future__ import annotations

import numpy as np

from coldseam.case.read import loads
from coldseam.mesh.build import build_mesh
from coldseam.mesh.types import Mesh, MeshBody
from coldseam.solution.heatsystem import HeatSystem, heat_system
from coldseam.solution.stepper import State
from coldseam.solution.transient import History, Transient


def grid(*axes, bodies=("slab",), material=("stuff",), body_of=None, axisymmetric=False) -> Mesh:
    """Return a simplex mesh over a tensor grid (m); ``body_of`` maps cell centres (n, dim) to bodies."""
    dim = len(axes)
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, dim)
    shape = tuple(len(a) for a in axes)
    number = np.arange(len(points)).reshape(shape)
    corner = {}
    for bits in np.ndindex(*(2,) * dim):
        corner[bits] = number[tuple(slice(b, n - 1 + b) for b, n in zip(bits, shape, strict=True))].ravel()
    if dim == 2:
        paths = [((0, 0), (1, 0), (1, 1)), ((0, 0), (1, 1), (0, 1))]
    else:  # the six tetrahedra along the cube's diagonal (Kuhn)
        from itertools import permutations

        paths = []
        for order in permutations(range(3)):
            at, path = [0, 0, 0], [(0, 0, 0)]
            for axis in order:
                at[axis] = 1
                path.append(tuple(at))
            paths.append(tuple(path))
    cells = np.vstack([np.column_stack([corner[bits] for bits in path]) for path in paths])
    owner = np.zeros(len(cells), dtype=int) if body_of is None else body_of(points[cells].mean(axis=1))
    named = tuple(MeshBody(name=n, material=m, source=i) for i, (n, m) in enumerate(zip(bodies, material, strict=True)))
    return build_mesh(points, cells, owner, named, axisymmetric=axisymmetric)


SLAB = """
title = "slab"
[model]
dimensions = 2
accuracy = {accuracy}
[time]
duration = {duration}
start = {start}
record_every = {record}
tolerance = {tolerance}
[spaces.air]
temperature = {air}
film = {film}
[materials.stuff]
conductivity = {k}
density = {rho}
specific_heat = {c}
[[body]]
name = "slab"
material = "stuff"
box = {{ from = [0, 0], to = [{length}, {width}] }}
[[boundary]]
name = "face"
on = {{ plane = {{ x = {length} }} }}
space = "air"
[[boundary]]
name = "rest"
on = "rest"
adiabatic = true
[[probe]]
name = "centre"
at = [0, {half}]
[[probe]]
name = "surface"
at = [{length}, {half}]
"""


def slab_text(**change) -> str:
    """Return the case text of a slab with a film on its right face; lengths mm."""
    values = {
        "accuracy": 0.01, "duration": 1.0, "start": 1, "record": 0.05, "tolerance": 1e-4, "air": 0, "film": 1,
        "k": 1, "rho": 1, "c": 1, "length": 1000, "width": 100,
    } | change  # fmt: skip
    return SLAB.format(half=values["width"] / 2, **values)


def run_on(mesh: Mesh, text: str, start=None, **options) -> History:
    """Run a case text on a mesh from a temperature (°C) and return its history."""
    transient = stepping(mesh, text, start, **options)
    while transient.status == "running":
        transient.step()
    return transient.result()


def stepping(mesh: Mesh, text: str, start=None, **options) -> Transient:
    """Return the run of a case text on a mesh, not yet begun."""
    system = heat_system(loads(text), mesh)
    return Transient(system, first_state(system, start), **options)


def first_state(system: HeatSystem, start=None) -> State:
    """Return the state at the start: one temperature, and the spaces' own."""
    value = system.case.time.start if start is None else start
    spaces = system.spaces
    y = [value if spaces.floating(s).start is None else spaces.floating(s).start for s in range(len(spaces.names))]
    y += [
        y[s] if spaces.floating(s).goods[g].start is None else spaces.floating(s).goods[g].start
        for s, g in spaces.goods
    ]
    return State(
        time=0.0,
        temperature=np.full(system.mesh.n_nodes, value, dtype=float) if np.ndim(value) == 0 else value,
        y=np.array(y, dtype=float),
        running=np.zeros(len(spaces.names), dtype=np.int64),
    )
