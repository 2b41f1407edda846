"""Rate uncertainties: the table's factors, the distribution chosen, and what must not change."""

from __future__ import annotations

import builtins
import csv
from math import log
from pathlib import Path
from statistics import NormalDist

import cantera as ct
import numpy as np
import pytest

from sonoyield.decide.kinetics_uncertainty import (
    DEFAULT_FACTOR,
    deviation,
    multiplied,
    multipliers,
    perturbed,
    rate_uncertainties,
)
from sonoyield.describe.gas import GasPhase, load_phase

TABLE = Path(__file__).parents[2] / "mechanisms" / "reactions.csv"


@pytest.fixture(params=[("h2o_o2", None), ("h2o_o2", "HE"), ("h2o_o2_n2", "AR")], ids=str)
def phase(request: pytest.FixtureRequest) -> GasPhase:
    return load_phase(*request.param)


def test_every_reaction_is_in_one_rate_with_the_tables_factor_and_source(phase):
    with TABLE.open(newline="") as file:
        table = {row["id"]: row for row in csv.DictReader(file)}
    rates = rate_uncertainties(phase)
    rows = sorted(row for rate in rates for row in rate.rows)
    assert rows == list(range(phase.solution().n_reactions))
    for rate in rates:
        for name in rate.reaction_id.split("+"):
            assert rate.factor == float(table[name]["f_uncertainty"])
        assert rate.source == table[rate.reaction_id.split("+")[0]]["f_source"]
        assert not rate.assumed


def test_what_shares_a_draw():
    names = {rate.reaction_id for rate in rate_uncertainties(load_phase("h2o_o2"))}
    assert "R2a+R2b" in names  # one rate in two terms, one factor
    assert {"R22a", "R22b"} <= names  # two factors: evaluated apart
    assert {"R5", "R6a+R6b+R6c+R6d"} <= names  # M apart from argon and its copies


def test_draws_follow_the_normal_cut_at_two_deviations():
    """Against the closed form of the truncated normal (its distribution function), 40 000 draws.

    1.63 / sqrt(N) is the 1 % point of the Kolmogorov-Smirnov distance (Smirnov 1948).
    """
    rate = rate_uncertainties(load_phase("h2o_o2", "AR"))[0]
    draws = np.sort([deviation(rate, seed) for seed in range(40_000)])
    assert draws[0] > -2.0 and draws[-1] < 2.0
    tail = NormalDist().cdf(-2.0)
    expected = [(NormalDist().cdf(z) - tail) / (1.0 - 2.0 * tail) for z in draws]
    seen = (np.arange(len(draws)) + 0.5) / len(draws)
    assert np.abs(seen - expected).max() < 1.63 / np.sqrt(len(draws))


def test_rates_stay_within_their_factor_and_are_median_one(phase):
    seen = np.array([list(multipliers(phase, seed).values()) for seed in range(2000)])
    factors = {row: rate.factor for rate in rate_uncertainties(phase) for row in rate.rows}
    bound = np.array([factors[row] for row in multipliers(phase, 0)])
    assert (seen <= bound).all() and (seen >= 1.0 / bound).all()
    # The median's standard error is sqrt(pi / 2) sigma / sqrt(N) at most; four of them.
    error = 4.0 * np.sqrt(np.pi / 2.0 / len(seen)) * np.log(bound) / 2.0
    assert (np.abs(np.log(np.median(seen, axis=0))) < error).all()


def test_different_rates_are_drawn_apart():
    rates = rate_uncertainties(load_phase("h2o_o2"))
    draws = np.array([[deviation(rate, seed) for seed in range(2000)] for rate in rates])
    correlation = np.corrcoef(draws) - np.eye(len(rates))
    assert np.abs(correlation).max() < 5.0 / np.sqrt(2000.0)


def test_seed_and_reaction_alone_decide_whatever_the_phase_and_order():
    argon, helium = load_phase("h2o_o2", "AR"), load_phase("h2o_o2", "HE")
    first = multipliers(argon, 7)
    multipliers(helium, 8)
    assert multipliers(argon, 7) == first != multipliers(argon, 8)
    shared = [{rate.key: deviation(rate, 7) for rate in rate_uncertainties(one)}
              for one in (argon, helium)]  # fmt: skip
    assert shared[0] == shared[1]


def test_perturbed_reads_nothing_and_restores_even_after_an_error(phase, monkeypatch):
    gas = phase.solution()
    rate_uncertainties(phase)

    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("a file or a mechanism was read")

    monkeypatch.setattr(builtins, "open", refuse)
    monkeypatch.setattr(Path, "open", refuse)
    monkeypatch.setattr(ct, "Solution", refuse)
    wanted = multipliers(phase, 3)
    with pytest.raises(ZeroDivisionError), perturbed(phase, 3):
        _ = 1 / 0
    assert all(gas.multiplier(row) == 1.0 for row in wanted)
    with perturbed(phase, 3):
        assert phase.solution() is gas
        assert [gas.multiplier(row) for row in wanted] == list(wanted.values())
    assert all(gas.multiplier(row) == 1.0 for row in wanted)


def test_perturbations_nest():
    phase = load_phase("h2o_o2", "AR")
    gas = phase.solution()
    with multiplied(phase, {0: 2.0}):
        with multiplied(phase, {0: 3.0}):
            assert gas.multiplier(0) == 6.0
        assert gas.multiplier(0) == 2.0
    assert gas.multiplier(0) == 1.0


def test_equilibrium_is_that_of_thermo_whatever_the_rates():
    """Steam at 3000 K and 1 bar: Cantera's Gibbs minimiser, which knows no rates, against a
    reactor run to its end with perturbed ones."""
    phase = load_phase("h2o_o2", "AR")
    gas = phase.solution()
    gas.TPX = 3000.0, 1e5, "H2O:1, AR:1"
    gas.equilibrate("TP")
    expected = gas.X
    with perturbed(phase, 11):
        gas.TPX = 3000.0, 1e5, "H2O:1, AR:1"
        reactor = ct.IdealGasConstPressureReactor(gas, energy="off", clone=False)
        network = ct.ReactorNet([reactor])
        network.rtol, network.atol = 1e-10, 1e-18
        network.advance(10.0)
        found = reactor.phase.X
        irreversible = [i for i in range(gas.n_reactions) if not gas.reaction(i).reversible]
        net = np.delete(reactor.phase.net_rates_of_progress, irreversible)
        gross = np.delete(reactor.phase.forward_rates_of_progress, irreversible)
    assert found == pytest.approx(expected, rel=1e-6, abs=1e-14)
    assert np.abs(net).max() < 1e-6 * gross.max()


def test_a_mechanism_without_factors_gets_the_marked_default(tmp_path):
    """Cantera's shipped ``h2o2.yaml`` gives no factors."""
    from dataclasses import replace

    path = Path(ct.__file__).parent / "data" / "h2o2.yaml"
    other = replace(load_phase("h2o_o2", "AR"), path=str(path), phase="ohmech")
    for rate in rate_uncertainties(other):
        assert rate.assumed and rate.factor == DEFAULT_FACTOR
        assert rate.sigma == pytest.approx(log(2.0) / 2.0)
    broken = tmp_path / "broken.yaml"
    text = path.read_text()
    at = text.index("- equation:")
    broken.write_text(text[:at] + "- uncertainty-factor: 0.5\n  " + text[at + 2 :])
    with pytest.raises(ValueError, match=r"uncertainty-factor 0\.5"):
        rate_uncertainties(replace(other, path=str(broken)))
