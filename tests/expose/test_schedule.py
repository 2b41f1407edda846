"""Share of time with sound on, collapses per second, and the warning of short pulses."""

import pytest

from sonoyield.describe.protocol import Pulse, Schedule
from sonoyield.expose.schedule import driving, pulse_warning


def schedule(duration: str, length: str = "", every: str = "") -> Schedule:
    pulse = Pulse.model_validate({"length": length, "every": every}) if length else None
    return Schedule.model_validate({"duration": duration, "pulse": pulse})


def test_continuous() -> None:
    found = driving(schedule("10 min"), 355e3, 1.0)
    assert (found.share_on, found.per_second, found.per_second_on) == (1.0, 355e3, 355e3)
    assert found.duration == 600.0


def test_pulsed() -> None:
    """1 ms every 10 ms of 1 MHz: a thousand periods in each of a hundred pulses a second."""
    found = driving(schedule("2 min", "1 ms", "10 ms"), 1e6, 1.0)
    assert found.share_on == pytest.approx(0.1, rel=1e-12)
    assert found.per_second == pytest.approx(1000 * 100, rel=1e-12)
    assert found.per_second_on == 1e6


def test_every_second_period() -> None:
    found = driving(schedule("1 s", "5 ms", "50 ms"), 20e3, 0.5)
    assert found.per_second_on == pytest.approx(1e4, rel=1e-12)
    assert found.per_second == pytest.approx(1e3, rel=1e-12)


def test_pulse_as_long_as_its_repetition_is_continuous() -> None:
    assert driving(schedule("1 min", "50 ms", "0.05 s"), 1e6, 1.0).share_on == 1.0


@pytest.mark.parametrize(
    ("length", "warned"), [("9.9 us", True), ("10 us", False), ("1 ms", False), ("1 us", True)]
)
def test_short_pulses_are_told(length: str, warned: bool) -> None:
    found = pulse_warning(schedule("1 min", length, "1 s"), 1e6)
    assert (found is not None) is warned
    assert found is None or "acoustic periods" in found


def test_no_pulse_no_warning() -> None:
    assert pulse_warning(schedule("1 min"), 1e6) is None
