"""Rates of change of all cells of the resolved bubble, compiled.

Each cell is Noble-Abel gas with chemistry at the true density; one pressure in all of them, whose
rate follows in closed form.
"""

from __future__ import annotations

from math import cos, log, nan, pi, sin

import numpy as np

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import aqueous_production
from sonoyield.collapse.cells_flows import through_faces, through_wall
from sonoyield.collapse.exchange import COVOLUME, ENTHALPY_AT_LIQUID, MASS
from sonoyield.collapse.film_grid import film_diffusion
from sonoyield.collapse.kernel import call, inner, making
from sonoyield.collapse.kinetics import thermo
from sonoyield.collapse.radial import keller_miksis
from sonoyield.describe.gas import GAS_CONSTANT, Array


@inner
def rates(time: float, state: Array, gas: c.Gas, film: c.Film, work: c.Work, out: Array) -> None:
    """Fill ``out`` with the time derivatives of ``state``; not-a-number for one not physical."""
    if not volumes(state, gas, work):
        out[:] = nan
        return
    _contents(state, gas, work, out)
    through_wall(state, gas, film, work, out)
    through_faces(state, gas, work, out)
    _pressure_and_motion(time, state, gas, work, out)
    _in_film(state, gas, film, work, out)


@inner
def volumes(state: Array, gas: c.Gas, work: c.Work) -> bool:
    """Pressure, volumes and faces of the cells; whether the state is physical."""
    cells, count = work.fractions.shape
    radius = state[c.RADIUS]
    cell, face = work.cell, work.face
    free = 4.0 / 3.0 * pi * radius**3
    thermal = 0.0
    at = c.CROSSED + count
    for i in range(cells):
        total = weight = covolume = 0.0
        for k in range(count):
            n = state[at + k]
            total += n
            weight += n * gas.species[k, MASS]
            covolume += n * gas.species[k, COVOLUME]
        temperature = state[at + count]
        if not (total > 0.0 and 1.0 < temperature < eq.WARMEST_TRIAL):
            return False
        for k in range(count):
            work.fractions[i, k] = state[at + k] / total
        cell[i, c.AMOUNT], cell[i, c.WEIGHT], cell[i, c.COVOLUMES] = total, weight, covolume
        free -= covolume
        thermal += total * GAS_CONSTANT * temperature
        at += count + 1
    if not (radius > 0.0 and free > 0.0):
        return False
    pressure = thermal / free
    work.whole[c.PRESSURE], work.whole[c.FREE] = pressure * work.whole[c.TRIAL], free
    inside = 0.0
    at = c.CROSSED + count
    for i in range(cells):
        ideal = cell[i, c.AMOUNT] * GAS_CONSTANT * state[at + count] / pressure
        volume = ideal + cell[i, c.COVOLUMES]
        cell[i, c.VOLUME] = ideal / work.whole[c.TRIAL] + cell[i, c.COVOLUMES]
        cell[i, c.CENTRE] = np.cbrt(0.75 / pi * (inside + 0.5 * volume))
        inside += volume
        face[i, c.AREA] = 4.0 * pi * np.cbrt(0.75 / pi * inside) ** 2
        at += count + 1
    face[cells - 1, c.AREA] = 4.0 * pi * radius**2
    work.whole[c.HALF] = radius - np.cbrt(radius**3 - 0.375 / pi * volume)
    return True


@inner
def _contents(state: Array, gas: c.Gas, work: c.Work, out: Array) -> None:
    """Thermo and chemistry of each cell."""
    cells, count = work.fractions.shape
    pressure = work.whole[c.PRESSURE]
    gibbs, crowding, concentration = work.row[0], work.row[1], work.row[2]
    at = c.CROSSED + count
    for i in range(cells):
        temperature, volume = state[at + count], work.cell[i, c.VOLUME]
        made = work.made[i]
        thermo(temperature, gas.nasa, work.capacity[i], work.enthalpy[i], gibbs)
        if gas.reactive:
            crowd(temperature, pressure, volume, work.cell[i, c.COVOLUMES], gas.species, crowding)
            for k in range(count):
                concentration[k] = state[at + k] / volume
            call(gas.production, (
                temperature, concentration, gibbs, crowding, gas.dense, gas.kinetics,
                work.kinetics, made,
            ))  # fmt: skip
        capacity = heating = gain = 0.0
        for k in range(count):
            made[k] *= volume
            capacity += work.fractions[i, k] * work.capacity[i, k]
            gain += made[k]
            heating -= made[k] * (work.enthalpy[i, k] + pressure * gas.species[k, COVOLUME])
            out[at + k] = made[k]
        work.cell[i, c.CAPACITY], work.cell[i, c.HEATING] = capacity, heating
        work.cell[i, c.GAIN] = gain
        at += count + 1


