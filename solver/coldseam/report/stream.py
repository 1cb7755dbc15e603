r"""The stream function of a plane heat flow: lines with the same heat between every two neighbours.

Without heat sources the flux q has no divergence, so a stream function psi exists with
q = (d psi/dy, -d psi/dx): its contour lines run along q and between two lines at psi and
psi + d flows d W per metre of depth. The flux of linear elements is free of divergence only in the
mean over control volumes; psi is therefore the linear field that minimises

    sum over cells of A w |q - rot psi|^2,      w = |grad T| / |q|  (1/k, the energy norm),

a single sparse solve with the matrix of 1/k on the same triangles. In an axisymmetric section
2 pi r q takes the place of q, and the strips carry W for the whole turn.

A hole with a net heat flow Q makes psi grow by Q on every turn round it. Q times the angle about a
point in the hole, over 2 pi, grows by just that and has a single-valued gradient, which is taken
out of q before the solve and put back cell by cell afterwards. Lines join up across the angle's
jump when Q is a whole number of strips.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.report.plane import Section, chains, outline_edges


@dataclass(frozen=True, kw_only=True, eq=False)
class StreamFunction:
    """psi at each cell's corners, and how well its lines follow the flux.

    Parameters
    ----------
    values
        W/m of depth (axisymmetric: W), shape (m, 3); neighbours agree up to whole ``periods``.
    periods
        Net heat flow into the solid from every hole, same unit, shape (n_holes,).
    misfit
        |q - rot psi| / |q| in the energy norm: how coarse the mesh is for the purpose.
    generated
        Share of the heat that arises (or vanishes) inside: sum of |nodal imbalance| of interior nodes over
        half that of the boundary's. Linear elements balance every interior node, so 0 without sources.
    step
        Heat between two neighbouring lines, same unit.
    """

    values: np.ndarray
    periods: np.ndarray
    misfit: float
    generated: float
    step: float


def stream_function(
    section: Section, *, axisymmetric: bool = False, same: np.ndarray | None = None, strips: int = 20
) -> StreamFunction:
    """Return the stream function of a section's flux.

    Parameters
    ----------
    section
        With temperature and flux.
    axisymmetric
        The points are (r, z).
    same
        For every node the node it coincides with (contacts double nodes), shape (n,).
    strips
        About how many strips the heat is divided into.
    """
    points = section.points
    cells = section.cells if same is None else same[section.cells]
    centre = points[cells].mean(axis=1)
    flux = section.flux * (2 * np.pi * centre[:, :1] if axisymmetric else 1.0)
    gradient, area = _gradients(points, cells)
    weight = _weights(section, gradient, flux)
    nodal_flow = _nodal_flows(cells, gradient, area, flux)
    holes, periods = _holes(points, cells, nodal_flow)
    angle, angle_flux = _angles(points, cells, centre, holes, periods)
    target = flux - angle_flux
    nodal = _least_squares(cells, gradient, area * weight, target, len(points))
    residual = target - _rot(np.einsum("mki,mk->mi", gradient, nodal[cells]))
    misfit = np.sqrt(np.sum(area * weight * (residual**2).sum(1)) / max(_energy(area * weight, flux), 1e-300))
    span = float(np.ptp(nodal[cells])) if len(periods) == 0 else max(float(np.abs(periods).max()), np.ptp(nodal[cells]))
    step = _step(span, periods, strips)
    if len(periods) > 1 and step > 0:  # several holes: whole strips round each, so that no line ends in mid-air
        angle, _ = _angles(points, cells, centre, holes, np.round(periods / step) * step)
    return StreamFunction(
        values=nodal[cells] + angle,
        periods=periods,
        misfit=float(misfit),
        generated=_generated(cells, nodal_flow),
        step=step,
    )


def _step(span: float, periods: np.ndarray, strips: int) -> float:
    from coldseam.report.style import round_step

    if span <= 0 or not np.isfinite(span):
        return 0.0
    largest = float(np.abs(periods).max()) if len(periods) else 0.0
    if largest > 1e-3 * span:
        return largest / max(1, round(strips * largest / span))
    return round_step(span / strips)


def _rot(gradient: np.ndarray) -> np.ndarray:
    return np.stack([gradient[:, 1], -gradient[:, 0]], axis=1)


def _gradients(points: np.ndarray, cells: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the gradients of the corner functions, shape (m, 3, 2), and the areas."""
    corner = points[cells]
    opposite = corner[:, [2, 0, 1]] - corner[:, [1, 2, 0]]
    area = 0.5 * (opposite[:, 1, 0] * opposite[:, 2, 1] - opposite[:, 1, 1] * opposite[:, 2, 0])
    area = np.where(area <= 0, np.finfo(float).tiny, area)
    return np.stack([-opposite[:, :, 1], opposite[:, :, 0]], axis=2) / (2 * area)[:, None, None], area


