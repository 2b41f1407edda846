"""Follow one bubble with its chemistry coupled one way: the wall does not feel the reactions.

First the bubble with frozen chemistry. Then a Cantera reactor receives what that history delivers,
its volume and what its wall conducts of heat and vapour against time, and reacts; what it makes
crosses the wall by the same exchange law, at the reactor's own state.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from typing import Any

import cantera as ct
import numpy as np

from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import CONTENTS_FLOOR, Bubble
from sonoyield.collapse.compression import ROOM, Compression, reactor_rates
from sonoyield.collapse.dense import dense_production, net_stoichiometry
from sonoyield.collapse.exchange import COVOLUME
from sonoyield.collapse.follow import FAILED, STEP_LIMIT, Accuracy, _Run
from sonoyield.collapse.history import History, Recorder
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.reactor import KILO, OWN, AddedStates, IntegrationError
from sonoyield.describe.gas import Array

WARM = 600.0  # K; the reactor begins where the gas is first warmer, fresh contents are inert below
VOLUME_LIMIT = 1e-6  # relative difference between the reactor's volume and the history's
STOPS = (FAILED, STEP_LIMIT)
# Share of the volume that the molecules' covolumes may fill. Steam that splits makes more of them,
# and in the strongest collapses they would not fit where the frozen contents went.
FULL = 0.99
COLD_LIMIT = 10  # times the limit on the reactor's steps: explicit ones cost a tenth
SHARE = 0.01  # of the tolerance asked for: the volume is a state of the reactor and holds to it


@dataclass(frozen=True, eq=False)
class OneWayHistory(History):
    """What a one-way run leaves.

    ``states``: radius, wall speed and the ledger's integrals of the bubble stage; temperature,
    contents and what crossed of the reactor. ``frozen`` is the bubble stage at the same times
    (exact at the marks): the energy ledger is its own, as only there wall and gas exchange work.
    ``volume_error`` is the largest relative difference between the two volumes; ``supplied`` (N,)
    the energy that the reactor has received, J.
    """

    frozen: Array | None = None
    supplied: Array | None = None
    volume_error: float = 0.0

    @property
    def bubble_stage(self) -> History:
        """The bubble stage alone, whose chemistry is frozen, row by row beside this history."""
        assert self.frozen is not None
        return History(self.bubble, self.times, self.frozen, self.marks, self.stopped)


def follow_one_way(
    bubble: Bubble, collapses: int = 1, accuracy: Accuracy | None = None
) -> OneWayHistory:
    """Integrate from rest until ``collapses`` windows of the frozen bubble are complete.

    Ends earlier, and says so in ``History.stopped``, as ``follow`` does, and fails where the
    reactor's volume leaves the history's by more than 1e-6 or is too small for what is in it.
    """
    accuracy = accuracy or Accuracy()
    history = _once(bubble, collapses, accuracy)
    for _ in range(accuracy.tighten):
        follows = history.volume_error <= VOLUME_LIMIT
        if follows and (history.stopped in STOPS or balance(history.bubble_stage).closed):
            break
        accuracy = replace(accuracy, relative=0.1 * accuracy.relative)
        history = _once(bubble, collapses, accuracy)
    return history


def _once(bubble: Bubble, collapses: int, accuracy: Accuracy) -> OneWayHistory:
    frozen = _FrozenRun(bubble, collapses, accuracy).complete()
    warm = np.flatnonzero(frozen.temperature > WARM)
    return _react(
        frozen,
        int(warm[0]) if len(warm) else len(frozen.times) - 1,
        replace(accuracy, steps=accuracy.steps * collapses),
    )


class _FrozenRun(_Run):
    """The bubble stage: the compiled explicit integrator all the way, chemistry frozen."""

    def __init__(self, bubble: Bubble, collapses: int, accuracy: Accuracy) -> None:
        super().__init__(bubble, collapses, replace(accuracy, split=True))
        self.warm = np.inf

    def _reactive(self) -> bool:
        return False

    def _cold(self) -> str:
        before = self.counters["cold_steps"]
        stopped = super()._cold()
        if not self.implicit_only:
            return stopped
        if self.counters["cold_steps"] == before:
            return FAILED
        self.implicit_only = False  # the record was full, or one more attempt decides
        most = COLD_LIMIT * self.most
        return STEP_LIMIT if self.counters["cold_steps"] >= most else ""


def _react(frozen: History, begin: int, accuracy: Accuracy) -> OneWayHistory:
    """Let the contents react along a frozen history from row ``begin`` on."""
    compression = Compression.of(frozen)
    record = Recorder(np.append(frozen.states[0], 0.0))
    spare = np.zeros((begin, 1))
    record.extend(frozen.times[1 : begin + 1], np.hstack([frozen.states[1 : begin + 1], spare]))
    stage = _ReactorStage(frozen, compression, begin, SHARE * accuracy.relative)
    marks = [row for row in frozen.marks if row <= begin]
    ends = [row for row in frozen.marks if row > begin]
    if frozen.times[-1] > frozen.times[max(begin, *frozen.marks)]:
        ends.append(len(frozen.times) - 1)
    stopped = ""
    while ends and not stopped:
        stopped = stage.step(accuracy.steps)
        while ends and not stopped and stage.time >= frozen.times[ends[0]]:
            row = ends.pop(0)
            record.add(frozen.times[row], stage.between(float(frozen.times[row])))
            if row in frozen.marks:
                marks.append(record.last)
        if ends and not stopped and stage.time > record.times[record.last]:
            record.add(stage.time, stage.state)
    return _gather(frozen, compression, record, tuple(marks), stopped or frozen.stopped, stage)


def _gather(
    frozen: History, compression: Compression, record: Recorder, marks: tuple[int, ...],
    stopped: str, stage: _ReactorStage,
) -> OneWayHistory:
    """Join the reactor's steps with the bubble stage at the same times."""
    times, rows = record.arrays()
    beside = np.column_stack([np.interp(times, frozen.times, one) for one in frozen.states.T])
    after = times > stage.began
    beside[after, eq.RADIUS], beside[after, eq.SPEED] = compression.wall(times[after])
    ledger = slice(eq.MOLES + 2 * len(frozen.bubble.phase.species), beside.shape[1])
    states = rows[:, :-1].copy()
    states[:, eq.RADIUS], states[:, eq.SPEED] = beside[:, eq.RADIUS], beside[:, eq.SPEED]
    states[:, ledger] = beside[:, ledger]
    return OneWayHistory(
        frozen.bubble, times, states, marks, stopped,
        frozen.counters | {"hot_steps": stage.steps, "evaluations": stage.evaluations,
                           "stages": stage.starts},
        frozen=beside, supplied=rows[:, -1], volume_error=stage.volume_error,
    )  # fmt: skip


