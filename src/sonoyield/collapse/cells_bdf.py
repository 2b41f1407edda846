"""Steps of the resolved bubble: backward differentiation with Newton's method, compiled.

The numerical differentiation formulas of Shampine and Reichelt 1997 (SIAM J. Sci. Comput. 18, 1),
orders 1 to 5 in backward differences. The equations of a step are solved by ``cells_newton`` and
``cells_elimination`` directly, so that what they conserve is conserved, and a run stays in compiled
code.
"""

from __future__ import annotations

from math import isfinite, sqrt
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sonoyield.collapse import cells as c
from sonoyield.collapse import cells_elimination as elimination
from sonoyield.collapse import cells_newton as newton
from sonoyield.collapse import cells_rates
from sonoyield.collapse.kernel import address_of, call, inner, making, outer
from sonoyield.collapse.small_matrices import copy
from sonoyield.describe.gas import Array

END, MAXIMUM, WARM, FULL, FAILED = range(5)  # why a stretch ended

# Entries of ``Memory.numbers`` and of ``Memory.counts``.
TIME, STEP, CONVERGENCE, TURNED = range(4)
ORDER, EQUAL, FRESH, FACTORED, EVALUATIONS, JACOBIANS, FACTORISATIONS, STEPS, AGE = range(9)

HIGHEST = 5  # order


class Memory(NamedTuple):
    """What carries over from one step to the next; ``differences`` (HIGHEST + 3, S)."""

    differences: Array
    numbers: Array
    counts: NDArray[np.int64]
    room: Array  # (8, S)


def memory_for(size: int) -> Memory:
    """Room for a state of length ``size``."""
    return Memory(
        np.zeros((HIGHEST + 3, size)), np.zeros(4), np.zeros(9, dtype=np.int64),
        np.zeros((8, size)),
    )  # fmt: skip


class Calls(NamedTuple):
    """Addresses of what a step calls."""

    rates: int
    evaluate: int
    factorise: int
    solve: int
    substitute: int


def calls_for(
    state: Array, gas: c.Gas, film: c.Film, work: c.Work, blocks: newton.Blocks
) -> Calls:
    """What a step calls, compiled if need be, for arguments of these types."""
    rates = address_of(cells_rates.rates, 0.0, state, gas, film, work, state)
    evaluate = address_of(newton.evaluate, 0.0, state, gas, film, work, blocks, rates, state)
    known, row = (0.0, blocks, film.gas_index), state
    substitute = address_of(elimination.substitute, *known, row, row)
    factorise = address_of(elimination.factorise, *known, substitute)
    solve = address_of(elimination.solve, *known, substitute, row, row)
    return Calls(rates, evaluate, factorise, solve, substitute)


@outer
def begin(
    time: float, step: float, state: Array, gas: c.Gas, film: c.Film, memory: Memory, work: c.Work,
    calls: Calls,
) -> None:  # fmt: skip
    """Start from ``state`` at order 1 with a first ``step`` (s)."""
    d, rates = memory.differences, memory.room[0]
    call(calls.rates, (time, state, gas, film, work, rates))
    d[:] = 0.0
    for a in range(state.size):
        d[0, a], d[1, a] = state[a], step * rates[a]
    memory.numbers[TIME], memory.numbers[STEP] = time, step
    memory.counts[:EVALUATIONS] = 0
    memory.counts[ORDER] = 1
    memory.counts[EVALUATIONS] += 1


@outer
def integrate(
    stop: float, relative: float, floors: Array, warm: float, gas: c.Gas, film: c.Film,
    memory: Memory, work: c.Work, blocks: newton.Blocks, calls: Calls, times: Array, states: Array,
) -> tuple[int, int]:  # fmt: skip
    """Step towards ``stop`` (s); returns why it ended and how many rows it recorded.

    ``floors`` (S,) absolute tolerances in units of the relative one. Rows go to ``times`` (P,) and
    ``states`` (P, S). Ends past ``stop`` (``END``), where the radius is largest (``MAXIMUM``, the
    last but one row), with a cell above ``warm`` K (``WARM``), with the record full or failed.
    """
    taken = 0
    while taken + 2 <= times.size:
        before = memory.differences[0, c.SPEED]
        if not _step(relative, floors, gas, film, memory, work, blocks, calls):
            return FAILED, taken
        crest = before > 0.0 and memory.differences[0, c.SPEED] <= 0.0
        if crest:
            times[taken] = _between(memory, states[taken])
            taken += 1
        times[taken] = memory.numbers[TIME]
        copy(memory.differences[0], states[taken])
        taken += 1
        _next_step(memory, work.fractions.shape)
        if crest:
            return MAXIMUM, taken
        if _hottest(states[taken - 1], work.fractions.shape) > warm:
            return WARM, taken
        if memory.numbers[TIME] >= stop:
            return END, taken
    return FULL, taken


