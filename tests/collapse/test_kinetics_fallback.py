"""A mechanism that the compiled kinetics do not know runs with Cantera, and gives the same."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from sonoyield.collapse import kinetics_fallback as fallback
from sonoyield.collapse.follow import Accuracy
from sonoyield.collapse.history import History
from sonoyield.collapse.kinetics_tables import UnknownKineticsError
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.resolved import follow_resolved
from sonoyield.collapse.yields import collapse_of, counts_of
from sonoyield.describe.gas import GasPhase, load_phase
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.estimate import bubble_of, liquid_of

ARGON = Path(__file__).parents[2] / "examples" / "bench_355kHz_argon.toml"


def run() -> History:
    protocol = Protocol.load(ARGON)
    bubble = bubble_of(protocol, liquid_of(protocol))
    return follow_resolved(bubble, 1, Accuracy(relative=1e-6, tighten=0), cells=6)


def refuse(phase: GasPhase) -> None:
    raise UnknownKineticsError(f"{phase.name}: refused for this test")


def test_cantera_cell_by_cell_gives_the_compiled_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    known = run()
    with monkeypatch.context() as patch:
        patch.setattr(fallback, "compile_kinetics", refuse)
        asked = run()
    assert not known.stopped and not asked.stopped
    closed = balance(asked)
    assert closed.closed and closed.element_error < 1e-12
    # The same equations; only Newton's matrix is from other derivatives, which moves the end by
    # less than what a step may err (1e-6).
    peaks = [collapse_of(one).peak_temperature_K for one in (known, asked)]
    assert peaks[1] == pytest.approx(peaks[0], rel=1e-6)
    counts, others = counts_of(known), counts_of(asked)
    for name in ("OH", "H", "HO2", "H2O2"):
        assert others[name].delivered == pytest.approx(counts[name].delivered, rel=1e-6)


def test_a_kind_refused_is_asked_of_cantera(monkeypatch: pytest.MonkeyPatch) -> None:
    phase = load_phase("h2o_o2", "AR")
    assert fallback.cell_kinetics(phase).known
    monkeypatch.setattr(fallback, "compile_kinetics", refuse)
    assert not fallback.cell_kinetics(phase).known


def test_differences_are_those_of_cantera_s_own_derivatives() -> None:
    """Against Cantera's own, which leave out the derivatives of a falloff's blend."""
    phase = load_phase("h2o_o2", "AR")
    gas, count = phase.solution(), len(phase.species)
    c = np.linspace(1.0, 5.0, count)
    out, slopes, warm = np.empty(count), np.empty((count, count)), np.empty(count)
    try:
        for r, reaction in enumerate(gas.reactions()):
            plain = reaction.reaction_type in ("Arrhenius", "three-body-Arrhenius")
            gas.set_multiplier(1.0 if plain else 0.0, r)
        fallback._differ(phase, 3000.0, c, np.zeros(count), 0, out, slopes, warm)
        gas.TDX = 3000.0, float(c @ phase.molar_mass), c
        gross = 1e3 * (gas.creation_rates + gas.destruction_rates)
        assert np.all(np.abs(out - 1e3 * gas.net_production_rates) <= 1e-12 * gross)
        expected = np.asarray(gas.net_production_rates_ddCi)
        warming = 1e3 * np.asarray(gas.net_production_rates_ddT)
    finally:
        gas.set_multiplier(1.0)
    assert np.abs(slopes - expected).max() <= 1e-5 * np.abs(expected).max()
    assert np.abs(phase.atoms @ slopes).max() <= 1e-7 * np.abs(slopes).max()
    # Cantera's derivative by temperature holds the concentrations' densities as ours does.
    assert np.abs(warm - warming).max() <= 1e-3 * np.abs(warming).max()
