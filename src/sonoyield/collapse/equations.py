"""The equations of the well-mixed bubble, compiled: one right-hand side for every stage.

State: radius, wall speed, temperature, the contents n_k (mol), what has crossed into the liquid
(mol, net), and the ledger's integrals (J). Gas: Noble-Abel, p (V - sum n_k b_k) = n R T, in the
pressure and in the work; rates of reaction are given, taken at the true density.
"""

from __future__ import annotations

from math import cos, nan, pi, sin

from numba import njit

from sonoyield.collapse.exchange import (
    COVOLUME,
    CROSSES,
    ENTHALPY_AT_LIQUID,
    MASS,
    layer_thickness,
    species_flow,
)
from sonoyield.collapse.properties import (
    heat_capacity_and_enthalpy,
    mixture_conductivity,
    transport_logarithm,
)
from sonoyield.collapse.radial import keller_miksis
from sonoyield.describe.gas import GAS_CONSTANT, Array

# Layout of the state: then n_k (K), crossed (K), and the ledger's integrals.
RADIUS, SPEED, TEMPERATURE, MOLES = range(4)
WORK, VISCOUS, RADIATION, HEAT, CARRIED, FAR_FIELD = range(6)
LEDGER = 6

# Layout of the constants.
(
    DENSITY,
    SOUND_SPEED,
    VISCOSITY,
    SURFACE_TENSION,
    LIQUID_TEMPERATURE,
    AMBIENT_PRESSURE,
    PRESSURE_AMPLITUDE,
    ANGULAR_FREQUENCY,
    WATER,
    TRANSPORT_TOP,
) = range(10)
CONSTANTS = 10

# Rows of the scratch space (SCRATCH, K).
FRACTIONS, CAPACITY, ENTHALPY, FLOW = range(4)
SCRATCH = 4

WARMEST_TRIAL = 1e5  # K; a trial state beyond is refused, and the step with it


def state_size(species: int) -> int:
    """Length of the state vector for a number of species."""
    return MOLES + 2 * species + LEDGER


@njit(cache=True, error_model="numpy")
def gas_pressure(radius: float, temperature: float, moles: Array, species: Array) -> float:
    """Pressure of the Noble-Abel gas, Pa; not positive where the covolumes do not fit."""
    free = 4.0 / 3.0 * pi * radius**3
    total = 0.0
    for k in range(moles.size):
        total += moles[k]
        free -= moles[k] * species[k, COVOLUME]
    return total * GAS_CONSTANT * temperature / free


