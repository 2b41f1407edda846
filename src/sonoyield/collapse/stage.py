"""One stretch of a resolved run: a set of species in the cells, and their integrator's memory."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from sonoyield.collapse import cells as c
from sonoyield.collapse import cells_bdf as bdf
from sonoyield.collapse import cells_elimination as elimination
from sonoyield.collapse import cells_newton as newton
from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import CONTENTS_FLOOR, Bubble
from sonoyield.collapse.kernel import address_of, reach
from sonoyield.collapse.kinetics_fallback import cell_kinetics
from sonoyield.describe.gas import Array


class Stage:
    """The cells of a bubble with some of its phase's species; ``faces`` (N+1,) as in ``Gas``.

    ``table`` is the bubble's table of species, with what else crosses where there is a film.
    ``temperature_jump``: the surface resists heat, as ``cells_flows`` says.
    """

    def __init__(
        self,
        bubble: Bubble,
        species: Sequence[int],
        faces: Array,
        reactive: bool,
        table: Array,
        film: c.Film,
        temperature_jump: bool = False,
    ) -> None:
        self.bubble, self.kept = bubble, np.asarray(species, dtype=np.intp)
        self.cells, self.count = len(faces) - 1, len(self.kept)
        self.film, self.faces = film, faces
        kinetics = cell_kinetics(bubble.phase)
        phase, constants = bubble.phase, bubble.constants.copy()
        constants[eq.WATER] = list(self.kept).index(phase.index("H2O"))
        self.gas = c.Gas(
            constants,
            np.ascontiguousarray(table[self.kept]),
            np.ascontiguousarray(phase.nasa[self.kept]),
            np.ascontiguousarray(phase.conductivity[self.kept]),
            np.ascontiguousarray(phase.diffusivity[np.ix_(self.kept, self.kept)]),
            faces,
            reactive,
            bubble.dense,
            kinetics.tables,
            kinetics.production,
            kinetics.derivatives,
            temperature_jump,
        )
        shape = self.spots = (len(film.edges) - 1, len(film.gas_index))
        self.start = c.CROSSED + self.count
        self.wet = self.start + self.cells * (self.count + 1)
        self.size = self.wet + shape[0] * shape[1]
        self.work = c.work_for(self.cells, self.count, kinetics.scratch, shape)
        self.blocks = newton.blocks_for(self.cells, self.count, shape, self.size)
        self.time, self.state = 0.0, np.zeros(self.size)
        self.memory = bdf.memory_for(self.size)
        self.calls = bdf.calls_for(self.state, self.gas, film, self.work, self.blocks)
        self.floors = self._floors()

    def begin(self, time: float, step: float, state: Array) -> None:
        """Start from a state laid out as in ``cells`` with a first ``step`` in s."""
        self.time, self.state = time, state
        bdf.begin(
            time, step, state, self.gas, self.film, self.memory, self.work, self.calls
        )

    def advance(
        self, stop: float, relative: float, warm: float, most: int
    ) -> tuple[int, Array, Array]:
        """Step towards ``stop`` (s); why that ended (as ``cells_bdf`` says), times and states.

        At most ``most`` rows; ends as well with a cell above ``warm`` K.
        """
        times, states = np.empty(most), np.empty((most, self.size))
        why, taken = bdf.integrate(
            stop, relative, self.floors, warm, self.gas, self.film, self.memory, self.work,
            self.blocks, self.calls, times, states,
        )  # fmt: skip
        if taken:
            self.time, self.state = float(times[taken - 1]), states[taken - 1].copy()
        return why, times[:taken], states[:taken]

    @property
    def last_step(self) -> float:
        """Size of the step to come, s."""
        return float(self.memory.numbers[bdf.STEP])

    def rates(self, time: float, state: Array, out: Array) -> None:
        """Fill ``out`` (S,) with the rates of change of ``state`` (S,) at ``time`` s."""
        reach(self.calls.rates, (time, state, self.gas, self.film, self.work, out))

    def evaluate(self, time: float, state: Array, out: Array) -> None:
        """As ``rates``, and find the Jacobian J there for the next three."""
        given = (time, state, self.gas, self.film, self.work, self.blocks, self.calls.rates, out)
        reach(self.calls.evaluate, given)

    def factorise(self, gamma: float) -> None:
        """Make ready to solve with I - ``gamma`` J."""
        given = (gamma, self.blocks, self.film.gas_index, self.calls.substitute)
        reach(self.calls.factorise, given)

    def solve(self, gamma: float, right: Array, out: Array) -> None:
        """Fill ``out`` (S,) with the x that solves (I - ``gamma`` J) x = ``right`` (S,)."""
        given = (gamma, self.blocks, self.film.gas_index, self.calls.substitute, right, out)
        reach(self.calls.solve, given)

    def multiply(self, x: Array, out: Array) -> None:
        """Fill ``out`` (S,) with J ``x`` (S,)."""
        given = (self.blocks, self.film.gas_index, x, out)
        reach(address_of(elimination.multiply, *given), given)

    @property
    def counts(self) -> dict[str, int]:
        """Steps, evaluations of the rates, Jacobians and factorisations so far."""
        counts = self.memory.counts
        return {
            "steps": int(counts[bdf.STEPS]),
            "evaluations": int(counts[bdf.EVALUATIONS]),
            "jacobians": int(counts[bdf.JACOBIANS]),
            "factorisations": int(counts[bdf.FACTORISATIONS]),
        }

    def temperatures(self, states: Array) -> Array:
        """Temperature of each cell, K (P, N), of states (P, S)."""
        return self._cells(states)[..., self.count]

    def moles(self, states: Array) -> Array:
        """Amounts of all the phase's species, mol (P, N, K), of states (P, S)."""
        whole = np.zeros((len(states), self.cells, len(self.bubble.phase.species)))
        whole[..., self.kept] = self._cells(states)[..., : self.count]
        return whole

    def concentrations(self, states: Array) -> Array:
        """Concentrations in the film, mol/m3 (P, M, L), of states (P, S)."""
        return states[:, self.wet :].reshape(-1, *self.spots)[..., : self.film.dissolved]

    def warming(self, states: Array) -> Array:
        """How much warmer than far away the film is, K (P, M), of states (P, S); where it warms."""
        return states[:, self.wet :].reshape(-1, *self.spots)[..., -1]

    def summary(self, state: Array) -> Array:
        """A state as ``equations`` lays it out: mole mean of the temperature, all contents."""
        count = len(self.bubble.phase.species)
        inside = self._cells(state)
        amounts = inside[:, : self.count].sum(axis=1)
        row = np.zeros(eq.state_size(count))
        row[eq.RADIUS], row[eq.SPEED] = state[c.RADIUS], state[c.SPEED]
        row[eq.TEMPERATURE] = amounts @ inside[:, self.count] / amounts.sum()
        row[eq.MOLES + self.kept] = inside[:, : self.count].sum(axis=0)
        row[eq.MOLES + count + self.kept] = state[c.CROSSED : self.start]
        row[eq.MOLES + 2 * count :] = state[c.LEDGER : c.CROSSED]
        return row

    def compose(
        self, head: Array, crossed: Array, moles: Array, temperatures: Array,
        warming: Array | None = None,
    ) -> Array:  # fmt: skip
        """A state of this stage: ``head`` up to what crossed, ``crossed`` (K,), ``moles`` (N, K).

        The film's concentrations are those far away; so is its temperature without ``warming``
        (M,), K.
        """
        state = np.empty(self.size)
        state[: c.CROSSED] = head
        state[c.CROSSED : self.start] = crossed[self.kept]
        inside = state[self.start : self.wet].reshape(self.cells, self.count + 1)
        inside[:, : self.count] = moles[:, self.kept]
        inside[:, self.count] = temperatures
        wet = state[self.wet :].reshape(self.spots)
        wet[:] = self.film.bulk
        if warming is not None:
            wet[:, -1] = warming
        return state

    def _cells(self, states: Array) -> Array:
        inside = states[..., self.start : self.wet]
        return inside.reshape(*states.shape[:-1], self.cells, self.count + 1)

    def _floors(self) -> Array:
        """What relative accuracy starts from, by state; the ledger only follows."""
        bubble = self.bubble
        floors = np.empty(self.size)
        floors[c.RADIUS], floors[c.SPEED] = 1e-3 * bubble.radius, bubble.speed_scale
        floors[c.LEDGER : c.CROSSED] = LEDGER_FOLLOWS * bubble.energy_scale
        contents = CONTENTS_FLOOR * float(bubble.moles.sum())
        floors[c.CROSSED : self.start] = contents
        inside = floors[self.start : self.wet].reshape(self.cells, self.count + 1)
        inside[:, : self.count] = contents * np.diff(self.faces)[:, None]
        inside[:, self.count] = 1.0
        floors[self.wet :] = FILM_FLOOR
        if self.film.warms:
            floors[self.wet :].reshape(self.spots)[:, -1] = WARMING_FLOOR
        return floors


LEDGER_FOLLOWS = 1e3  # the ledger takes no part in the choice of steps
FILM_FLOOR = 1e-3  # mol/m3
WARMING_FLOOR = 1.0  # K, as in the gas
