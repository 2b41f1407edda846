"""Compiled kinetics against Cantera, the reference here for rates, thermo and their units.

Outside: Cantera 3.2's rates of progress, productions and standard thermo, for the shipped
mechanisms and for its own h2o2.yaml and gri30.yaml (GRI-Mech 3.0); conservation of elements; the
Gibbs-Helmholtz equation; central differences for the derivatives.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import cantera as ct
import numpy as np
import pytest

from sonoyield.collapse.dense import dense_production, net_stoichiometry
from sonoyield.collapse.kinetics import production, production_and_jacobian, thermo
from sonoyield.collapse.kinetics_tables import (
    DisagreementError,
    UnknownKineticsError,
    cantera_production,
    compile_kinetics,
    random_state,
)
from sonoyield.collapse.properties import heat_capacity_and_enthalpy
from sonoyield.describe.gas import GAS_CONSTANT, Array, GasPhase, load_phase

SHIPPED = [(name, noble) for name in ("h2o_o2", "h2o_o2_n2") for noble in ("AR", None)]
CANTERA_FILES = Path(ct.__file__).parent / "data"
TOLERANCE = 1e-9  # of a reaction's gross rate, or of a species' gross production


@pytest.fixture(params=SHIPPED, ids=lambda pair: f"{pair[0]}-{pair[1] or 'all'}")
def phase(request: pytest.FixtureRequest) -> GasPhase:
    return load_phase(*request.param)


def states(phase: GasPhase, count: int, seed: int = 7) -> Iterator[tuple[float, Array]]:
    rng = np.random.default_rng(seed)
    for _ in range(count):
        yield random_state(rng, phase.solution())


def set_state(phase: GasPhase, temperature: float, concentrations: Array) -> ct.Solution:
    gas = phase.solution()
    gas.TDX = temperature, float(concentrations @ phase.molar_mass), concentrations
    return gas


def change_of(phase: GasPhase) -> Array:
    gas = phase.solution()
    return np.abs(gas.product_stoich_coeffs - gas.reactant_stoich_coeffs)


def gibbs_of(phase: GasPhase, temperature: float) -> tuple[Array, Array]:
    capacity, enthalpy, gibbs = np.empty((3, len(phase.species)))
    thermo(temperature, phase.nasa, capacity, enthalpy, gibbs)
    return enthalpy, gibbs


def crowding_of(phase: GasPhase, concentrations: Array) -> Array:
    free = 1.0 - float(concentrations @ phase.covolume)
    return -np.log(free) + phase.covolume * concentrations.sum() / free


class Compiled:
    """The compiled functions of a phase, called on one state at a time."""

    def __init__(self, phase: GasPhase) -> None:
        self.phase = phase
        self.kinetics = compile_kinetics(phase)
        self.scratch = self.kinetics.scratch()

    def rates(self, t: float, c: Array, crowding: Array | None = None) -> tuple[Array, ...]:
        """Production, forward and reverse rates of progress."""
        out, given = np.empty(c.size), np.zeros(c.size) if crowding is None else crowding
        gibbs, dense = gibbs_of(self.phase, t)[1], crowding is not None
        production(t, c, gibbs, given, dense, self.kinetics.tables, self.scratch, out)
        return out, self.scratch.forward.copy(), self.scratch.reverse.copy()

    def jacobian(self, t: float, c: Array, crowding: Array, dense: bool) -> tuple[Array, ...]:
        out, by_t, by_c = np.empty(c.size), np.empty(c.size), np.empty((c.size, c.size))
        enthalpy, gibbs = gibbs_of(self.phase, t)
        production_and_jacobian(
            t, c, gibbs, enthalpy, crowding, dense, self.kinetics.tables, self.scratch,
            out, by_c, by_t,
        )  # fmt: skip
        return out, by_c, by_t


def compare_with_cantera(phase: GasPhase, count: int) -> None:
    compiled = Compiled(phase)
    for t, c in states(phase, count):
        made, forward, reverse = compiled.rates(t, c)
        gas = set_state(phase, t, c)
        there, back = gas.forward_rates_of_progress * 1e3, gas.reverse_rates_of_progress * 1e3
        gross = np.abs(there) + np.abs(back)
        assert np.all(np.abs(forward - there) <= TOLERANCE * gross)
        assert np.all(np.abs(reverse - back) <= TOLERANCE * gross)
        turnover = (gas.creation_rates + gas.destruction_rates) * 1e3
        assert np.all(np.abs(made - gas.net_production_rates * 1e3) <= TOLERANCE * turnover)


def test_rates_are_cantera_s(phase: GasPhase) -> None:
    compare_with_cantera(phase, 1000)


@pytest.mark.parametrize("file", ["h2o2.yaml", "gri30.yaml"])
def test_rates_of_other_mechanisms_are_cantera_s(file: str) -> None:
    compare_with_cantera(load_phase(str(CANTERA_FILES / file)), 200)


def test_thermo_is_cantera_s(phase: GasPhase) -> None:
    gas = phase.solution()
    capacity, enthalpy, gibbs = np.empty((3, len(phase.species)))
    for t in np.geomspace(200.0, 12345.0, 60):
        thermo(t, phase.nasa, capacity, enthalpy, gibbs)
        gas.TP = t, gas.reference_pressure
        assert capacity == pytest.approx(gas.standard_cp_R * GAS_CONSTANT, rel=1e-12)
        scale = 1e-12 * np.abs(gas.standard_enthalpies_RT) + 1e-11
        assert np.all(np.abs(enthalpy / (GAS_CONSTANT * t) - gas.standard_enthalpies_RT) <= scale)
        assert gibbs == pytest.approx(gas.standard_gibbs_RT, rel=1e-11, abs=1e-11)


@pytest.mark.parametrize("temperature", [30.0, 120.0, 199.0])
def test_cold_thermo_holds_the_heat_capacity(phase: GasPhase, temperature: float) -> None:
    capacity, enthalpy, gibbs, plain, heat = np.empty((5, len(phase.species)))
    thermo(temperature, phase.nasa, capacity, enthalpy, gibbs)
    heat_capacity_and_enthalpy(temperature, phase.nasa, plain, heat)
    assert capacity == pytest.approx(plain, rel=1e-12)
    assert enthalpy == pytest.approx(heat, rel=1e-12)
    step = 1e-4 * temperature  # Gibbs-Helmholtz: d(g/RT)/dT = -h/(R T^2)
    change = gibbs_of(phase, temperature + step)[1] - gibbs_of(phase, temperature - step)[1]
    expected = -enthalpy / (GAS_CONSTANT * temperature**2)
    assert change / (2 * step) == pytest.approx(expected, rel=1e-5, abs=1e-7)


def test_dense_factors_are_those_of_the_dense_gas(phase: GasPhase) -> None:
    compiled, rng = Compiled(phase), np.random.default_rng(11)
    found, logarithms = np.empty((2, len(phase.species)))
    for t, c in states(phase, 200):
        c *= rng.uniform(0.001, 0.8) / float(c @ phase.covolume)  # covolumes fill up to 80 %
        made = compiled.rates(t, c, crowding_of(phase, c))[0]
        gas = set_state(phase, t, c)
        forward, reverse = gas.forward_rates_of_progress, gas.reverse_rates_of_progress
        dense_production(
            forward, reverse, *net_stoichiometry(gas), 1.0, c, phase.covolume, logarithms, found
        )
        turnover = change_of(phase) @ (compiled.scratch.forward + compiled.scratch.reverse)
        assert np.all(np.abs(made - found) <= TOLERANCE * turnover)


def by_difference(compiled: Compiled, t: float, c: Array, crowding: Array | None) -> Array:
    """Change of the production by each ln c and by ln T, to fourth order: (K, K+1)."""
    columns = []
    for j in range(c.size + 1):
        slopes = []
        for step in (1e-4, 2e-4):
            ends = []
            for factor in (1.0 + step, 1.0 - step):
                moved = np.where(np.arange(c.size) == j, factor * c, c)
                ends.append(compiled.rates(t * factor if j == c.size else t, moved, crowding)[0])
            slopes.append((ends[0] - ends[1]) / (2.0 * step))
        columns.append((4.0 * slopes[0] - slopes[1]) / 3.0)
    return np.column_stack(columns)


def compare_with_differences(phase: GasPhase, dense: bool, count: int) -> None:
    compiled = Compiled(phase)
    change = change_of(phase)
    for t, c in states(phase, count):
        if np.any(np.abs(phase.nasa[:, :, 9:] / t - 1.0) < 1e-3):
            continue  # thermo is not smooth where two polynomials meet
        crowding = np.linspace(0.0, 2.0, c.size)
        given = crowding if dense else None
        made, forward, reverse = compiled.rates(t, c, given)
        expected = by_difference(compiled, t, c, given)
        out, by_c, by_t = compiled.jacobian(t, c, crowding, dense)
        turnover = change @ (forward + reverse)
        assert np.all(np.abs(out - made) <= 1e-12 * turnover)
        # what is left is the rounding of a difference: 1e-15/1e-4 of what makes it up
        assert np.all(np.abs(by_c * c - expected[:, :-1]) <= 1e-10 * turnover[:, None])
        steep = 1.0 + np.abs(compiled.kinetics.tables.activation) / t
        warmth = change @ ((forward + reverse) * steep)
        assert np.all(np.abs(by_t * t - expected[:, -1]) <= 1e-8 * warmth)


@pytest.mark.parametrize("dense", [False, True])
def test_derivatives_are_those_of_differences(phase: GasPhase, dense: bool) -> None:
    compare_with_differences(phase, dense, 25)


def test_derivatives_of_another_mechanism_are_those_of_differences() -> None:
    compare_with_differences(load_phase(str(CANTERA_FILES / "gri30.yaml")), False, 5)


def test_elements_are_kept(phase: GasPhase) -> None:
    compiled = Compiled(phase)
    change = change_of(phase)
    for t, c in states(phase, 100):
        out, by_c, by_t = compiled.jacobian(t, c, crowding_of(phase, 1e-3 * c), True)
        turnover = phase.atoms @ (change @ np.abs(compiled.scratch.net))
        assert np.all(np.abs(phase.atoms @ out) <= 1e-14 * turnover)
        assert np.all(np.abs(phase.atoms @ by_t) <= 1e-13 * (phase.atoms @ np.abs(by_t)))
        sizes = np.abs(phase.atoms) @ np.abs(by_c)
        assert np.all(np.abs(phase.atoms @ by_c) <= 1e-13 * sizes)


def test_noble_gases_only_collide() -> None:
    phase = load_phase("h2o_o2", "AR")
    t, c = next(states(phase, 1))
    out, by_c, by_t = Compiled(phase).jacobian(t, c, np.zeros(c.size), False)
    argon = phase.index("AR")
    assert out[argon] == by_t[argon] == 0.0 and np.all(by_c[argon] == 0.0)
    assert by_c[phase.index("H"), argon] != 0.0


def test_trial_states_give_numbers(phase: GasPhase) -> None:
    compiled = Compiled(phase)
    rng = np.random.default_rng(3)
    for t in (20.0, 250.0, 3000.0, 12000.0):
        for share in (0.0, -1e-12, -1e-3, -1.0):
            c = np.where(rng.random(len(phase.species)) < 0.5, 1000.0, share * 1000.0)
            for made in compiled.jacobian(t, c, np.zeros(c.size), True):
                assert np.all(np.isfinite(made))
    out, forward, reverse = compiled.rates(3000.0, np.full(c.size, -1.0))
    collided = [r.third_body is not None for r in phase.solution().reactions()]
    assert np.all(forward[collided] == 0.0) and np.all(reverse[collided] == 0.0)
    assert np.all(np.isfinite(out))


def test_no_number_stays_no_number() -> None:
    phase = load_phase("h2o_o2", "AR")
    out, forward, reverse = Compiled(phase).rates(float("nan"), np.ones(len(phase.species)))
    assert np.all(np.isnan(forward)) and np.all(np.isnan(reverse))
    assert np.isnan(out[phase.index("OH")])


# Additions to Cantera's h2o2.yaml (units cm, mol, cal/mol).
KNOWN = """
- equation: H + HO2 + O2 <=> H2O2 + O2
  type: three-body
  rate-constant: {A: 1.0e+15, b: -0.5, Ea: 500.0}
