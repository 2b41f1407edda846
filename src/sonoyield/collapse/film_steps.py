"""One stretch of time in the film: diffusion, reactions and the wall's inflow, compiled.

Rosenbrock's method with the coefficients ROS34PW2 of Rang and Angermann 2005 (BIT 45, 761): order 3
with an error estimate of order 2, stiffly accurate, one factorisation a step. What reacted and what
crossed are integrated by the same stages, so every species' budget closes to rounding.
"""

from __future__ import annotations

from math import isfinite
from typing import Any, NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from sonoyield.collapse.aqueous import aqueous_jacobian, aqueous_rates, aqueous_slopes
from sonoyield.collapse.film_blocks import factorise, solve
from sonoyield.collapse.film_grid import film_conductances, wall_conductance
from sonoyield.describe.gas import Array

DONE, STUCK, TOO_MANY = range(3)


class Wall(NamedTuple):
    """What the wall does over time: nodes ``times`` (P,) s, ``radius`` m with its ``speed`` m/s.

    ``gas`` (P, S) mol/m3 beside the wall and ``gas_side`` (P, S) m/s of the crossing species, whose
    places in the film are ``crossing`` (S,). Linear between nodes, the radius cubic.
    """

    times: Array
    radius: Array
    speed: Array
    gas: Array
    gas_side: Array
    crossing: NDArray[np.int64]


class Liquid(NamedTuple):
    """The film's cells and chemistry: faces (M+1,), species (L), compiled reactions (J)."""

    edges: Array
    diffusivity: Array
    henry: Array
    bulk: Array
    reactions: Any


class Totals(NamedTuple):
    """What happened, mol: ``reacted`` (J,), ``entered`` (L,) at the wall, ``left`` (L,) outwards.

    ``own`` (M, L, L), ``inner`` and ``outer`` (M, L): the Jacobian's blocks integrated over time.
    """

    reacted: Array
    entered: Array
    left: Array
    own: Array
    inner: Array
    outer: Array


class _Stage(NamedTuple):
    """Rates of one stage and the wall at its time."""

    rates: Array  # (M, L)
    reacting: Array  # (J,)
    entering: Array  # (L,)
    leaving: Array  # (L,)
    conductance: Array  # (L,), m3/s of the wall, per mol/m3 of gas
    faces: Array  # (M,)


class _Work(NamedTuple):
    """Room for a step: the Jacobian at its start and the four stages."""

    own: Array  # (M, L, L)
    inner: Array  # (M, L)
    outer: Array  # (M, L)
    inverse: Array  # (M, L, L)
    through: Array  # (L,), m3/s back through the wall
    beyond: Array  # (L,), m3/s outwards
    u: Array  # (4, M, L)
    reacted: Array  # (4, J)
    entered: Array  # (4, L)
    left: Array  # (4, L)
    trial: Array  # (M, L)
    right: Array  # (M, L)
    slopes: Array  # (J,)


def totals_for(cells: int, kinds: int, reactions: int) -> Totals:
    """Empty totals for M cells, L species and J reactions."""
    return Totals(
        np.zeros(reactions),
        np.zeros(kinds),
        np.zeros(kinds),
        np.zeros((cells, kinds, kinds)),
        np.zeros((cells, kinds)),
        np.zeros((cells, kinds)),
    )


@njit(cache=True, error_model="numpy")
def integrate_film(
    start: float,
    stop: float,
    step: float,
    most: int,
    c: Array,
    liquid: Liquid,
    wall: Wall,
    relative: float,
    absolute: float,
    totals: Totals,
) -> tuple[int, int, float]:
    """Carry ``c`` (M, L) mol/m3 from ``start`` to ``stop`` s and add to ``totals``.

    Returns why it ended (``DONE``, ``STUCK``: no step is small enough, ``TOO_MANY``: ``most``
    steps), the steps tried and the next step, s.
    """
    stage, work = _room(c.shape[0], c.shape[1], totals.reacted.size)
    time = start
    current = False  # whether the Jacobian belongs to c
    for tried in range(most):
        if time >= stop:
            return DONE, tried, step
        step = min(step, stop - time)
        _rates(time, c, liquid, wall, stage)
        if not current:
            _jacobian(c, liquid, stage, work)
        current = True
        _stages(time, step, c, liquid, wall, stage, work)
        error = _error(c, work.u, relative, absolute)
        if not isfinite(error) or error > 1.0:
            step *= 0.2 if not isfinite(error) else max(0.2, 0.9 * error ** (-1 / 3))
            if not step > SMALLEST * wall.times[-1]:
                return STUCK, tried, step
            continue
        _accept(step, c, work, totals)
        current = False
        time = stop if step == stop - time else time + step
        step *= min(4.0, 0.9 * max(error, 1e-6) ** (-1 / 3))
    return TOO_MANY, most, step


