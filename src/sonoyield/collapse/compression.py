"""What a frozen bubble hands to a reactor: volume and exchange against time, compiled."""

from __future__ import annotations

from dataclasses import dataclass
from math import nan, pi
from typing import Any

import numpy as np
from numba import njit

from sonoyield.collapse import equations as eq
from sonoyield.collapse.exchange import (
    COVOLUME,
    CROSSES,
    ENTHALPY_AT_LIQUID,
    EQUILIBRIUM,
    species_flow,
)
from sonoyield.collapse.history import History
from sonoyield.collapse.properties import heat_capacity_and_enthalpy, transport_logarithm
from sonoyield.collapse.reactor import KILO, OWN
from sonoyield.describe.gas import GAS_CONSTANT, Array

# Columns of the nodes: radius and its first two derivatives; what the wall conducts of heat (W for
# each K of difference) and of vapour (mol/s for each mol/m3), each with its derivative; how fast
# the volume relaxes to the history's (1/s).
#
# The conductances are handed over, not the flows themselves: the reactor is cooler than the frozen
# gas and holds less steam, and the frozen gas's flows take more than it has (tried: below 4 K in
# argon at 20 kHz and 1.5 bar, negative steam at 355 kHz and 2 bar).
TIME, RADIUS, SPEED, ACCELERATION, HEAT, HEAT_SLOPE, VAPOUR, VAPOUR_SLOPE, RELAXATION = range(9)
COLUMNS = 9

# Rows of the scratch space of the right-hand side.
MOLES, FRACTIONS, CAPACITY, ENTHALPY, FLOW = range(5)
ROOM = 5

# Relaxation of the volume, in each step of the history: an imposed velocity alone is integrated and
# drifts. Much faster ones are stiff and leave the volume to the integrator's Newton tolerance.
FEEDBACK = 1.0
# Longest step, in steps of the history there and at every later time within its reach: an
# integrator that has grown its step in a quiet stretch would leap over a collapse.
REACH = 4.0
FINEST = 1e-7  # of the period; steps of the history cut shorter to land on a crest count as this


@dataclass(frozen=True, eq=False)
class Compression:
    """Nodes (N, 9) of a frozen history, columns as named in this module, and step limits (N,) s.

    Between nodes the radius is the quintic that meets radius, speed and acceleration of both.
    """

    nodes: Array
    limits: Array

    @classmethod
    def of(cls, frozen: History, feedback: float = FEEDBACK, reach: float = REACH) -> Compression:
        """Read a history with frozen chemistry; ``feedback`` and ``reach`` as named here."""
        later = np.diff(frozen.times, prepend=-1.0) > 0.0
        nodes = np.zeros((int(later.sum()), COLUMNS))
        times = nodes[:, TIME] = frozen.times[later]
        count = len(frozen.bubble.phase.species)
        _fill(frozen.states[later], nodes, count, *frozen.bubble.tables)
        steps = np.maximum(np.diff(times), FINEST * frozen.bubble.period)
        nodes[:-1, RELAXATION] = feedback / steps
        if len(nodes) > 2:
            nodes[:, HEAT_SLOPE] = _slopes(times, nodes[:, HEAT])
            nodes[:, VAPOUR_SLOPE] = _slopes(times, nodes[:, VAPOUR])
        return cls(nodes, _limits(steps, reach))

    def wall(self, times: Array) -> tuple[Array, Array]:
        """Radius (m) and wall speed (m/s) at each time (s)."""
        rows = [wall_at(self.nodes, segment(self.nodes, time), time) for time in times]
        found = np.array(rows).reshape(-1, 2)
        return found[:, 0], found[:, 1]

    def volume(self, time: float) -> float:
        """Volume at a time (s), m3."""
        radius, _ = wall_at(self.nodes, segment(self.nodes, time), time)
        return float(4.0 / 3.0 * pi * radius**3)

    def longest_step(self, time: float) -> float:
        """Longest step that an integrator may take from a time (s) on, s."""
        row = segment(self.nodes, time)
        left = float(self.nodes[row + 1, TIME]) - time
        return min(float(self.limits[row]), left + float(self.limits[row + 1]))