@njit(cache=True, error_model="numpy")
def rates(
    time: float,
    state: Array,
    production: Array,
    constants: Array,
    species: Array,
    nasa: Array,
    conductivity: Array,
    diffusivity: Array,
    scratch: Array,
    out: Array,
) -> None:
    """Fill ``out`` with the time derivatives of ``state``; ``production`` in mol/s (K,).

    A state that is not physical (as a trial step may give) yields not-a-number throughout.
    """
    count = production.size
    radius, speed, temperature = state[RADIUS], state[SPEED], state[TEMPERATURE]
    moles = state[MOLES : MOLES + count]
    fractions, capacity = scratch[FRACTIONS], scratch[CAPACITY]
    enthalpy, flow = scratch[ENTHALPY], scratch[FLOW]

    total = 0.0
    mass = 0.0
    free = 4.0 / 3.0 * pi * radius**3
    volume = free
    for k in range(count):
        total += moles[k]
        mass += moles[k] * species[k, MASS]
        free -= moles[k] * species[k, COVOLUME]
    good = radius > 0.0 and free > 0.0 and total > 0.0 and 1.0 < temperature < WARMEST_TRIAL
    if not good:
        out[:] = nan
        return
    pressure = total * GAS_CONSTANT * temperature / free

    heat_capacity_and_enthalpy(temperature, nasa, capacity, enthalpy)
    molar_capacity = 0.0
    for k in range(count):
        fractions[k] = moles[k] / total
        molar_capacity += fractions[k] * capacity[k]

    # Heat and species through the wall, into the gas.
    area = 4.0 * pi * radius * radius
    u = transport_logarithm(temperature, constants[TRANSPORT_TOP])
    conducts = mixture_conductivity(
        temperature, u, fractions, conductivity, int(constants[WATER])
    )
    thermal = conducts * volume / (total * molar_capacity)
    heat = (
        area
        * conducts
        * (constants[LIQUID_TEMPERATURE] - temperature)
        / layer_thickness(radius, speed, thermal)
    )
    species_flow(
        radius, speed, temperature, u, pressure, volume, moles, fractions, species, diffusivity,
        flow,
    )

    # Gas: first law of the open, reacting contents.
    growth = area * speed
    work_heat = -pressure * growth + heat
    gained = 0.0
    covolume_gained = 0.0
    carried = 0.0
    for k in range(count):
        change = production[k]
        energy = enthalpy[k] - GAS_CONSTANT * temperature
        if species[k, CROSSES] != 0.0:
            brought = flow[k] * (species[k, ENTHALPY_AT_LIQUID] + pressure * species[k, COVOLUME])
            work_heat += brought
            carried -= brought
            change += flow[k]
        work_heat -= change * energy
        gained += change
        covolume_gained += change * species[k, COVOLUME]
        out[MOLES + k] = change
        out[MOLES + count + k] = -flow[k]
    warming = work_heat / (total * (molar_capacity - GAS_CONSTANT))
    pressure_rate = pressure * (
        gained / total + warming / temperature - (growth - covolume_gained) / free
    )

    # Liquid.
    phase = constants[ANGULAR_FREQUENCY] * time
    sound = -constants[PRESSURE_AMPLITUDE] * sin(phase)
    sound_rate = -constants[PRESSURE_AMPLITUDE] * constants[ANGULAR_FREQUENCY] * cos(phase)
    far = constants[AMBIENT_PRESSURE] + sound
    density, viscosity = constants[DENSITY], constants[VISCOSITY]
    tension = constants[SURFACE_TENSION]
    acceleration = keller_miksis(
        radius, speed, pressure, pressure_rate, far, sound_rate, density,
        constants[SOUND_SPEED], viscosity, tension,
    )

    out[RADIUS] = speed
    out[SPEED] = acceleration
    out[TEMPERATURE] = warming

    fill_ledger(
        radius, speed, acceleration, pressure, sound, -heat, carried, constants,
        out[MOLES + 2 * count :],
    )


@njit(cache=True, error_model="numpy")
def fill_ledger(
    radius: float,
    speed: float,
    acceleration: float,
    pressure: float,
    sound: float,
    heat: float,
    carried: float,
    constants: Array,
    ledger: Array,
) -> None:
    """Fill ``ledger`` (6,), W: where the sound's work goes; ``heat`` and ``carried`` outwards."""
    density, viscosity = constants[DENSITY], constants[VISCOSITY]
    area = 4.0 * pi * radius * radius
    growth = area * speed
    far = constants[AMBIENT_PRESSURE] + sound
    wall = pressure - (2.0 * constants[SURFACE_TENSION] + 4.0 * viscosity * speed) / radius
    inertia = density * (radius * acceleration + 1.5 * speed * speed)
    bulge = area * acceleration + 8.0 * pi * radius * speed * speed
    ledger[WORK] = -sound * growth
    ledger[VISCOUS] = 4.0 * viscosity * speed / radius * growth
    ledger[RADIATION] = -(inertia - (wall - far)) * growth
    ledger[HEAT] = heat
    ledger[CARRIED] = carried
    ledger[FAR_FIELD] = density * bulge * bulge / (4.0 * pi * constants[SOUND_SPEED])


def stored_energy(state: Array, constants: Array) -> float:
    """Energy stored in motion, surface and displaced volume, J.

    2 pi rho R^3 U^2 + 4 pi R^2 sigma + p0 V; the gas's own is ``internal_energy``.
    """
    radius, speed = float(state[RADIUS]), float(state[SPEED])
    return float(
        2.0 * pi * constants[DENSITY] * radius**3 * speed * speed
        + 4.0 * pi * radius * radius * constants[SURFACE_TENSION]
        + constants[AMBIENT_PRESSURE] * 4.0 / 3.0 * pi * radius**3
    )


@njit(cache=True, error_model="numpy")
def internal_energy(temperature: float, moles: Array, nasa: Array, scratch: Array) -> float:
    """Internal energy sum n_k u_k of gas at one temperature, J, in the mechanism's zero."""
    heat_capacity_and_enthalpy(temperature, nasa, scratch[CAPACITY], scratch[ENTHALPY])
    gas = 0.0
    for k in range(moles.size):
        gas += moles[k] * (scratch[ENTHALPY, k] - GAS_CONSTANT * temperature)
    return gas
