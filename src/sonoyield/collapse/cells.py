"""The gas resolved from centre to wall: rates of change of all cells, compiled.

Spherical cells of fixed mass fraction at one pressure (Prosperetti 1991, J. Fluid Mech. 222, 587,
for the uniform pressure), so that a compression moves no gas through their faces. In each cell:
amounts n_k and a temperature; Noble-Abel gas, chemistry at the true density. Between cells:
conduction and mixture-averaged diffusion with a mass correction (Kee, Coltrin, Glarborg 2003,
ch. 12; no thermal diffusion). At the wall: half a cell of gas, the kinetic resistance of the
surface and, for what a liquid film follows, half a cell of liquid, in series.

State: radius, wall speed, the ledger's integrals, what has crossed (K), then for each cell its
amounts (K) and temperature, then the film's concentrations (M, L).
"""

from __future__ import annotations

from math import cos, log, nan, pi, sin
from typing import Any, NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import aqueous_production
from sonoyield.collapse.exchange import (
    COVOLUME,
    CROSSES,
    ENTHALPY_AT_LIQUID,
    EQUILIBRIUM,
    MASS,
    SURFACE,
)
from sonoyield.collapse.film_grid import film_diffusion
from sonoyield.collapse.kinetics import Scratch, Tables, production, thermo
from sonoyield.collapse.properties import TRACE, mixture_conductivity, transport_logarithm
from sonoyield.collapse.radial import keller_miksis
from sonoyield.describe.gas import GAS_CONSTANT, Array

RADIUS, SPEED, LEDGER = 0, 1, 2
CROSSED = LEDGER + eq.LEDGER  # then the cells, from CROSSED + K on

# Columns of ``Work.cell``: totals of a cell, its molar heat capacity, what heats it, what it gains.
AMOUNT, WEIGHT, COVOLUMES, VOLUME, CAPACITY, HEATING, GAIN, CENTRE = range(8)
# Columns of ``Work.face``; face i lies outside cell i, the last one is the wall.
AREA, HEAT_CONDUCTANCE, DRIFT, ENTHALPY_FLOW = range(4)
# Entries of ``Work.whole``.
# TRIAL multiplies the pressure (1, but for the Jacobian).
PRESSURE, FREE, STIFFNESS, PRESSURE_RATE, TRIAL, MASS_RATE, BY_SURFACE, HALF = range(8)


class Gas(NamedTuple):
    """What the equations know of bubble, liquid and gas.

    ``faces`` (N+1,) mass fraction inside each face; ``kinetics`` the compiled mechanism's tables.
    """

    constants: Array
    species: Array
    nasa: Array
    conductivity: Array
    diffusivity: Array
    faces: Array
    reactive: bool
    dense: bool
    kinetics: Tables


class Film(NamedTuple):
    """The liquid film: volume coordinate of its cells' edges (M+1,), dissolved species (L).

    ``gas_index`` (L,) position of each in the gas, -1 for those of the liquid alone.
    """

    edges: Array
    diffusivity: Array
    henry: Array
    bulk: Array
    gas_index: NDArray[np.int64]
    aqueous: Any


class Work(NamedTuple):
    """Room for what one evaluation finds, kept for the Jacobian."""

    whole: Array  # (8,)
    cell: Array  # (N, 8)
    face: Array  # (N, 4)
    fractions: Array  # (N, K)
    capacity: Array  # (N, K)
    enthalpy: Array  # (N, K)
    made: Array  # (N, K), mol/s by chemistry
    conductance: Array  # (N, K), mol/s per mole fraction, each face
    per_mass: Array  # (N, K), mol/kg at each face
    flow: Array  # (N, K), mol/s outwards through each face
    row: Array  # (6, K)
    kinetics: Scratch
    film: Array  # (M, L)


