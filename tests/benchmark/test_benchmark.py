"""The benchmark runs, and the product asks Cantera no more often than the plain baseline does.

Never timed: counts only. Source of the comparison: SciPy's LSODA in ``tests/second_opinion.py``.
"""

from __future__ import annotations

import json
from pathlib import Path

import pytest
import resolved_rows
import run

import second_opinion
from sonoyield.collapse.follow import follow


def test_runs_and_reports(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    name = "argon 1 MHz 4 bar 1.5 um"
    target = tmp_path / "figures.json"
    assert run.main(["--runs", "1", "--case", name, "--json", str(target)]) == 0
    printed = capsys.readouterr().out
    assert all(label in printed for label in run.LINES)
    (row,) = json.loads(target.read_text(encoding="utf-8"))["cases"]
    assert row["case"] == name
    assert row["product_temperature"] == pytest.approx(row["baseline_temperature"], rel=2e-3)
    assert row["product_oh"] == pytest.approx(row["baseline_oh"], rel=0.02)


@pytest.mark.parametrize("film", [False, True])
def test_says_where_the_time_of_the_resolved_gas_goes(film: bool) -> None:
    row = run.measure_resolved(run.RESOLVED[0], film, 1)
    assert row.film is film
    assert min(row.to_baseline, row.to_mixed) > 0.0
    shares = (row.rates_share, row.jacobian_share, row.factorisation_share, row.solution_share)
    assert min(shares) > 0.0
    assert row.evaluations > row.steps > row.factorisations > row.jacobians > 0
    assert row.energy_error < 1e-4
    printed = resolved_rows.table([row])
    assert all(label in printed for label in resolved_rows.LINES)


@pytest.mark.parametrize("name", run.CASES)
def test_no_more_evaluations_than_the_baseline(name: str) -> None:
    history = follow(run.bubble(name))
    end = float(history.times[history.marks[-1]])
    baseline = second_opinion.run(run.as_case(run.bubble(name), "gas"), end)
    assert 0 < run.counted(history) <= baseline.evaluations
