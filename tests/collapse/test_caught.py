"""What the film behind a resolved run catches, against the run that carries the film along."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

from sonoyield.collapse.aqueous import CAUGHT, AqueousChemistry, aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.caught import (
    BETWEEN_MAXIMA,
    FROM_REST,
    InLiquid,
    catches,
    dissolved_gases,
    repeating_span,
    wall_history,
)
from sonoyield.collapse.film_grid import film_edges, volumes
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.collapse.resolved import FILM_CELLS, follow_resolved
from sonoyield.describe.gas import AVOGADRO, phase_for
from sonoyield.describe.gases import AIR, COMPOSITIONS
from sonoyield.describe.liquid import water
from sonoyield.describe.scavengers import Scavenger

ATMOSPHERE = 101325.0
PROBE = {"probe": Scavenger(k=4e6, concentration=2.0)}  # 4e9 L/mol/s, 2 mmol/L
ONCE = Accuracy(relative=1e-6, tighten=0, seconds=900.0)  # a first run compiles


@lru_cache
def bubble(gas: str = "argon", temperature: float = 298.15) -> Bubble:
    """355 kHz, 2 bar, 3 um."""
    mixture = AIR if gas == "air" else COMPOSITIONS[gas]
    return Bubble(
        phase_for("auto", mixture), water(temperature), ATMOSPHERE, 355e3, 2e5, 3e-6, mixture,
        {"water": 0.4, "radicals": 0.4},
    )  # fmt: skip


def film_of(gas: str, scavenged: bool = True) -> AqueousChemistry:
    one = bubble(gas)
    return aqueous_chemistry(
        one.liquid.temperature, PROBE if scavenged else {}, nitrogen="N2" in one.mixture,
        dissolved=dissolved_gases(one),
    )  # fmt: skip


@lru_cache
def run(gas: str, film: str = "scavenged") -> History:
    chemistry = film_of(gas, film == "scavenged") if film else None
    return follow_resolved(bubble(gas), accuracy=ONCE, chemistry=chemistry)


@lru_cache
def liquid(gas: str) -> InLiquid:
    return catches(run(gas), PROBE, longest_stay=100.0)


@pytest.mark.parametrize("gas", ["argon", "air"])
def test_flow_without_a_film_is_what_crossed(gas: str) -> None:
    """A run without a film meets a perfect sink: what the wall offers is what it delivered."""
    history = run(gas, "")
    span, window = repeating_span(history)
    assert window == BETWEEN_MAXIMA
    chemistry = film_of(gas)
    wall = wall_history(history, chemistry, span)
    offered = np.trapezoid(wall.offered(), wall.times, axis=0)
    crossed = history.crossed[span[1]] - history.crossed[span[0]]
    for name in ("OH", "H2O2", "HO2"):
        found = offered[wall.species.index(name)] / crossed[history.bubble.phase.index(name)]
        assert found == pytest.approx(1.0, rel=0.01), name


@pytest.mark.parametrize(("gas", "more"), [("argon", 0.0070), ("air", 0.0125)])
def test_fresh_cycle_enters_what_the_coupled_run_delivers(gas: str, more: float) -> None:
    """``more`` OH enters the film alone, as measured here; the coupled run is the truth."""
    found = liquid(gas)
    assert found.same_film
    assert found.fresh.OH_entered / found.OH_delivered - 1.0 == pytest.approx(more, abs=0.003)


@pytest.mark.parametrize(("gas", "more"), [("argon", 0.023), ("air", 0.022)])
def test_fresh_cycle_catches_what_the_coupled_run_catches(gas: str, more: float) -> None:
    """``more`` is caught by the film alone, whose cells are finer, as measured here."""
    history, chemistry = run(gas), film_of(gas)
    assert history.cells is not None and history.cells.film is not None
    radius = history.bubble.radius
    edges = film_edges(0.2 * radius, radius, FILM_CELLS)
    last = history.cells.film[-1][:, chemistry.index(CAUGHT + "probe")]
    coupled = AVOGADRO * float(volumes(edges) @ last)
    assert liquid(gas).catches[0].fresh / coupled - 1.0 == pytest.approx(more, abs=0.006)


@pytest.mark.parametrize("gas", ["argon", "air"])
def test_range_over_renewal(gas: str) -> None:
    """Fresh liquid catches most; in one place the catch falls to what diffusion supplies."""
    one = liquid(gas).catches[0]
    assert (one.k_L_per_mol_s, one.mol_per_L) == pytest.approx((4e9, 2e-3))
    assert one.after_cycles[0] == 1.0 and one.after_cycles[-1] == 100.0
    assert one.molecules_then[0] == pytest.approx(one.fresh, rel=1e-12)
    assert list(one.molecules_then) == sorted(one.molecules_then, reverse=True)
    assert one.molecules == one.repeating < one.molecules_then[-1]
    assert liquid(gas).repeats
    assert 0.9 * one.supply_limit < one.repeating < 1.1 * one.supply_limit


@pytest.mark.parametrize("gas", ["argon", "air"])
@pytest.mark.parametrize("cycle", ["fresh", "repeating"])
def test_oh_goes_somewhere(gas: str, cycle: str) -> None:
    """Of OH, the four ends add up to what entered and what the liquid itself made of it."""
    fate = getattr(liquid(gas), cycle)
    reacted = fate.OH_caught + fate.OH_to_H2O2 + fate.OH_to_nitrogen + fate.OH_lost
    assert reacted == pytest.approx(fate.OH_entered, rel=0.02)
    assert sum(fate.shares.values()) == pytest.approx(1.0, rel=1e-12)
    assert (fate.OH_to_nitrogen > 1.0) == (gas == "air")


def test_without_scavengers() -> None:
    """OH makes more H2O2 where nothing else takes it; nothing is caught."""
    found = catches(run("argon", "plain"), {})
    assert found.catches == () and found.same_film and found.repeats
    assert found.fresh.OH_caught == 0.0
    assert found.fresh.H2O2 > liquid("argon").fresh.H2O2
    assert found.fresh.OH_entered == pytest.approx(found.OH_delivered, rel=0.02)


def test_a_film_without_the_scavenger_is_told_apart() -> None:
    found = catches(run("argon", "plain"), PROBE, longest_stay=0.0)
    assert not found.same_film
    assert found.catches[0].after_cycles == found.catches[0].molecules_then == ()
    assert found.fresh.OH_entered > 1.05 * found.OH_delivered


def test_only_the_window_from_rest() -> None:
    history = replace(run("argon"), marks=run("argon").marks[:2])
    assert repeating_span(history) == ((0, len(history.times) - 1), FROM_REST)
    found = catches(history, PROBE, longest_stay=0.0)
    assert found.window == FROM_REST
    assert found.fresh.OH_entered == pytest.approx(found.OH_delivered, rel=0.02)


def test_mixed_gas_is_refused() -> None:
    with pytest.raises(ValueError, match="resolved"):
        catches(follow(bubble("argon")), PROBE)


@pytest.mark.parametrize(("celsius", "printed"), [(5.0, 12.77), (25.0, 8.263), (40.0, 6.41)])
def test_oxygen_of_water_saturated_with_air(celsius: float, printed: float) -> None:
    """mg/L beside moist air of 1 atm: Benson and Krause 1984, Limnol. Oceanogr. 29, 620 (memory).

    Within 2 %: the table of Henry's constants is a compilation. Argon brings none.
    """
    found = dissolved_gases(bubble("air", 273.15 + celsius))["O2"] * 31.998
    assert found == pytest.approx(printed, rel=0.02)
    assert dissolved_gases(bubble("argon")) == {}
