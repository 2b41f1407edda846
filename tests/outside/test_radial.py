"""The product's Keller-Miksis acceleration in the reference integrations (rows DYN-05 to -26).

The figures were made with two integrators that agree to six digits; Keller and Miksis 1980.
"""

from __future__ import annotations

from math import pi

import numpy as np
import pytest
from polytropic import driven, first_extreme
from rows import ROWS

from sonoyield.collapse.radial import keller_miksis

HARD = 8.86  # R0 / a of argon, as the rows state it


@pytest.mark.parametrize("seed", range(12))
def test_acceleration_satisfies_the_published_equation(seed: int) -> None:
    """Keller and Miksis 1980, as the rows state it, term by term on random states.

    Also the terms that the integrations below hardly feel: the rate of the far pressure, and the
    acceleration inside the rate of the viscous wall pressure.
    """
    rng = np.random.default_rng(seed)
    r, pg, far = (float(10.0**e) for e in rng.uniform([-7.0, 3.0, 4.0], [-4.0, 9.0, 6.0]))
    v = float(rng.uniform(-900.0, 900.0))
    pg_rate, far_rate = float(rng.normal(0.0, 1e7 * pg)), float(rng.normal(0.0, 1e7 * far))
    rho, c, mu, sigma = 998.2071505, 1482.34617, 0.05, 0.0727361404
    a = keller_miksis(r, v, pg, pg_rate, far, far_rate, rho, c, mu, sigma)
    wall = pg - 2.0 * sigma / r - 4.0 * mu * v / r
    drag_rate = 4.0 * mu * (a / r - v * v / r**2)
    wall_rate = pg_rate + 2.0 * sigma * v / r**2 - drag_rate
    terms = [
        (1.0 - v / c) * r * a,
        1.5 * v * v * (1.0 - v / (3.0 * c)),
        -(1.0 + v / c) * (wall - far) / rho,
        -r / (rho * c) * (wall_rate - far_rate),
    ]
    assert abs(sum(terms)) <= 1e-9 * max(map(abs, terms))


def test_dyn_05_isothermal_hard_core() -> None:
    row, rest, frequency = ROWS["DYN-05"], 4.5e-6, 26.5e3
    bubble = driven(rest, frequency, 1.3e5, 1.0, rest / HARD)
    when, largest = first_extreme(bubble, 0.5 / frequency, largest=True)
    row.agrees(largest / rest)
    row.agrees(largest * 1e6, row.noted("Rmax="))
    row.agrees(when * frequency, row.noted(r"Rmax=[\d.]+ um at t\*f="))
    when, smallest = first_extreme(bubble, 0.6 / frequency, largest=False)
    row.agrees(smallest * 1e6, row.noted("Rmin="))
    row.agrees(when * frequency, row.noted(r"Rmin=[\d.]+ um at t\*f="))


def test_dyn_06_adiabatic_ideal_gas() -> None:
    row, rest, frequency = ROWS["DYN-06"], 4.5e-6, 26.5e3
    bubble = driven(rest, frequency, 1.3e5, 5.0 / 3.0)
    _, largest = first_extreme(bubble, 0.5 / frequency, largest=True)
    row.agrees(largest * 1e6, row.noted("Rmax="))
    _, smallest = first_extreme(bubble, 0.6 / frequency, largest=False)
    row.agrees(smallest * 1e6)
    # (R0/Rmin)^2: twice the relative tolerance on Rmin
    heated = 293.15 * bubble.heating(smallest)
    assert heated == pytest.approx(10573.0, rel=2.0 * row.percents[0])


def test_dyn_07_adiabatic_hard_core_at_300_khz() -> None:
    row, rest, frequency = ROWS["DYN-07"], 3e-6, 300e3
    bubble = driven(rest, frequency, 2.0e5, 5.0 / 3.0, rest / HARD)
    when, largest = first_extreme(bubble, 0.7 / frequency, largest=True)
    row.agrees(largest * 1e6, row.noted("Rmax="))
    row.agrees(when * frequency, row.noted(r"ratio [\d.]+\) at t\*f="))
    when, smallest = first_extreme(bubble, 0.8 / frequency, largest=False)
    row.agrees(smallest * 1e6)
    row.agrees(when * frequency, row.noted(r"collapse at t\*f="))
    row.agrees(293.15 * bubble.heating(smallest), row.noted("T_max="))


@pytest.mark.parametrize(
    ("row", "rest", "frequency", "amplitude", "kappa", "core"),
    [
        ("DYN-23", 5e-6, 26.5e3, 1.0e5, 1.4, 0.0),
        ("DYN-24", 5e-6, 26.5e3, 1.2e5, 5.0 / 3.0, 0.0),
        ("DYN-26", 3.6e-6, 52e3, 1.52e5, 1.0, 3.6e-6 / 8.54),
    ],
)
def test_expansion(
    row: str, rest: float, frequency: float, amplitude: float, kappa: float, core: float
) -> None:
    bubble = driven(rest, frequency, amplitude, kappa, core)
    _, largest = first_extreme(bubble, 1.0 / frequency, largest=True)
    found = largest * 1e6 if ROWS[row].unit == "um" else largest / rest
    ROWS[row].agrees(found)


def test_dyn_24_collapse_with_and_without_sound() -> None:
    """Smallest radius, and both figures of the incompressible limit (c taken as 1e9 m/s)."""
    row, rest, frequency = ROWS["DYN-24"], 5e-6, 26.5e3
    bubble = driven(rest, frequency, 1.2e5, 5.0 / 3.0)
    _, smallest = first_extreme(bubble, 0.65 / frequency, largest=False)
    row.agrees(smallest * 1e6, row.noted("Rmin "))
    incompressible = bubble.in_liquid(sound_speed=1e9)
    _, largest = first_extreme(incompressible, 1.0 / frequency, largest=True)
    row.agrees(largest / rest, row.noted("Rayleigh-Plesset: ratio "))
    _, smallest = first_extreme(incompressible, 0.65 / frequency, largest=False)
    row.agrees(smallest * 1e6, row.noted(r"Rayleigh-Plesset: ratio [\d.]+, Rmin "))


def test_dyn_22_small_amplitude_is_linear() -> None:
    row, frequency, rest = ROWS["DYN-22"], 20e3, 10e-6
    bubble = driven(rest, frequency, 1000.0, 1.4)
    found = bubble.follow(14.0 / frequency)
    settled = found.sol(np.linspace(13.0, 14.0, 20001) / frequency)[0] / rest - 1.0
    row.agrees(float(settled.max() - settled.min()) / 2.0)


def test_dyn_22_figure_is_its_formula() -> None:
    """The printed response follows from the formula in the row, so the row is not misprinted."""
    rest, omega, rho, c, mu = 10e-6, 2.0 * pi * 20e3, 998.2071505, 1482.34617, 1.0015961e-3
    gas = 101325.0 + 2.0 * 0.0727361404 / rest
    natural = (3.0 * 1.4 * gas - 2.0 * 0.0727361404 / rest) / (rho * rest**2)
    damping = 2.0 * mu / (rho * rest**2) + omega**2 * rest / (2.0 * c)
    response = 1000.0 / (rho * rest**2)
    response /= ((natural - omega**2) ** 2 + (2.0 * damping * omega) ** 2) ** 0.5
    assert response == pytest.approx(ROWS["DYN-22"].number, rel=1e-4)
