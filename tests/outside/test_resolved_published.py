"""The resolved bubble and its film against published single bubbles, E = predicted - published.

Every published number here is from memory (rows of ``data.csv``): Storey and Szeri 2000 (SBL-06*,
SBL-08), Didenko and Suslick 2002 (DID-*), argon over air in reactors (YLD-ARAIR). Nothing is tuned;
where a prediction is outside what the row allows, the test says so and holds it to what it is.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

import numpy as np
import pytest
from bubbles import ATMOSPHERE
from rows import ROWS

from sonoyield.collapse.aqueous import aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.caught import InLiquid, catches, dissolved_gases
from sonoyield.collapse.follow import Accuracy
from sonoyield.collapse.history import History
from sonoyield.collapse.resolved import follow_resolved
from sonoyield.collapse.yields import counts_of
from sonoyield.describe.gas import phase_for
from sonoyield.describe.gases import AIR, COMPOSITIONS
from sonoyield.describe.liquid import water
from sonoyield.describe.scavengers import Scavenger

ONCE = Accuracy(relative=1e-6, tighten=0, seconds=900.0)  # a first run compiles
ARGON = COMPOSITIONS["argon"]
RATE = 4e6  # m3/mol/s: 4e9 L/mol/s, a fast scavenger


def bubble(
    drive: tuple[float, float, float], gas: Mapping[str, float], celsius: float, vapour: bool = True
) -> Bubble:
    return Bubble(
        phase_for("auto", gas), water(273.15 + celsius), ATMOSPHERE, *drive, gas,
        {"water": 0.4, "radicals": 0.4}, vapour=vapour,
    )  # fmt: skip


# --- Storey and Szeri 2000: what vapour and reactions take from the peak


SONOLUMINESCENT = (26.5e3, 1.2e5, 4.5e-6)
CASCADE = ("no vapour", "vapour", "vapour and reactions")


@lru_cache
def collapse(case: str) -> tuple[float, float, float]:
    """Hottest cell and mole mean at its peak, K; water's mole fraction at the smallest radius."""
    one = bubble(SONOLUMINESCENT, ARGON, 25.0, vapour=case != "no vapour")
    gas = one.phase.solution()
    gas.set_multiplier(0.0 if case == "vapour" else 1.0)
    try:
        history = follow_resolved(one, accuracy=ONCE)
    finally:
        gas.set_multiplier(1.0)
    assert history.cells is not None and len(history.windows) == 1
    moles = history.moles[history.marks[1] + int(history.radius[history.marks[1] :].argmin())]
    share = moles[one.phase.index("H2O")] / moles.sum()
    return (
        float(history.cells.temperature.max()),
        float(history.temperature.max()),
        float(share),
    )


@pytest.mark.parametrize(
    ("case", "row", "found", "error"),
    [
        ("no vapour", "SBL-06", 14587.0, -6313.0),
        ("vapour", "SBL-06b", 8303.0, -1397.0),
        ("vapour and reactions", "SBL-08", 6353.0, -647.0),
    ],
)
def test_peak_temperature_in_the_centre(case: str, row: str, found: float, error: float) -> None:
    """E = -6313, -1397, -647 K: 30.2, 14 and 9 % below what is published; the rows allow 30 %.

    Without vapour that is just outside (30.1 % with 40 cells): disagreement. There the published
    gas carries waves, which heat its centre beyond what a gas at one pressure reaches (memory).
    """
    hottest, mean, _ = collapse(case)
    assert hottest == pytest.approx(found, rel=0.01)
    assert hottest - ROWS[row].number == pytest.approx(error, abs=0.01 * found)
    assert mean < hottest
    if case != "no vapour":
        ROWS[row].agrees(hottest)


def test_order_of_the_cascade() -> None:
    """SBL-06: the robust part, and vapour with reactions at about a third (here 0.44)."""
    peaks = [collapse(case)[0] for case in CASCADE]
    assert peaks == sorted(peaks, reverse=True)
    assert ROWS["SBL-08"].number / ROWS["SBL-06"].number == pytest.approx(0.33, abs=0.01)
    assert peaks[2] / peaks[0] == pytest.approx(0.44, abs=0.01)


def test_trapped_water() -> None:
    """SBL-06c: 0.14. E = -0.03 without reactions and -0.09 with: the rest has split by then.

    With reactions that is a factor 2.9, outside the factor 2 of the row: disagreement.
    """
    published = ROWS["SBL-06c"].number
    assert collapse("vapour")[2] - published == pytest.approx(-0.029, abs=0.002)
    assert collapse("vapour and reactions")[2] - published == pytest.approx(-0.091, abs=0.002)


# --- Didenko and Suslick 2002: one air bubble, 52 kHz, 22 degC


@lru_cache
def air_bubble(concentration: float) -> tuple[History, InLiquid]:
    """Run and liquid with mol/m3 of a scavenger of 4e9 L/mol/s."""
    one = bubble((52e3, 1.5e5, 3.6e-6), AIR, 22.0)
    return followed(one, concentration)


