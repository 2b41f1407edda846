"""Warnings that go with an estimate's numbers."""

from __future__ import annotations

from sonoyield.collapse.follow import PATIENCE
from sonoyield.collapse.history import History
from sonoyield.collapse.ionisation import THRESHOLD, IonisationEstimate, ionisation_of
from sonoyield.collapse.mixed_rule import mixed_is_safe
from sonoyield.collapse.outcome import Code, Outcome
from sonoyield.collapse.thermo_range import thermo_range
from sonoyield.collapse.uniformity import SONIC, UNEVEN, Uniformity
from sonoyield.collapse.yields import Collapse
from sonoyield.describe.liquid import LiquidState
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.schedule import pulse_warning

COLD_GAS = 200.0  # K, where the thermo polynomials end below
WARM_LIQUID = 50.0  # K of warming beyond which constant properties of water err by tens of %
FAST_WALL = 0.5  # of the sound speed: Keller-Miksis begins to err


def remarks_on(
    protocol: Protocol,
    liquid: LiquidState,
    history: History,
    collapse: Collapse,
    outcome: Outcome,
    uniformity: Uniformity,
) -> list[str]:
    """Warnings that go with the numbers of one run."""
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
    found += _on_pressure(uniformity)
    if history.cells is not None and history.cells.warming is not None:
        found += _on_warming(float(history.cells.warming[:, 0].max()))
    if history.cells is None and collapse.inertial:
        found.append(mixed_is_safe(collapse, protocol.gas.mixture).sentence)
    pulses = pulse_warning(protocol.schedule, protocol.drive.frequency)
    return [*found, pulses] if pulses else found


def _ionisation_warning(ions: IonisationEstimate) -> str:
    return (
        f"Ionisation is not modelled. From {ions.onset_temperature_K:.0f} K on more than "
        f"{100 * THRESHOLD:.0f} % of this gas would be ionised (Saha estimate), and "
        f"{100 * ions.ionised_share:.2g} % at the {ions.peak_temperature_K:.0f} K reached: the "
        "true peak is cooler."
    )


def _on_warming(warmest: float) -> list[str]:
    """The layer takes the liquid's properties as constant."""
    if warmest <= WARM_LIQUID:
        return []
    return [
        f"The liquid at the wall warms by {warmest:.0f} K for a moment: its properties, taken as "
        "constant, do not hold there, and the vapour let in is an upper estimate."
    ]


def _on_pressure(uniformity: Uniformity) -> list[str]:
    found = []
    if uniformity.pressure_spread > UNEVEN:
        found.append(
            "One pressure for the whole gas is not quite true: at its worst the centre would have "
            f"{100 * uniformity.pressure_spread:.0f} % more than the wall (estimate)."
        )
    if uniformity.gas_mach > SONIC:
        found.append(
            f"The wall closes in at Mach {uniformity.gas_mach:.1f} in the gas: waves, which are "
            "not modelled, may heat the centre further."
        )
    return found
