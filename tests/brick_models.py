"""Models on grids of bricks, and scikit-fem's independent answers to them.

A :class:`Model` says what lies where by functions of places ``x``, shape (dim, n), in metres; :func:`bricks` makes
meshes of it with scikit-fem's generators, :func:`prove_on` runs our networks on such a mesh, and
:func:`independent_flows` solves the same model with scikit-fem's quadratic elements.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pyamg
import skfem
from scipy import sparse
from scipy.sparse.linalg import spsolve
from skfem.helpers import dot, grad, mul

from coldseam.mesh.build import build_mesh
from coldseam.mesh.contacts import open_contacts
from coldseam.mesh.types import Mesh, MeshBody
from coldseam.solution.bounds import Bounds, prove
from coldseam.solution.respond import Response, respond
from coldseam.volumes.conditions import Conditions, Terminal
from coldseam.volumes.nodes import node_network, node_operator

TIGHT = 1e-13
GRADING = 2.5
Where = Callable[[np.ndarray], np.ndarray]
TURN = 2.0 * np.pi


@dataclass(frozen=True, kw_only=True)
class Model:
    """A steady conduction problem on unit bricks.

    Parameters
    ----------
    size
        Extent along each axis, m, whole numbers.
    body
        Body number at a place.
    conductivity
        Of each body, W/(m K): a number or a tensor (dim, dim).
    terminal
        Terminal number at the centre of an exterior facet, -1 where none.
    films
        Of each terminal, W/(m² K); inf: the surface itself has the temperature.
    temperatures
        Of each terminal, °C.
    hole
        Where there is nothing, or None.
    source, flux
        W/m³ in a body, by its number; W/m² into facets without terminal where ``fluxed``.
    sheet, sheet_conductance
        Which exterior facets carry a sheet, and its conductivity times thickness, W/K.
    contact
        Conductance of the contact between bodies 0 and 1, W/(m² K), or None.
    axisymmetric, origin
        The first coordinate is the radius and begins at ``origin``.
    """

    size: tuple[int, ...]
    conductivity: tuple
    terminal: Where
    films: tuple[float, ...]
    temperatures: tuple[float, ...]
    body: Where = lambda x: np.zeros(x.shape[1], dtype=int)
    hole: Where | None = None
    source: tuple[float, ...] = ()
    flux: float = 0.0
    fluxed: Where | None = None
    sheet: Where | None = None
    sheet_conductance: float = 0.0
    contact: float | None = None
    axisymmetric: bool = False
    origin: float = 0.0

    @property
    def dim(self) -> int:
        """Number of space dimensions."""
        return len(self.size)

    @property
    def has_load(self) -> bool:
        """Whether heat enters other than through terminals."""
        return bool(any(self.source) or self.flux)

    @property
    def state(self) -> np.ndarray:
        """Terminal temperatures, and 1 for the loads where there are any."""
        return np.array([*self.temperatures, *([1.0] if self.has_load else [])])


def bricks(model: Model, per_metre: int, *, refined: int = 0, seed: int | None = None, graded: bool = False):
    """Return a scikit-fem mesh of a model.

    Parameters
    ----------
    per_metre
        Bricks along each metre.
    refined
        Times that a random quarter of the cells is bisected.
    graded
        Smaller bricks towards all half metres, where every model has its edges.
    seed
        Also moves the inner nodes of the first grid that lie on no whole coordinate by up to 0.15 bricks.
    """
    axes = [np.linspace(0, s, s * per_metre + 1) for s in model.size]
    if graded:
        axes = [_graded(axis) for axis in axes]
    kind = skfem.MeshTri if model.dim == 2 else skfem.MeshTet
    mesh = kind.init_tensor(*axes)
    rng = np.random.default_rng(seed)
    if seed is not None:
        p = mesh.p.copy()
        inside = np.all(np.abs(p * 2 - np.round(p * 2)) > 1e-9, axis=0)
        p[:, inside] += rng.uniform(-0.15, 0.15, (model.dim, inside.sum())) / per_metre
        mesh = kind(p, mesh.t)
    if model.hole is not None:
        mesh = mesh.remove_elements(np.flatnonzero(model.hole(mesh.p[:, mesh.t].mean(axis=1))))
    for _ in range(refined):
        mesh = mesh.refined(rng.choice(mesh.t.shape[1], max(mesh.t.shape[1] // 4, 1), replace=False))
    return kind(mesh.p + np.array([model.origin, *[0.0] * (model.dim - 1)])[:, None], mesh.t)


def _graded(axis: np.ndarray) -> np.ndarray:
    """Draw coordinates towards whole halves: within each half metre t -> t^p/(t^p + (1 - t)^p)."""
    whole, t = np.divmod(np.round(2.0 * axis, 12), 1.0)
    return 0.5 * (whole + t**GRADING / (t**GRADING + (1.0 - t) ** GRADING))


def _places(model: Model, points: np.ndarray) -> np.ndarray:
    """Return grid coordinates (dim, n) of points (n, dim) or (dim, n, ...) in metres from the grid's corner."""
    return points - np.array([model.origin, *[0.0] * (model.dim - 1)]).reshape(-1, 1)


