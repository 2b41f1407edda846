"""Rate constants above the collision limit: the table is what the mechanism gives, and is right.

Figures from outside: the collision cross-section from Cantera's own viscosities, and the excesses
found by the independent survey that came with the source tables.
"""

from __future__ import annotations

import csv
import importlib.util
from pathlib import Path
from types import ModuleType

import cantera as ct
import numpy as np
import pytest

FOLDER = Path(__file__).resolve().parents[1] / "mechanisms"


def load_module() -> ModuleType:
    spec = importlib.util.spec_from_file_location("collision_limit", FOLDER / "collision_limit.py")
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


LIMIT = load_module()
Key = tuple[float, float, str, str]


@pytest.fixture(scope="module")
def gas() -> ct.Solution:
    return ct.Solution(str(FOLDER / "h2o_o2_n2.yaml"), "gas")


@pytest.fixture(scope="module")
def table() -> dict[Key, float]:
    with (FOLDER / "collision_limit.csv").open(newline="", encoding="utf-8") as handle:
        return {
            (float(row["temperature_K"]), float(row["pressure_Pa"]), row["id"], row["direction"]):
            float(row["ratio"])
            for row in csv.DictReader(handle)
        }  # fmt: skip


def test_table_is_what_the_mechanism_gives(gas: ct.Solution, table: dict[Key, float]) -> None:
    found = LIMIT.above_limit(gas)
    now = {(one.temperature_K, one.pressure_Pa, one.id, one.direction): one.ratio for one in found}
    assert {(round(t), round(p), *rest) for t, p, *rest in now} == set(table)
    for (t, p, label, direction), ratio in now.items():
        written = table[float(round(t)), float(round(p)), label, direction]
        assert ratio == pytest.approx(written, rel=0.06)  # two digits


def test_smaller_mechanism_has_none_but_those(table: dict[Key, float]) -> None:
    small = ct.Solution(str(FOLDER / "h2o_o2.yaml"), "gas")
    listed = {(label, direction) for _, _, label, direction in table}
    assert {(one.id, one.direction) for one in LIMIT.above_limit(small)} <= listed


# README of the source tables (one or two digits). It counts a pair of like molecules twice.
SURVEY = [
    (8000.0, 1e9, "N67b", "forward", 9.0, 1), (8000.0, 1e9, "N10", "forward", 7.0, 1),
    (8000.0, 1e9, "N58", "forward", 2.0, 2), (8000.0, 1e9, "N27", "forward", 1.2, 1),
    (8000.0, 1e9, "R21", "forward", 1.1, 1), (8000.0, 1e9, "N74", "reverse", 2.0, 1),
    (1000.0, 1e8, "R9", "forward", 1.6, 1), (1000.0, 1e9, "R9", "forward", 16.0, 1),
    (2000.0, 1e9, "R9", "forward", 3.0, 1), (1000.0, 1e9, "N64", "forward", 26.0, 1),
    (1000.0, 1e9, "R5", "reverse", 2.3, 2), (1000.0, 1e9, "R7", "forward", 1.5, 2),
    (1000.0, 1e9, "N1", "reverse", 2.9, 2),
]  # fmt: skip


@pytest.mark.parametrize(("t", "p", "label", "direction", "ratio", "like"), SURVEY)
def test_excesses_are_those_of_the_survey(
    table: dict[Key, float], t: float, p: float, label: str, direction: str, ratio: float, like: int
) -> None:
    assert table[t, p, label, direction] == pytest.approx(like * ratio, rel=0.08)


@pytest.mark.parametrize("name", ["AR", "N2", "O2", "HE"])
@pytest.mark.parametrize("temperature", [500.0, 1000.0, 4000.0])
def test_cross_section_is_that_of_viscosity(
    gas: ct.Solution, name: str, temperature: float
) -> None:
    """Chapman-Enskog: sigma^2 Omega = 5/16 (pi m k T)^(1/2) / (pi eta), eta from Cantera."""
    gas.TPX = temperature, 1e5, {name: 1.0}
    mass = gas.mean_molecular_weight / (1e3 * LIMIT.AVOGADRO)
    energy = LIMIT.BOLTZMANN * temperature
    section = 5.0 / 16.0 * np.sqrt(np.pi * mass * energy) / (np.pi * gas.viscosity)
    speed = np.sqrt(8.0 * np.pi * energy / (0.5 * mass))
    expected = 0.5 * 1e3 * LIMIT.AVOGADRO * section * speed
    assert LIMIT.collision_limit(gas, {name: 2.0}) == pytest.approx(expected, rel=0.03)


def test_nothing_fast_matters_in_a_bubble() -> None:
    """NH2 + O at the limit instead of 1.8 times above it: OH, H2O2, NO as before.

    The same cut in H + OH (+M), to show that it would be seen.
    """
    before = _delivered({})
    for name, amount in _delivered({"N67b": 1.0 / 1.77}).items():
        assert amount == pytest.approx(before[name], rel=2e-3), name
    assert _delivered({"R10hp": 1.0 / 1.77})["OH"] != pytest.approx(before["OH"], rel=5e-3)


def _delivered(factors: dict[str, float]) -> dict[str, float]:
    """Molecules of OH and H2O2 delivered and NO made by argon with 20 % N2 at 1 MHz and 6 bar."""
    from sonoyield.collapse.bubble import Bubble
    from sonoyield.collapse.follow import follow
    from sonoyield.describe.gas import AVOGADRO, load_phase
    from sonoyield.describe.liquid import water

    phase = load_phase("h2o_o2_n2", "AR")
    labels = [dict(one.input_data)["id"] for one in phase.solution().reactions()]
    mixture, shares = {"AR": 0.8, "N2": 0.2}, {"water": 0.4, "radicals": 0.4}
    bubble = Bubble(phase, water(298.15), 101325.0, 1e6, 6e5, 1.5e-6, mixture, shares)
    try:
        for label, factor in factors.items():
            phase.solution().set_multiplier(factor, labels.index(label))
        history = follow(bubble, 1)
    finally:
        phase.solution().set_multiplier(1.0)
    end = history.spans[0][1]
    crossed, left = (AVOGADRO * one[end] for one in (history.crossed, history.moles))
    amounts = {name: float(crossed[phase.index(name)]) for name in ("OH", "H2O2")}
    nitric = phase.index("NO")
    return amounts | {"NO": float(crossed[nitric] + left[nitric])}
