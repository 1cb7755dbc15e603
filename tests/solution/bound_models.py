"""The models whose bounds are tested, with exact or independently computed heat flows.

``flows`` are the heat flows into the solid at every terminal, W (2D: W/m); ``doubt`` is how well they are known,
relative to the largest. Exact ones carry their formula. The others are Richardson extrapolations of scikit-fem
solutions with quadratic elements on three graded meshes, ``finest`` bricks a metre and twice half as many;
``test_best_known_flows`` in test_bounds.py (slow) computes them again.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, log, pi

import numpy as np
from brick_models import Model

EDGE = 1.0 - 2.0 * log(2.0) / pi
"""Excess of a square edge over its plain walls (conformal mapping, 0.558729)."""


INDEPENDENT = "scikit-fem, quadratic elements, extrapolated"


@dataclass(frozen=True, kw_only=True)
class Known:
    """A model, its heat flows, how well they are known and why, and the finest mesh of the independent solution."""

    model: Model
    flows: tuple[float, ...]
    doubt: float
    why: str
    finest: int = 0


def _sides(*faces):
    """Return a function that gives each facet the number of the first (axis, value) it lies on, else -1."""

    def number(x):
        found = np.full(x.shape[1], -1)
        for n, (axis, value) in reversed(list(enumerate(faces))):
            found[np.abs(x[axis] - value) < 1e-9] = n
        return found

    return number


def _outer_inner(x):
    """Corner of walls 1 m thick: 0 on the planes through the origin, 1 on the inner faces."""
    outer = np.any(np.abs(x) < 1e-9, axis=0)
    inner = np.all(x > 1.0 - 1e-9, axis=0) & np.any(np.abs(x - 1.0) < 1e-9, axis=0)
    return np.where(outer, 0, np.where(inner, 1, -1))


def _tee(x):
    """A wall with a partition: 0 its long side, 1 and 2 the two rooms on the other."""
    room = np.where(x[0] < 1.5, 1, 2)
    return np.where(x[1] < 1e-9, 0, np.where((x[1] > 1.0 - 1e-9) & (x[1] < 2.0 - 1e-9), room, -1))


def _beyond_wall(x):
    return np.all(x > 1.0, axis=0)


def _bolt(x):
    """A square bolt, a quarter of it in the corner of the panel, through the panel's 1 m of thickness."""
    return np.where((x[0] < 0.5) & (x[1] < 0.5), 1, 0)


def _inner_faces(x):
    return _outer_inner(x) == 1


PANEL = dict(size=(2, 2, 1), body=_bolt, terminal=_sides((2, 0.0), (2, 1.0)), temperatures=(0.0, 1.0))
CORNER = dict(hole=_beyond_wall, terminal=_outer_inner, temperatures=(0.0, 1.0))

