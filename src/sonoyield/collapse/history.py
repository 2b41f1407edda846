"""What a run leaves: radius, speed, temperature and contents against time, and its windows."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.describe.gas import Array


@dataclass(frozen=True, eq=False)
class CellRecord:
    """The resolved gas at each step: N cells of mass fractions ``faces`` (N+1,), centre first.

    ``temperature`` (P, N) K, ``moles`` (P, N, K) mol; ``film`` (Q, M, L) mol/m3, concentrations in
    the liquid film at the last Q steps. ``warming`` (P, M) K, of the film over the liquid far away,
    where the liquid at the wall warms.
    """

    faces: Array
    temperature: Array
    moles: Array
    film: Array | None = None
    warming: Array | None = None


@dataclass(frozen=True, eq=False)
class History:
    """Accepted steps of one bubble, from rest, and where its windows begin and end.

    ``times`` (N,) s and ``states`` (N, S) as laid out in ``equations``. ``marks`` are the rows of
    rest and of each main expansion maximum; ``windows`` pairs of rows from rest to the second
    main maximum, then from one to the next. ``stopped`` says why the run ended early, or is
    empty. ``counters`` are the integrators' steps and evaluations. ``cells`` where the gas is
    resolved; the states then hold the mole mean of its temperature.
    """

    bubble: Bubble
    times: Array
    states: Array
    marks: tuple[int, ...]
    stopped: str = ""
    counters: dict[str, int] = field(default_factory=dict)
    cells: CellRecord | None = None

    @property
    def windows(self) -> tuple[tuple[int, int], ...]:
        """Rows where each complete window begins and ends; empty when none is complete."""
        ends = self.marks[2:]
        return tuple(zip((self.marks[0], *ends[:-1]), ends, strict=True)) if ends else ()

    @property
    def spans(self) -> tuple[tuple[int, int], ...]:
        """The complete windows or, where there is none, the whole run."""
        return self.windows or ((0, len(self.times) - 1),)

    @property
    def radius(self) -> Array:
        """Bubble radius at each step, m."""
        return self.states[:, eq.RADIUS]

    @property
    def speed(self) -> Array:
        """Wall speed at each step, m/s, positive outwards."""
        return self.states[:, eq.SPEED]

    @property
    def temperature(self) -> Array:
        """Gas temperature at each step, K."""
        return self.states[:, eq.TEMPERATURE]

    @property
    def moles(self) -> Array:
        """Contents at each step, mol, shape (N, K)."""
        return self.states[:, eq.MOLES : eq.MOLES + self._count]

    @property
    def crossed(self) -> Array:
        """What has crossed into the liquid (net) at each step, mol, shape (N, K)."""
        return self.states[:, eq.MOLES + self._count : eq.MOLES + 2 * self._count]

    @property
    def ledger(self) -> Array:
        """Integrals of the energy ledger at each step, J, shape (N, 6)."""
        return self.states[:, eq.MOLES + 2 * self._count :]

    @property
    def pressure(self) -> Array:
        """Gas pressure at each step, Pa."""
        species = self.bubble.species
        return np.array(
            [
                eq.gas_pressure(row[eq.RADIUS], row[eq.TEMPERATURE], moles, species)
                for row, moles in zip(self.states, self.moles, strict=True)
            ]
        )

    @property
    def bubble_stage(self) -> History:
        """The run whose wall and gas exchange the work that the energy ledger counts: this one."""
        return self

    @property
    def _count(self) -> int:
        return len(self.bubble.phase.species)


class Recorder:
    """Collects accepted steps, growing its arrays as needed."""

    def __init__(self, state: Array) -> None:
        self.times = np.empty(2048)
        self.states = np.empty((2048, state.size))
        self.size = 0
        self.add(0.0, state)

    def add(self, time: float, state: Array) -> None:
        """Append one step."""
        if self.size == len(self.times):
            self._grow()
        self.times[self.size] = time
        self.states[self.size] = state
        self.size += 1

    def extend(self, times: Array, states: Array) -> None:
        """Append several steps, ``times`` (N,) and ``states`` (N, S)."""
        needed = self.size + len(times)
        while needed > len(self.times):
            self._grow()
        self.times[self.size : needed] = times
        self.states[self.size : needed] = states
        self.size = needed

    @property
    def last(self) -> int:
        """Row of the last step."""
        return self.size - 1

    def arrays(self) -> tuple[Array, Array]:
        """The steps recorded so far, as copies of exactly their length."""
        return self.times[: self.size].copy(), self.states[: self.size].copy()

    def _grow(self) -> None:
        self.times = np.concatenate([self.times, np.empty_like(self.times)])
        self.states = np.concatenate([self.states, np.empty_like(self.states)])
