"""Estimate one exposure: protocol in, collapse, yields, dose and their pedigree out."""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict, dataclass, replace
from importlib.metadata import version
from math import isfinite
from typing import Any

from sonoyield._version import __version__
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import PATIENCE, Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.collapse.ionisation import THRESHOLD, IonisationEstimate, ionisation_of
from sonoyield.collapse.ledger import Balance, Energies, balance, energies
from sonoyield.collapse.one_way import follow_one_way
from sonoyield.collapse.outcome import Code, Outcome, outcome_of
from sonoyield.collapse.thermo_range import ThermoRange, thermo_range
from sonoyield.collapse.thresholds import mechanical_index
from sonoyield.collapse.yields import (
    OXIDANT_FORMULA,
    Collapse,
    Counts,
    collapse_of,
    counts_of,
    oxidant_per_collapse,
    windows_per_period,
)
from sonoyield.describe.gas import ABSORBED, phase_for
from sonoyield.describe.liquid import LiquidState, liquid_state
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.dose import Dose, dose
from sonoyield.expose.schedule import Driving, driving, pulse_warning

SCHEMA = 1
LIBRARIES = ("cantera", "numba", "numpy", "pydantic", "pint")
COLD_GAS = 200.0  # K, where the thermo polynomials end below
NUMBERS = ("collapse", "counts", "energy", "driven", "doses", "oxidant", "ionisation")
MUCH_NITROGEN = 0.1  # share of the dry gas
AIR_WARNING = (
    "A gas of one temperature makes too little in nitrogen and air, whose core is hotter than "
    "their mean: at 355 kHz, 2 bar, 3 um an independent, radially resolved model gave 23 "
    "times the OH. Do not rank air against argon by these numbers."
)
FAST_WALL = 0.5  # of the sound speed: Keller-Miksis begins to err


@dataclass(frozen=True, eq=False)
class Estimate:
    """Everything known about one exposure.

    ``collapse``, ``counts``, ``energy``, ``doses``, ``oxidant`` and ``ionisation`` are ``None``
    when the numerics failed (``outcome.code.has_numbers`` is false), and ``thermo_range`` empty.
    ``counts`` in molecules per collapse, by species. ``history`` holds the run itself,
    ``accuracy`` what was asked of it.
    """

    protocol: Protocol
    liquid: LiquidState
    history: History
    outcome: Outcome
    warnings: tuple[str, ...]
    balance: Balance
    collapse: Collapse | None
    counts: dict[str, Counts] | None
    energy: Energies | None
    driven: Driving | None
    doses: dict[str, Dose] | None
    oxidant: Dose | None
    mechanical_index: float | None
    accuracy: Accuracy
    thermo_range: tuple[ThermoRange, ...]
    ionisation: IonisationEstimate | None
    coupling_difference: dict[str, Any] | None = None

    def as_dict(self) -> dict[str, Any]:
        """The result by its documented keys, ready for JSON (no not-a-number)."""
        return _as_dict(self)


def estimate(protocol: Protocol, both: bool = False, accuracy: Accuracy | None = None) -> Estimate:
    """Drive the protocol's bubble through its collapses and count what it makes.

    With ``both`` the other coupling is run too and its difference reported. Raises
    ``FileNotFoundError`` when a shipped mechanism is not installed.
    """
    accuracy = accuracy or Accuracy()
    liquid = liquid_of(protocol)
    bubble = bubble_of(protocol, liquid)
    history = _run(bubble, protocol, protocol.model.coupling, accuracy)
    result = _estimate(protocol, liquid, history, accuracy)
    if not both:
        return result
    other = "one_way" if protocol.model.coupling == "two_way" else "two_way"
    second = _estimate(protocol, liquid, _run(bubble, protocol, other, accuracy), accuracy)
    return _with_difference(result, second, other)


def liquid_of(protocol: Protocol) -> LiquidState:
    """Properties of the protocol's liquid at its temperature."""
    liquid = protocol.liquid
    return liquid_state(liquid.kind, liquid.temperature, liquid.salinity or 0.0)


