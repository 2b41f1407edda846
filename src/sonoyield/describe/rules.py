"""Rules between the fields of one protocol; each refusal names the key it blames."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from sonoyield.describe.errors import RefusalError
from sonoyield.describe.fields import AUTO, SHIPPED
from sonoyield.describe.liquid import liquid_state
from sonoyield.describe.units import DIMENSIONS, format_quantity

if TYPE_CHECKING:
    from sonoyield.describe.protocol import Model, Protocol

LARGEST_GAS_SHARE = 0.1  # of the liquid's volume; above it bubbles do not act one by one
MECHANISM = "model.mechanism"
SCAVENGERS = "liquid.scavengers"
RESOLVED = 'model.interior = "resolved"'
# Keys of the model that say something of the resolved interior only.
OF_THE_RESOLVED = ("cells", "wall", "temperature_jump", "oxygen_atom")
ROUNDING = 1e-9  # equal times written in different units stay equal


def check_rules(protocol: Protocol) -> None:
    """Refuse a protocol whose fields contradict each other.

    Raises ``RefusalError`` with the dotted key of the field to change.
    """
    _check_times(protocol)
    _check_boiling(protocol)
    _check_filling(protocol)
    _check_mechanism(protocol)
    _check_interior(protocol.model)
    _check_scavengers(protocol)


def _check_times(protocol: Protocol) -> None:
    period = 1.0 / protocol.drive.frequency
    schedule = protocol.schedule
    shortest = f"at least one acoustic period, {_time(period)}"
    if schedule.duration < period * (1 - ROUNDING):
        raise RefusalError("shorter than one acoustic period", shortest, "schedule.duration")
    pulse = schedule.pulse
    if pulse is None:
        return
    if pulse.length < period * (1 - ROUNDING):
        raise RefusalError("shorter than one acoustic period", shortest, "schedule.pulse.length")
    if pulse.length > pulse.every * (1 + ROUNDING):
        allowed = f"at most schedule.pulse.every, {_time(pulse.every)}"
        raise RefusalError(
            "a pulse is longer than its repetition", allowed, "schedule.pulse.length"
        )
    if schedule.duration < pulse.every * (1 - ROUNDING):
        allowed = f"at least schedule.pulse.every, {_time(pulse.every)}"
        raise RefusalError("shorter than one pulse repetition", allowed, "schedule.duration")


def _check_boiling(protocol: Protocol) -> None:
    liquid = protocol.liquid
    vapour = liquid_state(liquid.kind, liquid.temperature, liquid.salinity).saturation_pressure
    if vapour >= liquid.ambient_pressure:
        boiling = format_quantity(vapour, DIMENSIONS["ambient"])
        ambient = format_quantity(liquid.ambient_pressure, DIMENSIONS["ambient"])
        problem = f"the liquid would boil at rest under {ambient}"
        allowed = f"a temperature whose vapour pressure, here {boiling}, is below the ambient one"
        raise RefusalError(problem, allowed, "liquid.temperature")


def _check_filling(protocol: Protocol) -> None:
    bubble = 4.0 / 3.0 * math.pi * protocol.bubbles.radius**3
    share = protocol.bubbles.number_density * bubble
    if share > LARGEST_GAS_SHARE:
        most = LARGEST_GAS_SHARE / bubble
        raise RefusalError(
            f"bubbles of this radius would fill {share:.3g} of the liquid's volume",
            f"at most {LARGEST_GAS_SHARE:g} of it, that is {most:.3g} / m^3",
            "bubbles.number_density",
        )


def _check_mechanism(protocol: Protocol) -> None:
    mechanism, mixture = protocol.model.mechanism, protocol.gas.mixture
    if mechanism == "h2o_o2" and "N2" in mixture:
        raise RefusalError(
            "this mechanism holds no nitrogen, the gas does", '"auto" or "h2o_o2_n2"', MECHANISM
        )
    if mechanism == AUTO or mechanism in SHIPPED:
        return
    from sonoyield.describe.gas import phase_for  # Cantera: only where a file is to be read

    try:
        phase_for(mechanism, mixture)
    except RefusalError as error:
        raise RefusalError(error.problem, error.allowed, MECHANISM) from None


def _check_interior(model: Model) -> None:
    if model.interior == "resolved":
        _check_resolved(model)
        return
    for key in OF_THE_RESOLVED:
        if key in model.model_fields_set:
            problem = "the mixed interior has no such choice"
            raise RefusalError(problem, f"with {RESOLVED} only", f"model.{key}")
    if model.film:
        problem = "the mixed interior has no film of liquid around it"
        raise RefusalError(problem, f"false, or true with {RESOLVED}", "model.film")


def _check_resolved(model: Model) -> None:
    if model.coupling == "one_way":
        unsaid = "" if "interior" in model.model_fields_set else ", which is the default,"
        raise RefusalError(
            f"a resolved interior{unsaid} is always coupled both ways",
            '"two_way", or "one_way" with model.interior = "mixed"',
            "model.coupling",
        )
    if not model.film and "oxygen_atom" in model.model_fields_set:
        problem = "says what oxygen atoms do in the film, and there is none"
        raise RefusalError(problem, "with model.film = true only", "model.oxygen_atom")


def _check_scavengers(protocol: Protocol) -> None:
    model = protocol.model
    needed = {
        RESOLVED: model.interior == "resolved",
        "model.film = true": model.film,
        "model.uptake = true": model.uptake,
    }
    lacking = [words for words, met in needed.items() if not met]
    if protocol.liquid.scavengers and lacking:
        problem = "scavengers act in the film of liquid, on what crosses the wall"
        raise RefusalError(problem, f"with {' and '.join(lacking)} only", SCAVENGERS)


def _time(seconds: float) -> str:
    return format_quantity(seconds, DIMENSIONS["time"])
