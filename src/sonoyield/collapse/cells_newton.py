"""The Jacobian of the resolved bubble in parts, as ``cells_elimination`` solves with, compiled.

With pressure, volumes and conductances held only neighbours touch, and in the amounts of a
neighbour a block is a diagonal and two outer products. What every cell feels (pressure's rate,
pressure, mass taken up, radius and speed) comes beside the blocks as columns. Every entry that
takes from one cell gives to another, so that a Newton step conserves elements however well it
converges.
"""

from __future__ import annotations

from math import pi
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import aqueous_jacobian
from sonoyield.collapse.cells_rates import crowd
from sonoyield.collapse.exchange import COVOLUME, ENTHALPY_AT_LIQUID, EQUILIBRIUM, MASS
from sonoyield.collapse.film_grid import film_conductances
from sonoyield.collapse.kernel import call, inner
from sonoyield.collapse.kinetics import thermo
from sonoyield.collapse.small_matrices import copy
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
    wall: Array  # (4, K): flow into the liquid by amount, share, film; what enthalpy it carries
    film_own: Array  # (M, L, L)
    film_inverse: Array  # (M, L, L)
    film_inner: Array  # (M, L): cell i by cell i - 1
    film_outer: Array  # (M, L): cell i by cell i + 1
    squeeze: Array  # (S,): what a rate of pressure does to each state
    feels: Array  # (S,): pressure rate by each state's own rate, times the stiffness
    squeezed: Array  # (S,): the solution for ``squeeze``
    numbers: Array  # (4,): stiffness, denominator, volume of the film's first cell, conducted heat
    columns: Array  # (4, S): rates by pressure, mass taken up, radius and speed
    by_pressure: Array  # (S,): pressure by each state
    by_cell: Array  # (K,): mass taken up by the outermost cell's amounts
    by_film: Array  # (L,): mass taken up by the film's first concentrations
    solved: Array  # (4, S): the solutions for ``columns``
    small: Array  # (4, 4)
    seen_by_all: Array  # (4, 4)
    scalars: Array  # (4,)
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
    layer: Array  # (5,): where the liquid warms, as named below


# Entries of ``Blocks.layer``: water's flow into the liquid by its warming, latent heat, heat
# capacities (J/K) of the outermost cell and of the film's first one, water's place in the gas.
BY_WARMING, LATENT, OF_GAS, OF_FILM, WATER = range(5)


def blocks_for(cells: int, species: int, film: tuple[int, int], size: int) -> Blocks:
    """Room for a factorisation; ``film`` is (M, L), ``size`` the length of the state."""
    m, (spots, kinds) = species + 1, film
    return Blocks(
        np.zeros((cells, m, m)), np.zeros((cells, m, m)), np.zeros((cells, 3, species)),
        np.zeros((cells, 3, species)), np.zeros((cells, species)), np.zeros((cells, 2)),
        np.zeros((4, species)),
        np.zeros((spots, kinds, kinds)), np.zeros((spots, kinds, kinds)),
        np.zeros((spots, kinds)), np.zeros((spots, kinds)), np.zeros(size), np.zeros(size),
        np.zeros(size), np.zeros(4), np.zeros((4, size)), np.zeros(size), np.zeros(species),
        np.zeros(kinds), np.zeros((4, size)), np.zeros((4, 4)),
        np.zeros((4, 4)), np.zeros(4), np.zeros(cells), np.zeros(3),
        np.zeros((2, size)),
        np.zeros((m, m)), np.zeros((m, m)), np.zeros((3, m)),
        np.zeros((kinds, kinds)), np.zeros(kinds),
        np.zeros((species, species)), np.zeros(species), np.zeros(5),
    )  # fmt: skip


@inner
def evaluate(
    time: float, state: Array, gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks, rates: int,
    out: Array,
) -> None:  # fmt: skip
    """Find the Jacobian's parts at a state; ``rates`` is their address, ``out`` takes them."""
    call(rates, (time, state, gas, film, work, out))
    _own_chemistry(state, gas, work, blocks)
    _between(gas, work, blocks)
    _at_wall(gas, film, work, blocks)
    _film_blocks(state, film, work, blocks)
    _layer(gas, film, work, blocks)
    _pressure_vectors(state, gas, work, blocks)
    _mass_vectors(gas, film, work, blocks)
    _trial_columns(time, state, gas, film, work, blocks, rates, out)


@inner
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
        crowd(temperature, pressure, volume, work.cell[i, c.COVOLUMES], gas.species, crowding)
        for k in range(count):
            concentration[k] = state[at + k] / volume
        call(gas.derivatives, (
            temperature, concentration, gibbs, work.enthalpy[i], crowding, gas.dense,
            gas.kinetics, work.kinetics, work.row[3], blocks.derivatives, blocks.by_temperature,
        ))  # fmt: skip
        _chemistry_block(i, temperature, volume, pressure, gas, work, blocks)
        at += count + 1