def mesh_of(model: Model, grid) -> Mesh:
    """Return our mesh of a scikit-fem mesh, contacts opened."""
    body = model.body(_places(model, grid.p[:, grid.t].mean(axis=1)))
    bodies = tuple(MeshBody(name=f"b{n}", material=f"m{n}", source=n) for n in range(len(model.conductivity)))
    mesh = build_mesh(grid.p.T, grid.t.T, body, bodies, axisymmetric=model.axisymmetric)
    if model.contact is None:
        return mesh
    first, second = (np.arange(len(bodies)) == n for n in (0, 1))
    return open_contacts(mesh, [(first, second)])


def conditions_of(model: Model, mesh: Mesh) -> Conditions:
    """Return what acts on a mesh of a model."""
    centres = _places(model, mesh.points[mesh.facets].mean(axis=1).T)
    terminal = model.terminal(centres)
    films = np.array(model.films)
    film = np.where(terminal >= 0, np.where(np.isfinite(films), films, 0.0)[terminal], 0.0)
    tensors = np.array([k * np.eye(model.dim) if np.ndim(k) == 0 else k for k in model.conductivity], dtype=float)
    scalars = np.trace(tensors, axis1=1, axis2=2) / model.dim
    isotropic = all(np.ndim(k) == 0 for k in model.conductivity)
    sheet = np.zeros(len(mesh.facets), dtype=bool) if model.sheet is None else model.sheet(centres)
    fluxed = np.zeros(len(mesh.facets), dtype=bool) if model.fluxed is None else model.fluxed(centres)
    source = np.array(model.source or [0.0] * len(scalars))
    return Conditions(
        conductivity=scalars[mesh.cell_body],
        tensors=None if isotropic else tensors / scalars[:, None, None],
        source=source[mesh.cell_body],
        film=film,
        flux=model.flux * fluxed,
        terminal=terminal,
        terminals=tuple(
            Terminal(boundaries=(n,), temperature=t, fixed=bool(np.isinf(h)))
            for n, (t, h) in enumerate(zip(model.temperatures, model.films, strict=True))
        ),
        sheet_facets=mesh.facets[sheet],
        sheet_conductance=np.full(int(sheet.sum()), model.sheet_conductance),
        link_conductance=np.empty(0) if mesh.links is None else np.full(len(mesh.links), model.contact),
        clashes=(),
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class Proof:
    """A model solved and proven on one mesh."""

    mesh: Mesh
    given: Conditions
    weights: np.ndarray
    nodes: Response
    bounds: Bounds


def solved_on(model: Model, grid, tolerance: float = TIGHT):
    """Return (mesh, conditions, weights, node response) of a model on a scikit-fem mesh."""
    mesh = mesh_of(model, grid)
    given = conditions_of(model, mesh)
    operator, weights = node_operator(mesh, given)
    return mesh, given, weights, respond(node_network(mesh, given, operator), mesh.dim, tolerance)


def prove_on(model: Model, grid) -> Proof:
    """Solve and prove a model on a scikit-fem mesh."""
    mesh, given, weights, nodes = solved_on(model, grid)
    return Proof(mesh=mesh, given=given, weights=weights, nodes=nodes, bounds=prove(mesh, given, weights, nodes))


def independent_flows(model: Model, per_metre: int, elements=None) -> np.ndarray:
    """Return each terminal's heat flow into the solid from scikit-fem, W, with quadratic elements unless given.

    Flows are read from the energy of the unit fields, so their error is the square of the field's.
    """
    triangles = model.dim == 2
    grid, joints = _cut(model, bricks(model, per_metre, graded=True))
    element = elements or (skfem.ElementTriP2() if triangles else skfem.ElementTetP2())
    basis = skfem.Basis(grid, element)
    matrix, loads = _conduction(model, basis)
    matrix = matrix + _contact_matrix(model, joints, grid, element)
    form = _Quadratic.of(model, grid, element, matrix, loads)
    return form.flows(model.state)


def _radius(model: Model, x):
    return TURN * x[0] if model.axisymmetric else 1.0


def _conduction(model: Model, basis):
    dim = model.dim
    tensors = np.array([k * np.eye(dim) if np.ndim(k) == 0 else k for k in model.conductivity], dtype=float)
    source = np.array(model.source or [0.0] * len(tensors))

    def bodies(x):
        centres = x.mean(axis=2)
        return np.repeat(model.body(_places(model, centres))[:, None], x.shape[2], axis=1)

    def stiffness(u, v, w):
        k = np.moveaxis(tensors[bodies(w.x)], (-2, -1), (0, 1))
        return _radius(model, w.x) * dot(mul(k, grad(u)), grad(v))

    def load(v, w):
        return _radius(model, w.x) * source[bodies(w.x)] * v

    return skfem.BilinearForm(stiffness).assemble(basis), skfem.LinearForm(load).assemble(basis)


def _cut(model: Model, grid):
    """Return a grid with the nodes between bodies 0 and 1 doubled for a contact, and the facets on its two sides.

    Not ours: the cells of body 1 simply get nodes of their own, in the same order, so that facets match in pairs.
    """
    if model.contact is None:
        return grid, None
    second = model.body(_places(model, grid.p[:, grid.t].mean(axis=1))) == 1
    joint = [n for n, (a, b) in enumerate(grid.f2t.T) if b >= 0 and second[a] != second[b]]
    ends = np.sort(grid.facets[:, joint], axis=0)
    cells = np.where(second, grid.t + grid.p.shape[1], grid.t)
    used, cells = np.unique(cells, return_inverse=True)
    cells = cells.reshape(grid.t.shape)
    cut = type(grid)(np.tile(grid.p, 2)[:, used], cells)
    number = {tuple(facet): n for n, facet in enumerate(np.sort(cut.facets, axis=0).T)}
    sides = [np.searchsorted(used, ends + shift) for shift in (0, grid.p.shape[1])]
    return cut, [np.array([number[tuple(facet)] for facet in side.T]) for side in sides]


def _contact_matrix(model: Model, joints, grid, element):
    n = skfem.Basis(grid, element).N
    if joints is None:
        return sparse.csr_matrix((n, n))
    sides = [skfem.FacetBasis(grid, element, facets=numbers) for numbers in joints]
    assert np.allclose(sides[0].global_coordinates(), sides[1].global_coordinates())
    form = skfem.BilinearForm(lambda u, v, w: _radius(model, w.x) * model.contact * u * v)
    a, b = sides
    return form.assemble(a, a) + form.assemble(b, b) - form.assemble(a, b) - form.assemble(b, a)


def _solve(matrix, right: np.ndarray) -> np.ndarray:
    """Solve directly, or by pyamg where that would take long."""
    if matrix.shape[0] < 30_000:
        return spsolve(matrix.tocsc(), right).reshape(right.shape)
    solver = pyamg.smoothed_aggregation_solver(matrix)
    return np.column_stack([solver.solve(b, tol=1e-11, accel="cg", maxiter=300) for b in right.T])


@dataclass(frozen=True, kw_only=True, eq=False)
class _Quadratic:
    """Energy of unit fields: ``u.A u - 2 u.B x + x.S x``; the last column of B and S is that of the loads."""

    form: np.ndarray

    @classmethod
    def of(cls, model: Model, grid, element, matrix, loads):
        basis = skfem.Basis(grid, element)
        facets = grid.boundary_facets()
        centres = _places(model, grid.p[:, grid.facets[:, facets]].mean(axis=1))
        if model.axisymmetric:
            off_axis = np.any(grid.p[0][grid.facets[:, facets]] > 1e-9, axis=0)
            facets, centres = facets[off_axis], centres[:, off_axis]
        terminal = model.terminal(centres)
        p = len(model.films)
        drive, own = np.zeros((basis.N, p + model.has_load)), np.zeros(p + model.has_load)
        fields, held = np.zeros_like(drive), np.zeros(basis.N, dtype=bool)

        def on(where):
            return skfem.FacetBasis(grid, element, facets=facets[where])

        for k, h in enumerate(model.films):
            at = on(terminal == k)
            if np.isinf(h):
                sites = basis.get_dofs(facets[terminal == k]).all()
                fields[sites, k], held[sites] = 1.0, True
                continue
            matrix = matrix + skfem.BilinearForm(lambda u, v, w, h=h: _radius(model, w.x) * h * u * v).assemble(at)
            drive[:, k] = skfem.LinearForm(lambda v, w, h=h: _radius(model, w.x) * h * v).assemble(at)
            own[k] = skfem.Functional(lambda w, h=h: _radius(model, w.x) * h + 0 * w.x[0]).assemble(at)
        if model.sheet is not None:
            kt = model.sheet_conductance

            def in_plane(u, v, w):
                along = dot(grad(u), grad(v)) - dot(grad(u), w.n) * dot(grad(v), w.n)
                return _radius(model, w.x) * kt * along

            matrix = matrix + skfem.BilinearForm(in_plane).assemble(on(model.sheet(centres)))
        if model.has_load:
            drive[:, -1] = loads
            if model.fluxed is not None:
                into = skfem.LinearForm(lambda v, w: _radius(model, w.x) * model.flux * v)
                drive[:, -1] += into.assemble(on(model.fluxed(centres)))
        free = np.flatnonzero(~held)
        matrix = matrix.tocsr()
        right = drive - matrix @ fields
        fields[free] = _solve(matrix[free][:, free].tocsr(), right[free])
        mixed = fields.T @ drive
        return cls(form=fields.T @ (matrix @ fields) - mixed - mixed.T + np.diag(own))

    def flows(self, state: np.ndarray) -> np.ndarray:
        """Return each terminal's heat flow into the solid, W."""
        return (self.form @ state)[: len(state)]
