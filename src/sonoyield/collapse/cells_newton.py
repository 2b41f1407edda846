"""The linear solver of the resolved bubble: cells one after another, compiled.

CVODE solves (I - gamma J) x = r by GMRES; this is the preconditioner. J is taken with pressure,
volumes and conductances held: then only neighbours touch, and in the amounts of a neighbour a
block is a diagonal and two outer products. Elimination runs from the centre to the wall and on
through the film. The pressure, which every cell feels, comes back in closed form (Sherman and
Morrison 1950, Ann. Math. Stat. 21, 124). Every entry that takes from one cell gives to another, so
that a Newton step conserves elements however well it converges.
"""

from __future__ import annotations

from math import pi
from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import aqueous_jacobian
from sonoyield.collapse.exchange import COVOLUME, ENTHALPY_AT_LIQUID, MASS
from sonoyield.collapse.film_grid import film_conductances
from sonoyield.collapse.kinetics import production_and_jacobian, thermo
from sonoyield.describe.gas import GAS_CONSTANT, Array

Indices = NDArray[np.int64]


class Blocks(NamedTuple):
    """What a factorisation keeps."""

    own: Array  # (N, m, m), m = K + 1: rates of a cell by its own state
    inverse: Array  # (N, m, m), of the eliminated block
    inner: Array  # (N, 3, K): face's dependence on the cell inside: diagonal, share, mass
    outer: Array  # (N, 3, K): the same on the cell outside
    per_mass: Array  # (N, K), mol/kg at each face
    heat: Array  # (N, 2): temperature outside by the one inside, and back
    wall: Array  # (4, K): flow into the liquid by amount, by share, by film concentration; what
    # enthalpy it carries
    film_own: Array  # (M, L, L)
    film_inverse: Array  # (M, L, L)
    film_inner: Array  # (M, L): cell i by cell i - 1
    film_outer: Array  # (M, L): cell i by cell i + 1
    squeeze: Array  # (S,): what a rate of pressure does to each state
    feels: Array  # (S,): pressure rate by each state's own rate, times the stiffness
    squeezed: Array  # (S,): the solution for ``squeeze``
    numbers: Array  # (4,): stiffness, denominator, volume of the film's first cell, heat conductance
    columns: Array  # (4, S): rates by pressure, mass taken up, radius and speed
    by_pressure: Array  # (S,): pressure by each state
    by_cell: Array  # (K,): mass taken up by the outermost cell's amounts
    by_film: Array  # (L,): mass taken up by the film's first concentrations
    solved: Array  # (4, S): the solutions for ``columns``
    small: Array  # (4, 4)
    per_kelvin: Array  # (N,): amount in a cell over its temperature, which makes them comparable
    sizes: Array  # (3,): pressure, mass of the gas, radius
    trial: Array  # (2, S)
    room: Array  # (m, m)
    seen: Array  # (m, m)
    lines: Array  # (3, m)
    film_room: Array  # (L, L)
    film_line: Array  # (L,)
    derivatives: Array  # (K, K)
    by_temperature: Array  # (K,)


def blocks_for(cells: int, species: int, film: tuple[int, int], size: int) -> Blocks:
    """Room for a factorisation; ``film`` is (M, L), ``size`` the length of the state."""
    m, (spots, kinds) = species + 1, film
    return Blocks(
        np.zeros((cells, m, m)), np.zeros((cells, m, m)), np.zeros((cells, 3, species)),
        np.zeros((cells, 3, species)), np.zeros((cells, species)), np.zeros((cells, 2)), np.zeros((4, species)),
        np.zeros((spots, kinds, kinds)), np.zeros((spots, kinds, kinds)),
        np.zeros((spots, kinds)), np.zeros((spots, kinds)), np.zeros(size), np.zeros(size),
        np.zeros(size), np.zeros(4), np.zeros((4, size)), np.zeros(size), np.zeros(species),
        np.zeros(kinds), np.zeros((4, size)), np.zeros((4, 4)), np.zeros(cells), np.zeros(3),
        np.zeros((2, size)),
        np.zeros((m, m)), np.zeros((m, m)), np.zeros((3, m)),
        np.zeros((kinds, kinds)), np.zeros(kinds),
        np.zeros((species, species)), np.zeros(species),
    )  # fmt: skip