def work_for(cells: int, species: int, scratch: Scratch, film: tuple[int, int]) -> Work:
    """Room for ``cells`` of ``species``; ``scratch`` of the kinetics, ``film`` (M, L)."""
    each = [np.zeros((cells, species)) for _ in range(7)]
    whole = np.zeros(8)
    whole[TRIAL] = 1.0
    return Work(
        whole, np.zeros((cells, 8)), np.zeros((cells, 4)), *each,
        np.zeros((6, species)), scratch, np.zeros(film),
    )  # fmt: skip


@njit(cache=True, error_model="numpy")
def rates(time: float, state: Array, gas: Gas, film: Film, work: Work, out: Array) -> None:
    """Fill ``out`` with the time derivatives of ``state``; not-a-number for one not physical."""
    if not _volumes(state, gas, work):
        out[:] = nan
        return
    _contents(state, gas, work, out)
    _through_wall(state, gas, film, work, out)
    _through_faces(state, gas, work, out)
    _pressure_and_motion(time, state, gas, work, out)
    _in_film(state, gas, film, work, out)


@njit(cache=True, error_model="numpy")
def _volumes(state: Array, gas: Gas, work: Work) -> bool:
    """Pressure, volumes and faces of the cells; whether the state is physical."""
    cells, count = work.fractions.shape
    radius = state[RADIUS]
    cell, face = work.cell, work.face
    free = 4.0 / 3.0 * pi * radius**3
    thermal = 0.0
    at = CROSSED + count
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
        cell[i, AMOUNT], cell[i, WEIGHT], cell[i, COVOLUMES] = total, weight, covolume
        free -= covolume
        thermal += total * GAS_CONSTANT * temperature
        at += count + 1
    if not (radius > 0.0 and free > 0.0):
        return False
    pressure = thermal / free
    work.whole[PRESSURE], work.whole[FREE] = pressure * work.whole[TRIAL], free
    inside = 0.0
    at = CROSSED + count
    for i in range(cells):
        ideal = cell[i, AMOUNT] * GAS_CONSTANT * state[at + count] / pressure
        volume = ideal + cell[i, COVOLUMES]
        cell[i, VOLUME] = ideal / work.whole[TRIAL] + cell[i, COVOLUMES]
        cell[i, CENTRE] = np.cbrt(0.75 / pi * (inside + 0.5 * volume))
        inside += volume
        face[i, AREA] = 4.0 * pi * np.cbrt(0.75 / pi * inside) ** 2
        at += count + 1
    face[cells - 1, AREA] = 4.0 * pi * radius**2
    work.whole[HALF] = radius - np.cbrt(radius**3 - 0.375 / pi * volume)
    return True


@njit(cache=True, error_model="numpy")
def _contents(state: Array, gas: Gas, work: Work, out: Array) -> None:
    """Thermo and chemistry of each cell."""
    cells, count = work.fractions.shape
    pressure = work.whole[PRESSURE]
    gibbs, crowding, concentration = work.row[0], work.row[1], work.row[2]
    at = CROSSED + count
    for i in range(cells):
        temperature, volume = state[at + count], work.cell[i, VOLUME]
        made = work.made[i]
        thermo(temperature, gas.nasa, work.capacity[i], work.enthalpy[i], gibbs)
        if gas.reactive:
            crowd(temperature, pressure, volume, work.cell[i, COVOLUMES], gas.species, crowding)
            for k in range(count):
                concentration[k] = state[at + k] / volume
            production(
                temperature, concentration, gibbs, crowding, gas.dense, gas.kinetics,
                work.kinetics, made,
            )
        capacity = heating = gain = 0.0
        for k in range(count):
            made[k] *= volume
            capacity += work.fractions[i, k] * work.capacity[i, k]
            gain += made[k]
            heating -= made[k] * (work.enthalpy[i, k] + pressure * gas.species[k, COVOLUME])
            out[at + k] = made[k]
        work.cell[i, CAPACITY], work.cell[i, HEATING] = capacity, heating
        work.cell[i, GAIN] = gain
        at += count + 1


