"""What one collapse is and makes: its extremes, and molecules made, delivered and left."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sonoyield.collapse.history import History
from sonoyield.collapse.thresholds import inertial
from sonoyield.describe.gas import AVOGADRO

# OH equivalents of what is delivered: what each species can oxidise, counted as OH.
OXIDANT = {"OH": 1.0, "H2O2": 2.0, "HO2": 1.0, "O": 2.0, "O3": 2.0}
OXIDANT_FORMULA = "OH + 2 H2O2 + HO2 + 2 O + 2 O3, delivered, in OH equivalents"
REPORTED = ("OH", "H2O2", "HO2", "O", "O3", "H", "H2")
REPORTED_IF_THERE = ("NO", "NO2", "HONO", "HONO2", "N2O")  # by mechanisms with nitrogen


@dataclass(frozen=True)
class Collapse:
    """The strongest collapse of a run; SI units, ``vapour_fraction_at_peak`` a mole fraction.

    ``peak_temperature_K`` is the mole mean over the gas. Of a resolved gas
    ``centre_temperature_K`` is the highest at the centre and ``hottest_temperature_K`` the highest
    of any cell, which may lie further out; both are ``None`` where the gas is mixed.
    """

    peak_temperature_K: float
    centre_temperature_K: float | None
    hottest_temperature_K: float | None
    peak_pressure_Pa: float
    max_radius_m: float
    min_radius_m: float
    compression_ratio: float
    time_of_peak_s: float
    peak_wall_speed_m_s: float
    vapour_fraction_at_peak: float
    lowest_temperature_K: float
    inertial: bool


@dataclass(frozen=True)
class Counts:
    """Molecules of one species per collapse.

    ``peak``: largest inventory in the gas; ``delivered``: crossed into the liquid over the
    window; ``left``: still in the gas at its end.
    """

    peak: float
    delivered: float
    left: float


def collapse_of(history: History) -> Collapse:
    """Extremes over the run's windows (over the whole run where none is complete)."""
    end = history.spans[-1][1] + 1
    temperature, radius = history.temperature[:end], history.radius[:end]
    hottest = int(np.argmax(temperature))
    largest, smallest = float(radius.max()), float(radius.min())
    moles = history.moles[hottest]
    water = moles[history.bubble.phase.index("H2O")]
    return Collapse(
        peak_temperature_K=float(temperature[hottest]),
        centre_temperature_K=_centre(history, end),
        hottest_temperature_K=_hottest(history, end),
        peak_pressure_Pa=float(history.pressure[:end].max()),
        max_radius_m=largest,
        min_radius_m=smallest,
        compression_ratio=(largest / smallest) ** 3,
        time_of_peak_s=float(history.times[hottest]),
        peak_wall_speed_m_s=float(np.abs(history.speed[:end]).max()),
        vapour_fraction_at_peak=float(max(water, 0.0) / moles.sum()),
        lowest_temperature_K=_lowest(history, end),
        inertial=inertial(largest / history.bubble.radius),
    )


def _hottest(history: History, end: int) -> float | None:
    return None if history.cells is None else float(history.cells.temperature[:end].max())


def _lowest(history: History, end: int) -> float:
    """Lowest temperature anywhere in the gas, K."""
    gas = history.temperature if history.cells is None else history.cells.temperature
    return float(gas[:end].min())


def _centre(history: History, end: int) -> float | None:
    """Highest temperature at the centre, from a parabola in r through the two inmost cells, K."""
    if history.cells is None:
        return None
    inner, outer = history.cells.temperature[:end, 0], history.cells.temperature[:end, 1]
    # Of T = T0 - a r^2 a cell has the value at its mean r^2; volumes go nearly as masses here.
    first, second = history.cells.faces[1] ** (2 / 3), history.cells.faces[2] ** (2 / 3)
    near = 0.6 * first
    far = 0.6 * (second**2.5 - first**2.5) / (second**1.5 - first**1.5)
    return float((inner + (inner - outer) * near / (far - near)).max())


def counts_of(history: History) -> dict[str, Counts]:
    """Molecules per collapse of each reported species: means over the run's windows.

    Zero for O3 where the mechanism does not hold it; nitrogen species only where it does.
    """
    species = history.bubble.phase.species
    names = (*REPORTED, *(name for name in REPORTED_IF_THERE if name in species))
    return {
        name: _counts(history, species.index(name)) if name in species else Counts(0.0, 0.0, 0.0)
        for name in names
    }


def oxidant_per_collapse(counts: dict[str, Counts]) -> float:
    """Delivered oxidant in OH equivalents, molecules per collapse (``OXIDANT_FORMULA``)."""
    return sum(weight * counts[name].delivered for name, weight in OXIDANT.items())


def windows_per_period(history: History) -> float:
    """Main collapses per acoustic period, taken as locked to the drive.

    One over the mean number of periods between main expansion maxima, to the nearest whole
    number; one where fewer than two maxima were found.
    """
    if len(history.marks) < 3:
        return 1.0
    times = history.times[list(history.marks[1:])]
    spacing = float(times[-1] - times[0]) / (len(times) - 1) / history.bubble.period
    return 1.0 / max(1, round(spacing))


def _counts(history: History, k: int) -> Counts:
    moles, crossed = history.moles[:, k], history.crossed[:, k]
    spans = history.spans
    # The integrator's tolerance may leave a few millionths of a molecule below zero.
    peak = np.mean([max(moles[a : b + 1].max(), 0.0) for a, b in spans])
    delivered = np.mean([max(crossed[b] - crossed[a], 0.0) for a, b in spans])
    left = np.mean([max(moles[b], 0.0) for _, b in spans])
    return Counts(*(float(value * AVOGADRO) for value in (peak, delivered, left)))
