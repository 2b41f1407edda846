"""Estimate one exposure: protocol in, collapse, yields, dose and their pedigree out."""

from __future__ import annotations

from dataclasses import asdict, replace
from typing import Any

from sonoyield.collapse.aqueous import aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.caught import catches, dissolved_gases
from sonoyield.collapse.film_cycles import FilmError
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.collapse.ionisation import ionisation_of
from sonoyield.collapse.ledger import Energies, balance, energies
from sonoyield.collapse.one_way import follow_one_way
from sonoyield.collapse.outcome import outcome_of
from sonoyield.collapse.resolved import STEAMY, STEAMY_CELLS, follow_resolved
from sonoyield.collapse.thermo_range import thermo_range
from sonoyield.collapse.thresholds import mechanical_index
from sonoyield.collapse.uniformity import uniformity_of
from sonoyield.collapse.yields import (
    collapse_of,
    counts_of,
    oxidant_per_collapse,
    windows_per_period,
)
from sonoyield.describe.gas import ABSORBED, phase_for
from sonoyield.describe.liquid import LiquidState, liquid_state
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.dose import dose
from sonoyield.expose.remarks import remarks_on
from sonoyield.expose.result import Estimate
from sonoyield.expose.schedule import driving

NUMBERS = ("collapse", "counts", "energy", "driven", "doses", "oxidant", "ionisation", "uniformity")


def estimate(
    protocol: Protocol,
    both: bool = False,
    accuracy: Accuracy | None = None,
    fast: bool = False,
) -> Estimate:
    """Drive the protocol's bubble through its collapses and count what it makes.

    The headline is the resolved bubble, with the well-mixed gas in Cantera's reactor beside it;
    with ``fast``, or where the protocol asks for a mixed interior, it is the well-mixed gas alone,
    with the size of its known error among the warnings.
    With ``both`` the reactor's other coupling is run too and its difference reported. Raises
    ``FileNotFoundError`` when a shipped mechanism is not installed.
    """
    accuracy = accuracy or Accuracy()
    liquid = liquid_of(protocol)
    bubble = bubble_of(protocol, liquid)
    mixed = _estimate(protocol, liquid, _run(bubble, protocol, accuracy), accuracy)
    if both:
        mixed = _with_other_coupling(mixed, bubble, accuracy)
    if fast or protocol.model.interior == "mixed":
        return mixed
    steam = mixed.collapse.vapour_fraction_at_peak if mixed.collapse is not None else 0.0
    history = _resolve(bubble, protocol, accuracy, steam)
    result = _estimate(protocol, liquid, history, accuracy)
    wet = history.cells is not None and protocol.model.film and protocol.model.uptake
    if result.counts is not None and wet:
        result = _with_film(result)
    told = (*result.warnings, *_on_steam(history, steam)) if result.counts else ()
    return replace(
        result, mixed=mixed, coupling_difference=mixed.coupling_difference, warnings=told
    )


def _on_steam(history: History, steam: float) -> list[str]:
    """What few cells leave of the layer in which nearly pure steam condenses."""
    cells = history.cells
    if steam < STEAMY or cells is None or len(cells.faces) > STEAMY_CELLS:
        return []
    return [
        "Nearly pure steam condenses in a layer thinner than "
        f"{len(cells.faces) - 1} cells resolve: 20 leave some 40 % too much OH, "
        f"{STEAMY_CELLS} some 5 % (oxygen, 22 kHz)."
    ]


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


def _run(
    bubble: Bubble, protocol: Protocol, accuracy: Accuracy, coupling: str | None = None
) -> History:
    """The well-mixed gas."""
    two_way = (coupling or protocol.model.coupling) == "two_way"
    run = follow if two_way else follow_one_way
    return run(bubble, protocol.model.collapses, accuracy)


def _resolve(
    bubble: Bubble, protocol: Protocol, accuracy: Accuracy, steam: float
) -> History:
    model = protocol.model
    chemistry = None
    if model.film and model.uptake:
        chemistry = aqueous_chemistry(
            bubble.liquid.temperature,
            protocol.liquid.scavengers,
            model.oxygen_atom,
            nitrogen="N2" in bubble.phase.species,
            dissolved=dissolved_gases(bubble),
        )
    return follow_resolved(
        bubble,
        model.collapses,
        accuracy,
        cells=model.cells,
        chemistry=chemistry,
        wall=model.wall,
        temperature_jump=model.temperature_jump,
        steam=steam,
    )


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
    uniformity = uniformity_of(history)
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
        warnings=tuple(remarks_on(protocol, liquid, history, collapse, outcome, uniformity)),
        uniformity=uniformity,
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


def _with_film(result: Estimate) -> Estimate:
    """What scavengers catch and what becomes of OH in the liquid, over repeating cycles."""
    protocol = result.protocol
    try:
        found = catches(result.history, protocol.liquid.scavengers, protocol.model.oxygen_atom)
    except FilmError as error:
        told = f"The film could not be followed over cycles, so nothing is caught here: {error}"
        return replace(result, warnings=(*result.warnings, told))
    return replace(result, in_liquid=found)


def _with_other_coupling(result: Estimate, bubble: Bubble, accuracy: Accuracy) -> Estimate:
    protocol = result.protocol
    other = "one_way" if protocol.model.coupling == "two_way" else "two_way"
    history = _run(bubble, protocol, accuracy, other)
    return _with_difference(
        result, _estimate(protocol, result.liquid, history, accuracy), other
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