@njit(cache=True, error_model="numpy")
def segment(nodes: Array, time: float) -> int:
    """Row of the last node not after ``time``, so that another follows it."""
    low, high = 0, len(nodes) - 1
    while high - low > 1:
        middle = (low + high) // 2
        if nodes[middle, TIME] <= time:
            low = middle
        else:
            high = middle
    return low


@njit(cache=True, error_model="numpy")
def wall_at(nodes: Array, row: int, time: float) -> tuple[float, float]:
    """Radius, m, and speed, m/s, by the quintic between a node and the next."""
    a, b = nodes[row], nodes[row + 1]
    h = b[TIME] - a[TIME]
    s = (time - a[TIME]) / h
    speed, bend = h * a[SPEED], h * h * a[ACCELERATION]
    d = b[RADIUS] - a[RADIUS] - speed - 0.5 * bend
    e = h * b[SPEED] - speed - bend
    f = h * h * b[ACCELERATION] - bend
    c3, c4, c5 = 10.0 * d - 4.0 * e + 0.5 * f, -15.0 * d + 7.0 * e - f, 6.0 * d - 3.0 * e + 0.5 * f
    radius = a[RADIUS] + s * (speed + s * (0.5 * bend + s * (c3 + s * (c4 + s * c5))))
    slope = speed + s * (bend + s * (3.0 * c3 + s * (4.0 * c4 + s * 5.0 * c5)))
    return radius, slope / h


@njit(cache=True, error_model="numpy")
def conductance_at(nodes: Array, row: int, time: float, column: int) -> float:
    """Of heat or vapour, by the cubic that meets values and slopes of both nodes."""
    a, b = nodes[row], nodes[row + 1]
    h = b[TIME] - a[TIME]
    s = (time - a[TIME]) / h
    first, last = h * a[column + 1], h * b[column + 1]
    d = b[column] - a[column]
    bend, twist = 3.0 * d - 2.0 * first - last, first + last - 2.0 * d
    return a[column] + s * (first + s * (bend + s * twist))


@njit(cache=True, error_model="numpy")
def reactor_rates(
    crossing: Any, scale: float, nodes: Array, scratch: Array, constants: Array, species: Array,
    nasa: Array, diffusivity: Array, time: float, y: Array, left: Array, right: Array,
) -> None:  # fmt: skip
    """Turn Cantera's production (kmol/s, in ``right``) into the whole right-hand side.

    Temperature, volume, amounts (kmol), crossed (kmol), energy received (J, scaled).
    """
    row = segment(nodes, time)
    radius, speed = wall_at(nodes, row, time)
    temperature, volume = y[0], y[1]
    moles, fractions, capacity = scratch[MOLES], scratch[FRACTIONS], scratch[CAPACITY]
    enthalpy, flow = scratch[ENTHALPY], scratch[FLOW]
    count = moles.size
    total, free = 0.0, volume
    for k in range(count):
        moles[k] = y[OWN + k] * KILO
        total += moles[k]
        free -= moles[k] * species[k, COVOLUME]
    left[0] = 1.0
    if not (free > 0.0 and total > 0.0 and 1.0 < temperature < eq.WARMEST_TRIAL):
        right[:] = nan
        return
    for k in range(count):
        fractions[k] = moles[k] / total
    pressure = total * GAS_CONSTANT * temperature / free
    heat_capacity_and_enthalpy(temperature, nasa, capacity, enthalpy)
    species_flow(
        radius, speed, temperature, transport_logarithm(temperature, constants[eq.TRANSPORT_TOP]),
        pressure, volume, moles, fractions, species, diffusivity, flow,
    )  # fmt: skip
    water = int(constants[eq.WATER])
    missing = species[water, EQUILIBRIUM] - moles[water] / volume
    flow[water] = conductance_at(nodes, row, time, VAPOUR) * missing
    colder = constants[eq.LIQUID_TEMPERATURE] - temperature

    lag = 4.0 / 3.0 * pi * radius**3 - volume
    growth = 4.0 * pi * radius * radius * speed + nodes[row, RELAXATION] * lag
    received = conductance_at(nodes, row, time, HEAT) * colder - pressure * growth
    molar_capacity, spent = 0.0, 0.0
    for k in range(count):
        if species[k, CROSSES] != 0.0:
            brought = species[k, ENTHALPY_AT_LIQUID] + pressure * species[k, COVOLUME]
            received += flow[k] * brought
        change = right[OWN + k] * KILO + flow[k]
        spent += change * (enthalpy[k] - GAS_CONSTANT * temperature)
        molar_capacity += fractions[k] * capacity[k]
        right[OWN + k] = change / KILO
    right[0] = (received - spent) / (total * (molar_capacity - GAS_CONSTANT))
    right[1] = growth
    for c in range(crossing.size):
        right[OWN + count + c] = -flow[crossing[c]] / KILO
    right[OWN + count + crossing.size] = received * scale


