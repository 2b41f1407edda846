"""Heat capacities above 6000 K, where the source of most molecules ends: held, and how far off.

Outside: statistical mechanics of a rigid rotor with harmonic vibrations, its frequencies the
fundamentals of Shimanouchi 1972 and Jacox 1998 as in the NIST Chemistry WebBook (from memory; a
test against the source polynomials at 1000 K keeps out a wrong one), and the diatomics whose NASA
Glenn polynomials (TP-2002-211556) reach 20000 K.
"""

from __future__ import annotations

import importlib.util
import math
from pathlib import Path
from types import ModuleType
from typing import Any

import cantera as ct
import numpy as np
import pytest

FOLDER = Path(__file__).resolve().parents[1] / "mechanisms"
C2 = 1.438776877  # cm K, CODATA
TOP = 6000.0  # K
# cm-1
VIBRATIONS = {
    "H2O": (3657, 1595, 3756),
    "HO2": (3436, 1392, 1098),
    "H2O2": (3599, 1402, 877, 371, 3608, 1266),
    "O3": (1103, 701, 1042),
    "NO2": (1318, 750, 1618),
    "N2O": (1285, 589, 589, 2224),
    "HNO": (2684, 1565, 1501),
    "HONO": (3591, 1700, 1263, 790, 596, 544),
    "NH2": (3219, 1497, 3301),
    "NH3": (3337, 950, 3444, 3444, 1627, 1627),
    "HONO2": (3550, 1709, 1331, 1325, 879, 763, 647, 580, 458),
    "NO3": (1050, 762, 1492, 1492, 360, 360),
    "NNH": (2690, 1583, 1082),
}
# Held cp over the harmonic one at 6000, 8000 and 12000 K. What is above one is anharmonicity,
# and, in HO2, O3, NO2, HNO, NH2 and NO3, low electronic states.
EXCESS = {
    "H2O": (1.097, 1.087, 1.080), "HO2": (1.071, 1.066, 1.063), "H2O2": (1.034, 1.028, 1.024),
    "O3": (1.279, 1.278, 1.277), "NO2": (1.224, 1.222, 1.221), "N2O": (1.072, 1.069, 1.068),
    "HNO": (1.113, 1.109, 1.107), "HONO": (1.000, 0.997, 0.994), "NH2": (1.136, 1.128, 1.123),
    "NH3": (1.065, 1.056, 1.050), "HONO2": (0.965, 0.962, 0.960), "NO3": (1.110, 1.108, 1.107),
    "NNH": (0.994, 0.991, 0.989),
}  # fmt: skip


@pytest.fixture(scope="module")
def gas() -> ct.Solution:
    return ct.Solution(str(FOLDER / "h2o_o2_n2.yaml"), "gas")


def harmonic(name: str, temperature: float) -> float:
    """cp/R of a rigid rotor with harmonic vibrations."""
    x = C2 * np.array(VIBRATIONS[name]) / temperature
    rotation = 1.0 if name == "N2O" else 1.5
    return 2.5 + rotation + float((x**2 * np.exp(x) / np.expm1(x) ** 2).sum())


def test_every_species_that_ends_is_compared(gas: ct.Solution) -> None:
    data: dict[str, dict[str, Any]] = {one.name: dict(one.input_data) for one in gas.species()}
    ending = {name for name, fields in data.items() if fields["source-range"][1] == TOP}
    assert ending == set(VIBRATIONS) == set(EXCESS)


@pytest.mark.parametrize("name", VIBRATIONS)
def test_statistical_mechanics_meets_the_source_at_1000_kelvin(gas: ct.Solution, name: str) -> None:
    source = gas.species(name).thermo.cp(1000.0) / ct.gas_constant
    assert source == pytest.approx(harmonic(name, 1000.0), rel=0.025)


@pytest.mark.parametrize("name", VIBRATIONS)
def test_held_heat_capacity_beside_the_harmonic_one(gas: ct.Solution, name: str) -> None:
    for temperature, excess in zip((6000.0, 8000.0, 12000.0), EXCESS[name], strict=True):
        held = gas.species(name).thermo.cp(temperature) / ct.gas_constant
        assert held / harmonic(name, temperature) == pytest.approx(excess, abs=0.002)


