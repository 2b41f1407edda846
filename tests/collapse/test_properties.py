"""The compiled gas properties against Cantera itself, and steam against IAPWS R15-11."""

from __future__ import annotations

import cantera as ct
import numpy as np
import pytest
from iapws._iapws import _ThCond

from sonoyield.collapse.properties import (
    COLDEST,
    COLDEST_TRANSPORT,
    heat_capacity_and_enthalpy,
    mixture_conductivity,
    mixture_diffusivity,
    steam_conductivity,
    transport_logarithm,
)
from sonoyield.describe.gas import Array, GasPhase, load_phase

TIGHT = 1e-9
STATES = range(25)


@pytest.fixture(scope="module", params=["h2o_o2", "h2o_o2_n2"])
def phase(request: pytest.FixtureRequest) -> GasPhase:
    return load_phase(request.param)


@pytest.fixture(scope="module")
def gas(phase: GasPhase) -> ct.Solution:
    return ct.Solution(phase.path)  # its own, so that no other test meets its state


def random_state(phase: GasPhase, seed: int, dry: bool = False) -> tuple[float, float, Array]:
    """Temperature (log-uniform over the tables), pressure, mole fractions (many small)."""
    rng = np.random.default_rng(seed)
    temperature = float(np.exp(rng.uniform(np.log(201.0), np.log(0.999 * phase.transport_top))))
    pressure = float(10.0 ** rng.uniform(2.0, 9.0))
    x = rng.dirichlet(np.full(len(phase.species), 0.3)) + 1e-6
    if dry:
        x[phase.index("H2O")] = 0.0
    return temperature, pressure, x / x.sum()


@pytest.mark.parametrize("seed", STATES)
def test_heat_capacity_and_enthalpy(phase: GasPhase, gas: ct.Solution, seed: int) -> None:
    temperature, pressure, x = random_state(phase, seed)
    gas.TPX = temperature, pressure, x
    capacity, enthalpy = np.empty(len(x)), np.empty(len(x))
    heat_capacity_and_enthalpy(temperature, phase.nasa, capacity, enthalpy)
    assert capacity == pytest.approx(gas.partial_molar_cp / 1e3, rel=TIGHT)
    # An enthalpy may pass through zero: against R T.
    scale = ct.gas_constant / 1e3 * temperature
    assert enthalpy / scale == pytest.approx(gas.standard_enthalpies_RT, rel=TIGHT, abs=TIGHT)


def test_heat_capacity_is_held_below_the_polynomials(phase: GasPhase, gas: ct.Solution) -> None:
    gas.TP = COLDEST, 1e5
    cp, h = gas.partial_molar_cp / 1e3, gas.partial_molar_enthalpies / 1e3
    capacity, enthalpy = np.empty(len(cp)), np.empty(len(cp))
    heat_capacity_and_enthalpy(COLDEST - 60.0, phase.nasa, capacity, enthalpy)
    assert capacity == pytest.approx(cp, rel=TIGHT)
    assert enthalpy == pytest.approx(h - 60.0 * cp, rel=TIGHT)


@pytest.mark.parametrize("seed", STATES)
def test_conductivity_of_dry_gas(phase: GasPhase, gas: ct.Solution, seed: int) -> None:
    temperature, pressure, x = random_state(phase, seed, dry=True)
    gas.TPX = temperature, pressure, x
    u = transport_logarithm(temperature, phase.transport_top)
    ours = mixture_conductivity(temperature, u, x, phase.conductivity, phase.index("H2O"))
    # Cantera takes an absent species as 1e-20 of the gas.
    assert ours == pytest.approx(gas.thermal_conductivity, rel=TIGHT)


@pytest.mark.parametrize("seed", STATES)
def test_conductivity_of_moist_gas(phase: GasPhase, gas: ct.Solution, seed: int) -> None:
    """Cantera's value for each species, the standard's for steam, averaged as Cantera does."""
    temperature, pressure, x = random_state(phase, seed)
    gas.TPX = temperature, pressure, x
    single = np.array([_alone(gas, temperature, name) for name in phase.species])
    single[phase.index("H2O")] = steam_conductivity(temperature)
    expected = 0.5 * (x @ single + 1.0 / (x @ (1.0 / single)))
    u = transport_logarithm(temperature, phase.transport_top)
    ours = mixture_conductivity(temperature, u, x, phase.conductivity, phase.index("H2O"))
    assert ours == pytest.approx(expected, rel=TIGHT)


def _alone(gas: ct.Solution, temperature: float, name: str) -> float:
    gas.TPX = temperature, 1e5, {name: 1.0}
    return float(gas.thermal_conductivity)


@pytest.mark.parametrize("seed", STATES)
def test_diffusivity(phase: GasPhase, gas: ct.Solution, seed: int) -> None:
    temperature, pressure, x = random_state(phase, seed)
    gas.TPX = temperature, pressure, x
    u = transport_logarithm(temperature, phase.transport_top)
    ours = [
        mixture_diffusivity(k, temperature, u, pressure, x, phase.molar_mass, phase.diffusivity)
        for k in range(len(x))
    ]
    assert ours == pytest.approx(gas.mix_diff_coeffs, rel=TIGHT)


def test_diffusivity_of_a_pure_gas(phase: GasPhase, gas: ct.Solution) -> None:
    k = phase.index("AR")
    x = np.zeros(len(phase.species))
    x[k] = 1.0
    gas.TPX = 500.0, 2e5, x
    u = transport_logarithm(500.0, phase.transport_top)
    ours = mixture_diffusivity(k, 500.0, u, 2e5, x, phase.molar_mass, phase.diffusivity)
    assert ours == pytest.approx(gas.binary_diff_coeffs[k, k], rel=TIGHT)


def test_transport_is_held_at_the_ends_of_its_range(phase: GasPhase) -> None:
    top = phase.transport_top
    assert transport_logarithm(50.0, top) == pytest.approx(np.log(COLDEST_TRANSPORT))
    assert transport_logarithm(2.0 * top, top) == pytest.approx(np.log(top))
    assert transport_logarithm(1000.0, top) == pytest.approx(np.log(1000.0))


@pytest.mark.parametrize(("temperature", "printed"), [(298.15, 18.4341883), (873.15, 79.1034659)])
def test_steam_is_that_of_the_release(temperature: float, printed: float) -> None:
    """IAPWS R15-11, table 4, density zero, mW/m/K (memory; the package below gives the same)."""
    assert 1e3 * steam_conductivity(temperature) == pytest.approx(printed, rel=1e-8)


@pytest.mark.parametrize("temperature", [273.16, 300.0, 500.0, 800.0, 1000.0, 1173.0])
def test_steam_is_that_of_the_package(temperature: float) -> None:
    """The release as written in ``iapws``, without density. Its own accuracy in dilute steam is
    about 2 % (memory); what is checked is that the same formula stands here."""
    assert steam_conductivity(temperature) == pytest.approx(_ThCond(1e-9, temperature), rel=1e-7)


def test_steam_extrapolates_like_a_dilute_gas() -> None:
    """Above the release: between T^0.5 (rigid spheres) and T^1.5 up to 10 000 K."""
    for temperature in (1200.0, 3000.0, 10_000.0):
        slope = np.log(steam_conductivity(1.01 * temperature) / steam_conductivity(temperature))
        assert 0.5 < slope / np.log(1.01) < 1.5