@njit(cache=True, error_model="numpy")
def _fill(
    states: Array, nodes: Array, count: int, constants: Array, species: Array, nasa: Array,
    conductivity: Array, diffusivity: Array,
) -> None:  # fmt: skip
    """Wall and exchange at each step of the history, by the very equations that made it.

    Both flows are linear in what the liquid offers: against a liquid at 0 K and without vapour
    pressure they are the conductances times minus what the gas has.
    """
    production = np.zeros(count)
    scratch = np.empty((eq.SCRATCH, count))
    slopes = np.empty(states.shape[1])
    water = int(constants[eq.WATER])
    bare, dry = constants.copy(), species.copy()
    bare[eq.LIQUID_TEMPERATURE] = 0.0
    dry[:, EQUILIBRIUM] = 0.0
    for i in range(len(states)):
        eq.rates(
            nodes[i, TIME], states[i], production, constants, species, nasa, conductivity,
            diffusivity, scratch, slopes,
        )  # fmt: skip
        nodes[i, RADIUS] = states[i, eq.RADIUS]
        nodes[i, SPEED] = slopes[eq.RADIUS]
        nodes[i, ACCELERATION] = slopes[eq.SPEED]
        eq.rates(
            nodes[i, TIME], states[i], production, bare, dry, nasa, conductivity, diffusivity,
            scratch, slopes,
        )  # fmt: skip
        nodes[i, HEAT] = slopes[eq.MOLES + 2 * count + eq.HEAT] / states[i, eq.TEMPERATURE]
        steam = states[i, eq.MOLES + water] / (4.0 / 3.0 * pi * states[i, eq.RADIUS] ** 3)
        nodes[i, VAPOUR] = slopes[eq.MOLES + count + water] / steam if steam > 0.0 else 0.0


def _slopes(times: Array, values: Array) -> Array:
    """Harmonic means of the secants: the cubic stays between neighbours (Fritsch, Butland 1984)."""
    secants = np.diff(values) / np.diff(times)
    product, total = secants[:-1] * secants[1:], secants[:-1] + secants[1:]
    inner = np.divide(2.0 * product, total, out=np.zeros_like(total), where=product > 0.0)
    return np.concatenate([secants[:1], inner, secants[-1:]])


@njit(cache=True, error_model="numpy")
def _limits(steps: Array, reach: float) -> Array:
    """Longest step from each node that overshoots no later node by ``reach`` steps there."""
    limits = np.empty(len(steps) + 1)
    limits[-1] = np.inf
    for i in range(len(steps) - 1, -1, -1):
        limits[i] = min(reach * steps[i], steps[i] + limits[i + 1])
    return limits
