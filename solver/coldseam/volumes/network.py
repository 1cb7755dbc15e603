"""The heat network: sites joined by conductances, terminals outside, and its quadratic energy.

Both discretisations have this one form: the finite volumes (a site per node) and the
Crouzeix-Raviart field of the lower bound (a site per facet). With site temperatures u, terminal
temperatures t and loads b the network minimises

    J(u; t, s) = u.A u - 2 u.B t + t.diag(sum B) t - 2 s b.u - s² m

over the free sites, s scaling the loads. At the minimum J is a quadratic form of x = (t, s),

    J = x.Lambda x,     heat flow into the solid at terminal k = (Lambda x)_k,

so all heat flows, coupling coefficients and their bounds are read from the small matrix Lambda.
Its last row belongs to the loads and is absent when there are none.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse


@dataclass(frozen=True, kw_only=True, eq=False)
class Network:
    """A heat network.

    Parameters
    ----------
    matrix
        A: conduction, sheets and contacts, plus the films on its diagonal, W/K, (n, n).
    exchange
        B: film conductance between sites and terminals, W/K, (n, n_terminals).
    fixed
        Terminal whose temperature the site has, -1 for free sites, (n,).
    load
        b: heat into each site at s = 1, W, (n,).
    constant
        m: energy of the loads that no site temperature carries, W K.
    has_load
        Whether the loads form a last row of Lambda.
    """

    matrix: sparse.csr_array
    exchange: sparse.csr_array
    fixed: np.ndarray
    load: np.ndarray
    constant: float
    has_load: bool

    @property
    def n_terminals(self) -> int:
        """Number of terminals."""
        return self.exchange.shape[1]

    @property
    def free(self) -> np.ndarray:
        """Mask of the sites whose temperature is an unknown, (n,)."""
        return self.fixed < 0

    @property
    def free_matrix(self) -> sparse.csr_array:
        """The matrix of the free sites; the whole matrix itself, not a copy, where all are free."""
        free = self.free
        return self.matrix if free.all() else self.matrix[free][:, free]

    def start(self) -> np.ndarray:
        """Return unit fields with the fixed sites set and 0 elsewhere, (n, n_terminals [+ 1])."""
        fields = np.zeros((len(self.fixed), self.n_terminals + self.has_load))
        sites = np.flatnonzero(~self.free)
        fields[sites, self.fixed[sites]] = 1.0
        return fields

    def right_hand_side(self) -> np.ndarray:
        """Return what drives each unit field at every site, W, (n, n_terminals [+ 1])."""
        return self.drive_beyond(self.start())

    def drive_beyond(self, fields: np.ndarray) -> np.ndarray:
        """Return what given unit fields lack to balance at every site, W, both (n, n_terminals [+ 1])."""
        drive = self.exchange.toarray()
        if self.has_load:
            drive = np.column_stack([drive, self.load])
        return drive - self.matrix @ fields

    def energy(self, fields: np.ndarray) -> np.ndarray:
        """Return Lambda of given unit fields, W/K, symmetric, (n_terminals [+ 1],) squared.

        For fields that are not exact minimisers the energy is an upper estimate of the network's own.
        """
        p = self.n_terminals
        form = fields.T @ (self.matrix @ fields)
        form = 0.5 * (form + form.T)
        mixed = np.zeros_like(form)
        mixed[:, :p] = fields.T @ self.exchange
        form -= mixed + mixed.T
        form[:p, :p] += np.diag(self.exchange.sum(axis=0))
        if self.has_load:
            work = fields.T @ self.load
            form[-1] -= work
            form[:, -1] -= work
            form[-1, -1] -= self.constant
        return form