class _ReactorStage:
    """Steps the reactor along the compression; ``state`` ends with the energy received."""

    def __init__(
        self, frozen: History, compression: Compression, begin: int, relative: float
    ) -> None:
        self.compression = compression
        self.covolume = frozen.bubble.species[:, COVOLUME]
        self.time = self.began = float(frozen.times[begin])
        self.state = np.append(frozen.states[begin], 0.0)
        self.steps, self.starts, self.last, self.volume_error = 0, 1, 0.0, 0.0
        self.reactor = _reactor(frozen.bubble, frozen.states[begin], compression)
        self.network = ct.ReactorNet([self.reactor])
        self.network.initial_time = self.time
        self.network.rtol = relative
        self.network.atol = relative * CONTENTS_FLOOR * float(frozen.bubble.moles.sum()) / KILO
        self.network.max_err_test_fails = 20
        self.network.max_steps = 100_000

    @property
    def evaluations(self) -> int:
        return self.reactor.evaluations

    def step(self, most: int) -> str:
        """Advance by one step no longer than the compression allows; why to stop, or nothing."""
        limit = self.compression.longest_step(self.time)
        # The integrator chooses its next step before it learns the next limit, which falls by at
        # most the step taken: half of this limit is never more than the next.
        self.network.max_time_step = 0.5 * limit
        try:
            if self.last > limit:
                self._restart()
            now = self.network.step()
        except IntegrationError:
            return FAILED
        self.last, self.time = now - self.time, now
        self.steps += 1
        self.reactor.unpack(self.reactor.trial, self.state)
        error = self._volume_error(now, self.reactor.trial[1])
        self.volume_error = max(self.volume_error, error)
        if error > VOLUME_LIMIT or self._filled() > FULL:
            return FAILED
        return STEP_LIMIT if self.steps >= most else ""

    def between(self, time: float) -> Array:
        """State at a time inside the last step, by the integrator's own polynomial."""
        value, factor = self.network.get_derivative(0), 1.0
        for order in range(1, int(self.network.solver_stats["last_order"]) + 1):
            factor *= (time - self.time) / order
            value = value + factor * self.network.get_derivative(order)
        state = self.state.copy()
        self.reactor.unpack(value, state)
        return state

    def _restart(self) -> None:
        """Begin anew with a small step: the integrator never shortens its step on request."""
        self.reactor.start[:] = self.reactor.trial
        self.network.reinitialize()
        self.starts += 1

    def _filled(self) -> float:
        moles = self.state[eq.MOLES : eq.MOLES + self.reactor.count]
        return float(moles @ self.covolume / self.reactor.trial[1])

    def _volume_error(self, time: float, volume: float) -> float:
        there = float(self.compression.volume(time))
        return abs(volume - there) / there


