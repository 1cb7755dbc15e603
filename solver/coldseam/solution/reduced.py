"""Heat networks of few unknowns: the equations of all nodes, projected on a basis.

With V the basis of the free nodes, C-orthonormal (V'CV = 1), and S the nodes held by each boundary of fixed temperature
(a node between two of them in the shares of its area), the unknowns w stand for node temperatures T = W w,

    W = [V 0; 0 S],     (W'CW) dw/dt = W'b + W'B t + W'G y - W'A W w

(Galerkin). V is turned so that V'AV is diagonal (Ritz modes and their rates 1/s). The projected equations have the form
of the full ones, so that stepper, gauges and bookkeeping work on them unchanged. A uniform temperature must be in V:
then the flows of all nodes add up to those of the unknowns and the heat balance closes as before. The flows of the
fixed boundaries are rows of their own, hence exact for T.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from scipy import sparse

from coldseam.solution.heatsystem import FlowReaders, HeatSystem
from coldseam.solution.stepper import State
from coldseam.volumes.network import Network

SEEN = 8
"""Nodes, for each vector of the basis, at which the error of a step is looked at."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Basis:
    """What spans the temperatures of the free nodes.

    Parameters
    ----------
    vectors
        V, K per unknown, (n_free, m), Fortran order; V'CV = 1, V'AV diagonal.
    rates
        Diagonal of V'AV, 1/s, (m,).
    seen
        Rows of V at which steps are judged, (n_seen,).
    """

    vectors: np.ndarray
    rates: np.ndarray
    seen: np.ndarray


@dataclass(frozen=True, kw_only=True, eq=False)
class ReducedSystem(HeatSystem):
    """The projected equations of a :class:`HeatSystem`, in its own form.

    Parameters
    ----------
    full
        The equations of all nodes.
    basis
        Of the free nodes.
    shares
        S, (n_nodes, n_fixed); rows of free nodes are empty.
    """

    full: HeatSystem
    basis: Basis
    shares: sparse.csr_array

    @property
    def whole(self) -> HeatSystem:
        """The equations of all nodes."""
        return self.full

    def expand(self, temperature: np.ndarray) -> np.ndarray:
        """Return W w, °C, (n_nodes,)."""
        size = len(self.basis.rates)
        nodes = self.shares @ temperature[size:]
        nodes[self.full.free] = self.basis.vectors @ temperature[:size]
        return nodes

    def reading(self, weights: sparse.csr_array) -> np.ndarray:
        """Return weights W, (n, m + n_fixed)."""
        return _projected(weights, self.full.free, self.basis.vectors, self.shares)

    def largest(self, change: np.ndarray) -> float:
        """Return the largest change, K, at the nodes that stand for all (:func:`seen_rows`), of changes (m,)."""
        return float(np.max(np.abs(self.basis.vectors[self.basis.seen] @ change), initial=0.0))


def _projected(weights, free: np.ndarray, vectors: np.ndarray, shares: sparse.csr_array) -> np.ndarray:
    inside = sparse.csr_array(weights[:, np.flatnonzero(free)])
    return np.hstack([inside @ vectors, np.asarray((weights @ shares).todense())])


def turned(system: HeatSystem, vectors: np.ndarray) -> Basis:
    """Return C-orthonormal vectors, (n_free, m), as Ritz modes; for the rest as :class:`Basis`."""
    free = np.flatnonzero(system.free)
    matrix = sparse.csr_array(system.network.free_matrix)
    form = vectors.T @ (matrix @ vectors)
    rates, turn = np.linalg.eigh(0.5 * (form + form.T))
    modes = np.asfortranarray(vectors @ turn)
    assert modes.shape[0] == len(free)
    return Basis(vectors=modes, rates=rates, seen=seen_rows(modes))


def seen_rows(vectors: np.ndarray) -> np.ndarray:
    """Return the rows at which each vector, (n, m), is largest and smallest, (n_seen,): a field's extremes lie near some."""
    count = min(SEEN // 2, len(vectors))
    most = np.argpartition(vectors, (count - 1, len(vectors) - count), axis=0)
    return np.unique(np.concatenate([most[:count], most[-count:]]))


def reduced_system(system: HeatSystem, basis: Basis) -> ReducedSystem:
    """Return the projected equations.

    Parameters
    ----------
    system
        The equations of all nodes.
    basis
        Of its free nodes.
    """
    network, free = system.network, system.free
    held = np.flatnonzero(np.diff(system.readers.fixed_nodes.indptr))
    shares = sparse.csr_array(system.readers.fixed_nodes[held].T)
    size = len(basis.rates)

    def project(block: sparse.csr_array) -> np.ndarray:
        return _projected(sparse.csr_array(block.T), free, basis.vectors, shares).T

    meets = project(network.matrix @ shares)  # conductances to the fixed boundaries
    coupling = project(system.coupling)
    load = project(sparse.csr_array(network.load[:, None]))[:, 0]
    own = {f.name: getattr(system, f.name) for f in fields(HeatSystem)}
    return ReducedSystem(
        **own
        | {
            "network": Network(
                matrix=np.block([[np.diag(basis.rates), meets[:size]], [meets[:size].T, meets[size:]]]),
                exchange=project(network.exchange),
                fixed=np.concatenate([np.full(size, -1), system.readers.terminal[held]]),
                load=load,
                constant=network.constant,
                has_load=network.has_load,
            ),
            "capacity": np.concatenate([np.ones(size), shares.T @ system.capacity]),
            "coupling": coupling,
            "gather": coupling.T,
            "drive": project(system.drive),
            "readers": _readers(system.readers, free, basis, shares, held),
        },
        full=system,
        basis=basis,
        shares=shares,
    )


def _readers(readers: FlowReaders, free, basis: Basis, shares, held: np.ndarray) -> FlowReaders:
    size, count = len(basis.rates), len(held)
    return replace(
        readers,
        film_nodes=_projected(readers.film_nodes, free, basis.vectors, shares),
        fixed_nodes=sparse.coo_array(
            (np.ones(count), (held, size + np.arange(count))), shape=(len(readers.film), size + count)
        ).tocsr(),
    )


def reduced_state(system: ReducedSystem, state: State) -> State:
    """Return the state of all nodes as that of the unknowns: C-orthogonally projected, fixed boundaries at their mean."""
    full, basis = system.full, system.basis
    free = full.free
    heat = full.capacity * state.temperature
    held = (system.shares.T @ heat) / system.capacity[len(basis.rates) :]
    return replace(state, temperature=np.concatenate([basis.vectors.T @ heat[free], held]))
