"""Limits of the mixed gas at small amplitude: the polytropic exponent from the product's rates.

Temperature against a small sinusoidal wall motion, linearised numerically around rest in argon
without vapour (and without excluded volume, which the closed form does not know). Closed form of
the gas resolved from centre to wall: Prosperetti 1977 (J. Acoust. Soc. Am. 61, 17), as in rows
DYN-P*. The mixed gas has its limits right and its middle wrong; how wrong is asserted below.
"""

from __future__ import annotations

from cmath import sqrt, tanh
from math import pi

import numpy as np
import pytest

from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.describe.gas import load_phase
from sonoyield.describe.liquid import water

PHASE, LIQUID = load_phase("h2o_o2"), water(298.15)
GAMMA = 5.0 / 3.0


def argon(frequency: float, radius: float) -> Bubble:
    return Bubble(
        PHASE, LIQUID, 101325.0, frequency, 0.0, radius, {"AR": 1.0},
        {"water": 0.4, "radicals": 0.4}, excluded_volume=False, vapour=False, uptake=False,
    )  # fmt: skip


def mixed(frequency: float, radius: float) -> complex:
    """Complex exponent of the product's gas: minus d ln p / (3 d ln R)."""
    bubble, count = argon(frequency, radius), len(PHASE.species)
    rest, out = bubble.at_rest(), np.empty(eq.state_size(count))
    nothing, scratch = np.zeros(count), np.empty((eq.SCRATCH, count))
    omega, small = 2.0 * pi * frequency, 1e-6

    def warming(column: int, step: float) -> float:
        slopes = []
        for sign in (1.0, -1.0):
            state = rest.copy()
            state[column] += sign * step
            eq.rates(0.0, state, nothing, *bubble.tables, scratch, out)
            slopes.append(float(out[eq.TEMPERATURE]))
        return (slopes[0] - slopes[1]) / (2.0 * step)

    temperature = float(rest[eq.TEMPERATURE])
    by_radius = warming(eq.RADIUS, small * radius)
    by_speed = warming(eq.SPEED, small * radius * omega)
    by_temperature = warming(eq.TEMPERATURE, small * temperature)
    follows = (by_radius + 1j * omega * by_speed) / (1j * omega - by_temperature)
    moles = rest[eq.MOLES : eq.MOLES + count]

    def log_pressure(larger: float, warmer: float) -> float:
        at = radius * (1.0 + larger), temperature * (1.0 + warmer)
        return float(np.log(eq.gas_pressure(*at, moles, bubble.species)))

    by_size = (log_pressure(small, 0.0) - log_pressure(-small, 0.0)) / (2.0 * small)
    by_warmth = (log_pressure(0.0, small) - log_pressure(0.0, -small)) / (2.0 * small)
    return -(by_size + by_warmth * follows * radius / temperature) / 3.0


def resolved(frequency: float, radius: float) -> complex:
    """Closed form, with Cantera's conductivity and density of argon."""
    gas = PHASE.solution()
    gas.TPX = 298.15, 101325.0 + 2.0 * LIQUID.surface_tension / radius, "AR:1"
    omega = 2.0 * pi * frequency
    chi = gas.thermal_conductivity / (gas.density * gas.cp_mass * omega * radius**2)
    root = sqrt(1j / chi)
    return GAMMA / (1.0 - 3.0 * (GAMMA - 1.0) * 1j * chi * (root / tanh(root) - 1.0))


@pytest.mark.parametrize(("frequency", "radius"), [(20e3, 0.5e-6), (20e3, 5e-6), (1e6, 1e-6)])
def test_small_and_slow_is_isothermal(frequency: float, radius: float) -> None:
    """Within the 0.5 % of rows DYN-P1 and -P2."""
    assert mixed(frequency, radius).real == pytest.approx(1.0, rel=5e-3)
    assert mixed(frequency, radius).real == pytest.approx(
        resolved(frequency, radius).real, rel=5e-3
    )


@pytest.mark.parametrize(("frequency", "radius"), [(1e5, 1e-3), (1e6, 5e-3)])
def test_large_and_fast_is_adiabatic(frequency: float, radius: float) -> None:
    assert mixed(frequency, radius).real == pytest.approx(GAMMA, rel=5e-3)


@pytest.mark.parametrize(
    ("frequency", "radius", "excess"),
    [(500e3, 5e-6, 0.019), (20e3, 50e-6, 0.115), (63e3, 50e-6, 0.179), (6.5e3, 500e-6, 0.068)],
)
def test_the_layer_of_the_mixed_gas_is_stiff_between(
    frequency: float, radius: float, excess: float
) -> None:
    """Expected to disagree with the closed form, because one temperature with a layer of R/pi
    holds heat back too much: the exponent is too high, by 12 % at 50 um and 20 kHz in argon.

    Air (rows DYN-P3 to -P7) waits for nitrogen; the bias there is about 8 %.
    """
    found = mixed(frequency, radius).real / resolved(frequency, radius).real - 1.0
    assert found == pytest.approx(excess, abs=0.003)
    assert 1.0 < resolved(frequency, radius).real < mixed(frequency, radius).real < GAMMA
