"""Whether a run conserves its elements, and where the work of the sound has gone."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from sonoyield.collapse import equations as eq
from sonoyield.collapse.history import History
from sonoyield.describe.gas import Array

ELEMENT_LIMIT, ENERGY_LIMIT = 1e-9, 1e-5  # of the well-mixed gas: relative, of the work done
RESOLVED_ELEMENT_LIMIT, RESOLVED_ENERGY_LIMIT = 1e-6, 1e-4  # likewise of the resolved gas
TRACE = 1e-12  # of all atoms: an element that is not there has no balance
LEAST_WORK = 1e-9  # of p0 V0: less work than that does not tell closure from rounding


@dataclass(frozen=True)
class Energies:
    """Energy of one window, J: work = viscous + radiation + heat + carried + stored + residual.

    ``radiation`` from the compressibility terms of the radial equation, ``radiation_far_field``
    the independent estimate rho V''^2 / (4 pi c); ``carried``: enthalpy taken into the liquid by
    what crossed; zero of enthalpy as in ``Bubble.zero_enthalpy``.
    """

    work: float
    viscous: float
    radiation: float
    radiation_far_field: float
    heat: float
    carried: float
    stored: float
    residual: float

    @property
    def dissipated(self) -> float:
        """Energy of the sound that does not come back, J."""
        return self.viscous + self.radiation + self.heat + self.carried


@dataclass(frozen=True)
class Balance:
    """How well a run closes: both relative, both at the worst window."""

    element_error: float
    energy_error: float
    element_limit: float = ELEMENT_LIMIT
    energy_limit: float = ENERGY_LIMIT

    @property
    def closed(self) -> bool:
        """Whether elements and energy are within the limits of this model."""
        within = self.element_error <= self.element_limit
        return within and self.energy_error <= self.energy_limit


def energies(history: History, span: tuple[int, int]) -> Energies:
    """Energy ledger between two rows of a history."""
    history = history.bubble_stage
    begin, end = span
    bubble = history.bubble
    change = history.ledger[end] - history.ledger[begin]
    zero = bubble.zero_enthalpy
    carried = float(change[eq.CARRIED] - zero @ (history.crossed[end] - history.crossed[begin]))
    stored = (
        _stored(history, end)
        - _stored(history, begin)
        - float(zero @ (history.moles[end] - history.moles[begin]))
    )
    spent = float(change[eq.VISCOUS] + change[eq.RADIATION] + change[eq.HEAT])
    return Energies(
        work=float(change[eq.WORK]),
        viscous=float(change[eq.VISCOUS]),
        radiation=float(change[eq.RADIATION]),
        radiation_far_field=float(change[eq.FAR_FIELD]),
        heat=float(change[eq.HEAT]),
        carried=carried,
        stored=stored,
        residual=float(change[eq.WORK]) - spent - carried - stored,
    )


def balance(history: History) -> Balance:
    """Closure of elements since rest and of energy in each window."""
    bubble = history.bubble
    least = LEAST_WORK * bubble.ambient_pressure * 4.0 / 3.0 * pi * bubble.radius**3
    energy = max(
        abs(one.residual) / max(abs(one.work), least)
        for one in (energies(history, span) for span in history.spans)
    )
    elements = max(_element_error(history, end) for _, end in history.spans)
    energy = float(np.nan_to_num(energy, nan=np.inf))
    if history.cells is None:
        return Balance(elements, energy)
    return Balance(elements, energy, RESOLVED_ELEMENT_LIMIT, RESOLVED_ENERGY_LIMIT)


def _stored(history: History, row: int) -> float:
    phase = history.bubble.phase
    scratch = np.empty((eq.SCRATCH, len(phase.species)))
    if history.cells is None:
        parts = [(history.temperature[row], history.moles[row])]
    else:
        cells = history.cells
        parts = list(zip(cells.temperature[row], cells.moles[row], strict=True))
    gas = sum(eq.internal_energy(t, n, phase.nasa, scratch) for t, n in parts)
    return eq.stored_energy(history.states[row], history.bubble.constants) + float(gas)


def _element_error(history: History, row: int) -> float:
    """Largest over the elements that are there of |gas + crossed - start| / (start + |crossed|)."""
    atoms: Array = history.bubble.phase.atoms
    start = atoms @ history.bubble.moles
    crossed = atoms @ history.crossed[row]
    whole = start + atoms @ np.abs(history.crossed[row])
    present = whole > TRACE * whole.sum()
    error = np.abs(atoms @ history.moles[row] + crossed - start)[present] / whole[present]
    return float(np.nan_to_num(error.max(initial=0.0), nan=np.inf))
