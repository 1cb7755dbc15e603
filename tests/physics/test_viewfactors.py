"""View factors against exact formulas, and what grey surfaces exchange against layer formulas."""

import numpy as np
import pytest

from coldseam.physics import viewfactors as vf

SIGMA = 5.670374419e-8


def loop(corners, pieces):
    """Return starts and ends of segments along a polygon whose corners run clockwise (the inside on the right)."""
    corners = np.array(corners, float)
    part = np.arange(pieces) / pieces
    after = np.roll(corners, -1, axis=0)
    start = (corners[:, None] + part[None, :, None] * (after - corners)[:, None]).reshape(-1, 2)
    ends = (corners[:, None] + (part + 1 / pieces)[None, :, None] * (after - corners)[:, None]).reshape(-1, 2)
    return start, ends


def circle(radius, n, clockwise):
    t = np.linspace(0, 2 * np.pi, n + 1) * (-1 if clockwise else 1)
    p = radius * np.column_stack([np.cos(t), np.sin(t)])
    return p[:-1], p[1:]


def test_parallel_and_perpendicular_plates_in_a_section():
    """Opposite plates of width w at distance h: sqrt(1 + (h/w)²) - h/w; perpendicular ones
    (1 + h/w - sqrt(1 + (h/w)²)) / 2 (Incropera table 13.1)."""
    w, h = 2.0, 1.0
    start, end = loop([(0, 0), (0, h), (w, h), (w, 0)], 5)
    area = np.linalg.norm(end - start, axis=1)
    seen = vf.crossed_strings(start, end)
    assert seen.sum(axis=1) == pytest.approx(area, rel=1e-12)  # closes by itself
    factors = seen / area[:, None]
    top, bottom, left = slice(5, 10), slice(15, 20), slice(0, 5)
    assert factors[top, bottom].sum(axis=1).mean() == pytest.approx(np.hypot(1, h / w) - h / w, rel=1e-12)
    assert factors[bottom, left].sum(axis=1).mean() == pytest.approx((1 + h / w - np.hypot(1, h / w)) / 2, rel=1e-12)


def test_concentric_cylinders_hide_one_another():
    """Inner cylinder r sees the outer R alone: F_oi = r / R, and R sees itself by 1 - r / R (exact)."""
    outer, inner = circle(2.0, 48, True), circle(1.0, 36, False)
    start, end = (np.vstack(pair) for pair in zip(outer, inner, strict=True))
    area = np.linalg.norm(end - start, axis=1)
    made = vf.closed(vf.crossed_strings(start, end), area)
    assert made.defect < 0.01
    assert made.factors[48:, 48:].sum() == pytest.approx(0.0, abs=1e-12)
    assert made.factors[:48, 48:].sum(axis=1).mean() == pytest.approx(0.5, rel=5e-3)
    assert made.factors.sum(axis=1) == pytest.approx(np.ones(84), rel=1e-10)
    assert area[:, None] * made.factors == pytest.approx((area[:, None] * made.factors).T, abs=1e-12)


def square(n, turn, shift):
    """Return triangles (2 n², 3, 3) of the unit square, turned and shifted, seen from +z before turning."""
    g = np.arange(n + 1) / n
    rows = []
    for i in range(n):
        for j in range(n):
            a, b, c, d = ((g[p], g[q], 0.0) for p, q in ((i, j), (i + 1, j), (i + 1, j + 1), (i, j + 1)))
            rows += [(a, b, c), (a, c, d)]
    return np.array(rows) @ np.array(turn, float).T + np.array(shift, float)


def mean_factor(first, second):
    """Return the factor from triangles to others, averaged over the centres of the first."""
    normal = np.cross(first[:, 1] - first[:, 0], first[:, 2] - first[:, 0])
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    return vf.point_to_triangles(first.mean(axis=1), normal, second).sum(axis=1).mean()


