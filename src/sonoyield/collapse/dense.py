"""Chemical equilibrium of the dense gas: what excluded volume does to forward and reverse rates.

In the Noble-Abel gas the activity of a species is its concentration times
V / (V - B) exp(b_k p / R T), B the sum of all covolumes, so that equilibrium shifts against
reactions that make particles (Toegel, Hilgenfeldt, Lohse 2002, Phys. Rev. Lett. 88, 034301). Rates
are Cantera's at the true density; where a reaction changes the number of particles, the direction
that joins them takes the whole factor (the transition state is taken as large as the joined
molecule, so that splitting keeps its measured rate); else both directions share it evenly, so that
nothing depends on how a reaction is written.
"""

from __future__ import annotations

from math import exp, log, pi
from typing import TYPE_CHECKING

import numpy as np
from numba import njit

from sonoyield.collapse.equations import MOLES, RADIUS
from sonoyield.collapse.exchange import COVOLUME
from sonoyield.describe.gas import Array

if TYPE_CHECKING:
    import cantera as ct

KILO = 1e3


def net_stoichiometry(gas: ct.Solution) -> tuple[Array, Array, Array]:
    """Net coefficients of each reaction as three arrays: where its entries end, species, value."""
    net = np.asarray(gas.product_stoich_coeffs) - np.asarray(gas.reactant_stoich_coeffs)
    entries = [np.flatnonzero(net[:, r]) for r in range(net.shape[1])]
    return (
        np.cumsum([len(one) for one in entries]),
        np.concatenate(entries),
        np.concatenate([net[one, r] for r, one in enumerate(entries)]),
    )


def dense_factors(gas: ct.Solution, covolume: Array, volumes: Array, moles: Array) -> Array:
    """Factors on forward and reverse rates, shape (N, 2, reactions).

    ``covolume`` m3/mol (K,), ``volumes`` m3 (N,), ``moles`` mol (N, K).
    """
    net = np.asarray(gas.product_stoich_coeffs) - np.asarray(gas.reactant_stoich_coeffs)
    free = volumes - moles @ covolume
    crowding = np.log(volumes / free)[:, None] + np.outer(moles.sum(axis=1) / free, covolume)
    shift = crowding @ net
    made = net.sum(axis=0)
    share = np.where(made < -0.5, 1.0, np.where(made > 0.5, 0.0, 0.5))
    return np.stack([np.exp(-share * shift), np.exp((1.0 - share) * shift)], axis=1)


@njit(cache=True, error_model="numpy")
def dense_production(
    forward: Array,
    reverse: Array,
    ends: Array,
    members: Array,
    coefficients: Array,
    volume: float,
    moles: Array,
    covolume: Array,
    logarithms: Array,
    production: Array,
) -> None:
    """Fill ``production`` (K,), mol/s, from rates of progress (R,) in kmol/m3/s.

    ``volume`` m3, ``moles`` mol (K,), ``covolume`` m3/mol (K,), ``logarithms`` scratch (K,).
    """
    total = 0.0
    free = volume
    for k in range(moles.size):
        total += moles[k]
        free -= moles[k] * covolume[k]
        production[k] = 0.0
    crowding = log(volume / free)
    for k in range(moles.size):
        logarithms[k] = crowding + covolume[k] * total / free
    start = 0
    for r in range(forward.size):
        shift = 0.0
        made = 0.0
        for e in range(start, ends[r]):
            shift += coefficients[e] * logarithms[members[e]]
            made += coefficients[e]
        if made < -0.5:
            net = forward[r] * exp(-shift) - reverse[r]
        elif made > 0.5:
            net = forward[r] - reverse[r] * exp(shift)
        else:
            half = exp(0.5 * shift)
            net = forward[r] / half - reverse[r] * half
        net *= KILO * volume
        for e in range(start, ends[r]):
            production[members[e]] += coefficients[e] * net
        start = ends[r]


@njit(cache=True, error_model="numpy")
def crowding(state: Array, species: Array) -> float:
    """Share of the bubble's volume that the covolumes of its contents take."""
    taken = 0.0
    for k in range(species.shape[0]):
        taken += state[MOLES + k] * species[k, COVOLUME]
    return taken / (4.0 / 3.0 * pi * state[RADIUS] ** 3)
