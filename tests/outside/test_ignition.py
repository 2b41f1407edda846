"""Ignition delays of hydrogen and oxygen in argon, shock tubes, by ``h2o_o2`` at fixed volume.

Each set's own mark of ignition: steepest rise of OH (Petersen 1996), half of the largest OH
(Chaumeix 2007), steepest rise of pressure (Cheng and Oppenheim 1984; Cohen, ReSpecTh x00000357),
largest OH (Pang 2009). ``computed_us`` is an earlier computation with the same tables by another
program: it checks that the mechanism was written down right. ``tau_exp_us`` is the experiment
(ChemKED and ReSpecTh collections).
"""

from __future__ import annotations

import csv
from functools import lru_cache
from pathlib import Path

import cantera as ct
import numpy as np
import pytest

from sonoyield.describe.gas import load_phase

with (Path(__file__).parent / "ignition_delays.csv").open(encoding="utf-8") as _handle:
    SHOTS = list(csv.DictReader(_handle))
NAMES = [f"{shot['dataset'].split()[0]}-{shot['T_K']}" for shot in SHOTS]


@lru_cache
def delay(at: int) -> float:
    """Predicted delay of one shot, microseconds."""
    shot = SHOTS[at]
    gas = ct.Solution(load_phase("h2o_o2").path)
    gas.TPX = float(shot["T_K"]), float(shot["P_atm"]) * ct.one_atm, shot["X"]
    reactor = ct.IdealGasReactor(gas, clone=False)
    network = ct.ReactorNet([reactor])
    network.rtol, network.atol = 1e-8, 1e-16
    end, hydroxyl = 4e-6 * float(shot["computed_us"]), gas.species_index("OH")
    found = []
    while network.time < end:
        network.step()
        found.append((network.time, gas.concentrations[hydroxyl], gas.P))
    return 1e6 * _mark(shot["dataset"], *np.array(found).T)


def _mark(dataset: str, t: np.ndarray, oh: np.ndarray, p: np.ndarray) -> float:
    if dataset.startswith("Petersen"):
        return float(t[np.gradient(oh, t).argmax()])
    top = int(oh.argmax())
    if dataset.startswith("Chaumeix"):
        return float(np.interp(0.5 * oh[top], oh[: top + 1], t[: top + 1]))
    if dataset.startswith("Pang"):
        return float(t[top])
    return float(t[np.gradient(p, t).argmax()])


@pytest.mark.parametrize("at", range(len(SHOTS)), ids=NAMES)
def test_as_computed_before_by_another_program(at: int) -> None:
    assert delay(at) == pytest.approx(float(SHOTS[at]["computed_us"]), rel=0.03)


def ratios(dataset: str, low: float = 0.0, high: float = 1e9) -> list[float]:
    """Predicted over measured delay of a set's shots between two temperatures."""
    return [
        delay(at) / float(shot["tau_exp_us"])
        for at, shot in enumerate(SHOTS)
        if shot["dataset"].startswith(dataset) and low <= float(shot["T_K"]) < high
    ]


def test_measured_at_high_pressure() -> None:
    """Petersen 1996, 33 to 87 atm, 1684 to 1855 K: within 15 % either way.

    20 % is what delays in shock tubes are commonly given (from memory).
    """
    found = ratios("Petersen")
    assert len(found) == 10
    assert all(0.8 < one < 1.2 for one in found)
    assert 0.9 < float(np.exp(np.mean(np.log(found)))) < 1.1


@pytest.mark.parametrize(
    ("dataset", "low", "high", "shots", "least", "most"),
    [
        ("Cheng", 0.0, 1e9, 5, 1.03, 1.62),  # late, most at 1051 K
        ("Cohen", 1000.0, 1e9, 4, 1.02, 1.37),  # late
        ("Cohen", 0.0, 1000.0, 1, 2.7, 2.75),  # 966 K, near the extended second limit
        ("Chaumeix", 0.0, 1e9, 4, 1.90, 2.19),  # measured on excited OH, digitised from a plot
        ("Pang", 1014.0, 1e9, 2, 1.57, 1.58),  # the facility's pressure rise is not modelled
        ("Pang", 1000.0, 1014.0, 1, 2.34, 2.37),
        ("Pang", 0.0, 1000.0, 1, 7.2, 7.3),
    ],
)
def test_measured_expected_to_disagree(
    dataset: str, low: float, high: float, shots: int, least: float, most: float
) -> None:
    """Expected to disagree, because of what stands beside each line: predicted over measured.

    Every mechanism of the source table is late by about as much on these shots.
    """
    found = ratios(dataset, low, high)
    assert len(found) == shots
    assert min(found) == pytest.approx(least, abs=0.02 * least)
    assert max(found) == pytest.approx(most, abs=0.02 * most)
