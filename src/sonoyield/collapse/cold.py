"""The slow part of a cycle: frozen chemistry, compiled explicit integration.

Dormand and Prince 1980 (J. Comput. Appl. Math. 6, 19), order 5 with an embedded order 4. The stage
ends at an expansion maximum, when the gas gets warm enough to react, at a given time, or when it
has taken more steps than an explicit method should (stiff: the implicit stage takes over).
"""

from __future__ import annotations

from math import isfinite

import numpy as np
from numba import njit

from sonoyield.collapse import equations as eq
from sonoyield.describe.gas import Array

END, MAXIMUM, WARM, STIFF, FAILED = range(5)

_SMALLEST = 1e-14  # of the period: a step below this cannot be taken


@njit(cache=True, error_model="numpy")
def integrate_frozen(
    start: float,
    stop: float,
    step: float,
    state: Array,
    warm: float,
    relative: float,
    absolute: Array,
    constants: Array,
    species: Array,
    nasa: Array,
    conductivity: Array,
    diffusivity: Array,
    times: Array,
    states: Array,
) -> tuple[int, int, float]:
    """Integrate from ``start`` towards ``stop`` (s) and record every accepted step.

    ``state`` (S,) is the beginning; steps go to ``times`` (N,) and ``states`` (N, S). Returns why
    it ended (``END``, ``MAXIMUM`` of the radius, ``WARM``: above ``warm`` K and still being
    compressed, ``STIFF``: the record is full, ``FAILED``), the number of steps recorded and the
    last step size, s.
    """
    size = state.size
    count = species.shape[0]
    production = np.zeros(count)
    scratch = np.empty((eq.SCRATCH, count))
    stages = np.empty((7, size))
    trial = np.empty(size)
    time = start
    smallest = _SMALLEST * 6.283185307179586 / constants[eq.ANGULAR_FREQUENCY]
    recorded = 0
    eq.rates(
        time, state, production, constants, species, nasa, conductivity, diffusivity,
        scratch, stages[0],
    )
    while recorded < times.size:
        step = min(step, stop - time)
        error = _attempt(
            time, step, state, relative, absolute, production, constants, species, nasa,
            conductivity, diffusivity, scratch, stages, trial,
        )
        if not isfinite(error) or error > 1.0:
            step *= 0.2 if not isfinite(error) else max(0.2, 0.9 * error**-0.2)
            if step < smallest:
                return FAILED, recorded, step
            continue
        grown = step * min(5.0, 0.9 * max(error, 1e-10) ** -0.2)
        crest = state[eq.SPEED] > 0.0 and trial[eq.SPEED] <= 0.0
        if crest:
            step = _land_on_crest(
                time, step, state, relative, absolute, production, constants, species, nasa,
                conductivity, diffusivity, scratch, stages, trial,
            )
            trial[eq.SPEED] = 0.0
        time += step
        state[:] = trial
        times[recorded] = time
        states[recorded] = state
        recorded += 1
        if crest:
            return MAXIMUM, recorded, step
        if state[eq.TEMPERATURE] > warm and stages[6, eq.TEMPERATURE] > 0.0:
            return WARM, recorded, grown
        if time >= stop:
            return END, recorded, grown
        step = grown
        stages[0] = stages[6]
    return STIFF, recorded, step


@njit(cache=True, error_model="numpy")
def _attempt(
    time: float, step: float, state: Array, relative: float, absolute: Array, production: Array,
    constants: Array, species: Array, nasa: Array, conductivity: Array, diffusivity: Array,
    scratch: Array, stages: Array, trial: Array,
) -> float:
    """One step into ``trial``; the error in units of the tolerance. ``stages[0]`` is given."""
    for s in range(1, 7):
        for i in range(state.size):
            total = 0.0
            for j in range(s):
                total += _A[s, j] * stages[j, i]
            trial[i] = state[i] + step * total
        eq.rates(
            time + _C[s] * step, trial, production, constants, species, nasa, conductivity,
            diffusivity, scratch, stages[s],
        )
    worst = 0.0
    for i in range(state.size):
        total = 0.0
        for j in range(7):
            total += _E[j] * stages[j, i]
        scale = absolute[i] + relative * max(abs(state[i]), abs(trial[i]))
        ratio = abs(step * total) / scale
        if not isfinite(ratio):
            return ratio
        worst = max(worst, ratio)
    return worst


@njit(cache=True, error_model="numpy")
def _land_on_crest(
    time: float, step: float, state: Array, relative: float, absolute: Array, production: Array,
    constants: Array, species: Array, nasa: Array, conductivity: Array, diffusivity: Array,
    scratch: Array, stages: Array, trial: Array,
) -> float:
    """Shorten the step (bisection and false position) until the wall stands still at its end."""
    low, high = 0.0, step
    rising, falling = state[eq.SPEED], trial[eq.SPEED]
    aim = step
    for turn in range(40):
        share = rising / (rising - falling) if turn % 3 < 2 else 0.5
        aim = low + (high - low) * share
        _attempt(
            time, aim, state, relative, absolute, production, constants, species, nasa,
            conductivity, diffusivity, scratch, stages, trial,
        )
        speed = trial[eq.SPEED]
        if abs(speed) <= 1e-9 * (abs(state[eq.SPEED]) + abs(falling)) or high - low < 1e-12 * step:
            break
        if speed > 0.0:
            low, rising = aim, speed
        else:
            high, falling = aim, speed
    return aim


_C = np.array([0.0, 1 / 5, 3 / 10, 4 / 5, 8 / 9, 1.0, 1.0])
_A = np.array(
    [
        [0, 0, 0, 0, 0, 0],
        [1 / 5, 0, 0, 0, 0, 0],
        [3 / 40, 9 / 40, 0, 0, 0, 0],
        [44 / 45, -56 / 15, 32 / 9, 0, 0, 0],
        [19372 / 6561, -25360 / 2187, 64448 / 6561, -212 / 729, 0, 0],
        [9017 / 3168, -355 / 33, 46732 / 5247, 49 / 176, -5103 / 18656, 0],
        [35 / 384, 0, 500 / 1113, 125 / 192, -2187 / 6784, 11 / 84],
    ]
)
_E = np.array(
    [71 / 57600, 0, -71 / 16695, 71 / 1920, -17253 / 339200, 22 / 525, -1 / 40]
)