MODELS: dict[str, Known] = {
    "edge, exact": Known(
        model=Model(size=(4, 4), conductivity=(1.0,), films=(inf, inf), **CORNER),
        flows=(-(6.0 + EDGE), 6.0 + EDGE),
        doubt=1e-7,
        why="legs 3 times the thickness: the far ends disturb by exp(-2 pi 3) = 7e-9",
    ),
    "slab with source, exact": Known(
        model=Model(
            size=(1, 1),
            conductivity=(2.0,),
            terminal=_sides((0, 0.0), (0, 1.0)),
            films=(inf, 4.0),
            temperatures=(20.0, 0.0),
            source=(60.0,),
        ),
        # k T'' = -q, T(0) = 20, -k T'(1) = h T(1): Q(0) = (20 - q/(2k) - q/h)/(1/k + 1/h)
        flows=((20.0 - 60.0 / 4.0 - 60.0 / 4.0) / 0.75, -60.0 - (20.0 - 60.0 / 4.0 - 60.0 / 4.0) / 0.75),
        doubt=1e-12,
        why="one-dimensional; by hand",
    ),
    "cylinder, exact": Known(
        model=Model(
            size=(1, 1),
            origin=0.5,
            axisymmetric=True,
            conductivity=(0.3,),
            terminal=_sides((0, 0.0), (0, 1.0)),
            films=(inf, 2.0),
            temperatures=(1.0, 0.0),
        ),
        flows=tuple(s / (log(3.0) / (2 * pi * 0.3) + 1.0 / (2 * pi * 1.5 * 2.0)) for s in (1.0, -1.0)),
        doubt=1e-12,
        why="ln(r2/r1)/(2 pi k l) and 1/(2 pi r2 l h) in series",
    ),
    "edge with films": Known(
        model=Model(size=(2, 2), conductivity=(1.0,), films=(5.0, 2.0), **CORNER),
        flows=(-1.4132398, 1.4132398),
        doubt=2e-6,
        why=INDEPENDENT,
        finest=32,
    ),
    "edge with source": Known(
        model=Model(size=(2, 2), conductivity=(1.0,), films=(5.0, inf), source=(3.0,), **CORNER),
        flows=(-7.126893, -1.873107),
        doubt=5e-6,
        why=INDEPENDENT,
        finest=32,
    ),
    "edge with sheet": Known(
        model=Model(
            size=(2, 2), conductivity=(1.0,), films=(inf, 2.0), sheet=_inner_faces, sheet_conductance=3.0, **CORNER
        ),
        flows=(-1.558360, 1.558360),
        doubt=1e-5,
        why=INDEPENDENT,
        finest=32,
    ),
    "wood, grain askew": Known(
        model=Model(
            size=(2, 1),
            body=lambda x: (x[0] > 1.0).astype(int),
            conductivity=(((0.35, 0.1), (0.1, 0.12)), 0.05),
            terminal=_sides((1, 0.0), (1, 1.0)),
            films=(inf, 8.0),
            temperatures=(0.0, 1.0),
        ),
        flows=(-0.1491894, 0.1491894),
        doubt=3e-6,
        why=INDEPENDENT,
        finest=64,
    ),
    "contact": Known(
        model=Model(
            size=(3, 1),
            body=lambda x: (x[0] > 1.0).astype(int),
            conductivity=(1.0, 5.0),
            contact=3.0,
            terminal=_sides((0, 0.0), (1, 1.0)),
            films=(inf, 4.0),
            temperatures=(1.0, 0.0),
        ),
        flows=(1.561807, -1.561807),
        doubt=3e-5,
        why=INDEPENDENT,
        finest=32,
    ),
    "three spaces": Known(
        model=Model(
            size=(3, 2),
            hole=lambda x: (x[1] > 1.0) & ((x[0] < 1.0) | (x[0] > 2.0)),
            conductivity=(0.5,),
            terminal=_tee,
            films=(8.0, 3.0, 3.0),
            temperatures=(-10.0, 20.0, 5.0),
        ),
        flows=(-26.19454, 23.27035, 2.92418),
        doubt=5e-6,
        why=INDEPENDENT,
        finest=32,
    ),
    "ring": Known(
        model=Model(size=(2, 2), origin=0.5, axisymmetric=True, conductivity=(1.0,), films=(5.0, 2.0), **CORNER),
        flows=(-13.02514, 13.02514),
        doubt=3e-6,
        why=INDEPENDENT,
        finest=32,
    ),
    "disc on the axis": Known(
        model=Model(
            size=(2, 1),
            axisymmetric=True,
            conductivity=(1.0,),
            terminal=lambda x: np.where((x[1] < 1e-9) & (x[0] < 1.0), 0, np.where(x[1] > 1.0 - 1e-9, 1, -1)),
            films=(inf, 2.0),
            temperatures=(1.0, 0.0),
        ),
        flows=(4.89692, -4.89692),
        doubt=2e-5,
        why=INDEPENDENT,
        finest=64,
    ),
    "corner": Known(
        model=Model(size=(2, 2, 2), conductivity=(1.0,), films=(inf, inf), **CORNER),
        flows=(-4.7807, 4.7807),
        doubt=5e-4,
        why=INDEPENDENT,
        finest=16,
    ),
    "bolt": Known(
        model=Model(conductivity=(0.03, 1.0), films=(8.0, 5.0), **PANEL),
        flows=(-0.30225, 0.30225),
        doubt=3e-4,
        why=INDEPENDENT,
        finest=16,
    ),
    "bolt with contact": Known(
        model=Model(conductivity=(0.03, 1.0), films=(8.0, 5.0), contact=0.2, **PANEL),
        flows=(-0.300685, 0.300685),
        doubt=3e-5,
        why=INDEPENDENT,
        finest=16,
    ),
    "bolt with skin": Known(
        model=Model(
            conductivity=(0.03, 1.0),
            films=(8.0, 5.0),
            sheet=lambda x: np.abs(x[2] - 1.0) < 1e-9,
            sheet_conductance=0.05,
            **PANEL,
        ),
        flows=(-0.30699, 0.30699),
        doubt=3e-4,
        why=INDEPENDENT,
        finest=16,
    ),
    "corner with source and flux": Known(
        model=Model(
            size=(2, 2, 2),
            hole=_beyond_wall,
            conductivity=(1.0,),
            terminal=_sides((2, 0.0), (0, 0.0), (1, 0.0)),
            films=(4.0, inf, 2.0),
            temperatures=(0.0, 5.0, 8.0),
            source=(2.0,),
            flux=3.0,
            fluxed=_inner_faces,
        ),
        flows=(-32.2012, -1.6896, 10.8908),
        doubt=5e-4,
        why=INDEPENDENT,
        finest=16,
    ),
}
