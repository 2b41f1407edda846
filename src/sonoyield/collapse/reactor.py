"""The hot part of a cycle: wall motion, exchange and chemistry in one Cantera reactor network.

The reactor is Cantera's ideal-gas mole reactor: it owns temperature, volume and amounts, sets the
phase and calls the kinetics. Wall speed, what has crossed and the ledger join it as further states
of the same implicit integrator, and its energy balance is replaced by ours (Noble-Abel, exchange).
"""

from __future__ import annotations

import os
from functools import partial
from math import pi
from typing import Any

import cantera as ct
import numpy as np
from numba import njit

from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import CONTENTS_FLOOR, Bubble
from sonoyield.collapse.dense import crowding, dense_production, net_stoichiometry
from sonoyield.collapse.exchange import COVOLUME
from sonoyield.describe.gas import Array

# The integrator below Cantera prints its warnings on stdout unless told where.
os.environ.setdefault("SUNLOGGER_WARNING_FILENAME", os.devnull)

IntegrationError = ct.CanteraError

THIN = 1e-4  # share of the volume that covolumes take; below it they do not shift equilibria
KILO = 1e3  # mol in a kmol, Cantera's unit
OWN = 2  # temperature and volume stand before the amounts in the reactor's state


class HotStage:
    """Steps the coupled bubble with Cantera's CVODES integrator from a given state.

    ``time`` (s) and ``state`` (laid out as in ``equations``) are those of the last step;
    ``relative`` is the tolerance of the next ``begin``.
    """

    def __init__(self, bubble: Bubble, relative: float) -> None:
        self._bubble = bubble
        self.relative = relative
        self.time = 0.0
        self.state = bubble.at_rest()
        self._network: ct.ReactorNet | None = None
        self.steps = 0
        self.evaluations = 0

    def begin(self, time: float, state: Array) -> None:
        """Start the network anew from ``state`` at ``time``."""
        reactor = _reactor(self._bubble, state)
        network = ct.ReactorNet([reactor])
        network.initial_time = time
        network.rtol = self.relative
        network.atol = self.relative * reactor.floor
        network.max_time_step = 0.05 * self._bubble.period
        network.max_err_test_fails = 20
        network.max_steps = 100_000
        self._reactor, self._network = reactor, network
        self.time, self.state = time, state.copy()
        self.steps = self.evaluations = 0

    def step(self) -> None:
        """Advance by one step of the integrator's own choice. Raises ``ct.CanteraError``."""
        network = self._network
        assert network is not None
        self.time = network.step()
        # Cantera ends a step by setting the reactor to the accepted solution.
        self._reactor.unpack(self._reactor.trial, self.state)
        self._reactor.choose_rates(self.state)
        self.steps += 1
        self.evaluations = self._reactor.evaluations

    def between(self, time: float) -> Array:
        """State at a time inside the last step, by the integrator's own polynomial."""
        network = self._network
        assert network is not None
        ago = time - self.time
        value, factor = network.get_derivative(0), 1.0
        for order in range(1, int(network.solver_stats["last_order"]) + 1):
            factor *= ago / order
            value = value + factor * network.get_derivative(order)
        state = self.state.copy()
        self._reactor.unpack(value, state)
        return state


class AddedStates(ct.ExtensibleIdealGasMoleReactor):
    """Cantera's reactor with further states behind its own ``base`` ones.

    ``start`` is the whole vector to begin from, ``trial`` the one that Cantera has set last.
    """

    base: int
    start: Array
    trial: Array

    def after_initialize(self, t0: float) -> None:  # noqa: ARG002 - Cantera's signature
        self.n_vars += len(self.start) - self.base

    def after_get_state(self, y: Any) -> None:
        np.asarray(y)[:] = self.start

    def after_update_state(self, y: Any) -> None:
        self.trial = np.asarray(y)

    def before_component_name(self, i: int) -> str | None:
        return f"added state {i - self.base}" if i >= self.base else None


class _BubbleReactor(AddedStates):
    """Cantera's reactor with the bubble's wall, exchange and ledger added to its state."""

    def prepare(self, bubble: Bubble, state: Array) -> None:
        count = len(bubble.phase.species)
        contents = float(bubble.moles.sum()) / KILO
        self.floor = CONTENTS_FLOOR * contents
        # The integrator takes one absolute tolerance: each added state is scaled to suit it.
        self.scales = np.array(
            [self.floor / bubble.speed_scale, self.floor / bubble.energy_scale]
        )
        self.base = OWN + count
        # The energy balance is ours; with Cantera's off the left-hand sides stay at one.
        self.energy_enabled = False
        self.gas = self.phase
        self.evaluations = 0
        self.start = np.empty(self.base + 1 + len(bubble.crossing) + eq.LEDGER)
        _pack(state, bubble.crossing, self.scales, count, self.start)
        self._unpack = partial(_unpack, bubble.crossing, self.scales, count)
        common = (
            bubble.crossing, self.scales, np.zeros(count), np.empty(eq.state_size(count)),
            np.empty(eq.state_size(count)), np.empty((eq.SCRATCH, count)), *bubble.tables,
        )  # fmt: skip
        self.bubble, self.dense = bubble, False
        self._fill_ideal = partial(_reactor_rates, *common)
        self._fill_dense = partial(
            _dense_rates, *net_stoichiometry(self.phase), bubble.species[:, COVOLUME].copy(),
            *common,
        )  # fmt: skip
        self.choose_rates(state)

    def choose_rates(self, state: Array) -> None:
        """Take the dense gas's rates, or Cantera's net ones where the gas is thin enough."""
        if self.bubble.dense:
            self.dense = crowding(state, self.bubble.species) > THIN
        self.chemistry_enabled = not self.dense

    def after_eval(self, t: float, left: Any, right: Any) -> None:  # noqa: ARG002 - likewise
        self.evaluations += 1
        if self.dense:
            gas = self.gas
            self._fill_dense(
                t, self.trial, np.asarray(right), gas.forward_rates_of_progress,
                gas.reverse_rates_of_progress,
            )  # fmt: skip
        else:
            self._fill_ideal(t, self.trial, np.asarray(right))

    def unpack(self, y: Array, state: Array) -> None:
        self._unpack(y, state)


