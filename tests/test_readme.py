"""The README says what is so: commands, example, figures, keys and codes."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from sonoyield import Estimate, Protocol, estimate
from sonoyield.collapse.outcome import Code

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
EXAMPLE = ROOT / "examples" / "bench_355kHz_argon.toml"


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