@inner
def _step(
    relative: float, floors: Array, gas: c.Gas, film: c.Film, memory: Memory, work: c.Work,
    blocks: newton.Blocks, calls: Calls,
) -> bool:  # fmt: skip
    """Take one step, shortening it until it succeeds; whether it did."""
    counts, numbers = memory.counts, memory.numbers
    for _ in range(PATIENCE):
        order = counts[ORDER]
        _predict(order, relative, floors, memory)
        turns = _newton(gas, film, memory, work, blocks, calls)
        if turns == 0:
            if counts[FRESH] == 0:
                counts[FACTORED] = 0
                counts[AGE] = OLD
            else:
                _change_step(0.5, memory)
            continue
        error = ERROR[order] * _norm(memory.room[3], memory.room[5], work.fractions.shape)
        if isfinite(error) and error <= 1.0:
            numbers[TIME] += numbers[STEP]
            counts[FRESH] = 0
            counts[STEPS] += 1
            counts[AGE] += 1
            counts[EQUAL] += 1
            numbers[TURNED] = turns
            _accept(order, memory)
            return True
        safety = SAFETY * (2 * TURNS + 1) / (2 * TURNS + turns)
        _change_step(max(0.2, safety * error ** (-1.0 / (order + 1))), memory)
    return False


@inner
def _predict(order: int, relative: float, floors: Array, memory: Memory) -> None:
    """Prediction in room 1, history term in room 2, weights of errors in room 5."""
    d, room = memory.differences, memory.room
    for a in range(floors.size):
        total = past = 0.0
        for i in range(order + 1):
            total += d[i, a]
            past += SUMS[i] * d[i, a]
        room[1, a] = total
        room[2, a] = past / ALPHA[order]
        room[5, a] = 1.0 / (relative * (floors[a] + abs(total)))


@inner
def _newton(
    gas: c.Gas, film: c.Film, memory: Memory, work: c.Work, blocks: newton.Blocks, calls: Calls
) -> int:
    """Solve for the change from the prediction (room 3); iterations taken, 0 for failure."""
    room, counts, numbers = memory.room, memory.counts, memory.numbers
    state, change, weights = room[4], room[3], room[5]
    scaled = numbers[STEP] / ALPHA[counts[ORDER]]
    time = numbers[TIME] + numbers[STEP]
    copy(room[1], state)
    change[:] = 0.0
    if counts[FACTORED] == 0:
        if counts[AGE] >= OLD:
            call(calls.evaluate, (time, state, gas, film, work, blocks, calls.rates, room[0]))
            counts[JACOBIANS] += 1
            counts[FRESH], counts[AGE] = 1, 0
            if not isfinite(room[0, c.SPEED]):  # not physical: a shorter step, a new Jacobian
                counts[AGE] = OLD
                return 0
        call(calls.factorise, (scaled, blocks, film.gas_index, calls.substitute))
        counts[FACTORED] = 1
        counts[FACTORISATIONS] += 1
        numbers[CONVERGENCE] = UNKNOWN
    last = 0.0
    for turn in range(TURNS):
        call(calls.rates, (time, state, gas, film, work, room[0]))
        counts[EVALUATIONS] += 1
        for a in range(state.size):
            room[6, a] = scaled * room[0, a] - room[2, a] - change[a]
        call(calls.solve, (
            scaled, blocks, film.gas_index, calls.substitute, room[6], room[7],
        ))  # fmt: skip
        size = _norm(room[7], weights, work.fractions.shape)
        if not isfinite(size):
            return 0
        rate = numbers[CONVERGENCE]
        if turn > 0 and last > 0.0:
            rate = size / last
            if rate >= 1.0 or rate ** (TURNS - turn) / (1.0 - rate) * size > ENOUGH:
                return 0
            numbers[CONVERGENCE] = max(0.5 * numbers[CONVERGENCE], rate)
        for a in range(state.size):
            state[a] += room[7, a]
            change[a] += room[7, a]
        if rate / (1.0 - rate) * size < ENOUGH:
            if rate > SLOW:
                counts[AGE] = OLD
            return turn + 1
        last = size
    return 0


@inner
def _accept(order: int, memory: Memory) -> None:
    d, change = memory.differences, memory.room[3]
    for a in range(change.size):
        d[order + 2, a] = change[a] - d[order + 1, a]
        d[order + 1, a] = change[a]
        for i in range(order, -1, -1):
            d[i, a] += d[i + 1, a]