def bubble_of(protocol: Protocol, liquid: LiquidState) -> Bubble:
    """The protocol's bubble at rest."""
    model = protocol.model
    phase = phase_for(model.mechanism, protocol.gas.mixture)
    shares = {"water": model.accommodation.water, "radicals": model.accommodation.radicals}
    shares |= {k: model.accommodation.of(k) for k in ABSORBED if k in phase.species}
    return Bubble(
        phase=phase,
        liquid=liquid,
        ambient_pressure=protocol.liquid.ambient_pressure,
        frequency=protocol.drive.frequency,
        pressure_amplitude=protocol.drive.pressure,
        radius=protocol.bubbles.radius,
        mixture=protocol.gas.mixture,
        accommodation=shares,
        excluded_volume=model.excluded_volume,
        vapour=model.vapour,
        uptake=model.uptake,
    )


def _run(bubble: Bubble, protocol: Protocol, coupling: str, accuracy: Accuracy) -> History:
    run = follow if coupling == "two_way" else follow_one_way
    return run(bubble, protocol.model.collapses, accuracy)


def _estimate(
    protocol: Protocol, liquid: LiquidState, history: History, accuracy: Accuracy
) -> Estimate:
    closure = balance(history)
    collapse = collapse_of(history)
    outcome = outcome_of(history, collapse, closure)
    drive = protocol.drive
    common: dict[str, Any] = {
        "protocol": protocol,
        "liquid": liquid,
        "history": history,
        "outcome": outcome,
        "balance": closure,
        "accuracy": accuracy,
        "mechanical_index": mechanical_index(drive.frequency, drive.pressure),
    }
    if not outcome.code.has_numbers:
        none: dict[str, Any] = dict.fromkeys(NUMBERS)
        return Estimate(**common, **none, warnings=(), thermo_range=())
    counts = counts_of(history)
    energy = _mean_energies(history)
    driven = driving(protocol.schedule, drive.frequency, windows_per_period(history))
    amounts = {name: one.delivered for name, one in counts.items()}
    amounts["oxidant"] = oxidant_per_collapse(counts)
    bubbles, volume = protocol.bubbles.number_density, protocol.liquid.volume
    doses = {
        name: dose(one, bubbles, volume, driven, energy.dissipated)
        for name, one in amounts.items()
    }
    return Estimate(
        **common,
        warnings=tuple(_warnings(protocol, liquid, history, collapse, outcome)),
        collapse=collapse,
        counts=counts,
        energy=energy,
        driven=driven,
        oxidant=doses.pop("oxidant"),
        thermo_range=tuple(thermo_range(history)),
        ionisation=ionisation_of(history),
        doses=doses,
    )


def _mean_energies(history: History) -> Energies:
    windows = [asdict(energies(history, span)) for span in history.spans]
    return Energies(**{key: sum(w[key] for w in windows) / len(windows) for key in windows[0]})


def _warnings(
    protocol: Protocol, liquid: LiquidState, history: History, collapse: Collapse, outcome: Outcome
) -> list[str]:
    found = list(history.bubble.phase.notes)
    if history.stopped:
        found.append(
            f"{len(history.windows)} of {protocol.model.collapses} windows completed: no further "
            f"main expansion came within {PATIENCE} periods. Yields are means over complete "
            "windows, or cover the whole run where there is none."
        )
    for one in filter(lambda each: each.matters, thermo_range(history)):
        found.append(
            f"{one.species} is above the {one.limit_K:.0f} K of its thermo source for "
            f"{one.time_s:.2g} s, at up to {100 * one.largest_share:.2g} % of the gas."
        )
    if (ions := ionisation_of(history)).matters:
        found.append(_ionisation_warning(ions))
    mach = collapse.peak_wall_speed_m_s / liquid.sound_speed
    if outcome.code is not Code.OUT_OF_RANGE and mach > FAST_WALL:
        found.append(f"The wall reaches Mach {mach:.2f} in the liquid: the radial equation errs.")
    if collapse.lowest_temperature_K < COLD_GAS:
        found.append(
            f"Expansion cools the gas to {collapse.lowest_temperature_K:.0f} K, below the 200 K "
            "where the thermo data end; heat capacities are held there, and no vapour condenses "
            "inside the gas."
        )
    if protocol.gas.mixture.get("N2", 0.0) > MUCH_NITROGEN and collapse.inertial:
        found.append(AIR_WARNING)
    pulses = pulse_warning(protocol.schedule, protocol.drive.frequency)
    return [*found, pulses] if pulses else found


