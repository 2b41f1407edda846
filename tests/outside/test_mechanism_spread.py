"""Delivered OH with our mechanism and two that Cantera ships, on the same bubbles.

``h2o2.yaml`` and ``gri30.yaml`` (GRI-Mech 3.0, a mechanism for flames) go in by their path, as a
user's own. What makes the difference is found by putting one part of ours into ``h2o2.yaml``.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import lru_cache
from pathlib import Path

import cantera as ct
import pytest
from bubbles import ATMOSPHERE, WATER

from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import follow
from sonoyield.collapse.yields import counts_of
from sonoyield.describe.gas import load_phase, phase_for
from sonoyield.describe.gases import AIR

DATA = Path(ct.__file__).parent / "data"
FLAME, GRI = str(DATA / "h2o2.yaml"), str(DATA / "gri30.yaml")
ARGON, OXYGEN = {"AR": 1.0}, {"O2": 1.0}
CASES: dict[str, tuple[float, float, float, Mapping[str, float]]] = {
    "argon 355 kHz": (355e3, 2.0e5, 3.0e-6, ARGON),
    "argon 1 MHz": (1e6, 4.0e5, 1.5e-6, ARGON),
    "argon 20 kHz": (20e3, 1.5e5, 4.5e-6, ARGON),
    "oxygen 355 kHz": (355e3, 3.0e5, 3.0e-6, OXYGEN),
    "air 355 kHz": (355e3, 2.0e5, 3.0e-6, AIR),
}


@lru_cache
def outcome(name: str, mechanism: str = "auto") -> tuple[float, float]:
    """OH delivered (molecules) and peak temperature (K)."""
    frequency, amplitude, radius, gas = CASES[name]
    phase = phase_for(mechanism, gas)
    history = follow(
        Bubble(
            phase, WATER, ATMOSPHERE, frequency, amplitude, radius, gas,
            {"water": 0.4, "radicals": 0.4},
        )
    )  # fmt: skip
    return counts_of(history)["OH"].delivered, float(history.temperature.max())


# OH delivered with ours and h2o2.yaml, molecules; peak temperatures, K
SPREAD = {
    "argon 355 kHz": (2.00e7, 1.77e7, 4767.0, 4889.0),
    "argon 1 MHz": (4.52e6, 4.08e6, 5532.0, 5709.0),
    "argon 20 kHz": (2.44e8, 1.95e8, 4909.0, 4907.0),
    "oxygen 355 kHz": (9.44e6, 7.96e6, 3200.0, 3166.0),
    "air 355 kHz": (2.27e5, 1.65e6, 2585.0, 2584.0),
}


@pytest.mark.parametrize("name", CASES)
def test_spread(name: str) -> None:
    """OH of ours over theirs: 1.13, 1.11, 1.25, 1.19; in weak air 0.14, explained below."""
    ours, theirs, hot, hot_theirs = SPREAD[name]
    assert outcome(name) == (pytest.approx(ours, rel=0.02), pytest.approx(hot, abs=10.0))
    found = outcome(name, FLAME)
    assert found == (pytest.approx(theirs, rel=0.02), pytest.approx(hot_theirs, abs=10.0))
    if not name.startswith("air"):
        assert 1.05 < ours / theirs < 1.30


@pytest.mark.parametrize("name", CASES)
def test_both_of_cantera_s_tell_the_same(name: str) -> None:
    """Also in air, so that the nitrogen chemistry of ``gri30.yaml`` is not what matters there."""
    many, hot = outcome(name, FLAME)
    assert outcome(name, GRI) == (pytest.approx(many, rel=5e-3), pytest.approx(hot, abs=3.0))


# --- what makes the difference --------------------------------------------------------------

EXCHANGE = ("HO2 + OH <=> H2O + O2",)
FALLOFF = ("H + OH (+M) <=> H2O (+M)", "H + O2 (+M) <=> HO2 (+M)", "H2O2 (+M) <=> 2 OH (+M)")


def _is_falloff(reaction: ct.Reaction) -> bool:
    equation = reaction.equation
    return "(+M)" in equation or equation.startswith(("H + OH + M", "H + O2 + "))


def _is_exchange(reaction: ct.Reaction) -> bool:
    return reaction.equation in EXCHANGE


def mixed(
    folder: Path,
    replaced: Callable[[ct.Reaction], bool] | None,
    by: tuple[str, ...] = (),
    thermo: bool = False,
) -> str:
    """``h2o2.yaml`` with some reactions, or the thermo, of ours; its path."""
    theirs, ours = ct.Solution(FLAME), load_phase("h2o_o2_n2").solution()
    species = []
    for one in theirs.species():
        copy = ct.Species.from_dict((ours.species(one.name) if thermo else one).input_data)
        copy.transport = one.transport
        species.append(copy)
    names = {one.name for one in species}
    base = ct.Solution(thermo="ideal-gas", species=species)
    reactions = [r for r in theirs.reactions() if replaced is None or not replaced(r)]
    for one in ours.reactions():
        if one.equation in by:
            text = dict(one.input_data)
            if "colliders" in text:
                text["colliders"] = [c for c in text["colliders"] if c["name"] in names | {"M"}]
            reactions.append(ct.Reaction.from_dict(text, base))
    gas = ct.Solution(
        thermo="ideal-gas", kinetics="gas", transport_model="mixture-averaged",
        species=species, reactions=reactions,
    )  # fmt: skip
    path = folder / "mixed.yaml"
    gas.write_yaml(path)
    return str(path)


def test_weak_air_hangs_on_one_reaction(tmp_path: Path) -> None:
    """Ours for HO2 + OH = H2O + O2 alone takes two thirds of the sevenfold (in logarithms) away.

    Its reverse is what starts radicals in damp air at 2585 K. GRI-Mech 3.0 adds a second term that
    outgrows the first above 1500 K (1.7e14 cm3/mol/s in all at 2500 K); ours is Keyser (1988) as
    Burke et al. (2012) took it, 3.2e13, with a factor 1.6 of uncertainty that does not cover this.
    Keyser measured near room temperature (254 to 382 K, from memory): ours is an extrapolation.
    """
    ours, theirs = outcome("air 355 kHz")[0], outcome("air 355 kHz", FLAME)[0]
    swapped = outcome("air 355 kHz", mixed(tmp_path, _is_exchange, EXCHANGE))[0]
    assert theirs / ours == pytest.approx(7.29, rel=0.03)
    assert swapped / ours == pytest.approx(2.00, rel=0.03)


def test_the_two_rate_constants() -> None:
    found = []
    for name in ("h2o_o2", FLAME):
        gas = load_phase(name).solution()
        gas.TP = 2500.0, 1e5
        every = zip(gas.forward_rate_constants, gas.reactions(), strict=True)
        found.append(1e3 * sum(k for k, one in every if _is_exchange(one)))
    assert found == pytest.approx([3.19e13, 1.688e14], rel=5e-3)


@pytest.mark.parametrize("name", ["argon 355 kHz", "argon 1 MHz"])
def test_falloff_makes_the_peak_lower(tmp_path: Path, name: str) -> None:
    """Ours for the three falloff reactions alone brings the peak down to within 15 K of ours.

    ``h2o2.yaml`` has H + OH + M and H + O2 + M at their low-pressure limit and other colliders.
    """
    ours, theirs = outcome(name)[1], outcome(name, FLAME)[1]
    swapped = outcome(name, mixed(tmp_path, _is_falloff, FALLOFF))[1]
    assert theirs > ours + 100.0
    assert abs(swapped - ours) < 15.0


@pytest.mark.parametrize(
    ("name", "gain"), [("argon 355 kHz", 1.082), ("argon 1 MHz", 1.068), ("argon 20 kHz", 1.079)]
)
def test_thermo_raises_hydroxyl(tmp_path: Path, name: str, gain: float) -> None:
    """Our thermo alone: OH lies lower, and theirs is a polynomial run on above 3500 K."""
    found = outcome(name, mixed(tmp_path, None, thermo=True))[0] / outcome(name, FLAME)[0]
    assert found == pytest.approx(gain, rel=0.01)