@inner
def _next_step(memory: Memory, shape: tuple[int, int]) -> None:
    """Choose order and size of the next step, once enough equal ones were taken."""
    counts, d, weights = memory.counts, memory.differences, memory.room[5]
    order = counts[ORDER]
    if counts[EQUAL] < order + 1:
        return
    best, chosen = 0.0, order
    for tried in range(order - 1, order + 2):
        if tried < 1 or tried > HIGHEST:
            continue
        error = ERROR[tried] * _norm(d[tried + 1], weights, shape)
        factor = 10.0 if error == 0.0 else error ** (-1.0 / (tried + 1))
        if factor > best:
            best, chosen = factor, tried
    counts[ORDER] = chosen
    turns = memory.numbers[TURNED]
    best *= SAFETY * (2 * TURNS + 1) / (2 * TURNS + turns)
    _change_step(min(10.0, best), memory)


@making
def _change_step(factor: float, memory: Memory) -> None:
    """Differences at a step ``factor`` times as long; the factorisation no longer fits."""
    order = memory.counts[ORDER]
    matrix = np.zeros((order + 1, order + 1))
    plain = np.zeros((order + 1, order + 1))
    for j in range(order + 1):
        matrix[0, j] = plain[0, j] = 1.0
        for i in range(1, order + 1):
            matrix[i, j] = matrix[i - 1, j] * (i - 1 - factor * j) / i
            plain[i, j] = plain[i - 1, j] * (i - 1 - j) / i
    both = matrix @ plain
    d = memory.differences
    old = np.empty(order + 1)
    for a in range(d.shape[1]):
        for i in range(order + 1):
            old[i] = d[i, a]
        for i in range(order + 1):
            total = 0.0
            for j in range(order + 1):
                total += both[j, i] * old[j]
            d[i, a] = total
    memory.numbers[STEP] *= factor
    memory.counts[EQUAL] = memory.counts[FACTORED] = 0


@inner
def _between(memory: Memory, out: Array) -> float:
    """Fill ``out`` with the state where the wall stands still in the last step; its time."""
    end, step = memory.numbers[TIME], memory.numbers[STEP]
    low, high = end - step, end
    for _ in range(60):
        middle = 0.5 * (low + high)
        if _at(middle, memory, c.SPEED) > 0.0:
            low = middle
        else:
            high = middle
    for a in range(out.size):
        out[a] = _at(high, memory, a)
    out[c.SPEED] = min(out[c.SPEED], 0.0)
    return high


@inner
def _at(time: float, memory: Memory, a: int) -> float:
    """State ``a`` inside the last step, by the polynomial through its past."""
    d, step = memory.differences, memory.numbers[STEP]
    behind = (time - memory.numbers[TIME]) / step
    total, product = d[0, a], 1.0
    for i in range(memory.counts[ORDER]):
        product *= (behind + i) / (i + 1)
        total += product * d[i + 1, a]
    return total


@inner
def _norm(x: Array, weights: Array, shape: tuple[int, int]) -> float:
    """Largest of: radius, speed, and root mean square over gas and over film.

    The wall must not drown among the many states of the gas. Ledger and what crossed follow.
    """
    cells, count = shape
    start = c.CROSSED + count
    first = start + cells * (count + 1)
    wall = max(abs(x[c.RADIUS] * weights[c.RADIUS]), abs(x[c.SPEED] * weights[c.SPEED]))
    total = 0.0
    for a in range(start, first):
        total += (x[a] * weights[a]) ** 2
    worst = max(wall, sqrt(total / (first - start)))
    if x.size > first:
        total = 0.0
        for a in range(first, x.size):
            total += (x[a] * weights[a]) ** 2
        worst = max(worst, sqrt(total / (x.size - first)))
    if not isfinite(total):
        return total
    return worst


@inner
def _hottest(state: Array, shape: tuple[int, int]) -> float:
    cells, count = shape
    hottest = 0.0
    at = c.CROSSED + count
    for _ in range(cells):
        hottest = max(hottest, state[at + count])
        at += count + 1
    return hottest


TURNS = 4  # of Newton's method
PATIENCE = 40  # attempts at one step
SAFETY = 0.9
ENOUGH = 0.03  # of the tolerance, left over by Newton's method
OLD = 10  # steps after which a Jacobian is made anew with the next factorisation
SLOW = 0.2  # rate of convergence above which it is as well
UNKNOWN = 0.3  # rate of convergence taken for a new factorisation
# Kappa of the formulas, sums of 1/i, and what follows from them (Shampine and Reichelt 1997).
_KAPPA = np.array([0.0, -0.1850, -1.0 / 9.0, -0.0823, -0.0415, 0.0])
SUMS = np.concatenate((np.zeros(1), np.cumsum(1.0 / np.arange(1, 6))))
ALPHA = (1.0 - _KAPPA) * SUMS
ERROR = _KAPPA * SUMS + 1.0 / np.arange(1, 7)
