"""Facts of the trade. ``common practice, no source``: figures that practitioners pass on.

"Adiabatic" is the product's Keller-Miksis with p ~ V^-gamma: no vapour, no heat, no reaction, no
covolume. "In reality" is the product's whole model. Oxygen (gamma 1.4) stands in for air, which
comes with nitrogen.
"""

from __future__ import annotations

import numpy as np
import pytest
from bubbles import ATMOSPHERE, WATER, bubble
from polytropic import Polytropic

from sonoyield.collapse.follow import follow

MEGAHERTZ = 1e6
ZERO = 273.15


def adiabatic(radius: float, amplitude: float, gamma: float, cycles: float) -> dict[str, float]:
    """Extremes of an adiabatic bubble in water at 25 degC, driven at 1 MHz."""
    one = Polytropic(
        radius, ATMOSPHERE + 2.0 * WATER.surface_tension / radius, gamma,
        density=WATER.density, sound_speed=WATER.sound_speed, viscosity=WATER.viscosity,
        tension=WATER.surface_tension, frequency=MEGAHERTZ, amplitude=amplitude,
    )  # fmt: skip
    found = one.follow(cycles / MEGAHERTZ)
    heated = [298.15 * one.heating(r) - ZERO for r in (found.y[0].max(), found.y[0].min())]
    return {
        "coldest": heated[0],
        "hottest": heated[1],
        "growth": float(found.y[0].max() / radius - 1.0),
        "shrinkage": float(1.0 - found.y[0].min() / radius),
        "speed": float(np.abs(found.y[1]).max()),
    }


def test_half_a_micron_at_one_atmosphere_would_swing_adiabatically() -> None:
    """Common practice, no source: -10 to +50 degC, radius +10 % and less when it shrinks.

    A prototype gave -7 to 49 degC, +10 and -6 %. Whole degrees of the prototype are met, and the
    trade's within its own rounding to tens.
    """
    swing = adiabatic(0.5e-6, ATMOSPHERE, 1.4, 12.0)
    assert swing["coldest"] == pytest.approx(-7.0, abs=0.5)
    assert swing["hottest"] == pytest.approx(49.0, abs=0.5)
    assert abs(swing["coldest"] - -10.0) < 5.0
    assert abs(swing["hottest"] - 50.0) < 5.0
    assert swing["growth"] == pytest.approx(0.10, abs=0.005)
    assert swing["shrinkage"] == pytest.approx(0.06, abs=0.005)


def test_half_a_micron_at_one_atmosphere_stays_isothermal() -> None:
    """Common practice, no source: 24 to 26 degC in reality, to the degree. Not inertial."""
    history = follow(bubble(MEGAHERTZ, ATMOSPHERE, 0.5e-6, "O2"), collapses=6)
    assert round(float(history.temperature.min()) - ZERO) == 24
    assert round(float(history.temperature.max()) - ZERO) == 26
    assert float(history.radius.max()) < 2.0 * 0.5e-6


@pytest.mark.parametrize(
    ("radius", "peak", "speed"),
    [(1.0e-6, 5881.0, 369.6), (2.0e-6, 6222.0, 327.7)],
)
def test_argon_at_two_and_a_half_atmospheres_peaks_near_6000(
    radius: float, peak: float, speed: float
) -> None:
    """Common practice, no source: near 6000 degC for 1 to 2 um (a prototype: 5700 to 6300).

    Expected to disagree in two points, because the trade's figures are round: it says about
    6500 degC, and a wall faster than sound in water, where this one reaches a quarter of it (the
    prototype: 360 m/s).
    """
    found = adiabatic(radius, 2.5 * ATMOSPHERE, 5.0 / 3.0, 2.0)
    assert 5700.0 < found["hottest"] < 6300.0
    assert found["hottest"] == pytest.approx(peak, rel=2e-3)
    assert found["speed"] == pytest.approx(speed, rel=2e-2)
    assert 0.2 < found["speed"] / WATER.sound_speed < 0.3
    assert found["growth"] > 1.0


@pytest.mark.parametrize(("radius", "peak"), [(1.25e-6, 7447.0), (1.5e-6, 4391.0)])
def test_argon_between_one_and_two_microns_is_not_monotonic(radius: float, peak: float) -> None:
    """Expected to disagree, because the first collapses fall into other phases of the drive:
    between 1 and 2 um the adiabatic peak runs from 4400 to 7400 degC."""
    found = adiabatic(radius, 2.5 * ATMOSPHERE, 5.0 / 3.0, 2.0)
    assert not 5700.0 < found["hottest"] < 6300.0
    assert found["hottest"] == pytest.approx(peak, rel=5e-3)


@pytest.mark.parametrize("radius", [1.0e-6, 2.0e-6])
def test_reality_is_colder_than_adiabatic(radius: float) -> None:
    """Common practice, no source: the collapse is nearly, not wholly, adiabatic."""
    history = follow(bubble(MEGAHERTZ, 2.5 * ATMOSPHERE, radius))
    assert float(history.radius.max()) > 2.0 * radius
    hottest = float(history.temperature.max()) - ZERO
    assert 2500.0 < hottest < adiabatic(radius, 2.5 * ATMOSPHERE, 5.0 / 3.0, 2.0)["hottest"]