def test_squares_in_space():
    """Unit cube: opposite faces .199825, adjacent .200044 (exact integrals, Howell's catalogue C-11, C-14)."""
    floor = square(8, np.eye(3), (0, 0, 0))
    ceiling = square(8, [[1, 0, 0], [0, -1, 0], [0, 0, -1]], (0, 1, 1))
    wall = square(8, [[0, 0, 1], [1, 0, 0], [0, 1, 0]], (0, 0, 0))
    assert mean_factor(floor, ceiling) == pytest.approx(0.199825, rel=1e-2)
    assert mean_factor(floor, wall) == pytest.approx(0.200044, rel=1e-2)
    # one point is exact: from the middle of the floor to the ceiling 4/pi asin-form = .23942
    # (differential element to parallel rectangle over its corner, four times: Incropera table 13.2)
    x = y = 0.5
    quarter = (
        x / np.hypot(1, x) * np.arctan(y / np.hypot(1, x)) + y / np.hypot(1, y) * np.arctan(x / np.hypot(1, y))
    ) / (2 * np.pi)
    middle = vf.point_to_triangles(np.array([[0.5, 0.5, 0.0]]), np.array([[0.0, 0.0, 1.0]]), ceiling).sum()
    assert middle == pytest.approx(4 * quarter, rel=1e-12)


def test_convexity():
    corners = np.array([[0, 0], [0, 1], [1, 1], [1, 0]], float)
    centres = np.array([[0, 0.5], [0.5, 1], [1, 0.5], [0.5, 0]])
    inward = np.array([[1, 0], [0, -1], [-1, 0], [0, 1]], float)
    assert vf.is_convex(centres, inward, corners)
    assert not vf.is_convex(centres, inward, np.vstack([corners, [0.5, -0.5]]))


def plates(*emissivities):
    """Return R of a stack: each pair (a, b) of neighbours sees nothing but the other."""
    return vf.exchange_matrix(np.array([[0.0, 1.0], [1.0, 0.0]]), np.array(emissivities))


def test_two_parallel_plates():
    """q = sigma (T1^4 - T2^4) / (1/e1 + 1/e2 - 1) (Incropera, equation 13.19)."""
    t = np.array([60.0, -20.0])
    q = vf.net_flux(plates(0.8, 0.3), t)
    expected = SIGMA * (333.15**4 - 253.15**4) / (1 / 0.8 + 1 / 0.3 - 1)
    assert q == pytest.approx([-expected, expected], rel=1e-12)


@pytest.mark.parametrize("shields", [1, 2, 5])
def test_radiation_shields(shields):
    """N shields of the plates' own emissivity let 1 / (N + 1) through (Incropera, section 13.3.3)."""
    e, hot, cold = 0.7, 400.0**4, 200.0**4
    r = plates(e, e)
    n = shields
    matrix, right = np.zeros((n, n)), np.zeros(n)
    for i in range(n):  # every shield gives on what it takes in: unknowns T^4 between the plates
        matrix[i, i] = 2 * r[0, 0]
        if i:
            matrix[i, i - 1] = r[0, 1]
        else:
            right[i] -= r[0, 1] * hot
        if i < n - 1:
            matrix[i, i + 1] = r[0, 1]
        else:
            right[i] -= r[0, 1] * cold
    fourth = np.linalg.solve(matrix, right)
    through = r[0, 0] * (hot - fourth[0])
    assert through == pytest.approx(r[0, 0] * (hot - cold) / (n + 1), rel=1e-12)


def test_exchange_is_reciprocal_and_rests_at_one_temperature():
    start, end = loop([(0, 0), (0, 1), (2, 1), (2, 0)], 3)
    area = np.linalg.norm(end - start, axis=1)
    factors = vf.closed(vf.crossed_strings(start, end), area).factors
    emissivity = np.linspace(0.2, 0.9, len(area))
    matrix = vf.exchange_matrix(factors, emissivity)
    both = area[:, None] * matrix
    assert both == pytest.approx(both.T, abs=1e-14)
    assert vf.net_flux(matrix, np.full(len(area), 15.0)) == pytest.approx(np.zeros(len(area)), abs=1e-10)
    hot = np.where(np.arange(len(area)) < 3, 80.0, 0.0)
    assert area @ vf.net_flux(matrix, hot) == pytest.approx(0.0, abs=1e-10)