- equation: O + H2O (+M) <=> H2O2 (+M)
  type: falloff
  low-P-rate-constant: {A: 1.0e+18, b: -1.1, Ea: 900.0}
  high-P-rate-constant: {A: 2.0e+13, b: 0.2, Ea: 100.0}
  efficiencies: {AR: 0.4, H2O: 7.0}
- equation: H + O2 (+AR) <=> HO2 (+AR)
  type: falloff
  low-P-rate-constant: {A: 3.0e+17, b: -0.8, Ea: -300.0}
  high-P-rate-constant: {A: 4.0e+12, b: 0.0, Ea: 0.0}
  Troe: {A: 0.6, T3: 150.0, T1: 1500.0, T2: 4500.0}
- equation: H2O2 + H2O => OH + OH + H2O
  type: elementary
  rate-constant: {A: 3.0e+13, b: 0.3, Ea: 40000.0}
- equation: H2 + O2 <=> OH + OH
  duplicate: true
  rate-constant: {A: 1.7e+13, b: 0.0, Ea: 47780.0}
- equation: H2 + O2 <=> OH + OH
  duplicate: true
  negative-A: true
  rate-constant: {A: -1.0e+12, b: 0.1, Ea: 48000.0}
"""
UNKNOWN = {
    "pressure-dependent-Arrhenius": """
