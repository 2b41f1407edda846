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
    """The strongest collapse of a run; SI units, ``vapour_fraction_at_peak`` a mole fraction."""

    peak_temperature_K: float
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
        peak_pressure_Pa=float(history.pressure[:end].max()),
        max_radius_m=largest,
        min_radius_m=smallest,
        compression_ratio=(largest / smallest) ** 3,
        time_of_peak_s=float(history.times[hottest]),
        peak_wall_speed_m_s=float(np.abs(history.speed[:end]).max()),
        vapour_fraction_at_peak=float(max(water, 0.0) / moles.sum()),
        lowest_temperature_K=float(temperature.min()),
        inertial=inertial(largest / history.bubble.radius),
    )


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
