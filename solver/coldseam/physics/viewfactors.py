"""View factors of surfaces that see each other, and the radiation they exchange.

In a cross-section by Hottel's crossed strings: two segments a-b and c-d that run round a cavity in the same sense have

    A_1 F_12 = (|ac| + |bd| - |bc| - |da|) / 2

exactly, if nothing stands between them; where a cavity is not convex, the part of each pair that sees the other is
found by rays between pieces of them. In three dimensions the factor from a point to a triangle is exact (Lambert's sum
over its edges, Hottel and Sarofim 1967) and averaged over points of a patch; cavities must be convex there.

Reciprocity ``A_i F_ij = A_j F_ji`` and closure ``sum_j F_ij = 1`` are enforced by scaling the symmetric matrix A F
to its row sums (Sinkhorn 1964); how much that changed is told.

Grey diffuse surfaces exchange ``q = -R sigma T^4`` into the surfaces, ``R = E (I - F (I - (I - E) F)^-1 E)`` with E the
emissivities (radiosity: Incropera, section 13.3). A R is symmetric and its rows add up to 0.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from coldseam.physics.radiation import KELVIN, STEFAN_BOLTZMANN

PIECES = 3
"""Pieces of a segment in the tests for what stands between two segments."""
SWEEPS = 200
FLAT = 1e-9
CHUNK = 2_000_000


@dataclass(frozen=True, kw_only=True, eq=False)
class Factors:
    """View factors of the patches of a cavity.

    Parameters
    ----------
    factors
        F, (n, n), closed and reciprocal.
    area
        m² (in a cross-section m²/m), (n,).
    defect
        Largest distance of a row sum from 1 before closure was enforced.
    """

    factors: np.ndarray
    area: np.ndarray
    defect: float


def crossed_strings(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Return A F of segments round a cavity in a cross-section, m, (n, n), not yet closed.

    Parameters
    ----------
    start, end
        Ends of the segments, (n, 2), m, all in the same sense round the cavity, the cavity on their right.
    """

    def length(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        return np.linalg.norm(a[:, None] - b[None], axis=2)

    strings = 0.5 * (length(start, start) + length(end, end) - length(end, start) - length(start, end))
    seen = _seen(start, end)
    np.fill_diagonal(strings, 0.0)
    return np.maximum(strings, 0.0) * seen


def _seen(start: np.ndarray, end: np.ndarray) -> np.ndarray:
    """Return what part of each pair of segments sees the other, (n, n)."""
    step = end - start
    normal = np.column_stack([step[:, 1], -step[:, 0]])
    size = float(np.ptp(np.concatenate([start, end]), axis=0).max())
    before = _before(start, end, start, normal, FLAT * size)
    if before.all():
        return np.ones((len(start), len(start)))  # convex: nothing can stand between
    part = (np.arange(PIECES) + 0.5) / PIECES
    points = start[:, None] + part[None, :, None] * step[:, None]
    seen = np.zeros((len(start), len(start)))
    for i in range(len(start)):  # over the patches of a cavity, a few hundred at most
        seen[i] = _rays(points[i], points, normal[i], normal, start, end, i)
    return seen


def _before(start, end, origin, normal, slack) -> np.ndarray:
    """Return which segments lie wholly before which, (n, n)."""
    lengths = np.linalg.norm(normal, axis=1)
    first = np.einsum("ik,ijk->ij", normal, start[None] - origin[:, None]) / lengths[:, None]
    second = np.einsum("ik,ijk->ij", normal, end[None] - origin[:, None]) / lengths[:, None]
    return (first >= -slack) & (second >= -slack)


def _rays(mine, points, normal, normals, start, end, own) -> np.ndarray:
    """Return the part of the rays from one segment's points (m, 2) to all points (n, m, 2) that nothing stops, (n,)."""
    ray = points[None] - mine[:, None, None]  # (m, n, m, 2)
    facing = (ray @ normal > 0) & (np.einsum("anbk,nk->anb", ray, normals) < 0)
    step = end - start
    cross = ray[..., None, 0] * step[:, 1] - ray[..., None, 1] * step[:, 0]  # (m, n, m, k)
    offset = start - mine[:, None]  # (m, k, 2)
    with np.errstate(divide="ignore", invalid="ignore"):
        along = (offset[..., 0] * step[:, 1] - offset[..., 1] * step[:, 0])[:, None, None] / cross
        on = (offset[:, None, None, :, 0] * ray[..., None, 1] - offset[:, None, None, :, 1] * ray[..., None, 0]) / cross
    stopped = (along > 1e-9) & (along < 1 - 1e-9) & (on >= 0.0) & (on <= 1.0) & (np.abs(cross) > 0)
    targets = np.arange(len(start))
    stopped[:, targets, :, targets] = False
    stopped[..., own] = False
    return (facing & ~stopped.any(axis=-1)).mean(axis=(0, 2))


def point_to_triangles(points: np.ndarray, normals: np.ndarray, corners: np.ndarray) -> np.ndarray:
    """Return the view factors from points with unit normals, (m, 3), to triangles, (n, 3, 3), shape (m, n).

    Exact where the triangle lies wholly before the point's plane and faces it; triangles behind give 0.
    """
    to = corners[None] - points[:, None, None]  # (m, n, 3, 3)
    size = np.linalg.norm(to, axis=3, keepdims=True)
    unit = to / np.maximum(size, 1e-300)
    total = np.zeros(to.shape[:2])
    for a, b in ((0, 1), (1, 2), (2, 0)):
        cross = np.cross(unit[:, :, a], unit[:, :, b])
        sine = np.linalg.norm(cross, axis=2)
        angle = np.arctan2(sine, np.einsum("mnk,mnk->mn", unit[:, :, a], unit[:, :, b]))
        total += angle / np.maximum(sine, 1e-300) * np.einsum("mnk,mk->mn", cross, normals)
    return np.maximum(-total / (2.0 * np.pi), 0.0)


def is_convex(points: np.ndarray, normals: np.ndarray, corners: np.ndarray) -> bool:
    """Return whether all corners, (k, dim), lie before all planes given by points and unit normals, (n, dim)."""
    slack = 1e-6 * float(np.ptp(corners, axis=0).max())
    rows = max(1, CHUNK // len(corners))
    return all(
        bool(
            (
                normals[i : i + rows] @ corners.T - (normals[i : i + rows] * points[i : i + rows]).sum(axis=1)[:, None]
                >= -slack
            ).all()
        )
        for i in range(0, len(points), rows)
    )


def closed(exchange: np.ndarray, area: np.ndarray) -> Factors:
    """Return view factors from A F, m², (n, n), and areas, m², (n,), made reciprocal and closed.

    Examples
    --------
    >>> made = closed(np.array([[0.1, 0.88], [0.9, 0.12]]), np.array([1.0, 1.0]))
    >>> made.factors.sum(axis=1).round(9).tolist()
    [1.0, 1.0]
    """
    both = 0.5 * (exchange + exchange.T)
    defect = float(np.abs(both.sum(axis=1) / area - 1.0).max())
    for _ in range(SWEEPS):
        sums = both.sum(axis=1)
        scale = np.sqrt(area / np.maximum(sums, 1e-300))
        both = scale[:, None] * both * scale
        if np.abs(both.sum(axis=1) / area - 1.0).max() < 1e-13:
            break
    return Factors(factors=both / area[:, None], area=area, defect=defect)


def exchange_matrix(factors: np.ndarray, emissivity: np.ndarray) -> np.ndarray:
    """Return R of the module text from view factors (n, n) and emissivities (n,), dimensionless, (n, n)."""
    n = len(emissivity)
    leaving = np.linalg.solve(np.eye(n) - (1.0 - emissivity)[:, None] * factors, np.diag(emissivity))
    return emissivity[:, None] * (np.eye(n) - factors @ leaving)


def net_flux(matrix: np.ndarray, temperature: np.ndarray) -> np.ndarray:
    """Return the heat flux into each patch, W/m², (n,), from R, (n, n), and temperatures in °C, (n,)."""
    t = temperature + KELVIN
    return -STEFAN_BOLTZMANN * (matrix @ t**4)
