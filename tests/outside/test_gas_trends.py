"""Trends between gases on whole runs: argon beside air, nitrogen oxides, the best share of O2.

Sources: the issue that asked for nitrogen, for the first two; rows YLD-05 (seen) and YLD-12
(memory) of ``data.csv`` for the share of O2 in argon that makes most oxidant.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from itertools import pairwise

import pytest
from bubbles import ATMOSPHERE, WATER
from rows import ROWS

from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import follow
from sonoyield.collapse.yields import counts_of, oxidant_per_collapse
from sonoyield.describe.gas import phase_for
from sonoyield.describe.gases import AIR, COMPOSITIONS

Drive = tuple[float, float, float]  # frequency Hz, amplitude Pa, radius at rest m
OXIDES = ("NO", "NO2", "HONO", "HONO2", "N2O")


def made(drive: Drive, gas: Mapping[str, float]) -> dict[str, float]:
    """Delivered molecules by species, with the oxidant in OH equivalents and the peak in K."""
    history = follow(
        Bubble(
            phase_for("auto", gas), WATER, ATMOSPHERE, *drive, gas, {"water": 0.4, "radicals": 0.4}
        )
    )
    counts = counts_of(history)
    found = {name: one.delivered for name, one in counts.items()}
    return found | {
        "oxidant": oxidant_per_collapse(counts), "peak": float(history.temperature.max())
    }  # fmt: skip


@pytest.mark.parametrize(
    ("drive", "share"),
    [
        ((355e3, 2.0e5, 3.0e-6), 0.0113),
        ((355e3, 3.0e5, 3.0e-6), 0.349),
        ((1e6, 4.0e5, 1.5e-6), 0.0184),
        ((52e3, 1.5e5, 3.6e-6), 0.711),
    ],
)
def test_argon_delivers_more_hydroxyl_than_air(drive: Drive, share: float) -> None:
    """``share``: OH in air over that in argon, as measured here; the trend asks for below one."""
    argon, air = made(drive, COMPOSITIONS["argon"]), made(drive, AIR)
    assert air["OH"] < argon["OH"]
    assert air["peak"] < argon["peak"] - 1000.0
    assert air["OH"] / argon["OH"] == pytest.approx(share, rel=0.03)


SLOW: Drive = (20e3, 1.5e5, 4.5e-6)


def test_air_delivers_more_than_argon_at_20_khz() -> None:
    """Expected to disagree, because the air's oxygen keeps the hydrogen of split steam busy.

    Nitrogen alone delivers less than argon; the same share of O2 in argon makes more than either.
    """
    found = {
        "argon": made(SLOW, COMPOSITIONS["argon"])["OH"],
        "nitrogen": made(SLOW, COMPOSITIONS["nitrogen"])["OH"],
        "air": made(SLOW, AIR)["OH"],
        "argon, O2": made(SLOW, {"AR": 0.79, "O2": 0.21})["OH"],
    }
    assert found["nitrogen"] < found["argon"] < found["air"] < found["argon, O2"]
    assert found["air"] / found["argon"] == pytest.approx(1.36, rel=0.03)
    assert found["nitrogen"] / found["argon"] == pytest.approx(0.838, rel=0.03)


def test_nitrogen_oxides_grow_with_the_peak() -> None:
    """355 kHz, 3 um: from a fiftieth of a molecule to thousands of NO as the drive rises."""
    found = [made((355e3, p, 3.0e-6), AIR) for p in (1.8e5, 2.0e5, 2.3e5, 2.6e5, 3.0e5)]
    found.append(made((52e3, 1.5e5, 3.6e-6), AIR))
    peaks = [one["peak"] for one in found]
    assert peaks == sorted(peaks)
    for name in ("NO", "N2O"):
        amounts = [one[name] for one in found]
        assert all(b > 3.0 * a for a, b in pairwise(amounts)), name
    totals = [sum(one[name] for name in OXIDES) for one in found]
    assert totals == pytest.approx([5.87, 149.0, 3353.0, 2.15e4, 9.48e4, 1.29e6], rel=0.05)


SHARES = [round(0.05 * k, 2) for k in range(13)]  # of O2 in argon, 0 to 60 %


@lru_cache
def by_share(drive: Drive) -> tuple[tuple[float, float], ...]:
    """Oxidant and H2O2 delivered at each of ``SHARES``."""
    found = []
    for share in SHARES:
        mixture = {"AR": 1.0 - share, "O2": share} if share else {"AR": 1.0}
        one = made(drive, mixture)
        found.append((one["oxidant"], one["H2O2"]))
    return tuple(found)


def best_share(drive: Drive) -> float:
    """The share of O2 in argon that makes most oxidant; inside the grid or the test fails."""
    oxidant = [one[0] for one in by_share(drive)]
    at = oxidant.index(max(oxidant))
    assert 0 < at < len(SHARES) - 1
    return SHARES[at]


MEDIUM = {
    (300e3, 1.6e5, 3e-6): 0.05,
    (300e3, 2e5, 3e-6): 0.10,
    (300e3, 3e5, 3e-6): 0.10,
    (300e3, 3e5, 5e-6): 0.10,
}


@pytest.mark.parametrize("drive", MEDIUM)
def test_best_share_of_oxygen_at_300_khz(drive: Drive) -> None:
    """YLD-12 (Hart & Henglein 1985; memory) puts the best share of O2 at 20 to 30 %.

    There is a maximum, 1.6 to 1.9 times pure argon, but it is expected to disagree, because 5 to
    10 % O2 bind the hydrogen of a single collapse already and more only cools it: the peak falls
    from 5084 to 4388 K at 20 % (2 bar), our reading. The row is a yield of the liquid over all
    bubble sizes.
    """
    low, high = (float(one) for one in ROWS["YLD-12"].note.split(";")[0].split("-"))
    assert (low, high) == (0.2, 0.3)
    found = best_share(drive)
    assert found < low
    assert found == pytest.approx(MEDIUM[drive], abs=0.001)
    gain = by_share(drive)[SHARES.index(found)][0] / by_share(drive)[0][0]
    assert 1.5 < gain < 2.0


LOW = {(28e3, 1.25e5, 4.5e-6): 0.10, (28e3, 1.4e5, 4.5e-6): 0.15, (28e3, 1.7e5, 4.5e-6): 0.30}


@pytest.mark.parametrize("drive", LOW)
def test_best_share_of_argon_at_28_khz(drive: Drive) -> None:
    """YLD-05 (seen; optimum at 50 to 85 % Ar): met at 1.4 and 1.7 bar with 85 and 70 % Ar.

    At 1.25 bar it is expected to disagree (90 % Ar), because the optimum moves with the drive and
    the row is one of a reactor with many. Why it moves that way is not established: steam at the
    peak in argon does not order it (0.18, 0.51 and 0.13 as a mole fraction).
    """
    assert "50-85 % Ar" in ROWS["YLD-05"].tolerance
    found = best_share(drive)
    assert found == pytest.approx(LOW[drive], abs=0.001)
    assert (0.15 <= found <= 0.5) is (drive[1] >= 1.4e5)