def test_classical_limit_is_equipartition() -> None:
    """At 10^6 K a linear molecule has (3 N - 3/2) R, any other (3 N - 2) R."""
    for name, vibrations in VIBRATIONS.items():
        atoms = (len(vibrations) + (5 if name == "N2O" else 6)) / 3
        limit = 3 * atoms - (1.5 if name == "N2O" else 2.0)
        assert harmonic(name, 1e6) == pytest.approx(limit, rel=1e-4)


def errors(gas: ct.Solution, temperature: float) -> tuple[float, float]:
    """Root mean square error of h(T) - h(6000 K), held and falling to the classical limit."""
    held, falling = [], []
    for name in ("H2", "OH", "O2", "NH", "N2", "NO"):
        thermo = gas.species(name).thermo
        excess = thermo.cp(TOP) / ct.gas_constant - 4.5
        true = (thermo.h(temperature) - thermo.h(TOP)) / ct.gas_constant
        rise = temperature - TOP
        held.append((4.5 + excess) * rise / true - 1.0)
        fallen = excess * TOP**2 * (1.0 / TOP - 1.0 / temperature)  # integral of (6000 K / T)^2
        falling.append((4.5 * rise + fallen) / true - 1.0)
    mean = [float(np.sqrt(np.mean(np.square(one)))) for one in (held, falling)]
    return mean[0], mean[1]


@pytest.mark.parametrize(
    ("temperature", "held", "falling"),
    [(8000.0, 0.018, 0.034), (10000.0, 0.049, 0.058), (12000.0, 0.090, 0.086)],
)
def test_held_is_nearer_where_bubbles_are(
    gas: ct.Solution, temperature: float, held: float, falling: float
) -> None:
    assert errors(gas, temperature) == pytest.approx((held, falling), abs=6e-4)


# --- what it does to the result ---------------------------------------------------------


def load_build() -> ModuleType:
    spec = importlib.util.spec_from_file_location("mechanism_build", FOLDER / "build.py")
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def scaled(factor: float, folder: Path) -> Path:
    """The smaller mechanism with every held cp times a factor, h and s still continuous."""
    build = load_build()
    tables = build.Tables(FOLDER)
    for name, intervals in tables.intervals.items():
        if float(tables.thermo[name]["Tmax_source_K"]) == TOP:
            top, more = intervals[-1], (factor - 1.0) * float(intervals[-1]["a3"])
            top["a3"] = repr(float(top["a3"]) + more)
            top["b1"] = repr(float(top["b1"]) - more * TOP)
            top["b2"] = repr(float(top["b2"]) - more * math.log(TOP))
    path = folder / f"scaled_{factor:.2f}.yaml"
    path.write_text(build.mechanism_text("h2o_o2", tables), encoding="utf-8")
    return path


def test_ten_per_cent_of_it_moves_delivered_oh_little(tmp_path: Path) -> None:
    """Xenon in water of 5 degC at 1 MHz and 5 bar, the hottest of a scan: about 9050 K."""
    from sonoyield.collapse.bubble import Bubble
    from sonoyield.collapse.follow import follow
    from sonoyield.describe.gas import load_phase
    from sonoyield.describe.liquid import water

    found = {}
    for factor in (0.9, 1.0, 1.1):
        phase = load_phase(str(scaled(factor, tmp_path)))
        shares = {"water": 0.4, "radicals": 0.4}
        bubble = Bubble(phase, water(278.15), 101325.0, 1e6, 5e5, 1e-6, {"XE": 1.0}, shares)
        history = follow(bubble, 1)
        assert history.temperature.max() > 8500.0
        found[factor] = float(history.crossed[history.spans[0][1], phase.index("OH")])
    assert found[0.9] / found[1.0] == pytest.approx(1.0020, abs=1e-3)
    assert found[1.1] / found[1.0] == pytest.approx(0.9981, abs=1e-3)
    assert found[0.9] > found[1.0] > found[1.1]
