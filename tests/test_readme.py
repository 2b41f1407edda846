"""The README says what is so: commands, example, figures, keys and codes."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from sonoyield import Estimate, Protocol, estimate
from sonoyield.collapse.outcome import Code
from sonoyield.decide.explain import explain

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
EXAMPLE = ROOT / "examples" / "bench_355kHz_argon.toml"
AIR = ROOT / "examples" / "bench_355kHz_air.toml"


@pytest.fixture(scope="module")
def result() -> Estimate:
    return estimate(Protocol.load(EXAMPLE), both=True)


def test_ci_runs_the_printed_commands() -> None:
    commands = re.findall(r"^python3 -m venv .*$", README, re.MULTILINE)
    assert len(commands) == 2
    ci = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    assert all(command in ci for command in commands)


def test_first_result_stands_within_ten_lines() -> None:
    assert any("delivered to the liquid" in line for line in README.splitlines()[:10])


def test_printed_protocol_is_the_shipped_example() -> None:
    (printed,) = re.findall(r"```toml\n(.*?)```", README, re.DOTALL)
    assert printed == EXAMPLE.read_text(encoding="utf-8")


def test_printed_counts_are_those_of_a_run(result: Estimate) -> None:
    """To the three digits printed; what is left is rounding and is not compared."""
    assert result.counts is not None
    for name, counts in result.counts.items():
        (row,) = re.findall(rf"^ {name} +(\S+) +(\S+) +\S+$", README, re.MULTILINE)
        found = [float(cell) for cell in row]
        assert found == pytest.approx([counts.peak, counts.delivered], rel=6e-3), name


def test_keys_and_codes_are_explained(result: Estimate) -> None:
    assert all(f"`{key}`" in README for key in result.as_dict())
    assert all(f"| `{code}` |" in README for code in Code)


def test_argon_beside_air(result: Estimate) -> None:
    """To the digits printed."""
    air = estimate(Protocol.load(AIR))
    assert result.collapse is not None and air.collapse is not None
    assert result.counts is not None and air.counts is not None
    peaks = [one.collapse.peak_temperature_K for one in (result, air) if one.collapse]
    assert side_by_side("peak temperature, K") == pytest.approx(peaks, abs=0.6)
    centres = [one.collapse.centre_temperature_K for one in (result, air) if one.collapse]
    assert side_by_side("at the centre, K") == pytest.approx(centres, abs=0.6)
    for name in ("OH", "H2O2"):
        counts = [result.counts[name].delivered, air.counts[name].delivered]
        assert side_by_side(f"{name} delivered") == pytest.approx(counts, rel=6e-3), name
    beside = [one.mixed.counts for one in (result, air) if one.mixed is not None]
    mixed = [counts["OH"].delivered for counts in beside if counts is not None]
    one_temperature = side_by_side("OH delivered by a gas of one temperature")
    assert one_temperature == pytest.approx(mixed, rel=6e-3)


def side_by_side(label: str) -> list[float]:
    (row,) = re.findall(rf"^\| {re.escape(label)} \| (\S+) \| (\S+) \|$", README, re.MULTILINE)
    return [float(cell) for cell in row]


def test_printed_explanation_is_that_of_a_run() -> None:
    """Net production and sensitivity of the printed rows, to the digits printed."""
    (story,) = explain(Protocol.load(EXAMPLE), ("OH",)).stories
    excerpt = README.split("OH: made (+)", 1)[1].split("```", 1)[0]
    made, influence = excerpt.split("OH delivered: sensitivity", 1)
    for one in story.productions[:4]:
        (net,) = re.findall(rf"^ {re.escape(one.rate.reaction_id)} .* (\S+)$", made, re.MULTILINE)
        assert float(net) == pytest.approx(one.net, rel=6e-3), one.rate.reaction_id
    for row in story.influences[:4]:
        label = re.escape(row.rate.reaction_id)
        (slope,) = re.findall(rf"^ {label} .* (\S+) +\S+ +\S+ %$", influence, re.MULTILINE)
        assert float(slope) == pytest.approx(row.sensitivity, abs=2e-3), row.rate.reaction_id