def _weights(section: Section, gradient: np.ndarray, flux: np.ndarray) -> np.ndarray:
    """Return 1/k of the cells, up to a factor, from what is in the view: |grad T| / |q|."""
    slope = np.linalg.norm(np.einsum("mki,mk->mi", gradient, section.temperature[section.cells]), axis=1)
    size = np.linalg.norm(flux, axis=1)
    good = (slope > 1e-9 * slope.max()) & (size > 1e-9 * size.max()) if len(size) and size.max() > 0 else size > 0
    if not good.any():
        return np.ones(len(size))
    ratio = np.where(good, slope / np.where(good, size, 1.0), np.nan)
    mean = np.full(section.cell_body.max() + 1, np.nan)
    for body in np.unique(section.cell_body[good]):
        mean[body] = np.median(ratio[good & (section.cell_body == body)])
    mean = np.where(np.isfinite(mean), mean, np.nanmedian(ratio))
    ratio = np.where(good, ratio, mean[section.cell_body])
    return np.clip(ratio / np.median(ratio), 1e-6, 1e6)


def _nodal_flows(cells, gradient, area, flux) -> np.ndarray:
    """Return the heat that leaves the solid at every node (zero inside, without sources)."""
    flow = np.einsum("m,mki,mi->mk", area, gradient, flux)
    return np.bincount(cells.ravel(), weights=flow.ravel())


def _generated(cells, nodal: np.ndarray) -> float:
    edges, _ = outline_edges(cells, np.zeros(len(cells), dtype=np.int64))
    outer = np.zeros(len(nodal), dtype=bool)
    outer[edges] = True
    size = np.abs(nodal)
    return float(size[~outer].sum() / max(0.5 * size[outer].sum(), 1e-300))


def _energy(weight: np.ndarray, flux: np.ndarray) -> float:
    return float(np.sum(weight * (flux**2).sum(axis=1)))


def _least_squares(cells, gradient, weight, target, n_nodes) -> np.ndarray:
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components
    from scipy.sparse.linalg import splu

    local = np.einsum("m,mki,mli->mkl", weight, gradient, gradient)
    rows, columns = np.repeat(cells, 3, axis=1).ravel(), np.tile(cells, (1, 3)).ravel()
    matrix = coo_matrix((local.ravel(), (rows, columns)), shape=(n_nodes, n_nodes)).tocsr()
    turned = np.stack([-target[:, 1], target[:, 0]], axis=1)  # rot psi = q  <=>  grad psi = turned q
    load = np.einsum("m,mki,mi->mk", weight, gradient, turned)
    right = np.bincount(cells.ravel(), weights=load.ravel(), minlength=n_nodes)
    used = np.zeros(n_nodes, dtype=bool)
    used[cells] = True
    _, part = connected_components(matrix, directed=False)
    _, pinned = np.unique(part, return_index=True)  # psi is free up to a constant in every part
    free = used.copy()
    free[pinned] = False
    psi = np.zeros(n_nodes)
    if free.any():
        inner = matrix[free][:, free].tocsc()
        psi[free] = splu(inner, permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True}).solve(right[free])
    return psi


def _holes(points, cells, nodal: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return a point inside every hole with a net heat flow, shape (h, 2), and that flow, into the solid.

    The flow comes from the balances of the hole's nodes, which are exact for linear elements, not
    from the flux in the cells along it.
    """
    edges, _ = outline_edges(cells, np.zeros(len(cells), dtype=np.int64))
    loops = chains(edges)
    found, flows = [], []
    for loop in loops if len(loops) > 1 else []:
        start, end = points[edges[loop, 0]], points[edges[loop, 1]]
        if np.sum(start[:, 0] * end[:, 1] - end[:, 0] * start[:, 1]) >= 0:
            continue  # an outer outline runs counterclockwise
        flow = -float(nodal[edges[loop, 0]].sum())
        if abs(flow) > 1e-3 * np.abs(nodal).sum():
            found.append(_point_inside(np.vstack([start, end[-1:]])))
            flows.append(flow)
    return np.array(found).reshape(-1, 2), np.array(flows)


def _point_inside(loop: np.ndarray) -> np.ndarray:
    """Return a point inside a closed polygon: the middle of the widest chord halfway up."""
    heights = np.unique(loop[:, 1])
    gap = np.argmax(np.diff(heights))
    level = 0.5 * (heights[gap] + heights[gap + 1])
    a, b = loop[:-1], loop[1:]
    crosses = (a[:, 1] < level) != (b[:, 1] < level)
    a, b = a[crosses], b[crosses]
    x = np.sort(a[:, 0] + (level - a[:, 1]) / (b[:, 1] - a[:, 1]) * (b[:, 0] - a[:, 0]))
    widest = np.argmax(x[1::2] - x[::2])
    return np.array([0.5 * (x[2 * widest] + x[2 * widest + 1]), level])


def _angles(points, cells, centre, holes, periods) -> tuple[np.ndarray, np.ndarray]:
    """Return the many-valued part of psi at the corners, (m, 3), and its exact flux at the centres."""
    value = np.zeros(cells.shape)
    flux = np.zeros((len(cells), 2))
    for hole, flow in zip(holes, periods, strict=True):
        corner = points[cells] - hole
        angle = np.arctan2(corner[:, :, 1], corner[:, :, 0])
        middle = np.arctan2(centre[:, 1] - hole[1], centre[:, 0] - hole[0])
        turn = np.remainder(angle - middle[:, None] + np.pi, 2 * np.pi) - np.pi
        value += flow / (2 * np.pi) * (middle[:, None] + turn)
        gradient, _ = _gradients(points, cells)
        flux += flow / (2 * np.pi) * _rot(np.einsum("mki,mk->mi", gradient, turn))
    return value, flux