- equation: H2 + O2 <=> OH + OH
  type: pressure-dependent-Arrhenius
  rate-constants: [{P: 1 atm, A: 1.0e+12, b: 0, Ea: 0}, {P: 100 atm, A: 3.0e+13, b: 0, Ea: 0}]
""",
    "Chebyshev": """
- equation: H2 + O2 <=> OH + OH
  type: Chebyshev
  temperature-range: [290.0, 3000.0]
  pressure-range: [0.01 atm, 100 atm]
  data: [[8.2, -0.4, -0.1], [0.3, 0.2, 0.1]]
""",
    "falloff-SRI": """
- equation: O + H2O (+M) <=> H2O2 (+M)
  type: falloff
  low-P-rate-constant: {A: 1.0e+18, b: -1.1, Ea: 900.0}
  high-P-rate-constant: {A: 2.0e+13, b: 0.2, Ea: 100.0}
  SRI: {A: 0.54, B: 201.0, C: 1024.0}
""",
    "Blowers-Masel": """
- equation: H2 + O2 <=> OH + OH
  type: Blowers-Masel
  rate-constant: {A: 1.0e+12, b: 0.0, Ea0: 40000.0, w: 1.0e+06}
""",
    "chemically-activated-Lindemann": """
- equation: O + H2O (+M) <=> OH + OH (+M)
  type: chemically-activated
  low-P-rate-constant: {A: 1.0e+12, b: 0.0, Ea: 17000.0}
  high-P-rate-constant: {A: 1.0e+05, b: 1.0, Ea: 17000.0}
