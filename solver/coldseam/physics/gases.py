"""Conductivity of dilute gases and their mixtures by kinetic theory.

Viscosity by Chapman and Enskog with the collision integral of Neufeld, Janzen, Aziz 1972 for Lennard-Jones molecules,

    mu = 2.6693e-6 sqrt(M T) / (sigma² Omega)      (Pa s; M in g/mol, T in K, sigma in Å)

conductivity ``15/4 R/M mu`` of monatomic gases. For others Eucken's correction ``(c_p + 5/4 R/M) mu`` is low by 5 %,
for large molecules 20 %, and its modified form is as much too high; taken is that of Stiel and Thodos (1964, AIChE
Journal 10, 26), ``(1.15 c_v + 2.03 R/M) mu``, between the two. Mixtures by Wassiljewa with the factors of Mason and
Saxena (Wilke's for the viscosities). Bird, Stewart, Lightfoot, Transport Phenomena, sections 1.4 and 9.3; molecular
parameters of their table E.1 from memory, those of cyclopentane ``epsilon/k = 0.77 T_c`` and a diameter that gives
CoolProp's viscosity at 300 K. Heat capacities at 300 K and their slope are CoolProp's.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

GAS_CONSTANT = 8.314462618
"""J/(mol K)."""
KELVIN = 273.15


@dataclass(frozen=True, kw_only=True)
class Gas:
    """Molecular data of a gas.

    Parameters
    ----------
    molar_mass
        g/mol.
    diameter, depth
        Lennard-Jones sigma, Å, and epsilon over Boltzmann's constant, K.
    heat_capacity, heat_slope
        c_p at 300 K, J/(mol K), and its change per kelvin.
    antoine
        A, B, C of ``log10(p / mmHg) = A - B / (C + t/°C)``, the vapour pressure; None where it does not condense.
    """

    molar_mass: float
    diameter: float
    depth: float
    heat_capacity: float = 2.5 * GAS_CONSTANT
    heat_slope: float = 0.0
    antoine: tuple[float, float, float] | None = None

    @property
    def monatomic(self) -> bool:
        """Whether it is of single atoms."""
        return self.heat_capacity == 2.5 * GAS_CONSTANT


GASES: Mapping[str, Gas] = {
    "helium": Gas(molar_mass=4.0026, diameter=2.576, depth=10.2),
    "neon": Gas(molar_mass=20.180, diameter=2.789, depth=35.7),
    "argon": Gas(molar_mass=39.948, diameter=3.432, depth=122.4),
    "krypton": Gas(molar_mass=83.80, diameter=3.675, depth=170.0),
    "xenon": Gas(molar_mass=131.29, diameter=4.009, depth=234.7),
    "nitrogen": Gas(molar_mass=28.013, diameter=3.667, depth=99.8, heat_capacity=29.12, heat_slope=0.001),
    "oxygen": Gas(molar_mass=31.999, diameter=3.433, depth=113.0, heat_capacity=29.39, heat_slope=0.006),
    "air": Gas(molar_mass=28.964, diameter=3.617, depth=97.0, heat_capacity=29.10, heat_slope=0.002),
    "carbon dioxide": Gas(molar_mass=44.010, diameter=3.996, depth=190.0, heat_capacity=37.2, heat_slope=0.043),
    "methane": Gas(molar_mass=16.043, diameter=3.780, depth=154.0, heat_capacity=35.8, heat_slope=0.045),
    "cyclopentane": Gas(
        molar_mass=70.13, diameter=5.33, depth=394.0, heat_capacity=84.07, heat_slope=0.336,
        antoine=(6.88676, 1124.162, 231.361),
    ),
}  # fmt: skip
"""The gases by name."""


def collision_integral(reduced: np.ndarray) -> np.ndarray:
    """Return Omega of viscosity at reduced temperatures ``k T / epsilon``, shape (n,) or any; all of unit 1."""
    return 1.16145 * reduced**-0.14874 + 0.52487 * np.exp(-0.77320 * reduced) + 2.16178 * np.exp(-2.43787 * reduced)


def viscosity(gas: Gas, temperature: np.ndarray) -> np.ndarray:
    """Return the viscosity of a gas, Pa s, at temperatures in °C, shape (n,) or any."""
    t = np.asarray(temperature, dtype=float) + KELVIN
    return 2.6693e-6 * np.sqrt(gas.molar_mass * t) / (gas.diameter**2 * collision_integral(t / gas.depth))


def conductivity(gas: Gas, temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity of a gas, W/(m K), at temperatures in °C, shape (n,) or any.

    Examples
    --------
    >>> round(float(conductivity(GASES["argon"], 26.85)), 4)
    0.0176
    """
    t = np.asarray(temperature, dtype=float) + KELVIN
    per_mole: float | np.ndarray = 3.75 * GAS_CONSTANT
    if not gas.monatomic:
        per_mole = 1.15 * (gas.heat_capacity + gas.heat_slope * (t - 300.0) - GAS_CONSTANT) + 2.03 * GAS_CONSTANT
    return per_mole / (1e-3 * gas.molar_mass) * viscosity(gas, temperature)


def mixture_conductivity(parts: Mapping[str, float | np.ndarray], temperature: np.ndarray) -> np.ndarray:
    """Return the conductivity of a mixture, W/(m K).

    Parameters
    ----------
    parts
        Amounts of each of :data:`GASES` by name in any common unit, one number or shape (n,).
    temperature
        °C, shape (n,).
    """
    t = np.asarray(temperature, dtype=float)
    names = list(parts)
    mu = {name: viscosity(GASES[name], t) for name in names}
    total = np.zeros_like(t)
    for i in names:
        mixed = np.zeros_like(t)
        for j in names:
            mass = GASES[i].molar_mass / GASES[j].molar_mass
            ratio = 1.0 + np.sqrt(mu[i] / mu[j]) * mass**-0.25
            mixed = mixed + parts[j] * ratio**2 / np.sqrt(8.0 * (1.0 + mass))
        with np.errstate(invalid="ignore"):
            total = total + np.where(parts[i] == 0, 0.0, parts[i] * conductivity(GASES[i], t) / mixed)
    return total


def vapour_pressure(gas: Gas, temperature: np.ndarray) -> np.ndarray:
    """Return the saturation pressure of a gas, Pa, at temperatures in °C, shape (n,) or any; inf where it has none."""
    t = np.asarray(temperature, dtype=float)
    if gas.antoine is None:
        return np.full_like(t, np.inf)
    a, b, c = gas.antoine
    return 133.322 * 10.0 ** (a - b / (c + np.maximum(t, -150.0)))