@njit(cache=True, error_model="numpy")
def _room(count: int, kinds: int, reactions: int) -> tuple[_Stage, _Work]:
    stage = _Stage(
        np.zeros((count, kinds)), np.zeros(reactions), np.zeros(kinds), np.zeros(kinds),
        np.zeros(kinds), np.zeros(count),
    )  # fmt: skip
    work = _Work(
        np.zeros((count, kinds, kinds)), np.zeros((count, kinds)), np.zeros((count, kinds)),
        np.zeros((count, kinds, kinds)), np.zeros(kinds), np.zeros(kinds),
        np.zeros((4, count, kinds)), np.zeros((4, reactions)), np.zeros((4, kinds)),
        np.zeros((4, kinds)), np.zeros((count, kinds)), np.zeros((count, kinds)),
        np.zeros(reactions),
    )  # fmt: skip
    return stage, work


@njit(cache=True, error_model="numpy")
def _stages(
    time: float, step: float, c: Array, liquid: Liquid, wall: Wall, stage: _Stage, work: _Work
) -> None:
    """The four stages of one step; ``stage`` holds the rates at its start."""
    factorise(1.0 / (GAMMA * step), work.own, work.inner, work.outer, work.inverse)
    for i in range(4):
        if i > 0:
            _combine(1.0, c, A[i], i, work.u, work.trial)
            _rates(time + ALPHA[i] * step, work.trial, liquid, wall, stage)
        _combine(1.0 / step, stage.rates, C[i], i, work.u, work.right)
        solve(work.inner, work.outer, work.inverse, work.right, work.u[i])
        _follow_stage(i, step, c, liquid, stage, work)


@njit(cache=True, error_model="numpy")
def _combine(scale: float, first: Array, weights: Array, count: int, u: Array, out: Array) -> None:
    """Fill ``out`` (M, L) with ``first`` + ``scale`` times the weighted sum of ``count`` stages."""
    for m in range(out.shape[0]):
        for k in range(out.shape[1]):
            total = 0.0
            for j in range(count):
                total += weights[j] * u[j, m, k]
            out[m, k] = first[m, k] + scale * total


@njit(cache=True, error_model="numpy")
def _follow_stage(
    i: int, step: float, c: Array, liquid: Liquid, stage: _Stage, work: _Work
) -> None:
    """What reacts and crosses in stage ``i``: integrals that the state does not depend on."""
    last = c.shape[0] - 1
    _continue(i, step, stage.reacting, work.reacted)
    _continue(i, step, stage.entering, work.entered)
    _continue(i, step, stage.leaving, work.left)
    for m in range(c.shape[0]):
        volume = liquid.edges[m + 1] - liquid.edges[m]
        aqueous_slopes(c[m], work.u[i, m], liquid.reactions, work.slopes)
        for j in range(work.slopes.size):
            work.reacted[i, j] += GAMMA * step * volume * work.slopes[j]
    for k in range(c.shape[1]):
        work.entered[i, k] -= GAMMA * step * work.through[k] * work.u[i, 0, k]
        work.left[i, k] += GAMMA * step * work.beyond[k] * work.u[i, last, k]


@njit(cache=True, error_model="numpy")
def _continue(i: int, step: float, rates: Array, integrals: Array) -> None:
    for n in range(rates.size):
        total = step * rates[n]
        for j in range(i):
            total += C[i, j] * integrals[j, n]
        integrals[i, n] = GAMMA * total


@njit(cache=True, error_model="numpy")
def _accept(step: float, c: Array, work: _Work, totals: Totals) -> None:
    _combine(1.0, c, M, 4, work.u, c)
    _add_up(work.reacted, totals.reacted)
    _add_up(work.entered, totals.entered)
    _add_up(work.left, totals.left)
    for m in range(c.shape[0]):
        for k in range(c.shape[1]):
            totals.inner[m, k] += step * work.inner[m, k]
            totals.outer[m, k] += step * work.outer[m, k]
            for n in range(c.shape[1]):
                totals.own[m, k, n] += step * work.own[m, k, n]


@njit(cache=True, error_model="numpy")
def _add_up(integrals: Array, total: Array) -> None:
    for n in range(total.size):
        for i in range(4):
            total[n] += M[i] * integrals[i, n]


@njit(cache=True, error_model="numpy")
def wall_at(time: float, wall: Wall) -> tuple[int, float, float]:
    """Node before ``time``, share of the way to the next one, and the radius, m."""
    at, after = 0, wall.times.size - 1
    while after - at > 1:
        middle = (at + after) // 2
        if wall.times[middle] <= time:
            at = middle
        else:
            after = middle
    width = wall.times[at + 1] - wall.times[at]
    s = min(max((time - wall.times[at]) / width, 0.0), 1.0)
    change = wall.radius[at + 1] - wall.radius[at]
    early = width * wall.speed[at] - change
    late = width * wall.speed[at + 1] - change
    bend = s * (1.0 - s) * ((1.0 - s) * early - s * late)
    return at, s, wall.radius[at] + s * change + bend