def followed(one: Bubble, concentration: float) -> tuple[History, InLiquid]:
    scavengers = {"probe": Scavenger(k=RATE, concentration=concentration)}
    chemistry = aqueous_chemistry(
        one.liquid.temperature, scavengers, nitrogen="N2" in one.phase.species,
        dissolved=dissolved_gases(one),
    )  # fmt: skip
    history = follow_resolved(one, accuracy=ONCE, chemistry=chemistry)
    return history, catches(history, scavengers, longest_stay=0.0)


@pytest.mark.parametrize(
    ("concentration", "fresh", "repeating"),
    [(0.1, 1.880e6, 2.37e5), (1.0, 5.81e6, 2.13e6), (2.0, 7.61e6, 3.78e6)],
)
def test_hydroxyl_of_one_bubble(concentration: float, fresh: float, repeating: float) -> None:
    """DID-01: 8.2e5 a cycle, within 30 %; the scavenger's concentration is not known to us.

    At 0.1 mmol/L that lies inside the range from fresh liquid to one place for good. At 1 and 2
    mmol/L even the lower end is above it, E = 1.3e6 and 3.0e6: by a factor of 2.6, within the
    row's 3, and of 4.6, disagreement. Delivered OH (2.24e7) is 27 times what was counted. The
    bubble grows to 31.3 um, 8 % beyond the measured 28.9 um: the drive is about 1.5 bar only.
    """
    published = ROWS["DID-01"].number
    history, found = air_bubble(concentration)
    one = found.catches[0]
    assert (one.fresh, one.repeating) == (
        pytest.approx(fresh, rel=0.03), pytest.approx(repeating, rel=0.03)
    )  # fmt: skip
    assert (one.repeating < published < one.fresh) == (concentration == 0.1)
    assert found.repeats and found.same_film
    assert (one.repeating < 3.0 * published) == (concentration < 2.0)
    assert counts_of(history)["OH"].delivered == pytest.approx(2.24e7, rel=0.03)
    assert float(history.radius.max()) == pytest.approx(31.3e-6, rel=0.005)


def test_nitrite_of_one_bubble() -> None:
    """DID-03: 9.9e6 a cycle, order of magnitude. Disagreement: a hundredth of it is delivered.

    By Henry's law NO and NO2 stay in the bubble, where the next collapses meet them: 2.0e6 are left
    in the gas after one, 4.3e5 have gone over, most as HONO. All made in a collapse, 2.5e6, is
    a quarter of what was published; whether it gets out once it has built up is not followed here.
    """
    published = ROWS["DID-03"].number
    history, found = air_bubble(1.0)
    counts = counts_of(history)
    oxides = [counts[name] for name in ("NO", "NO2", "HONO", "HONO2")]
    delivered, left = (sum(getattr(n, key) for n in oxides) for key in ("delivered", "left"))
    assert delivered == pytest.approx(4.3e5, rel=0.1)
    assert left == pytest.approx(2.0e6, rel=0.1)
    assert (delivered + left) / published == pytest.approx(0.245, rel=0.1)
    assert found.fresh.nitrite / published == pytest.approx(0.0176, rel=0.1)
    assert found.repeating.nitrite / published == pytest.approx(0.0022, rel=0.2)


# --- argon beside air


@pytest.mark.parametrize(
    ("drive", "delivered", "fresh", "repeating"),
    [
        ((355e3, 2.0e5, 3.0e-6), 6.54, 3.02, 0.99),
        ((355e3, 2.5e5, 3.0e-6), 2.49, 1.57, 1.03),
        ((355e3, 3.0e5, 3.0e-6), 2.07, 1.44, 1.04),
        ((1e6, 4.0e5, 1.5e-6), 4.81, 2.18, 1.03),
        ((52e3, 1.5e5, 3.6e-6), 1.77, 1.47, 1.10),
    ],
)
def test_argon_over_air(
    drive: tuple[float, float, float], delivered: float, fresh: float, repeating: float
) -> None:
    """YLD-ARAIR: about 1.3 of caught OH. Delivered is above it, by up to a factor of five.

    What 2 mmol/L of a fast scavenger catch brackets it: in one place both gases use up what
    diffusion brings, so the ratio tends to one; in fresh liquid it is 1.4 to 3.0.
    """
    published = ROWS["YLD-ARAIR"].number
    pairs = [ends(drive, gas) for gas in ("argon", "air")]
    found = [a / b for a, b in zip(*pairs, strict=True)]
    assert found == pytest.approx([delivered, fresh, repeating], rel=0.03)
    assert found[2] < published < found[1] < found[0]


@lru_cache
def ends(drive: tuple[float, float, float], gas: str) -> tuple[float, float, float]:
    """OH delivered, caught in fresh liquid and caught in one place, molecules a cycle."""
    history, found = followed(bubble(drive, AIR if gas == "air" else ARGON, 25.0), 2.0)
    one = found.catches[0]
    return counts_of(history)["OH"].delivered, one.fresh, one.repeating


def test_the_liquid_keeps_its_books() -> None:
    """Both cycles of the runs above: film budgets close, shares add up."""
    _, found = air_bubble(1.0)
    for cycle, fate in ((found.film.first, found.fresh), (found.film.last, found.repeating)):
        assert cycle.budget_error < 1e-6
        assert np.isclose(sum(fate.shares.values()), 1.0)