def _ionisation_warning(ions: IonisationEstimate) -> str:
    return (
        f"Ionisation is not modelled. From {ions.onset_temperature_K:.0f} K on more than "
        f"{100 * THRESHOLD:.0f} % of this gas would be ionised (Saha estimate), and "
        f"{100 * ions.ionised_share:.2g} % at the {ions.peak_temperature_K:.0f} K reached: the "
        "true peak is cooler."
    )


def _with_difference(result: Estimate, second: Estimate, other: str) -> Estimate:
    difference: dict[str, Any] = {"other": other, "other_outcome": str(second.outcome.code)}
    pairs = {}
    if result.collapse and second.collapse and result.counts and second.counts:
        pairs["peak_temperature_K"] = (
            result.collapse.peak_temperature_K,
            second.collapse.peak_temperature_K,
        )
        for name in ("OH", "H2O2"):
            pairs[f"{name}_delivered"] = (
                result.counts[name].delivered,
                second.counts[name].delivered,
            )
    for key, (this, that) in pairs.items():
        difference[key] = {"this": this, "other": that, "ratio": that / this if this else None}
    return replace(result, coupling_difference=difference)


def _as_dict(result: Estimate) -> dict[str, Any]:
    def plain(value: Any) -> Any:
        return None if value is None else asdict(value)

    def each(values: dict[str, Any] | None) -> Any:
        return None if values is None else {name: asdict(one) for name, one in values.items()}

    oxidant = plain(result.oxidant) or {}
    table = {
        "title": result.protocol.title,
        "version": __version__,
        "schema": SCHEMA,
        "warnings": list(result.warnings),
        "outcome": {"code": str(result.outcome.code), "sentence": result.outcome.sentence},
        "inputs": _inputs(result),
        "collapse": plain(result.collapse),
        "per_collapse": each(result.counts),
        "energy_per_window_J": plain(result.energy),
        "balance": {key: _finite(value) for key, value in asdict(result.balance).items()},
        "driving": plain(result.driven),
        "per_exposure": each(result.doses),
        "oxidant": {
            "mol_per_L": oxidant.get("mol_per_L"),
            "mol_per_J": oxidant.get("mol_per_J"),
            "mol": oxidant.get("mol"),
            "formula": OXIDANT_FORMULA,
        },
        "mechanical_index": result.mechanical_index,
        "thermo_range": [asdict(one) for one in result.thermo_range],
        "ionisation": plain(result.ionisation),
        "provenance": _provenance(result),
    }
    if result.coupling_difference is not None:
        table["coupling_difference"] = result.coupling_difference
    return table


def _finite(value: float) -> float | None:
    """A number for JSON, which knows no infinity: that of a ledger that cannot be added up."""
    return value if isfinite(value) else None


def _inputs(result: Estimate) -> dict[str, Any]:
    phase = result.history.bubble.phase
    return result.protocol.dump() | {
        "liquid_properties": asdict(result.liquid),
        "mechanism": {"name": phase.name, "sha256": phase.sha256},
        "accommodation": dict(result.history.bubble.accommodation),
    }


def _provenance(result: Estimate) -> dict[str, Any]:
    described = json.dumps(result.protocol.dump(), sort_keys=True)
    return {
        "input_sha256": hashlib.sha256(described.encode()).hexdigest(),
        "libraries": {name: version(name) for name in LIBRARIES},
        "tolerance": result.accuracy.relative,
        "windows": len(result.history.windows),
        "counters": result.history.counters,
    }