@njit(cache=True, error_model="numpy")
def evaluate(
    time: float, state: Array, gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks, out: Array
) -> None:
    """Find the Jacobian's parts at a state; ``out`` takes its rates."""
    c.rates(time, state, gas, film, work, out)
    _own_chemistry(state, gas, work, blocks)
    _between(gas, work, blocks)
    _at_wall(gas, film, work, blocks)
    _film_blocks(state, film, work, blocks)
    _pressure_vectors(state, gas, work, blocks)
    _mass_vectors(gas, film, work, blocks)
    _trial_columns(time, state, gas, film, work, blocks, out)


@njit(cache=True, error_model="numpy")
def factorise(gamma: float, blocks: Blocks, gas_index: Indices) -> None:
    """Eliminate I - gamma J from the centre outwards, then what all cells feel."""
    cells, m, _ = blocks.own.shape
    for i in range(cells):
        block = blocks.room
        for a in range(m):
            for b in range(m):
                block[a, b] = -gamma * blocks.own[i, a, b]
            block[a, a] += 1.0
        if i > 0:
            _take_out(gamma, i - 1, blocks, block)
        _invert_scaled(block, blocks.per_kelvin[i], blocks.inverse[i])
    _factorise_film(gamma, blocks, gas_index)
    _substitute(gamma, blocks, gas_index, blocks.squeeze, blocks.squeezed)
    blocks.numbers[1] = 1.0 - _felt(blocks, blocks.squeezed, blocks.squeeze)
    small = np.eye(4)
    for a in range(4):
        _solve_locally(gamma, blocks, gas_index, blocks.columns[a], blocks.solved[a])
        for b in range(4):
            small[b, a] -= gamma * _scalar(b, blocks, blocks.solved[a])
    pressure, weight, radius = blocks.sizes[0], blocks.sizes[1] / gamma, blocks.sizes[2]
    sizes = (pressure, weight, radius, radius / gamma)
    for a in range(4):
        for b in range(4):
            small[b, a] *= sizes[a] / sizes[b]
    invert(small, blocks.small)
    for a in range(4):
        for b in range(4):
            blocks.small[b, a] *= sizes[b] / sizes[a]


@njit(cache=True, error_model="numpy")
def solve(gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array) -> None:
    """Solve (I - gamma J) ``out`` = ``right`` with the last factorisation (Woodbury 1950)."""
    _solve_locally(gamma, blocks, gas_index, right, out)
    scalars = np.empty(4)
    for a in range(4):
        scalars[a] = gamma * _scalar(a, blocks, out)
    for a in range(4):
        share = 0.0
        for b in range(4):
            share += blocks.small[a, b] * scalars[b]
        for i in range(out.size):
            out[i] += share * blocks.solved[a, i]