@njit(cache=True, error_model="numpy")
def _rates(time: float, c: Array, liquid: Liquid, wall: Wall, stage: _Stage) -> None:
    """Rates of all cells, of all reactions, and through the wall and the outer face."""
    count, kinds = c.shape
    edges = liquid.edges
    at, share, radius = wall_at(time, wall)
    film_conductances(radius, edges, stage.faces)
    start, member, coefficient = liquid.reactions[2], liquid.reactions[3], liquid.reactions[4]
    reacting = np.empty(stage.reacting.size)
    for j in range(reacting.size):
        stage.reacting[j] = 0.0
    for m in range(count):
        for k in range(kinds):
            stage.rates[m, k] = 0.0
    for m in range(count):
        volume = edges[m + 1] - edges[m]
        aqueous_rates(c[m], liquid.reactions, reacting)
        for j in range(reacting.size):
            stage.reacting[j] += volume * reacting[j]
            for n in range(start[j], start[j + 1]):
                stage.rates[m, member[n]] += coefficient[n] * reacting[j]
        for k in range(kinds):
            beyond = c[m + 1, k] if m + 1 < count else liquid.bulk[k]
            flow = liquid.diffusivity[k] * stage.faces[m] * (beyond - c[m, k])
            stage.rates[m, k] += flow / volume
            if m + 1 < count:
                stage.rates[m + 1, k] -= flow / (edges[m + 2] - edges[m + 1])
            else:
                stage.leaving[k] = -flow
    for s in range(wall.crossing.size):
        k = wall.crossing[s]
        gas = (1.0 - share) * wall.gas[at, s] + share * wall.gas[at + 1, s]
        side = (1.0 - share) * wall.gas_side[at, s] + share * wall.gas_side[at + 1, s]
        passes = wall_conductance(radius, edges, liquid.diffusivity[k], liquid.henry[k], side)
        stage.conductance[k] = passes
        stage.entering[k] = passes * (gas - c[0, k] / liquid.henry[k])
        stage.rates[0, k] += stage.entering[k] / edges[1]


@njit(cache=True, error_model="numpy")
def _jacobian(c: Array, liquid: Liquid, stage: _Stage, work: _Work) -> None:
    count, kinds = c.shape
    own, inner, outer = work.own, work.inner, work.outer
    for k in range(kinds):
        work.through[k] = stage.conductance[k] / liquid.henry[k]
        work.beyond[k] = stage.faces[count - 1] * liquid.diffusivity[k]
    for m in range(count):
        aqueous_jacobian(c[m], liquid.reactions, own[m])
        volume = liquid.edges[m + 1] - liquid.edges[m]
        for k in range(kinds):
            outer[m, k] = liquid.diffusivity[k] * stage.faces[m] / volume
            inner[m, k] = liquid.diffusivity[k] * stage.faces[m - 1] / volume if m > 0 else 0.0
            own[m, k, k] -= inner[m, k] + outer[m, k]
            if m == 0:
                own[m, k, k] -= work.through[k] / volume


@njit(cache=True, error_model="numpy")
def _error(c: Array, u: Array, relative: float, absolute: float) -> float:
    """Largest error of a step in units of the tolerance."""
    worst = 0.0
    for m in range(c.shape[0]):
        for k in range(c.shape[1]):
            change = wrong = 0.0
            for i in range(4):
                change += M[i] * u[i, m, k]
                wrong += E[i] * u[i, m, k]
            scale = absolute + relative * max(abs(c[m, k]), abs(c[m, k] + change))
            ratio = abs(wrong) / scale
            if not isfinite(ratio):
                return ratio
            worst = max(worst, ratio)
    return worst


SMALLEST = 1e-14  # of the cycle: a step below this cannot be taken

GAMMA = 4.3586652150845900e-1
_ALPHA = np.array(
    [
        [0.0, 0.0, 0.0, 0.0],
        [8.7173304301691801e-1, 0.0, 0.0, 0.0],
        [8.4457060015369423e-1, -1.1299064236484185e-1, 0.0, 0.0],
        [0.0, 0.0, 1.0, 0.0],
    ]
)
_GAMMAS = np.array(
    [
        [GAMMA, 0.0, 0.0, 0.0],
        [-8.7173304301691801e-1, GAMMA, 0.0, 0.0],
        [-9.0338057013044082e-1, 5.4180672388095326e-2, GAMMA, 0.0],
        [2.4212380706095346e-1, -1.2232505839045147e0, 5.4526025533510214e-1, GAMMA],
    ]
)
_B = np.array([2.4212380706095346e-1, -1.2232505839045147e0, 1.5452602553351020e0, GAMMA])
_B_LOWER = np.array([3.7810903145819369e-1, -9.6042292212423178e-2, 5.0e-1, 2.1793326075422950e-1])
# Stages as u = (lower triangle of gammas) k: no product with J is needed (Hairer and Wanner 1996,
# Solving Ordinary Differential Equations II, IV.7).
_INVERSE = np.linalg.inv(_GAMMAS)
A = _ALPHA @ _INVERSE
C = np.diag(np.full(4, 1.0 / GAMMA)) - _INVERSE
M = _B @ _INVERSE
E = (_B - _B_LOWER) @ _INVERSE
ALPHA = _ALPHA.sum(axis=1)
