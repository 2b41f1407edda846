"""The product against the same equations written plainly (``tests/second_opinion.py``).

SciPy's LSODA with Cantera in the right-hand side imports nothing of the product. Tmax within 0.2 %
and delivered OH within 2 %, as the issue that asked for it says.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pytest
from bubbles import ATMOSPHERE, WATER, bubble

import second_opinion
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.describe.gas import ABSORBED, AVOGADRO, load_phase
from sonoyield.describe.gases import AIR
from sonoyield.describe.liquid import water

GASES = ("AR", "HE", "KR", "XE", "O2")
FEW = 1e3  # molecules, below which counts are not compared


def drawn(count: int = 16) -> list[Bubble]:
    """Cases over the whole range of the model, drawn once and for all."""
    rng = np.random.default_rng(20261201)

    def between(low: float, high: float) -> float:
        return float(np.exp(rng.uniform(np.log(low), np.log(high))))

    cases = []
    for at in range(count):
        frequency, amplitude = between(20e3, 2e6), between(1e5, 6e5)
        radius, celsius = between(0.8e-6, 8e-6), float(rng.uniform(5.0, 60.0))
        liquid = water(273.15 + celsius)
        cases.append(bubble(frequency, amplitude, radius, GASES[at % len(GASES)], liquid))
    return cases


CASES = drawn()
NAMES = [
    f"{next(iter(b.mixture))}-{b.frequency / 1e3:.0f}kHz-{b.pressure_amplitude / 1e5:.1f}bar"
    f"-{b.radius * 1e6:.1f}um"
    for b in CASES
]


def as_case(one: Bubble) -> second_opinion.Case:
    liquid = one.liquid
    return second_opinion.Case(
        frequency=one.frequency,
        pressure=one.pressure_amplitude,
        radius=one.radius,
        temperature=liquid.temperature,
        ambient=ATMOSPHERE,
        density=liquid.density,
        sound_speed=liquid.sound_speed,
        viscosity=liquid.viscosity,
        surface_tension=liquid.surface_tension,
        saturation_pressure=liquid.saturation_pressure,
        mixture=dict(one.mixture),
        mechanism_path=one.phase.path,
        accommodation_water=one.accommodation["water"],
        accommodation_radicals=one.accommodation["radicals"],
        excluded_volume=one.excluded_volume,
        covolumes=dict(zip(one.phase.species, one.phase.covolume.tolist(), strict=True)),
    )


def delivered(history: History, name: str = "OH") -> float:
    """What is delivered from rest to the end of the last window (or of the run), molecules."""
    k = history.bubble.phase.index(name)
    return float(history.crossed[history.spans[-1][1], k]) * AVOGADRO


@pytest.mark.parametrize("at", range(len(CASES)), ids=NAMES)
def test_agrees(at: int) -> None:
    history = follow(CASES[at])
    end = history.spans[-1][1]
    other = second_opinion.run(as_case(CASES[at]), float(history.times[end]))
    hottest = float(history.temperature[: end + 1].max())
    assert hottest == pytest.approx(other.peak_temperature, rel=2e-3)
    assert float(history.radius[: end + 1].max()) == pytest.approx(other.max_radius, rel=2e-3)
    ours, theirs = delivered(history), other.delivered["OH"]
    if max(ours, theirs) > FEW:
        assert ours == pytest.approx(theirs, rel=0.02)


def test_most_cases_deliver() -> None:
    """So that the comparison of counts is not an empty one."""
    counts = [delivered(follow(one)) for one in CASES]
    assert sum(count > FEW for count in counts) >= 8


@pytest.mark.parametrize(
    ("drive", "oxide"), [((355e3, 2.0e5, 3.0e-6), "N2O"), ((52e3, 1.5e5, 3.6e-6), "NO")]
)
def test_agrees_in_air(drive: tuple[float, float, float], oxide: str) -> None:
    """Nitrogen taken up by both; the nitrogen oxide that is there within 5 %."""
    one = Bubble(
        load_phase("h2o_o2_n2"), WATER, ATMOSPHERE, *drive, AIR, {"water": 0.4, "radicals": 0.4}
    )
    history = follow(one)
    end = history.spans[-1][1]
    other = second_opinion.run(as_case(one), float(history.times[end]))
    hottest = float(history.temperature[: end + 1].max())
    assert hottest == pytest.approx(other.peak_temperature, rel=2e-3)
    assert set(other.delivered) == {"H2O", *ABSORBED}
    for name, within in (("OH", 0.02), ("H2O2", 0.05), (oxide, 0.05)):
        ours, theirs = delivered(history, name), other.delivered[name]
        assert ours > 100.0
        assert ours == pytest.approx(theirs, rel=within), name


HONEST = {
    "argon 355 kHz": bubble(355e3, 2.0e5, 3.0e-6),
    "argon 20 kHz": bubble(20e3, 1.5e5, 4.5e-6),
    "argon 1 MHz": bubble(1e6, 4.0e5, 1.5e-6),
    "oxygen 355 kHz": bubble(355e3, 3.0e5, 3.0e-6, "O2"),
}


@lru_cache
def usual(name: str) -> float:
    return delivered(follow(HONEST[name]))


@pytest.mark.parametrize("name", HONEST)
def test_tightening_changes_little(name: str) -> None:
    tight = delivered(follow(HONEST[name], 1, Accuracy(relative=1e-9)))
    assert tight > FEW
    assert usual(name) == pytest.approx(tight, rel=0.01)


@pytest.mark.parametrize("name", HONEST)
def test_never_splitting_changes_little(name: str) -> None:
    whole = follow(HONEST[name], 1, Accuracy(split=False))
    assert whole.counters["cold_steps"] == 0
    assert usual(name) == pytest.approx(delivered(whole), rel=0.01)
