"""How far one pressure for the whole gas holds: estimates at each step of a run."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from sonoyield.collapse.exchange import COVOLUME, MASS
from sonoyield.collapse.history import History
from sonoyield.collapse.properties import heat_capacity_and_enthalpy
from sonoyield.describe.gas import GAS_CONSTANT

UNEVEN = 0.1  # share of the pressure from which the estimate is worth a warning
SONIC = 1.0  # wall speed over the gas's sound speed


@dataclass(frozen=True)
class Uniformity:
    """Worst over a run: pressure at the centre over that at the wall less one, and wall speed.

    ``pressure_spread``: rho_gas R R''/(2 p), of gas that contracts evenly (Lin, Storey and Szeri
    2002, J. Fluid Mech. 452, 145, from memory; that the gas is even is the estimate's own error).
    ``gas_mach``: inward wall speed over the sound speed of the gas at its mean temperature.
    """

    pressure_spread: float
    gas_mach: float

    @property
    def holds(self) -> bool:
        """Whether one pressure is within its range."""
        return self.pressure_spread <= UNEVEN and self.gas_mach <= SONIC


def uniformity_of(history: History) -> Uniformity:
    """Estimate both over the windows of a run (or over all of it)."""
    end = history.spans[-1][1] + 1
    if len(np.unique(history.times[:end])) < 3:
        return Uniformity(0.0, 0.0)
    radius, moles = history.radius[:end], history.moles[:end]
    volume = 4.0 / 3.0 * pi * radius**3
    density = moles @ history.bubble.species[:, MASS] / volume
    pressure = history.pressure[:end]
    times, rows = np.unique(history.times[:end], return_index=True)
    acceleration = np.gradient(history.speed[rows], times)
    spread = 0.5 * (density * radius / pressure)[rows] * np.abs(acceleration)
    inwards = np.clip(-history.speed[:end], 0.0, None)
    fast = np.flatnonzero(inwards > FAST * inwards.max())
    mach = max((inwards[row] / _sound_speed(history, int(row)) for row in fast), default=0.0)
    return Uniformity(float(spread.max()), float(mach))


def _sound_speed(history: History, row: int) -> float:
    """Sound speed of the Noble-Abel gas, m/s: c^2 = gamma p / rho / (1 - B/V)."""
    bubble, moles = history.bubble, history.moles[row]
    capacity, enthalpy = np.empty(len(moles)), np.empty(len(moles))
    heat_capacity_and_enthalpy(
        float(history.temperature[row]), bubble.phase.nasa, capacity, enthalpy
    )
    total = moles.sum()
    cp = capacity @ moles / total
    gamma = cp / (cp - GAS_CONSTANT)
    free = 4.0 / 3.0 * pi * history.radius[row] ** 3 - moles @ bubble.species[:, COVOLUME]
    pressure = total * GAS_CONSTANT * history.temperature[row] / free
    volume = 4.0 / 3.0 * pi * history.radius[row] ** 3
    mass = moles @ bubble.species[:, MASS]
    return float(np.sqrt(gamma * pressure * volume**2 / (mass * free)))


FAST = 0.05  # of the largest inward speed; slower steps cannot have the largest Mach number