@njit(cache=True, error_model="numpy")
def multiply(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    """Fill ``out`` with J x, the same J as ``solve`` inverts."""
    _multiply_locally(blocks, gas_index, x, out)
    for a in range(4):
        scalar = _scalar(a, blocks, x)
        for i in range(out.size):
            out[i] += scalar * blocks.columns[a, i]


@njit(cache=True, error_model="numpy")
def _solve_locally(
    gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array
) -> None:
    """Solve with neighbours and the pressure's rate, but without what else all cells feel."""
    _substitute(gamma, blocks, gas_index, right, out)
    scale = _felt(blocks, out, right) / blocks.numbers[1]
    for a in range(out.size):
        out[a] += scale * blocks.squeezed[a]


@njit(cache=True, error_model="numpy")
def _felt(blocks: Blocks, after: Array, before: Array) -> float:
    """Rate of pressure (times gamma) from the change of the local rates."""
    total = 0.0
    for a in range(blocks.feels.size):
        total += blocks.feels[a] * (after[a] - before[a])
    return total / blocks.numbers[0]


@njit(cache=True, error_model="numpy")
def _scalar(which: int, blocks: Blocks, x: Array) -> float:
    """Change of pressure, mass taken up, radius or speed with a change ``x`` of the state."""
    if which >= 2:
        return x[c.RADIUS] if which == 2 else x[c.SPEED]
    total = 0.0
    if which == 0:
        for a in range(x.size):
            total += blocks.by_pressure[a] * x[a]
        return total
    cells, m, _ = blocks.own.shape
    first = c.CROSSED + m - 1 + cells * m
    for k in range(m - 1):
        total += blocks.by_cell[k] * x[first - m + k]
    for s in range(blocks.by_film.size):
        total += blocks.by_film[s] * x[first + s]
    return total


@njit(cache=True, error_model="numpy")
def _own_chemistry(state: Array, gas: c.Gas, work: c.Work, blocks: Blocks) -> None:
    """Rates of each cell by its own state: chemistry, at fixed pressure."""
    cells, count = work.fractions.shape
    blocks.own[:] = 0.0
    if not gas.reactive:
        return
    gibbs, crowding, concentration = work.row[0], work.row[1], work.row[2]
    pressure = work.whole[c.PRESSURE]
    at = c.CROSSED + count
    for i in range(cells):
        temperature, volume = state[at + count], work.cell[i, c.VOLUME]
        thermo(temperature, gas.nasa, work.capacity[i], work.enthalpy[i], gibbs)
        c.crowd(
            temperature, pressure, volume, work.cell[i, c.COVOLUMES], gas.species, crowding
        )
        for k in range(count):
            concentration[k] = state[at + k] / volume
        production_and_jacobian(
            temperature, concentration, gibbs, work.enthalpy[i], crowding, gas.dense,
            gas.kinetics, work.kinetics, work.row[3], blocks.derivatives, blocks.by_temperature,
        )
        _chemistry_block(i, temperature, volume, pressure, gas, work, blocks)
        at += count + 1


@njit(cache=True, error_model="numpy")
def _chemistry_block(
    i: int, temperature: float, volume: float, pressure: float, gas: c.Gas, work: c.Work,
    blocks: Blocks,
) -> None:
    count = work.fractions.shape[1]
    own, made, concentration = blocks.own[i], work.row[3], work.row[2]
    amount = work.cell[i, c.AMOUNT]
    for k in range(count):
        diluted = made[k]  # what growing by one m3 changes, mol/s/m3
        for j in range(count):
            diluted -= blocks.derivatives[k, j] * concentration[j]
        for j in range(count):
            grows = GAS_CONSTANT * temperature / pressure + gas.species[j, COVOLUME]
            own[k, j] = blocks.derivatives[k, j] + diluted * grows
        grows = amount * GAS_CONSTANT / pressure
        own[k, count] = volume * blocks.by_temperature[k] + diluted * grows
    heat = amount * work.cell[i, c.CAPACITY]
    for j in range(count + 1):
        released = 0.0
        for k in range(count):
            released -= own[k, j] * (work.enthalpy[i, k] + pressure * gas.species[k, COVOLUME])
            if j == count:
                released -= made[k] * volume * work.capacity[i, k]
        own[count, j] = released / heat


@njit(cache=True, error_model="numpy")
def _between(gas: c.Gas, work: c.Work, blocks: Blocks) -> None:
    """Diffusion and conduction through the inner faces, added to both cells."""
    cells, count = work.fractions.shape
    for i in range(cells - 1):
        drift = 0.5 * work.face[i, c.DRIFT]
        for side in range(2):
            sign = 1.0 if side == 0 else -1.0
            part = blocks.inner[i] if side == 0 else blocks.outer[i]
            amount = work.cell[i + side, c.AMOUNT]
            mean = 0.0
            for k in range(count):
                by_mass = gas.species[k, MASS] * work.conductance[i, k]
                mean += by_mass * work.fractions[i + side, k]
            for k in range(count):
                part[0, k] = work.conductance[i, k] / amount
                part[0, k] -= sign * drift / work.cell[i + side, c.WEIGHT]
                part[1, k] = -work.conductance[i, k] * work.fractions[i + side, k] / amount
                part[2, k] = (gas.species[k, MASS] * work.conductance[i, k] - mean) / amount
                blocks.per_mass[i, k] = work.per_mass[i, k]
        for k in range(count):
            for j in range(count):
                inner = blocks.inner[i, 1, k] - work.per_mass[i, k] * blocks.inner[i, 2, j]
                outer = blocks.outer[i, 1, k] - work.per_mass[i, k] * blocks.outer[i, 2, j]
                blocks.own[i, k, j] -= inner
                blocks.own[i + 1, k, j] -= outer
            blocks.own[i, k, k] -= blocks.inner[i, 0, k]
            blocks.own[i + 1, k, k] -= blocks.outer[i, 0, k]
        _conduction(i, work, blocks)


@njit(cache=True, error_model="numpy")
def _conduction(i: int, work: c.Work, blocks: Blocks) -> None:
    count = work.fractions.shape[1]
    flows_in = flows_out = 0.0
    for k in range(count):
        flows_in += 0.5 * work.flow[i, k] * work.capacity[i, k]
        flows_out += 0.5 * work.flow[i, k] * work.capacity[i + 1, k]
    conducts = work.face[i, c.HEAT_CONDUCTANCE]
    inner = work.cell[i, c.AMOUNT] * work.cell[i, c.CAPACITY]
    outer = work.cell[i + 1, c.AMOUNT] * work.cell[i + 1, c.CAPACITY]
    blocks.own[i, count, count] += (flows_in - conducts) / inner
    blocks.own[i + 1, count, count] -= (flows_out + conducts) / outer
    blocks.heat[i, 0] = (conducts + flows_in) / outer
    blocks.heat[i, 1] = (conducts - flows_out) / inner


@njit(cache=True, error_model="numpy")
def _at_wall(gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks) -> None:
    """Flow through the wall by the outermost cell; what the film follows has no share term."""
    cells, count = work.fractions.shape
    last = cells - 1
    amount = work.cell[last, c.AMOUNT]
    wall = blocks.wall
    for k in range(count):
        wall[0, k] = work.conductance[last, k] / amount
        wall[1, k] = -wall[0, k] * work.fractions[last, k]
        wall[2, k] = 0.0
        wall[3, k] = gas.species[k, ENTHALPY_AT_LIQUID]
        wall[3, k] += work.whole[c.PRESSURE] * gas.species[k, COVOLUME]
    if film.edges.size > 1:
        for s in range(film.gas_index.size):
            if film.gas_index[s] >= 0:
                wall[1, film.gas_index[s]] = 0.0
    for k in range(count):
        for j in range(count):
            blocks.own[last, k, j] -= wall[1, k]
        blocks.own[last, k, k] -= wall[0, k]
    blocks.numbers[3] = work.face[last, c.HEAT_CONDUCTANCE]
    heat = amount * work.cell[last, c.CAPACITY]
    blocks.own[last, count, count] -= blocks.numbers[3] / heat


@njit(cache=True, error_model="numpy")
def _film_blocks(state: Array, film: c.Film, work: c.Work, blocks: Blocks) -> None:
    cells, count = work.fractions.shape
    spots = film.edges.size - 1
    if spots < 1:
        return
    kinds = film.gas_index.size
    blocks.numbers[2] = film.edges[1]
    first = c.CROSSED + count + cells * (count + 1)
    concentration = state[first:].reshape((spots, kinds))
    film_conductances(state[c.RADIUS], film.edges, work.film[:, 0])
    for i in range(spots):
        aqueous_jacobian(concentration[i], film.aqueous, blocks.film_own[i])
    for i in range(spots):
        volume = film.edges[i + 1] - film.edges[i]
        outer = work.film[i, 0]
        for s in range(kinds):
            passes = outer * film.diffusivity[s]
            blocks.film_own[i, s, s] -= passes / volume
            if i + 1 < spots:
                beyond = film.edges[i + 2] - film.edges[i + 1]
                blocks.film_outer[i, s] = passes / volume
                blocks.film_inner[i + 1, s] = passes / beyond
                blocks.film_own[i + 1, s, s] -= passes / beyond
    last = cells - 1
    for s in range(kinds):
        k = film.gas_index[s]
        if k >= 0:
            by_film = -work.conductance[last, k] * work.whole[c.BY_SURFACE] / film.henry[s]
            blocks.wall[2, k] = by_film
            blocks.film_own[0, s, s] += by_film / film.edges[1]


@njit(cache=True, error_model="numpy")
def _pressure_vectors(state: Array, gas: c.Gas, work: c.Work, blocks: Blocks) -> None:
    cells, count = work.fractions.shape
    pressure, free = work.whole[c.PRESSURE], work.whole[c.FREE]
    at = c.CROSSED + count
    for i in range(cells):
        temperature = state[at + count]
        for k in range(count):
            blocks.feels[at + k] = GAS_CONSTANT * temperature
            blocks.feels[at + k] += pressure * gas.species[k, COVOLUME]
        blocks.feels[at + count] = GAS_CONSTANT * work.cell[i, c.AMOUNT]
        blocks.per_kelvin[i] = work.cell[i, c.AMOUNT] / temperature
        blocks.squeeze[at + count] = (
            GAS_CONSTANT * temperature / (pressure * work.cell[i, c.CAPACITY])
        )
        at += count + 1
    blocks.numbers[0] = work.whole[c.STIFFNESS]
    blocks.sizes[0], blocks.sizes[2] = pressure, state[c.RADIUS]
    blocks.sizes[1] = work.cell[:, c.WEIGHT].sum()
    for a in range(blocks.feels.size):
        blocks.by_pressure[a] = blocks.feels[a] / free
    blocks.by_pressure[c.RADIUS] = -pressure * work.face[cells - 1, c.AREA] / free
    density, sound = gas.constants[eq.DENSITY], gas.constants[eq.SOUND_SPEED]
    radius, mach = state[c.RADIUS], state[c.SPEED] / sound
    left = (1.0 - mach) * radius + 4.0 * gas.constants[eq.VISCOSITY] / (density * sound)
    pushed = blocks.squeeze[c.SPEED] = radius / (density * sound) / left
    growth = work.face[cells - 1, c.AREA] * state[c.SPEED]
    blocks.squeeze[c.LEDGER + eq.RADIATION] = -density * radius * pushed * growth


@njit(cache=True, error_model="numpy")
def _mass_vectors(gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks) -> None:
    """How taking up mass moves gas through all faces, and what decides it."""
    cells, count = work.fractions.shape
    column = blocks.columns[1]
    column[:] = 0.0
    at = c.CROSSED + count
    for i in range(cells - 1):
        lost = 0.0
        for k in range(count):
            moved = -work.per_mass[i, k] * gas.faces[i + 1]
            column[at + k] -= moved
            column[at + count + 1 + k] += moved
            lost += 0.5 * moved * (work.enthalpy[i + 1, k] - work.enthalpy[i, k])
        column[at + count] -= lost / (work.cell[i, c.AMOUNT] * work.cell[i, c.CAPACITY])
        beyond = work.cell[i + 1, c.AMOUNT] * work.cell[i + 1, c.CAPACITY]
        column[at + 2 * count + 1] -= lost / beyond
        at += count + 1
    pushed = 0.0
    for a in range(column.size):
        pushed += blocks.feels[a] * column[a]
    for a in range(column.size):
        column[a] += pushed / blocks.numbers[0] * blocks.squeeze[a]
    shares = 0.0
    for k in range(count):
        shares += gas.species[k, MASS] * blocks.wall[1, k]
    for k in range(count):
        blocks.by_cell[k] = -gas.species[k, MASS] * blocks.wall[0, k] - shares
    for s in range(film.gas_index.size):
        k = film.gas_index[s]
        blocks.by_film[s] = -gas.species[k, MASS] * blocks.wall[2, k] if k >= 0 else 0.0


@njit(cache=True, error_model="numpy")
def _trial_columns(
    time: float, state: Array, gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks, base: Array
) -> None:
    """Rates by pressure, radius and speed, each with the other two held, by small differences."""
    trial, rates = blocks.trial[0], blocks.trial[1]
    pressure = work.whole[c.PRESSURE]
    for a in (0, 2, 3):
        trial[:] = state
        work.whole[c.TRIAL] = 1.0
        if a == 0:
            step = NUDGE * pressure
            work.whole[c.TRIAL] = 1.0 + NUDGE
        elif a == 2:
            step = NUDGE * state[c.RADIUS]
            trial[c.RADIUS] += step
            swollen = 4.0 / 3.0 * pi * (trial[c.RADIUS] ** 3 - state[c.RADIUS] ** 3)
            work.whole[c.TRIAL] = 1.0 + swollen / work.whole[c.FREE]
        else:
            step = NUDGE * max(abs(state[c.SPEED]), 1e-3 * gas.constants[eq.SOUND_SPEED])
            trial[c.SPEED] += step
        c.rates(time, trial, gas, film, work, rates)
        for i in range(base.size):
            blocks.columns[a, i] = (rates[i] - base[i]) / step
    work.whole[c.TRIAL] = 1.0


NUDGE = 1e-6  # relative step of the differences


@njit(cache=True, error_model="numpy")
def _take_out(gamma: float, i: int, blocks: Blocks, block: Array) -> None:
    """Subtract from the block of cell i + 1 what comes back to it through cell i."""
    m = block.shape[0]
    count = m - 1
    inverse, inner, outer, y = blocks.inverse[i], blocks.inner[i], blocks.outer[i], blocks.per_mass[i]
    seen, lines = blocks.seen, blocks.lines
    for a in range(m):
        shares = masses = 0.0
        for b in range(count):
            shares += inverse[a, b] * outer[1, b]
            masses += inverse[a, b] * y[b]
        for b in range(count):
            seen[a, b] = inverse[a, b] * outer[0, b] + shares - masses * outer[2, b]
        seen[a, count] = inverse[a, count] * blocks.heat[i, 1]
    lines[:2] = 0.0
    for k in range(count):
        for b in range(m):
            lines[0, b] += seen[k, b]
            lines[1, b] += inner[2, k] * seen[k, b]
    square = gamma * gamma
    for b in range(m):
        for k in range(count):
            block[k, b] -= square * (
                inner[0, k] * seen[k, b] + inner[1, k] * lines[0, b] - y[k] * lines[1, b]
            )
        block[count, b] -= square * blocks.heat[i, 0] * seen[count, b]


@njit(cache=True, error_model="numpy")
def _factorise_film(gamma: float, blocks: Blocks, gas_index: Indices) -> None:
    spots, kinds, _ = blocks.film_own.shape
    last = blocks.own.shape[0] - 1
    block = blocks.film_room
    for i in range(spots):
        for s in range(kinds):
            for t in range(kinds):
                block[s, t] = -gamma * blocks.film_own[i, s, t]
                k, j = gas_index[s], gas_index[t]
                if i > 0:
                    through = blocks.film_inverse[i - 1, s, t] * blocks.film_outer[i - 1, t]
                    block[s, t] -= gamma * gamma * blocks.film_inner[i, s] * through
                elif k >= 0 and j >= 0:
                    through = blocks.inverse[last, k, j] * blocks.wall[2, j]
                    block[s, t] += gamma * gamma * blocks.wall[0, k] / blocks.numbers[2] * through
            block[s, s] += 1.0
        invert(block, blocks.film_inverse[i])


@njit(cache=True, error_model="numpy")
def _substitute(
    gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array
) -> None:
    """Solve with pressure held: outwards through gas and film, then back."""
    cells, m, _ = blocks.own.shape
    count = m - 1
    spots, kinds = blocks.film_inner.shape
    start = c.CROSSED + count
    first = start + cells * m
    out[:start] = right[:start]
    line = blocks.lines[2]
    for i in range(cells):
        at = start + i * m
        if i > 0:
            _outwards(gamma, i - 1, blocks, out[at - m : at], line)
        else:
            line[:] = 0.0
        for a in range(m):
            line[a] += right[at + a]
        _times(blocks.inverse[i], line, out[at : at + m])
    if spots > 0:
        _substitute_film(gamma, blocks, gas_index, right, out)
        line[:] = 0.0
        for s in range(kinds):
            if gas_index[s] >= 0:
                line[gas_index[s]] = -gamma * blocks.wall[2, gas_index[s]] * out[first + s]
        _add_times(blocks.inverse[cells - 1], line, out[first - m : first])
    for i in range(cells - 2, -1, -1):
        at = start + i * m
        _inwards(gamma, i, blocks, out[at + m : at + 2 * m], line)
        _add_times(blocks.inverse[i], line, out[at : at + m])
    _follow_wall(gamma, blocks, gas_index, out, out)


@njit(cache=True, error_model="numpy")
def _substitute_film(
    gamma: float, blocks: Blocks, gas_index: Indices, right: Array, out: Array
) -> None:
    cells, m, _ = blocks.own.shape
    spots, kinds = blocks.film_inner.shape
    first = c.CROSSED + m - 1 + cells * m
    line = blocks.film_line
    for i in range(spots):
        at = first + i * kinds
        for s in range(kinds):
            line[s] = right[at + s]
            if i > 0:
                line[s] += gamma * blocks.film_inner[i, s] * out[at - kinds + s]
            elif gas_index[s] >= 0:
                flow = blocks.wall[0, gas_index[s]] * out[first - m + gas_index[s]]
                line[s] += gamma * flow / blocks.numbers[2]
        _times(blocks.film_inverse[i], line, out[at : at + kinds])
    for i in range(spots - 2, -1, -1):
        at = first + i * kinds
        for s in range(kinds):
            line[s] = gamma * blocks.film_outer[i, s] * out[at + kinds + s]
        _add_times(blocks.film_inverse[i], line, out[at : at + kinds])


@njit(cache=True, error_model="numpy")
def _outwards(gamma: float, i: int, blocks: Blocks, x: Array, line: Array) -> None:
    """Fill ``line`` with what cell i + 1 feels of a change ``x`` of cell i."""
    count = x.size - 1
    part = blocks.inner[i]
    _neighbour(gamma, part, blocks.per_mass[i], x, line)
    line[count] = gamma * blocks.heat[i, 0] * x[count]


@njit(cache=True, error_model="numpy")
def _inwards(gamma: float, i: int, blocks: Blocks, x: Array, line: Array) -> None:
    """Fill ``line`` with what cell i feels of a change ``x`` of cell i + 1."""
    count = x.size - 1
    _neighbour(gamma, blocks.outer[i], blocks.per_mass[i], x, line)
    line[count] = gamma * blocks.heat[i, 1] * x[count]


@njit(cache=True, error_model="numpy")
def _neighbour(gamma: float, part: Array, per_mass: Array, x: Array, line: Array) -> None:
    shares = masses = 0.0
    for k in range(per_mass.size):
        shares += x[k]
        masses += part[2, k] * x[k]
    for k in range(per_mass.size):
        line[k] = gamma * (part[0, k] * x[k] + part[1, k] * shares - per_mass[k] * masses)


@njit(cache=True, error_model="numpy")
def _follow_wall(
    gamma: float, blocks: Blocks, gas_index: Indices, x: Array, out: Array
) -> None:
    """Add what crosses with a change ``x`` of the outermost cell and of the film."""
    cells, m, _ = blocks.own.shape
    first = c.CROSSED + m - 1 + cells * m
    shares = 0.0
    for k in range(m - 1):
        shares += x[first - m + k]
    carried = 0.0
    for k in range(m - 1):
        flow = blocks.wall[0, k] * x[first - m + k] + blocks.wall[1, k] * shares
        out[c.CROSSED + k] += gamma * flow
        carried += blocks.wall[3, k] * flow
    if blocks.film_inner.shape[0] > 0:
        for s in range(gas_index.size):
            k = gas_index[s]
            if k >= 0:
                flow = blocks.wall[2, k] * x[first + s]
                out[c.CROSSED + k] += gamma * flow
                carried += blocks.wall[3, k] * flow
    out[c.LEDGER + eq.CARRIED] += gamma * carried
    out[c.LEDGER + eq.HEAT] += gamma * blocks.numbers[3] * x[first - 1]


@njit(cache=True, error_model="numpy")
def _times(matrix: Array, x: Array, out: Array) -> None:
    out[:] = 0.0
    _add_times(matrix, x, out)


@njit(cache=True, error_model="numpy", fastmath=True)
def _add_times(matrix: Array, x: Array, out: Array) -> None:
    for a in range(out.size):
        total = 0.0
        for b in range(out.size):
            total += matrix[a, b] * x[b]
        out[a] += total


@njit(cache=True, error_model="numpy")
def _multiply_locally(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    """Fill ``out`` with J x as far as neighbours and the pressure's rate make it."""
    cells, m, _ = blocks.own.shape
    start = c.CROSSED + m - 1
    first = start + cells * m
    line = blocks.lines[2]
    out[:start] = 0.0
    for i in range(cells):
        at = start + i * m
        _times(blocks.own[i], x[at : at + m], out[at : at + m])
        if i > 0:
            _outwards(1.0, i - 1, blocks, x[at - m : at], line)
            out[at : at + m] += line
        if i + 1 < cells:
            _inwards(1.0, i, blocks, x[at + m : at + 2 * m], line)
            out[at : at + m] += line
    _multiply_film(blocks, gas_index, x, out)
    _follow_wall(1.0, blocks, gas_index, x, out)
    felt = 0.0
    for a in range(start, first):
        felt += blocks.feels[a] * out[a]
    felt /= blocks.numbers[0]
    for a in range(first):
        out[a] += felt * blocks.squeeze[a]


@njit(cache=True, error_model="numpy")
def _multiply_film(blocks: Blocks, gas_index: Indices, x: Array, out: Array) -> None:
    cells, m, _ = blocks.own.shape
    spots, kinds = blocks.film_inner.shape
    first = c.CROSSED + m - 1 + cells * m
    for i in range(spots):
        at = first + i * kinds
        _times(blocks.film_own[i], x[at : at + kinds], out[at : at + kinds])
        for s in range(kinds):
            if i > 0:
                out[at + s] += blocks.film_inner[i, s] * x[at - kinds + s]
            elif gas_index[s] >= 0:
                k = gas_index[s]
                out[at + s] += blocks.wall[0, k] * x[first - m + k] / blocks.numbers[2]
                out[first - m + k] -= blocks.wall[2, k] * x[at + s]
            if i + 1 < spots:
                out[at + s] += blocks.film_outer[i, s] * x[at + kinds + s]


@njit(cache=True, error_model="numpy")
def invert(matrix: Array, out: Array) -> None:
    """Fill ``out`` with the inverse of ``matrix``, which is spoilt (Gauss and Jordan, row pivots).

    For blocks this small faster than a library call, and a singular one gives not-a-number.
    """
    size = matrix.shape[0]
    out[:] = 0.0
    for a in range(size):
        out[a, a] = 1.0
    for a in range(size):
        pivot = a
        for b in range(a + 1, size):
            if abs(matrix[b, a]) > abs(matrix[pivot, a]):
                pivot = b
        if pivot != a:
            for b in range(size):
                matrix[a, b], matrix[pivot, b] = matrix[pivot, b], matrix[a, b]
                out[a, b], out[pivot, b] = out[pivot, b], out[a, b]
        scale = 1.0 / matrix[a, a]
        for b in range(size):
            matrix[a, b] *= scale
            out[a, b] *= scale
        for row in range(size):
            factor = matrix[row, a]
            if row != a and factor != 0.0:
                for b in range(a, size):
                    matrix[row, b] -= factor * matrix[a, b]
                for b in range(size):
                    out[row, b] -= factor * out[a, b]


@njit(cache=True, error_model="numpy")
def _invert_scaled(block: Array, per_kelvin: float, out: Array) -> None:
    """Invert with amounts and temperature on one scale, or pivots are chosen by units."""
    last = block.shape[0] - 1
    for a in range(last):
        block[a, last] /= per_kelvin
        block[last, a] *= per_kelvin
    invert(block, out)
    for a in range(last):
        out[a, last] *= per_kelvin
        out[last, a] /= per_kelvin
