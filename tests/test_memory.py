"""Memory stays flat over a thousand collapses in one process."""

import os
from pathlib import Path

import pytest

from sonoyield import Protocol, estimate

STATUS = Path("/proc/self/statm")
LIMIT = 20e6  # bytes, for a thousand collapses
# coupling of the mixed gas, or resolved; runs, collapses each; the slower ones fewer
CASES = [("two_way", 1000, 1), ("one_way", 200, 1), ("two_way", 5, 20), ("resolved", 60, 1)]
PROTOCOL = {
    "drive": {"frequency": "355 kHz", "pressure": "2 bar"},
    "schedule": {"duration": "10 min"},
    "liquid": {"temperature": "25 degC", "volume": "100 mL"},
    "gas": {"mixture": "argon"},
    "bubbles": {"radius": "3 um", "number_density": "1e7 / m^3"},
}


def resident() -> int:
    """Resident set of this process, bytes."""
    return int(STATUS.read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE")


@pytest.mark.slow
@pytest.mark.skipif(not STATUS.exists(), reason="reads /proc")
@pytest.mark.parametrize(("coupling", "runs", "collapses"), CASES)
def test_flat(coupling: str, runs: int, collapses: int, capfd: pytest.CaptureFixture[str]) -> None:
    model: dict[str, object] = {"collapses": collapses}
    if coupling != "resolved":
        model |= {"interior": "mixed", "coupling": coupling}
    protocol = Protocol.from_dict(PROTOCOL | {"model": model})
    for _ in range(min(runs, 20)):
        estimate(protocol).as_dict()
    before = resident()
    for _ in range(runs):
        estimate(protocol).as_dict()
    growth = resident() - before
    with capfd.disabled():
        print(f"\n{coupling}, {runs} x {collapses}: grown by {growth / 1e6:.2f} MB")
    assert growth < LIMIT