@inner
def _chemistry_block(
    i: int, temperature: float, volume: float, pressure: float, gas: c.Gas, work: c.Work,
    blocks: Blocks,
) -> None:  # fmt: skip
    """The chemistry's derivatives as rates of the cell, whose volume follows its contents."""
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


@inner
def _between(gas: c.Gas, work: c.Work, blocks: Blocks) -> None:
    """Diffusion and conduction through the inner faces, added to both cells."""
    cells, count = work.fractions.shape
    for i in range(cells - 1):
        for side in range(2):
            sign, drift = 1.0 if side == 0 else -1.0, work.face[i, c.DRIFT]
            part = blocks.inner[i] if side == 0 else blocks.outer[i]
            amount = work.cell[i + side, c.AMOUNT]
            mean = 0.0
            for k in range(count):
                by_mass = gas.species[k, MASS] * work.conductance[i, k]
                mean += by_mass * work.fractions[i + side, k]
            for k in range(count):
                part[0, k] = work.conductance[i, k] / amount
                beyond = 1.0 - work.share[i, k] if side == 0 else work.share[i, k]
                part[0, k] -= sign * drift * 2.0 * beyond**2 / work.cell[i + side, c.WEIGHT]
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


@inner
def _conduction(i: int, work: c.Work, blocks: Blocks) -> None:
    count = work.fractions.shape[1]
    flows_in = flows_out = 0.0
    for k in range(count):
        flows_in += work.flow[i, k] * work.capacity[i, k]
        flows_out += work.flow[i, k] * work.capacity[i + 1, k]
    share = work.face[i, c.LEANING_HEAT]
    carried = (share * flows_in, (1.0 - share) * flows_out)
    flows_in *= 1.0 - share
    flows_out *= share
    conducts = work.face[i, c.HEAT_CONDUCTANCE]
    inner = work.cell[i, c.AMOUNT] * work.cell[i, c.CAPACITY]
    outer = work.cell[i + 1, c.AMOUNT] * work.cell[i + 1, c.CAPACITY]
    blocks.own[i, count, count] += (flows_in - conducts) / inner
    blocks.own[i + 1, count, count] -= (flows_out + conducts) / outer
    blocks.heat[i, 0] = (conducts + carried[0]) / outer
    blocks.heat[i, 1] = (conducts - carried[1]) / inner


@inner
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


@inner
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


@inner
def _layer(gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks) -> None:
    """How the warming of the liquid at the wall acts on conduction and on vapour at its surface."""
    warming = film.gas_index.size - 1
    if film.edges.size < 2 or film.gas_index[warming] != c.WARMING:
        return
    last, layer = work.fractions.shape[0] - 1, blocks.layer
    water = int(gas.constants[eq.WATER])
    latent, temperature = film.layer[c.LATENT_HEAT], work.whole[c.AT_WALL]
    steeper = (latent / (GAS_CONSTANT * temperature) - 1.0) / temperature
    steeper = steeper * work.whole[c.BY_SURFACE] + GAS_CONSTANT / work.whole[c.PRESSURE]
    ahead = gas.species[water, EQUILIBRIUM] * work.whole[c.SATURATION] * steeper
    layer[BY_WARMING] = -work.conductance[last, water] * ahead
    layer[LATENT], layer[WATER] = latent, water
    layer[OF_GAS] = work.cell[last, c.AMOUNT] * work.cell[last, c.CAPACITY]
    layer[OF_FILM] = film.layer[c.HEAT_CAPACITY] * film.edges[1]
    lost = blocks.numbers[3] - latent * layer[BY_WARMING]
    blocks.film_own[0, warming, warming] -= lost / layer[OF_FILM]


@inner
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


@inner
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
        if k == c.WARMING:
            water = int(blocks.layer[WATER])
            blocks.by_film[s] = -gas.species[water, MASS] * blocks.layer[BY_WARMING]


@inner
def _trial_columns(
    time: float, state: Array, gas: c.Gas, film: c.Film, work: c.Work, blocks: Blocks, rates: int,
    base: Array,
) -> None:  # fmt: skip
    """Rates by pressure, radius and speed, each with the other two held, by small differences."""
    trial, found = blocks.trial[0], blocks.trial[1]
    pressure = work.whole[c.PRESSURE]
    for a in (0, 2, 3):
        copy(state, trial)
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
        call(rates, (time, trial, gas, film, work, found))
        for i in range(base.size):
            blocks.columns[a, i] = (found[i] - base[i]) / step
    work.whole[c.TRIAL] = 1.0


NUDGE = 1e-6  # relative step of the differences
