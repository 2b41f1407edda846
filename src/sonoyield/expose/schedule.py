"""When the sound is on: share of time and collapses per second."""

from __future__ import annotations

from dataclasses import dataclass

from sonoyield.describe.protocol import Schedule

SHORT_PULSE = 10.0  # periods; below it the start-up of each pulse matters


@dataclass(frozen=True)
class Driving:
    """How often a bubble collapses.

    ``share_on`` of the time; ``per_second`` collapses per second of total time and
    ``per_second_on`` while the sound is on; ``duration`` s.
    """

    share_on: float
    per_second: float
    per_second_on: float
    duration: float


def driving(schedule: Schedule, frequency: float, windows_per_period: float) -> Driving:
    """Collapses per second of one bubble, ``frequency`` in Hz.

    Every acoustic period of a pulse counts, its first included.
    """
    on = windows_per_period * frequency
    return Driving(schedule.duty, on * schedule.duty, on, schedule.duration)


def pulse_warning(schedule: Schedule, frequency: float) -> str | None:
    """Plain warning where pulses are so short that their start-up matters."""
    if schedule.pulse is None:
        return None
    periods = schedule.pulse.length * frequency
    if periods >= SHORT_PULSE:
        return None
    return (
        f"Each pulse lasts {periods:.3g} acoustic periods; the first and the last are not full "
        f"collapses, so yields per exposure are upper bounds (the count wants {SHORT_PULSE:.0f})."
    )
