"""The first element sizes: coarse, but with cells in every body and round things round.

The aim is a valid start; later rounds refine by a size field made from the error. Sizes are given
at the vertices of the geometry and grow from there into faces and volumes, so that a small part
is surrounded by small elements without a rule for it (:mod:`coldseam.geometry.fields`). At a vertex::

    size = min(cap, longest / 4, max(FLAT * shortest, longest / many))

with the longest and shortest curve that ends there, ``cap`` an eighth of the model (or the case's
``model.size``). The last term lets elements lie flat in thin layers: the size is *not* forced
down to the thickness of a skin, since conduction through and along a skin is smooth on the scale
of ``sqrt(k t / h)``, far above its thickness. Curves that bend get a whole number of segments:
``segments`` per full turn. A polygon of n corners in a circle has less area than it, by the factor
``sin(2 pi / n) / (2 pi / n)`` (1.1 % at 24, 0.5 % at 37).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

FLAT = 30.0
"""Longest element along a thin layer, in thicknesses; aspect ratios of this order are harmless to
a linear element that conducts along and through a skin (common practice, no source)."""

MANY = {2: 200.0, 3: 24.0}
"""Bound on the elements along a long side that a thin layer may ask for in the first round."""

SEGMENTS = 24
"""Segments of a full circle in the first round."""

SEGMENTS_OF_MANY = 16
"""The same where there are more than ``MANY_ROUND`` round solids; later rounds raise it as the error asks."""

MANY_ROUND = 25

LONG = 4.0
"""Longest element along a round bar, in segments of its circle, in the first round."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Curves:
    """The curves of a geometry as arrays, row per curve.

    Parameters
    ----------
    tag
        Numbers of the curves, shape (n,).
    ends
        Positions of the end vertices in the vertex arrays (-1 for a closed curve), shape (n, 2).
    length
        Lengths, mm, shape (n,).
    turn
        Angle through which each curve bends, its largest curvature times its length, rad; 0 for
        straight ones, shape (n,).
    """

    tag: np.ndarray
    ends: np.ndarray
    length: np.ndarray
    turn: np.ndarray


def vertex_sizes(curves: Curves, n_vertices: int, dim: int, cap: float) -> np.ndarray:
    """Return the first element size at every vertex, mm, shape (n_vertices,)."""
    longest = np.zeros(n_vertices)
    shortest = np.full(n_vertices, np.inf)
    straight = (curves.turn == 0.0) & (curves.length > 0.0)
    for side in (0, 1):
        at = curves.ends[:, side]
        use = (at >= 0) & (curves.length > 0.0)
        np.maximum.at(longest, at[use], curves.length[use])
        use &= straight
        np.minimum.at(shortest, at[use], curves.length[use])
    longest[longest == 0.0] = cap
    shortest = np.minimum(shortest, longest)
    return np.minimum(cap, np.minimum(longest / 4.0, np.maximum(FLAT * shortest, longest / MANY[dim])))


def curve_sizes(curves: Curves, at_vertex: np.ndarray, cap: float) -> np.ndarray:
    """Return the size along every straight curve, that of its coarser end; inf where it asks for none.

    Shape (n_curves,), mm. A curve shorter than its size asks for none: it is a step in thickness.
    """
    ends = np.where(curves.ends >= 0, curves.ends, 0)
    size = at_vertex[ends].max(axis=1)
    return np.where((curves.ends[:, 0] >= 0) & (curves.turn == 0.0) & (size < curves.length), size, np.inf)


def turn_segments(turn: np.ndarray, segments: int) -> np.ndarray:
    """Return the number of segments of each bent curve, 0 for straight ones, shape (n,)."""
    count = np.ceil(np.minimum(turn, 8 * math.pi) * segments / (2 * math.pi) - 1e-6)
    return np.where(turn > 0.0, np.maximum(count, 2), 0).astype(int)


def bar_segments(length: float, segment: float) -> int:
    """Return the number of elements along a round bar of a length whose circle has that segment."""
    wanted = min(max(length / 8.0, segment), LONG * segment)
    return max(1, math.ceil(length / wanted - 1e-6))


def joined(pairs: list[tuple[int, int]], members: list[int]) -> dict[int, int]:
    """Return the representative (smallest member) of every member of sets joined by pairs."""
    root = {m: m for m in members}

    def find(m: int) -> int:
        while root[m] != m:
            root[m] = root[root[m]]
            m = root[m]
        return m

    for a, b in pairs:
        ra, rb = find(a), find(b)
        root[max(ra, rb)] = min(ra, rb)
    return {m: find(m) for m in members}


def first_segments(round_solids: int) -> int:
    """Return the segments of a full circle in the first round."""
    return SEGMENTS if round_solids <= MANY_ROUND else SEGMENTS_OF_MANY