@njit(cache=True, error_model="numpy")
def crowd(
    temperature: float, pressure: float, volume: float, covolume: float, species: Array, out: Array
) -> None:
    """Fill ``out`` (K,) with ln V/(V - B) + b_k p/(R T), as ``dense`` says."""
    shared = log(volume / (volume - covolume))
    scale = pressure / (GAS_CONSTANT * temperature)
    for k in range(out.size):
        out[k] = shared + species[k, COVOLUME] * scale


@njit(cache=True, error_model="numpy")
def mixture_diffusivities(
    temperature: float, u: float, pressure: float, x: Array, species: Array, diffusivity: Array,
    out: Array,
) -> None:
    """Fill ``out`` (K,), m2/s, as ``properties.mixture_diffusivity`` does for one species."""
    count = x.size
    whole = 0.0
    for k in range(count):
        out[k] = 0.0
        whole += max(x[k], 0.0) * species[k, MASS]
    for j in range(count):
        if x[j] <= TRACE_IN_CELLS:
            continue
        for k in range(count):
            if k != j:
                c = diffusivity[k, j]
                out[k] += x[j] / (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
    scale = temperature * temperature**0.5 / pressure
    for k in range(count):
        if out[k] <= 0.0:  # the pure gas: self-diffusion
            c = diffusivity[k, k]
            out[k] = scale * (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
        else:
            out[k] = scale * (whole - max(x[k], 0.0) * species[k, MASS]) / (whole * out[k])


TRACE_IN_CELLS = 1e3 * TRACE  # mole fraction; what is rarer does not slow the others down


@njit(cache=True, error_model="numpy")
def _through_wall(state: Array, gas: Gas, film: Film, work: Work, out: Array) -> None:
    """Heat and species from the outermost cell into the liquid; the gas's gain of mass.

    Half-cell resistances are in mole fraction; water moves against gas that stays (Stefan flow).
    """
    cells, count = work.fractions.shape
    last = cells - 1
    at = CROSSED + count + last * (count + 1)
    pressure, area = work.whole[PRESSURE], work.face[last, AREA]
    surface = gas.constants[eq.LIQUID_TEMPERATURE]
    temperature = 0.5 * (state[at + count] + surface)
    thickness = work.whole[HALF]
    x, diffuses = work.row[0], work.row[1]
    mean_covolume = work.cell[last, COVOLUMES] / work.cell[last, AMOUNT]
    density = 1.0 / (GAS_CONSTANT * temperature / pressure + mean_covolume)
    at_surface = 1.0 / (GAS_CONSTANT * surface / pressure + mean_covolume)
    _wall_mixture(work.fractions[last], gas, at_surface, x)
    u = transport_logarithm(temperature, gas.constants[eq.TRANSPORT_TOP])
    conducts = mixture_conductivity(
        temperature, u, x, gas.conductivity, int(gas.constants[eq.WATER])
    )
    work.face[last, HEAT_CONDUCTANCE] = area * conducts / thickness
    mixture_diffusivities(temperature, u, pressure, x, gas.species, gas.diffusivity, diffuses)
    work.whole[BY_SURFACE] = 1.0 / at_surface  # m3/mol
    weight = 0.0
    for k in range(count):
        weight += x[k] * gas.species[k, MASS]
    mass_rate = brought = 0.0
    for k in range(count):
        work.flow[last, k] = work.conductance[last, k] = 0.0
        if gas.species[k, CROSSES] == 0.0:
            continue
        stays = 1.0 - x[k] * gas.species[k, MASS] / weight
        resistance = thickness * stays / (density * diffuses[k])
        resistance += gas.species[k, SURFACE] / at_surface
        work.conductance[last, k] = area / resistance
        ahead = gas.species[k, EQUILIBRIUM] / at_surface
        work.flow[last, k] = work.conductance[last, k] * (work.fractions[last, k] - ahead)
    _into_film(state, film, work, area, at_surface)
    for k in range(count):
        flow = work.flow[last, k]
        if flow != 0.0:
            mass_rate -= gas.species[k, MASS] * flow
            out[at + k] -= flow
            work.cell[last, GAIN] -= flow
            carried = gas.species[k, ENTHALPY_AT_LIQUID]
            brought -= flow * (carried - work.enthalpy[last, k])
        out[CROSSED + k] = flow
    work.whole[MASS_RATE] = mass_rate
    heat = work.face[last, HEAT_CONDUCTANCE] * (surface - state[at + count])
    work.cell[last, HEATING] += heat + brought


@njit(cache=True, error_model="numpy")
def _wall_mixture(inside: Array, gas: Gas, density: float, x: Array) -> None:
    """Mole fractions half-way between the outermost cell and the surface."""
    total = 0.0
    for k in range(x.size):
        x[k] = max(inside[k], 0.0)
        if gas.species[k, CROSSES] != 0.0:
            x[k] = 0.5 * (x[k] + min(gas.species[k, EQUILIBRIUM] / density, 1.0))
        total += x[k]
    for k in range(x.size):
        x[k] /= total


@njit(cache=True, error_model="numpy")
def _into_film(state: Array, film: Film, work: Work, area: float, density: float) -> None:
    """Put the liquid's resistance and content into the flows of what the film follows."""
    cells, count = work.fractions.shape
    last = cells - 1
    if film.edges.size < 2:
        return
    thickness = 0.5 * (film.edges[1] - film.edges[0]) / area
    first = CROSSED + count + cells * (count + 1)
    for s in range(film.gas_index.size):
        k = film.gas_index[s]
        if k < 0:
            continue
        gaseous = work.conductance[last, k]
        if gaseous == 0.0:
            continue
        liquid = area * film.diffusivity[s] * film.henry[s] * density / thickness
        work.conductance[last, k] = 1.0 / (1.0 / gaseous + 1.0 / liquid)
        ahead = state[first + s] / (film.henry[s] * density)
        work.flow[last, k] = work.conductance[last, k] * (work.fractions[last, k] - ahead)


@njit(cache=True, error_model="numpy")
def _through_faces(state: Array, gas: Gas, work: Work, out: Array) -> None:
    """Conduction and diffusion between neighbours, with the drift that keeps mass fractions."""
    cells, count = work.fractions.shape
    at = CROSSED + count
    for i in range(cells - 1):
        _face(i, state[at + count], state[at + 2 * count + 1], gas, work)
        hotter = state[at + count] - state[at + 2 * count + 1]
        lost = 0.0
        for k in range(count):
            flow = work.flow[i, k]
            out[at + k] -= flow
            out[at + count + 1 + k] += flow
            work.cell[i, GAIN] -= flow
            work.cell[i + 1, GAIN] += flow
            lost += flow * (work.enthalpy[i + 1, k] - work.enthalpy[i, k])
        heat = work.face[i, HEAT_CONDUCTANCE] * hotter
        work.cell[i, HEATING] -= heat + 0.5 * lost
        work.cell[i + 1, HEATING] += heat - 0.5 * lost
        at += count + 1


@njit(cache=True, error_model="numpy")
def _face(i: int, inner: float, outer: float, gas: Gas, work: Work) -> None:
    """Conductances and flows of the face outside cell ``i``, from the temperatures beside it."""
    count = work.fractions.shape[1]
    x, diffuses = work.row[0], work.row[1]
    cell, area = work.cell, work.face[i, AREA]
    temperature = 0.5 * (inner + outer)
    for k in range(count):
        x[k] = 0.5 * (work.fractions[i, k] + work.fractions[i + 1, k])
    u = transport_logarithm(temperature, gas.constants[eq.TRANSPORT_TOP])
    conducts = mixture_conductivity(
        temperature, u, x, gas.conductivity, int(gas.constants[eq.WATER])
    )
    per_length = area / (cell[i + 1, CENTRE] - cell[i, CENTRE])
    work.face[i, HEAT_CONDUCTANCE] = conducts * per_length
    mixture_diffusivities(
        temperature, u, work.whole[PRESSURE], x, gas.species, gas.diffusivity, diffuses
    )
    density = (cell[i, AMOUNT] + cell[i + 1, AMOUNT]) / (cell[i, VOLUME] + cell[i + 1, VOLUME])
    drift = 0.0
    for k in range(count):
        conductance = density * diffuses[k] * per_length
        flow = conductance * (work.fractions[i, k] - work.fractions[i + 1, k])
        work.conductance[i, k] = conductance
        work.flow[i, k] = flow
        drift += gas.species[k, MASS] * flow
        inside = work.fractions[i, k] * cell[i, AMOUNT] / cell[i, WEIGHT]
        outside = work.fractions[i + 1, k] * cell[i + 1, AMOUNT] / cell[i + 1, WEIGHT]
        work.per_mass[i, k] = 0.5 * (inside + outside)
    drift += gas.faces[i + 1] * work.whole[MASS_RATE]
    work.face[i, DRIFT] = drift
    for k in range(count):
        work.flow[i, k] -= work.per_mass[i, k] * drift


@njit(cache=True, error_model="numpy")
def _pressure_and_motion(time: float, state: Array, gas: Gas, work: Work, out: Array) -> None:
    """Pressure's rate in closed form, then temperatures, wall motion and ledger."""
    cells, count = work.fractions.shape
    radius, speed = state[RADIUS], state[SPEED]
    pressure, area = work.whole[PRESSURE], work.face[cells - 1, AREA]
    growth = area * speed
    gained = -pressure * growth
    stiffness = 0.0
    at = CROSSED + count
    for i in range(cells):
        amount, temperature = work.cell[i, AMOUNT], state[at + count]
        share = GAS_CONSTANT / work.cell[i, CAPACITY]
        stiffness += amount * GAS_CONSTANT * temperature / pressure * (1.0 - share)
        gained += GAS_CONSTANT * temperature * work.cell[i, GAIN]
        gained += share * work.cell[i, HEATING]
        for k in range(count):
            gained += pressure * gas.species[k, COVOLUME] * out[at + k]
        at += count + 1
    pressure_rate = gained / stiffness
    work.whole[STIFFNESS], work.whole[PRESSURE_RATE] = stiffness, pressure_rate
    at = CROSSED + count
    for i in range(cells):
        squeezed = work.cell[i, AMOUNT] * GAS_CONSTANT * state[at + count] / pressure
        out[at + count] = (squeezed * pressure_rate + work.cell[i, HEATING]) / (
            work.cell[i, AMOUNT] * work.cell[i, CAPACITY]
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
    out[RADIUS], out[SPEED] = speed, acceleration
    last = CROSSED + count + (cells - 1) * (count + 1)
    heat = work.face[cells - 1, HEAT_CONDUCTANCE] * (
        state[last + count] - constants[eq.LIQUID_TEMPERATURE]
    )
    carried = 0.0
    for k in range(count):
        brings = gas.species[k, ENTHALPY_AT_LIQUID] + pressure * gas.species[k, COVOLUME]
        carried += work.flow[cells - 1, k] * brings
    eq.fill_ledger(
        radius, speed, acceleration, pressure, sound, heat, carried, constants,
        out[LEDGER : LEDGER + eq.LEDGER],
    )


@njit(cache=True, error_model="numpy")
def _in_film(state: Array, gas: Gas, film: Film, work: Work, out: Array) -> None:
    """Diffusion and reactions in the film, and what comes in through the wall."""
    cells, count = work.fractions.shape
    spots = film.edges.size - 1
    if spots < 1:
        return
    kinds = film.gas_index.size
    first = CROSSED + count + cells * (count + 1)
    concentration = state[first:].reshape((spots, kinds))
    change = out[first:].reshape((spots, kinds))
    change[:] = 0.0
    film_diffusion(
        concentration, state[RADIUS], film.edges, film.diffusivity, film.bulk, change
    )
    made = work.film[0]
    for i in range(spots):
        aqueous_production(concentration[i], film.aqueous, made)
        for s in range(kinds):
            change[i, s] += made[s]
    for s in range(kinds):
        if film.gas_index[s] >= 0:
            change[0, s] += work.flow[cells - 1, film.gas_index[s]] / film.edges[1]