""",
    "orders": """
- equation: H2 + O2 => OH + OH
  orders: {H2: 0.5}
  rate-constant: {A: 1.0e+10, b: 0.0, Ea: 40000.0}
""",
    "part of a molecule": """
- equation: HO2 + HO2 => H2O + 1.5 O2
  rate-constant: {A: 1.0e+10, b: 0.0, Ea: 0.0}
""",
    "more than 3": """
- equation: 2 H2 + 2 HO2 => 2 H2O + 2 OH
  rate-constant: {A: 1.0e+10, b: 0.0, Ea: 40000.0}
""",
    "colliders": """
- equation: H + OH (+M) <=> H2O (+M)
  type: linear-Burke
  colliders:
  - name: M
    type: pressure-dependent-Arrhenius
    rate-constants: [{P: 1 atm, A: 1.0e+12, b: 0, Ea: 0}, {P: 100 atm, A: 3.0e+13, b: 0, Ea: 0}]
  - name: H2O
    efficiency: {A: 5.0, b: 0.0, Ea: 0.0}
""",
}


def with_added(folder: Path, reactions: str) -> GasPhase:
    file = folder / "added.yaml"
    text = (CANTERA_FILES / "h2o2.yaml").read_text()
    file.write_text(text.rstrip() + "\n" + reactions.lstrip("\n"))
    return load_phase(str(file))


def test_every_known_kind_is_cantera_s(tmp_path: Path) -> None:
    phase = with_added(tmp_path, KNOWN)
    assert phase.solution().n_reactions == 29 + 6
    compare_with_cantera(phase, 300)
    compare_with_differences(phase, False, 10)


@pytest.mark.parametrize("kind", UNKNOWN)
def test_an_unknown_kind_is_refused_by_name(tmp_path: Path, kind: str) -> None:
    phase = with_added(tmp_path, UNKNOWN[kind])
    with pytest.raises(UnknownKineticsError, match=kind) as caught:
        compile_kinetics(phase)
    assert phase.solution().reaction(29).equation in str(caught.value)


@pytest.mark.parametrize("dense", [False, True])
def test_the_fallback_gives_the_same(phase: GasPhase, dense: bool) -> None:
    compiled = Compiled(phase)
    several = list(states(phase, 40))
    temperature = np.array([t for t, _ in several])
    concentrations = np.array([c for _, c in several])
    crowding = np.outer(np.linspace(0.0, 0.9, 40), phase.covolume / phase.covolume.max())
    found = cantera_production(phase, temperature, concentrations, crowding, dense)
    change = change_of(phase)
    for n, (t, c) in enumerate(several):
        made, forward, reverse = compiled.rates(t, c, crowding[n] if dense else None)
        assert np.all(np.abs(found[n] - made) <= TOLERANCE * (change @ (forward + reverse)))


def test_the_fallback_takes_any_kind(tmp_path: Path) -> None:
    phase = with_added(tmp_path, UNKNOWN["Chebyshev"])
    t, c = next(states(phase, 1))
    found = cantera_production(phase, np.array([t]), c[None, :], np.zeros((1, c.size)), False)[0]
    gas = set_state(phase, t, c)
    turnover = (gas.creation_rates + gas.destruction_rates) * 1e3
    assert np.all(np.abs(found - gas.net_production_rates * 1e3) <= 1e-12 * turnover)


def test_multipliers_of_the_phase_are_heeded() -> None:
    phase = load_phase("h2o_o2_n2", "AR")
    gas = phase.solution()
    factors = np.exp(np.random.default_rng(2).normal(size=gas.n_reactions))
    factors[5] = 0.0
    try:
        for r, factor in enumerate(factors):
            gas.set_multiplier(factor, r)
        compare_with_cantera(phase, 50)
    finally:
        gas.set_multiplier(1.0)
    compare_with_cantera(phase, 50)


def test_making_tables_leaves_the_phase_as_it_was(tmp_path: Path) -> None:
    phase = with_added(tmp_path, KNOWN)
    gas = phase.solution()
    gas.TPX = 765.0, 4.3e5, "H2:1, O2:2, AR:3"
    gas.set_multiplier(1.5, 3)
    before = gas.state.copy()
    compile_kinetics(phase)
    assert gas.state == pytest.approx(before, rel=1e-14)
    assert [gas.multiplier(3), gas.multiplier(4)] == [1.5, 1.0]


def test_disagreement_with_cantera_is_an_error() -> None:
    phase = load_phase("h2o_o2", "AR")
    nasa = phase.nasa.copy()
    nasa[phase.index("OH"), :, 7] += 1.0  # K, of its enthalpy
    with pytest.raises(DisagreementError, match="OH"):
        compile_kinetics(replace(phase, nasa=nasa))
