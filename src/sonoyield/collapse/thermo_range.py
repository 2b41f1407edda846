"""How long, and with how much of the gas, each species was above its thermo source's range."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sonoyield.collapse.history import History
from sonoyield.describe.gas import Array

TRACE = 1e-3  # mole fraction below which a species' thermo range does not decide
DUST = 1e-9  # mole fraction below which a species is not there but for rounding


@dataclass(frozen=True)
class ThermoRange:
    """A species' stay above the range of its thermo source during a run.

    ``limit_K`` end of the source; ``time_s`` time the gas spent above it; ``mean_share`` and
    ``largest_share`` mole fraction of the species over that time.
    """

    species: str
    limit_K: float
    time_s: float
    mean_share: float
    largest_share: float

    @property
    def matters(self) -> bool:
        """Whether there was more than a trace of it."""
        return self.largest_share > TRACE


def thermo_range(history: History) -> list[ThermoRange]:
    """Every species that was in the gas above its source's range, in the phase's order."""
    phase = history.bubble.phase
    weights = _time_weights(history.times)
    shares = np.maximum(history.moles, 0.0) / history.moles.sum(axis=1, keepdims=True)
    found = []
    for k, (name, limit) in enumerate(zip(phase.species, phase.source_limit, strict=True)):
        above = history.temperature > limit
        share, weight = shares[above, k], weights[above]
        time = float(weight.sum())
        if time > 0.0 and share.max() > DUST:
            mean = float((share * weight).sum() / time)
            found.append(ThermoRange(name, float(limit), time, mean, float(share.max())))
    return found


def _time_weights(times: Array) -> Array:
    """Trapezoid weights: half of each step goes to either end."""
    steps = np.diff(times)
    return 0.5 * (np.append(steps, 0.0) + np.insert(steps, 0, 0.0))