class _CompressedReactor(AddedStates):
    """Cantera's reactor in a given volume; what crossed and the energy received are added."""

    def prepare(self, bubble: Bubble, state: Array, compression: Compression) -> None:
        count = len(bubble.phase.species)
        self.count, self.crossing = count, bubble.crossing
        self.base = OWN + count
        # The integrator takes one absolute tolerance: energy is scaled to suit it.
        contents = float(bubble.moles.sum()) / KILO
        self.scale = CONTENTS_FLOOR * contents / bubble.energy_scale
        self.evaluations = 0
        self.energy_enabled = False  # the energy balance is ours
        self.rates = partial(
            reactor_rates, bubble.crossing, self.scale, compression.nodes,
            np.empty((ROOM, count)), *bubble.tables[:3], bubble.phase.diffusivity,
        )  # fmt: skip
        self.dense = bubble.dense
        self.chemistry_enabled = not self.dense
        self.gas, self.covolume = self.phase, bubble.species[:, COVOLUME].copy()
        self.net = net_stoichiometry(self.gas)
        self.production, self.logarithms = np.empty(count), np.empty(count)
        self.start = np.zeros(self.base + len(self.crossing) + 1)
        self.start[0] = state[eq.TEMPERATURE]
        self.start[1] = 4.0 / 3.0 * np.pi * state[eq.RADIUS] ** 3
        self.start[OWN : self.base] = state[eq.MOLES : eq.MOLES + count] / KILO
        self.start[self.base : -1] = state[eq.MOLES + count + self.crossing] / KILO

    def after_eval(self, t: float, left: Any, right: Any) -> None:
        self.evaluations += 1
        slopes = np.asarray(right)
        if self.dense:
            dense_production(
                self.gas.forward_rates_of_progress, self.gas.reverse_rates_of_progress, *self.net,
                self.trial[1], self.trial[OWN : self.base] * KILO, self.covolume, self.logarithms,
                self.production,
            )  # fmt: skip
            slopes[OWN : self.base] = self.production / KILO
        self.rates(t, self.trial, np.asarray(left), slopes)

    def unpack(self, y: Array, state: Array) -> None:
        """Fill a row from the reactor's state: temperature, contents, crossed, energy."""
        count = self.count
        state[eq.TEMPERATURE] = y[0]
        state[eq.MOLES : eq.MOLES + count] = y[OWN : self.base] * KILO
        state[eq.MOLES + count + self.crossing] = y[self.base : -1] * KILO
        state[-1] = y[-1] / self.scale


def _reactor(bubble: Bubble, state: Array, compression: Compression) -> _CompressedReactor:
    gas = bubble.phase.solution()
    moles = state[eq.MOLES : eq.MOLES + len(bubble.phase.species)]
    volume = 4.0 / 3.0 * np.pi * state[eq.RADIUS] ** 3
    density = float(moles @ bubble.phase.molar_mass) / volume
    gas.TDX = state[eq.TEMPERATURE], density, np.maximum(moles, 0.0)
    reactor = _CompressedReactor(gas, clone=False)
    reactor.volume = volume
    reactor.prepare(bubble, state, compression)
    return reactor
