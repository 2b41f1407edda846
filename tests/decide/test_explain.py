"""What makes and destroys delivered radicals, on the argon example."""

from __future__ import annotations

import json
from math import log
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

from sonoyield.cli import app
from sonoyield.collapse.bubble import CONTENTS_FLOOR
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.yields import counts_of
from sonoyield.decide import explain as module
from sonoyield.decide.explain import FINE, SCREENED, SpeciesError, Story, explain, sensitivity
from sonoyield.decide.kinetics_uncertainty import multiplied, rate_uncertainties
from sonoyield.decide.production import productions
from sonoyield.describe.gas import AVOGADRO
from sonoyield.describe.protocol import Protocol

EXAMPLES = Path(__file__).parents[2] / "examples"
ARGON = EXAMPLES / "bench_355kHz_argon.toml"
runner = CliRunner()


@pytest.fixture(scope="module")
def explained():
    return explain(Protocol.load(ARGON))


@pytest.fixture(scope="module")
def history(explained):
    return explained.estimate.history


def story_of(explained, species: str) -> Story:
    return next(story for story in explained.stories if story.species == species)


def slope_of(story: Story, name: str) -> float:
    return next(one.sensitivity for one in story.influences if one.rate.reaction_id == name)


@pytest.mark.parametrize("file", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
@pytest.mark.parametrize("coupling", ["two_way", "one_way"])
def test_net_production_is_what_the_integrators_states_say(file, coupling):
    """The states' own change, integrated by CVODES, against the trapezoid over the rates.

    Within 1 %, and ten times the integrator's absolute tolerance (1e-10 of the contents, a few
    molecules in all; some 45 H atoms are delivered in air). At 20 kHz H2O2 is made and destroyed
    15 000 times over: there 1 % of the net is 1e-6 of the gross.
    """
    protocol = Protocol.load(file)
    model = protocol.model.model_copy(update={"coupling": coupling})
    run = module.estimate(
        protocol.model_copy(update={"model": model}), accuracy=FINE, fast=True
    ).history
    least = 10.0 * 1e-6 * CONTENTS_FLOOR * float(run.bubble.moles.sum()) * AVOGADRO
    for species in ("OH", "H2O2", "HO2", "H", "O", "H2", "H2O"):
        k = run.bubble.phase.index(species)
        held = AVOGADRO * (run.moles[:, k] + run.crossed[:, k])
        change = float(np.mean([held[b] - held[a] for a, b in run.spans]))
        net = sum(one.net for one in productions(run, species))
        assert abs(net - change) < 0.01 * abs(change) + least, species


def test_signs_that_chemistry_dictates(explained):
    """Radicals that recombine are lost: more H + OH + M -> H2O or 2 OH -> H2O + O, fewer OH;
    faster OH + OH + M -> H2O2 in the expanding gas, fewer OH and more H2O2."""
    oh, peroxide = story_of(explained, "OH"), story_of(explained, "H2O2")
    assert slope_of(oh, "R10hp") < 0.0 and slope_of(oh, "R4") < 0.0
    assert slope_of(oh, "R18hp") < 0.0 < slope_of(peroxide, "R18hp")
    first = oh.productions[0]
    assert first.rate.reaction_id == "R10hp" and first.forward < 0.0 < first.reverse


def test_shares_of_variance_are_shares(explained):
    for story in explained.stories:
        shares = [one.variance_share for one in story.influences]
        assert len(shares) <= SCREENED
        assert sum(shares) == pytest.approx(1.0)
        assert shares == sorted(shares, reverse=True)
        variance = sum((one.sensitivity * one.rate.sigma) ** 2 for one in story.influences)
        assert log(story.factor) == pytest.approx(2.0 * np.sqrt(variance))


def test_screening_keeps_the_variance(explained, history):
    """Against the sensitivities of every rate of the mechanism: 98 % is kept."""
    species = ["OH", "H2O2"]
    every = {
        rate: sensitivity(history, rate, species, lambda: follow(history.bubble))
        for rate in rate_uncertainties(history.bubble.phase)
    }
    for story in explained.stories:
        parts = {rate: (one[story.species] * rate.sigma) ** 2 for rate, one in every.items()}
        kept = sum(parts[one.rate] for one in story.influences)
        assert kept > 0.98 * sum(parts.values())


@pytest.mark.parametrize("name", ["R10hp", "R4", "R18hp"])
def test_a_rate_changed_by_hand_does_what_the_sensitivity_says(explained, history, name):
    """One run with the rate 5 % faster at a tolerance ten times finer, against the linear
    estimate; 3 % of it for the curvature over the step of the difference and the tolerance."""
    rate = next(one for one in rate_uncertainties(history.bubble.phase) if one.reaction_id == name)
    fine = Accuracy(relative=1e-7)
    before = counts_of(follow(history.bubble, accuracy=fine))
    with multiplied(history.bubble.phase, dict.fromkeys(rate.rows, 1.05)):
        after = counts_of(follow(history.bubble, accuracy=fine))
    for story in explained.stories:
        change = log(after[story.species].delivered / before[story.species].delivered)
        assert change == pytest.approx(slope_of(story, name) * log(1.05), rel=0.03)


def test_rates_are_as_they_were_afterwards(explained, history):
    gas = history.bubble.phase.solution()
    assert explained.stories
    assert all(gas.multiplier(row) == 1.0 for row in range(gas.n_reactions))


def test_a_species_that_is_not_reported_is_refused():
    with pytest.raises(SpeciesError, match=r"CH4.*allowed OH"):
        explain(Protocol.load(ARGON), ("CH4",))
    answer = runner.invoke(app, ["explain", str(ARGON), "--species", "CH4", "--quiet"])
    assert answer.exit_code == 2


def test_where_nothing_is_delivered_it_says_so():
    protocol = Protocol.load(ARGON)
    drive = protocol.drive.model_copy(update={"pressure": 1e4})
    quiet = explain(protocol.model_copy(update={"drive": drive}))
    for story in quiet.stories:
        assert story.delivered < 1.0 and story.factor is None
        assert story.influences == () and "too few" in story.reason


def test_command_prints_tables_json_and_files(tmp_path):
    table = runner.invoke(app, ["explain", str(ARGON), "--quiet"])
    assert table.exit_code == 0
    assert "its share of variance" in table.stdout and "R10hp" in table.stdout
    plain = runner.invoke(app, ["explain", str(ARGON), "--quiet", "--json", "--species", "HO2"])
    result = json.loads(plain.stdout)
    assert list(result["species"]) == ["HO2"]
    assert result["species"]["HO2"]["influence"][0]["factor"] >= 1.0
    out = tmp_path / "why.csv"
    assert runner.invoke(app, ["explain", str(ARGON), "--quiet", "--out", str(out)]).exit_code == 0
    assert out.read_text().startswith("species,reaction_id,equation,factor,")


def test_numerics_that_failed_exit_with_3_and_no_numbers(monkeypatch):
    protocol = Protocol.load(ARGON)
    stopped = module.estimate(protocol, accuracy=Accuracy(steps=50), fast=True)
    monkeypatch.setattr(module, "estimate", lambda _, **__: stopped)
    answer = runner.invoke(app, ["explain", str(ARGON), "--json"])
    assert answer.exit_code == 3
    assert json.loads(answer.stdout)["species"] is None
