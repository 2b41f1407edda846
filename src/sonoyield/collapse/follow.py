"""Follow one bubble from rest through its main collapses, wall and chemistry coupled both ways.

A compiled explicit stage carries the cold, inert gas; Cantera's reactor network carries it while
it is hot or holds radicals. `marks` says where windows end.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numba import njit

from sonoyield.collapse import cold
from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.history import History, Recorder
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.marks import Marks, scratch
from sonoyield.collapse.reactor import HotStage, IntegrationError
from sonoyield.describe.gas import ABSORBED, Array

# Above these temperatures the reactor takes over. What would react in fresh gas on the way to
# 2300 K changes delivered OH by under 0.02 % (measured, nine strong collapses); it matters to one
# that ends below WEAK: where a quick look ahead with chemistry frozen stays below WEAK_AHEAD, or a
# run turns out so, the reactor begins early. Hydrogen and the remains of radicals left by an
# earlier collapse may react sooner.
WARM_FRESH, WARM_USED, WEAK, WEAK_AHEAD = 2300.0, 1000.0, 3000.0, 3400.0  # K
# The reactor lets go of colder gas when the radicals left in it are at most this share of those
# delivered so far (which bounds what freezing them can change), or of the contents.
QUIET_DELIVERED, QUIET_CONTENTS = 1e-4, 1e-9
PATIENCE = 2.5  # periods without a main maximum before the run ends
COLD_SHARE = 0.1  # of the tolerance asked for: it costs little there and closes the ledger
WEAK_SHARE = 0.5  # likewise where the reactor carries the compression from WARM_USED on


@dataclass(frozen=True)
class Accuracy:
    """Numerical choices of a run.

    ``relative`` tolerance asked for; ``split``: let the compiled stage carry the cold gas (else
    the reactor carries all of it); ``steps``: limit on the reactor's steps a window; ``tighten``:
    how often a run whose ledger does not close is repeated with a tenth of the tolerance;
    ``seconds``: limit on the time of a resolved run.
    """

    relative: float = 1e-6
    split: bool = True
    steps: int = 40_000
    tighten: int = 4
    seconds: float = 60.0


def follow(bubble: Bubble, collapses: int = 1, accuracy: Accuracy | None = None) -> History:
    """Integrate from rest until ``collapses`` windows are complete.

    Ends earlier, and says so in ``History.stopped``, where no main maximum comes within 2.5
    periods, at the step limit, or where the integration fails.
    """
    accuracy = accuracy or Accuracy()
    if bubble.pressure_amplitude == 0.0:
        return at_rest(bubble)
    warm = WARM_USED if bubble.mixture.get("H2") else WARM_FRESH
    run = _Run(bubble, collapses, accuracy, warm)
    history = run.complete()
    if not run.early and WARM_USED < history.temperature.max() < WEAK:
        warm = WARM_USED
        history = _Run(bubble, collapses, accuracy, warm).complete()
    for _ in range(accuracy.tighten):
        if history.stopped in (STEP_LIMIT, FAILED) or balance(history).closed:
            break
        accuracy = replace(accuracy, relative=0.1 * accuracy.relative)
        history = _Run(bubble, collapses, accuracy, warm).complete()
    return history


def at_rest(bubble: Bubble) -> History:
    """Without sound the bubble stays in the equilibrium that it starts from."""
    times = np.array([0.0, PATIENCE * bubble.period])
    return History(bubble, times, np.array([bubble.at_rest()] * 2), (0,), NO_MAXIMUM)


class _Run:
    def __init__(
        self, bubble: Bubble, collapses: int, accuracy: Accuracy, warm: float = WARM_FRESH
    ) -> None:
        self.bubble, self.accuracy = bubble, accuracy
        self.most = accuracy.steps * collapses
        self.relative = COLD_SHARE * accuracy.relative
        self.absolute = bubble.tolerances(self.relative)
        self.time, self.state = 0.0, bubble.at_rest()
        self.record = Recorder(self.state)
        self.marks = Marks(bubble, self.record, collapses + 2)  # rest, a maximum, one a window
        self.step = 1e-4 * bubble.period
        self.implicit_only = not accuracy.split
        self.hot = HotStage(bubble, accuracy.relative)
        self.counters = dict.fromkeys(("cold_steps", "hot_steps", "evaluations", "stages"), 0)
        species = bubble.phase.species
        self.radicals = eq.MOLES + np.array([species.index(k) for k in ABSORBED if k in species])
        self.warm = warm
        self.early = warm < WARM_FRESH
        self.few = QUIET_CONTENTS * float(bubble.moles.sum())

    def complete(self) -> History:
        stopped = ""
        while not stopped and not self.marks.complete:
            stopped = self._hot() if self._reactive() else self._cold()
        times, states = self.record.arrays()
        return History(
            self.bubble, times, states, tuple(self.marks.rows), stopped, dict(self.counters)
        )

    @property
    def deadline(self) -> float:
        return self.marks.latest + PATIENCE * self.bubble.period

    def _reactive(self) -> bool:
        if self.implicit_only or self.state[eq.TEMPERATURE] > self.warm:
            return True
        left, delivered = _totals(self.state, self.radicals, len(self.bubble.phase.species))
        return bool(left > max(self.few, QUIET_DELIVERED * delivered))

    def _cold(self) -> str:
        times, states = scratch(len(self.state))
        why, taken, self.step = cold.integrate_frozen(
            self.time, self.deadline, self.step, self.state, self.warm, self.relative,
            self.absolute, *self.bubble.tables, times, states,
        )  # fmt: skip
        self.counters["cold_steps"] += taken
        if taken:
            self.time = float(times[taken - 1])
            self.record.extend(times[:taken], states[:taken])
        if why == cold.END:
            return NO_MAXIMUM
        if why in (cold.STIFF, cold.FAILED):
            self.implicit_only = True
        elif why == cold.MAXIMUM:
            self._crest(self.time, self.state)
        return ""

    def _hot(self) -> str:
        hot, before, deadline = self.hot, dict(self.counters), self.deadline
        hot.relative = self.accuracy.relative * (WEAK_SHARE if self.early else 1.0)
        hot.begin(self.time, self.state)
        self.warm = WARM_USED
        stopped = ""
        while not stopped and not self.marks.complete:
            rising = self.state[eq.SPEED] > 0.0
            try:
                hot.step()
            except IntegrationError:
                stopped = FAILED
                break
            if rising and hot.state[eq.SPEED] <= 0.0:
                self._hot_crest()
                deadline = self.deadline
            self.record.add(hot.time, hot.state)
            self.state[:] = hot.state
            if hot.time >= deadline:
                stopped = NO_MAXIMUM
            elif before["hot_steps"] + hot.steps >= self.most:
                stopped = STEP_LIMIT
            elif not self._reactive():
                break
        self.time = hot.time
        self.counters["stages"] += 1
        self.counters["hot_steps"] = before["hot_steps"] + hot.steps
        self.counters["evaluations"] = before["evaluations"] + hot.evaluations
        self.step = 1e-4 * self.bubble.period
        return stopped

    def _hot_crest(self) -> None:
        """Find the maximum inside the reactor's last step on its own polynomial."""
        low, high = self.record.times[self.record.last], self.hot.time
        state = self.hot.state
        for _ in range(60):
            middle = 0.5 * (low + high)
            state = self.hot.between(middle)
            if state[eq.SPEED] > 0.0:
                low = middle
            else:
                high = middle
            if high - low <= 1e-13 * high:
                break
        self.record.add(high, state)
        self._crest(high, state)

    def _crest(self, time: float, state: Array) -> None:
        if self.marks.crest(time, state) and len(self.marks.rows) == 2 and self.warm == WARM_FRESH:
            _, hottest = self.marks.ahead(time, state)
            self.early = hottest <= WEAK_AHEAD
            self.warm = WARM_USED if self.early else WARM_FRESH


NO_MAXIMUM = "no_maximum"
STEP_LIMIT = "step_limit"
TIME_LIMIT = "time_limit"
FAILED = "integration_failed"


@njit(cache=True, error_model="numpy")
def _totals(state: Array, radicals: Array, count: int) -> tuple[float, float]:
    """Radicals in the gas and delivered so far, mol."""
    left = 0.0
    delivered = 0.0
    for row in radicals:
        left += state[row]
        delivered += state[row + count]
    return left, delivered