def _reactor(bubble: Bubble, state: Array) -> _BubbleReactor:
    gas = bubble.phase.solution()
    count = len(bubble.phase.species)
    moles = state[eq.MOLES : eq.MOLES + count]
    volume = 4.0 / 3.0 * pi * state[eq.RADIUS] ** 3
    density = float(moles @ bubble.phase.molar_mass) / volume
    gas.TDX = state[eq.TEMPERATURE], density, np.maximum(moles, 0.0)
    reactor = _BubbleReactor(gas, clone=False)
    reactor.volume = volume
    reactor.prepare(bubble, state)
    return reactor


@njit(cache=True, error_model="numpy")
def _pack(state: Array, crossing: Any, scales: Array, count: int, y: Array) -> None:
    y[0] = state[eq.TEMPERATURE]
    y[1] = 4.0 / 3.0 * pi * state[eq.RADIUS] ** 3
    for k in range(count):
        y[OWN + k] = state[eq.MOLES + k] / KILO
    at = OWN + count
    y[at] = state[eq.SPEED] * scales[0]
    for c in range(crossing.size):
        y[at + 1 + c] = state[eq.MOLES + count + crossing[c]] / KILO
    at += 1 + crossing.size
    for i in range(eq.LEDGER):
        y[at + i] = state[eq.MOLES + 2 * count + i] * scales[1]


@njit(cache=True, error_model="numpy")
def _unpack(crossing: Any, scales: Array, count: int, y: Array, state: Array) -> None:
    state[eq.TEMPERATURE] = y[0]
    state[eq.RADIUS] = (y[1] / (4.0 / 3.0 * pi)) ** (1.0 / 3.0) if y[1] > 0.0 else 0.0
    for k in range(count):
        state[eq.MOLES + k] = y[OWN + k] * KILO
    at = OWN + count
    state[eq.SPEED] = y[at] / scales[0]
    for c in range(crossing.size):
        state[eq.MOLES + count + crossing[c]] = y[at + 1 + c] * KILO
    at += 1 + crossing.size
    for i in range(eq.LEDGER):
        state[eq.MOLES + 2 * count + i] = y[at + i] / scales[1]


@njit(cache=True, error_model="numpy")
def _reactor_rates(
    crossing: Any, scales: Array, production: Array, state: Array, slopes: Array, scratch: Array,
    constants: Array, species: Array, nasa: Array, conductivity: Array, diffusivity: Array,
    time: float, y: Array, right: Array,
) -> None:
    """Turn Cantera's production (kmol/s, in ``right``) into the whole right-hand side."""
    count = production.size
    for k in range(count):
        production[k] = right[OWN + k] * KILO
    _unpack(crossing, scales, count, y, state)
    eq.rates(
        time, state, production, constants, species, nasa, conductivity, diffusivity,
        scratch, slopes,
    )
    right[0] = slopes[eq.TEMPERATURE]
    right[1] = 4.0 * pi * state[eq.RADIUS] ** 2 * state[eq.SPEED]
    for k in range(count):
        right[OWN + k] = slopes[eq.MOLES + k] / KILO
    at = OWN + count
    right[at] = slopes[eq.SPEED] * scales[0]
    for c in range(crossing.size):
        right[at + 1 + c] = slopes[eq.MOLES + count + crossing[c]] / KILO
    at += 1 + crossing.size
    for i in range(eq.LEDGER):
        right[at + i] = slopes[eq.MOLES + 2 * count + i] * scales[1]


@njit(cache=True, error_model="numpy")
def _dense_rates(
    ends: Any, members: Any, coefficients: Array, covolume: Array, crossing: Any, scales: Array,
    production: Array, state: Array, slopes: Array, scratch: Array, constants: Array,
    species: Array, nasa: Array, conductivity: Array, diffusivity: Array, time: float, y: Array,
    right: Array, forward: Array, reverse: Array,
) -> None:
    """As ``_reactor_rates``, with the production of the dense gas instead of Cantera's net one."""
    count = production.size
    _unpack(crossing, scales, count, y, state)
    dense_production(
        forward, reverse, ends, members, coefficients, y[1],
        state[eq.MOLES : eq.MOLES + count], covolume, scratch[0], production,
    )
    for k in range(count):
        right[OWN + k] = production[k] / KILO
    _reactor_rates(
        crossing, scales, production, state, slopes, scratch, constants, species, nasa,
        conductivity, diffusivity, time, y, right,
    )
