"""What a map of a surface is; apart from how it is computed, so that those who draw need not load the solver."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, kw_only=True, eq=False)
class SurfaceMap:
    """A field on the surface that faces one space.

    Parameters
    ----------
    key
        ``"excess_flux"`` or ``"surface_humidity"``.
    space
        Name of the space.
    values
        At the nodes, in ``unit``, shape (n_nodes,); nan off the surface.
    title, unit
        As printed.
    note
        What the field is measured against.
    """

    key: str
    space: str
    values: np.ndarray
    title: str
    unit: str
    note: str