@inner
def crowd(
    temperature: float, pressure: float, volume: float, covolume: float, species: Array, out: Array
) -> None:
    """Fill ``out`` (K,) with ln V/(V - B) + b_k p/(R T), as ``dense`` says."""
    shared = log(volume / (volume - covolume))
    scale = pressure / (GAS_CONSTANT * temperature)
    for k in range(out.size):
        out[k] = shared + species[k, COVOLUME] * scale


@inner
def _pressure_and_motion(time: float, state: Array, gas: c.Gas, work: c.Work, out: Array) -> None:
    """Pressure's rate in closed form, then temperatures, wall motion and ledger."""
    cells, count = work.fractions.shape
    radius, speed = state[c.RADIUS], state[c.SPEED]
    pressure, area = work.whole[c.PRESSURE], work.face[cells - 1, c.AREA]
    growth = area * speed
    gained = -pressure * growth
    stiffness = 0.0
    at = c.CROSSED + count
    for i in range(cells):
        amount, temperature = work.cell[i, c.AMOUNT], state[at + count]
        share = GAS_CONSTANT / work.cell[i, c.CAPACITY]
        stiffness += amount * GAS_CONSTANT * temperature / pressure * (1.0 - share)
        gained += GAS_CONSTANT * temperature * work.cell[i, c.GAIN]
        gained += share * work.cell[i, c.HEATING]
        for k in range(count):
            gained += pressure * gas.species[k, COVOLUME] * out[at + k]
        at += count + 1
    pressure_rate = gained / stiffness
    work.whole[c.STIFFNESS], work.whole[c.PRESSURE_RATE] = stiffness, pressure_rate
    at = c.CROSSED + count
    for i in range(cells):
        squeezed = work.cell[i, c.AMOUNT] * GAS_CONSTANT * state[at + count] / pressure
        out[at + count] = (squeezed * pressure_rate + work.cell[i, c.HEATING]) / (
            work.cell[i, c.AMOUNT] * work.cell[i, c.CAPACITY]
        )
        at += count + 1
    constants = gas.constants
    phase = constants[eq.ANGULAR_FREQUENCY] * time
    sound = -constants[eq.PRESSURE_AMPLITUDE] * sin(phase)
    sound_rate = -constants[eq.PRESSURE_AMPLITUDE] * constants[eq.ANGULAR_FREQUENCY] * cos(phase)
    far = constants[eq.AMBIENT_PRESSURE] + sound
    acceleration = keller_miksis(
        radius, speed, pressure, pressure_rate, far, sound_rate, constants[eq.DENSITY],
        constants[eq.SOUND_SPEED], constants[eq.VISCOSITY], constants[eq.SURFACE_TENSION],
    )
    out[c.RADIUS], out[c.SPEED] = speed, acceleration
    last = c.CROSSED + count + (cells - 1) * (count + 1)
    heat = work.face[cells - 1, c.HEAT_CONDUCTANCE] * (
        state[last + count] - work.whole[c.AT_WALL]
    )
    carried = 0.0
    for k in range(count):
        brings = gas.species[k, ENTHALPY_AT_LIQUID] + pressure * gas.species[k, COVOLUME]
        carried += work.flow[cells - 1, k] * brings
    eq.fill_ledger(
        radius, speed, acceleration, pressure, sound, heat, carried, constants,
        out[c.LEDGER : c.LEDGER + eq.LEDGER],
    )


@inner
def _in_film(state: Array, gas: c.Gas, film: c.Film, work: c.Work, out: Array) -> None:
    """Diffusion and reactions in the film, and what comes in through the wall.

    Heat enters by conduction and by vapour that condenses; other species bring none.
    """
    cells, count = work.fractions.shape
    spots = film.edges.size - 1
    if spots < 1:
        return
    kinds = film.gas_index.size
    first = c.CROSSED + count + cells * (count + 1)
    concentration = state[first:].reshape((spots, kinds))
    change = out[first:].reshape((spots, kinds))
    change[:] = 0.0
    _diffuse(concentration, state[c.RADIUS], film, change)
    made = work.film[0]
    for i in range(spots):
        aqueous_production(concentration[i], film.aqueous, made)
        for s in range(kinds):
            change[i, s] += made[s]
    for s in range(kinds):
        if film.gas_index[s] >= 0:
            change[0, s] += work.flow[cells - 1, film.gas_index[s]] / film.edges[1]
        elif film.gas_index[s] == c.WARMING:
            hotter = state[first - 1] - work.whole[c.AT_WALL]
            heat = work.face[cells - 1, c.HEAT_CONDUCTANCE] * hotter
            water = int(gas.constants[eq.WATER])
            heat += film.layer[c.LATENT_HEAT] * work.flow[cells - 1, water]
            change[0, s] += heat / (film.layer[c.HEAT_CAPACITY] * film.edges[1])


@making
def _diffuse(concentration: Array, radius: float, film: c.Film, change: Array) -> None:
    film_diffusion(concentration, radius, film.edges, film.diffusivity, film.bulk, change)
