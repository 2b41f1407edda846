"""The stay of each species above its thermo source's range, on histories made by hand."""

from __future__ import annotations

import numpy as np
import pytest

from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.history import History
from sonoyield.collapse.ionisation import ionisation_of
from sonoyield.collapse.thermo_range import TRACE, thermo_range
from sonoyield.describe.gas import AVOGADRO, load_phase
from sonoyield.describe.liquid import water

SHARES = {"water": 0.4, "radicals": 0.4}


def made(temperatures: list[float], steam: list[float], times: list[float]) -> History:
    """A history of argon with the given mole fractions of steam."""
    phase = load_phase("h2o_o2")
    bubble = Bubble(phase, water(298.15), 101325.0, 3e5, 2e5, 3e-6, {"AR": 1.0}, SHARES)
    states = np.tile(bubble.at_rest(), (len(times), 1))
    contents = states[:, eq.MOLES : eq.MOLES + len(phase.species)]
    contents[:] = 0.0
    contents[:, phase.index("H2O")] = 1e-15 * np.array(steam)
    contents[:, phase.index("AR")] = 1e-15 * (1.0 - np.array(steam))
    states[:, eq.TEMPERATURE] = temperatures
    return History(bubble, np.array(times), states, (0,))


def test_time_and_shares_by_hand() -> None:
    """Above 6000 K at 2, 3 and 5 s; half of each step goes to either end: 1, 1.5 and 1 s."""
    history = made(
        [300.0, 5000.0, 6500.0, 8000.0, 6100.0, 300.0],
        [0.9, 0.9, 0.2, 0.1, 0.3, 0.9],
        [0.0, 1.0, 2.0, 3.0, 5.0, 5.0],
    )
    (one,) = thermo_range(history)  # argon's source reaches 20000 K; nothing else is there
    assert (one.species, one.limit_K) == ("H2O", 6000.0)
    assert one.time_s == pytest.approx(1.0 + 1.5 + 1.0)
    assert one.mean_share == pytest.approx((0.2 * 1.0 + 0.1 * 1.5 + 0.3 * 1.0) / 3.5)
    assert one.largest_share == pytest.approx(0.3)
    assert one.matters


def test_a_trace_is_listed_and_does_not_decide() -> None:
    (one,) = thermo_range(made([300.0, 7000.0, 300.0], [0.9, 0.5 * TRACE, 0.9], [0.0, 1.0, 2.0]))
    assert one.largest_share == pytest.approx(0.5 * TRACE) and not one.matters


def test_nothing_below() -> None:
    assert thermo_range(made([300.0, 5999.0, 300.0], [0.5, 0.5, 0.5], [0.0, 1.0, 2.0])) == []


def test_above_20000_kelvin_argon_too() -> None:
    found = thermo_range(made([300.0, 20001.0, 300.0], [0.5, 0.5, 0.5], [0.0, 1.0, 2.0]))
    assert {one.species: one.limit_K for one in found} == {"H2O": 6000.0, "AR": 20000.0}


@pytest.mark.parametrize(("peak", "matters"), [(9000.0, False), (18000.0, True)])
def test_ionisation_at_the_hottest_moment(peak: float, matters: bool) -> None:
    history = made([300.0, peak, 300.0], [0.5, 0.0, 0.5], [0.0, 1.0, 2.0])
    ions = ionisation_of(history)
    volume = 4.0 / 3.0 * np.pi * history.radius[1] ** 3
    assert ions.number_density_per_m3 == pytest.approx(1e-15 * AVOGADRO / volume)
    assert ions.peak_temperature_K == peak
    assert ions.matters is matters is (ions.ionised_share > 0.01)
