"""What the wall of the resolved bubble does to heat, against kinetic theory."""

from __future__ import annotations

from math import pi, sqrt
from pathlib import Path

import pytest
from numba import njit

from sonoyield.collapse.cells_flows import temperature_jump
from sonoyield.collapse.follow import Accuracy
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.resolved import follow_resolved
from sonoyield.collapse.yields import collapse_of
from sonoyield.describe.gas import GAS_CONSTANT
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.estimate import bubble_of, liquid_of

ARGON = Path(__file__).parents[2] / "examples" / "bench_355kHz_argon.toml"


@njit
def jump(temperature: float, pressure: float, mass: float, capacity: float) -> float:
    return temperature_jump(temperature, pressure, mass, capacity)


def test_jump_is_twice_the_mean_free_path_or_so() -> None:
    """Argon at 298.15 K and 1 atm: the jump's length, conductivity times resistance.

    Kinetic theory (Kennard 1938; full accommodation): 2 g/(g + 1) mean free path/Pr with
    mean free path = 2 viscosity/(density c). Viscosity 22.6 uPa s, conductivity 17.7 mW/m/K
    (Lemmon and Jacobsen 2004, from memory). The two forms agree where the conductivity is
    Eucken's 15/4 R/M viscosity; the measured one is within 1 %.
    """
    temperature, pressure, mass = 298.15, 101325.0, 39.948e-3
    viscosity, conductivity, ratio = 22.6e-6, 17.7e-3, 5.0 / 3.0
    capacity = 2.5 * GAS_CONSTANT
    speed = sqrt(8.0 * GAS_CONSTANT * temperature / (pi * mass))
    path = 2.0 * viscosity * GAS_CONSTANT * temperature / (pressure * mass * speed)
    prandtl = viscosity * capacity / mass / conductivity
    expected = 2.0 * ratio / (ratio + 1.0) * path / prandtl
    found = conductivity * jump(temperature, pressure, mass, capacity)
    assert found == pytest.approx(expected, rel=1e-3)


def test_a_resisting_surface_keeps_the_gas_hotter_and_the_ledger_closes() -> None:
    protocol = Protocol.load(ARGON)
    bubble = bubble_of(protocol, liquid_of(protocol))
    accuracy = Accuracy(relative=1e-6, tighten=0)
    plain, resists = (
        follow_resolved(bubble, 1, accuracy, temperature_jump=one) for one in (False, True)
    )
    assert balance(resists).closed
    peaks = [collapse_of(one).peak_temperature_K for one in (plain, resists)]
    assert 0.0 < peaks[1] / peaks[0] - 1.0 < 0.1  # mean free path over thermal layer, at most
