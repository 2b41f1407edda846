"""Rates of production: what each reaction makes and destroys over the windows of a run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sonoyield.collapse.dense import dense_factors
from sonoyield.collapse.exchange import COVOLUME
from sonoyield.collapse.history import History
from sonoyield.decide.kinetics_uncertainty import RateUncertainty, rate_uncertainties
from sonoyield.describe.gas import AVOGADRO, Array


@dataclass(frozen=True)
class Production:
    """What one rate does to one species in the gas, molecules per window.

    ``forward`` and ``reverse`` are changes of the species by each direction (negative where it is
    destroyed); ``net`` is their sum.
    """

    rate: RateUncertainty
    forward: float
    reverse: float
    net: float


def productions(history: History, species: str) -> tuple[Production, ...]:
    """What each rate makes of a species, molecules per window (mean), largest |net| first.

    Integrals by the trapezoid over the accepted steps. Rates that do not touch the species are
    left out.
    """
    phase = history.bubble.phase
    gas, k = phase.solution(), phase.index(species)
    forward, reverse = _extents(history)
    change = gas.product_stoich_coeffs[k] - gas.reactant_stoich_coeffs[k]
    found = []
    for rate in rate_uncertainties(phase):
        rows = list(rate.rows)
        if not change[rows].any():
            continue
        ahead = AVOGADRO * float(change[rows] @ forward[rows])
        back = -AVOGADRO * float(change[rows] @ reverse[rows])
        found.append(Production(rate, ahead, back, ahead + back))
    return tuple(sorted(found, key=lambda one: -abs(one.net)))


def mismatch(history: History, species: str, made: tuple[Production, ...]) -> float:
    """How far the integrals miss what was left and crossed, as a share of it or of a molecule.

    Zero for an exact integral: the sum of net production is the change of the contents and of
    what crossed, by the run's own states.
    """
    k = history.bubble.phase.index(species)
    seen = history.moles[:, k] + history.crossed[:, k]
    change = AVOGADRO * float(np.mean([seen[b] - seen[a] for a, b in history.spans]))
    return abs(sum(one.net for one in made) - change) / max(abs(change), 1.0)


def _extents(history: History) -> tuple[Array, Array]:
    """Extent of each reaction, forward and reverse, mol per window (mean over the windows)."""
    rates = _rates_of_progress(history)
    mean = np.zeros(rates.shape[1:])
    for first, last in history.spans:
        window = slice(first, last + 1)
        mean += np.trapezoid(rates[window], history.times[window], axis=0) / len(history.spans)
    return mean[0], mean[1]


def _rates_of_progress(history: History) -> Array:
    """Forward and reverse rates of each reaction at each step, mol/s, (N, 2, reactions)."""
    phase = history.bubble.phase
    gas = phase.solution()
    volumes = 4.0 / 3.0 * np.pi * history.radius**3
    moles = history.moles
    densities = moles @ phase.molar_mass / volumes
    fractions = moles / moles.sum(axis=1, keepdims=True)
    rates = np.empty((len(volumes), 2, gas.n_reactions))
    for row, (temperature, density) in enumerate(zip(history.temperature, densities, strict=True)):
        # As the reactor does: what its tolerance leaves below zero is kept there.
        gas.set_unnormalized_mole_fractions(fractions[row])
        gas.TD = temperature, density
        rates[row, 0] = gas.forward_rates_of_progress
        rates[row, 1] = gas.reverse_rates_of_progress
    rates *= (1e3 * volumes)[:, None, None]  # kmol/m3/s to mol/s
    bubble = history.bubble
    if not bubble.dense:
        return rates
    return rates * dense_factors(gas, bubble.species[:, COVOLUME], volumes, moles)
