"""Main expansion maxima of a run as it goes, where its windows begin and end.

A *main expansion maximum* has no larger radius within half a period before or after it; a
*window* ends at one.
"""

from __future__ import annotations

import numpy as np

from sonoyield.collapse import cold
from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.history import Recorder
from sonoyield.describe.gas import Array

LOOK_AHEAD = 1e-4  # tolerance of the look ahead, which only compares radii
ROOM = 20_000  # steps of the explicit stage before it counts as stiff


class Marks:
    """Rows of a record that are marks: rest, then main maxima, until ``wanted`` are there.

    States are laid out as in ``equations``.
    """

    def __init__(self, bubble: Bubble, record: Recorder, wanted: int) -> None:
        self.bubble, self.record, self.wanted = bubble, record, wanted
        self.rows = [0]
        self._crests: list[tuple[float, float]] = []
        self._half = 0.5 * bubble.period
        self._absolute = bubble.tolerances(LOOK_AHEAD)

    @property
    def complete(self) -> bool:
        """Whether all marks are there."""
        return len(self.rows) >= self.wanted

    @property
    def latest(self) -> float:
        """Time of the last mark, s."""
        return float(self.record.times[self.rows[-1]])

    def crest(self, time: float, state: Array) -> bool:
        """Take a maximum, the record's last row, unless a larger radius is too near; whether so."""
        radius = float(state[eq.RADIUS])
        self._drop_outgrown()
        larger = any(when > time - self._half and r > radius for when, r in self._crests)
        self._crests.append((time, radius))
        ends = len(self.rows) + 1 == self.wanted
        if larger or (ends and self._outgrown(time, state)):
            return False
        self.rows.append(self.record.last)
        return True

    def ahead(self, time: float, state: Array) -> tuple[float, float]:
        """Largest radius and temperature in the next half period, by a quick frozen look ahead."""
        stop = time + self._half
        ahead = state.copy()
        step = 1e-4 * self.bubble.period
        times, states = scratch(len(state))
        largest = hottest = 0.0
        why = cold.MAXIMUM
        while why == cold.MAXIMUM and time < stop:
            why, taken, step = cold.integrate_frozen(
                time, stop, step, ahead, np.inf, LOOK_AHEAD, self._absolute, *self.bubble.tables,
                times, states,
            )  # fmt: skip
            if taken == 0:
                break
            time = float(times[taken - 1])
            largest = max(largest, float(states[:taken, eq.RADIUS].max()))
            hottest = max(hottest, float(states[:taken, eq.TEMPERATURE].max()))
        return largest, hottest

    def _drop_outgrown(self) -> None:
        """Unmark the last maximum where the radius has grown larger within half a period."""
        row, size = self.rows[-1], self.record.size
        if row == 0:
            return
        times, radii = self.record.times[row:size], self.record.states[row:size, eq.RADIUS]
        if radii[times <= times[0] + self._half].max() > radii[0] * (1.0 + LOOK_AHEAD):
            self.rows.pop()

    def _outgrown(self, time: float, state: Array) -> bool:
        """Whether the radius grows larger within half a period."""
        largest, _ = self.ahead(time, state)
        return largest > state[eq.RADIUS] * (1.0 + LOOK_AHEAD)


_buffers: dict[int, tuple[Array, Array]] = {}


def scratch(size: int) -> tuple[Array, Array]:
    """Room for the explicit stage's steps, made once for each length of the state."""
    if size not in _buffers:
        _buffers[size] = np.empty(ROOM), np.empty((ROOM, size))
    return _buffers[size]
