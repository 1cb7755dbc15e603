"""The slowest time constants of a model: how long it takes to forget its past.

With C the heat capacities and K the conductances of nodes and floating spaces, all outside temperatures held and
machines standing still, every disturbance is a sum of modes that decay as exp(-t / tau); 1/tau are the eigenvalues of
K v = C v / tau. The largest few tau come from inverse (Lanczos) iteration on one factor of K.
"""

from __future__ import annotations

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import ArpackError, LinearOperator, eigsh, splu

from coldseam.solution.heatsystem import HeatSystem

MOST_UNKNOWNS = {2: 60_000, 3: 12_000}
HOW_MANY = 3


def time_constants(system: HeatSystem, count: int = HOW_MANY) -> list[float]:
    """Return the largest time constants, s, longest first; empty for models too large, or that nothing outside holds.

    Parameters
    ----------
    system
        The equations.
    count
        How many are wanted.
    """
    free = np.flatnonzero(system.free)
    spaces = system.spaces
    n = len(free) + spaces.n
    if n > MOST_UNKNOWNS[system.mesh.dim] or n < count + 2:
        return []
    matrix = sparse.csr_array(system.network.matrix[free][:, free])
    capacity = system.capacity[free]
    if spaces.n:
        coupling = sparse.csr_array(system.coupling[free])
        y = np.full(spaces.n, 0.0)
        _, slope = spaces.flows(y, np.zeros(len(spaces.names), dtype=np.int64), 0.0, machines=False)
        corner = sparse.csr_array(np.diag(system.films) - slope)
        matrix = sparse.block_array([[matrix, -coupling], [-coupling.T, corner]])
        capacity = np.concatenate([capacity, spaces.capacity])
    root = np.sqrt(capacity)
    scaled = sparse.csc_array(sparse.diags_array(1.0 / root) @ matrix @ sparse.diags_array(1.0 / root))
    try:
        factor = splu(scaled, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
        inverse = LinearOperator(scaled.shape, factor.solve, dtype=float)
        values = eigsh(inverse, k=count, which="LM", return_eigenvectors=False, v0=root)
    except (RuntimeError, ArpackError):  # singular: nothing outside holds the model
        return []
    found = sorted((float(v) for v in values), reverse=True)
    return found if np.all(np.isfinite(found)) and found[0] < 1e15 and found[-1] > 0.0 else []
