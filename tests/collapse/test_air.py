"""Air and other mixtures with nitrogen: what is taken up, what is reported, that it balances."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from sonoyield import Protocol
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.exchange import CROSSES, SURFACE
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.yields import collapse_of, counts_of
from sonoyield.describe.gas import ABSORBED
from sonoyield.expose.estimate import bubble_of, estimate, liquid_of

EXAMPLES = Path(__file__).resolve().parents[2] / "examples"
NITROGEN = ("NO", "NO2", "HONO", "HONO2", "N2O")


def described(gas: str = "air", **model: Any) -> Protocol:
    return Protocol.from_dict(
        {
            "drive": {"frequency": "355 kHz", "pressure": "2 bar"},
            "schedule": {"duration": "10 min"},
            "liquid": {"temperature": "25 degC", "volume": "100 mL"},
            "gas": {"mixture": gas},
            "bubbles": {"radius": "3 um", "number_density": "1e7 / m^3"},
            "model": model,
        }
    )


def bubble(gas: str = "air", **model: Any) -> Bubble:
    protocol = described(gas, **model)
    return bubble_of(protocol, liquid_of(protocol))


def test_what_crosses_the_wall() -> None:
    one = bubble()
    crossing = {one.phase.species[k] for k in one.crossing}
    assert crossing == {"H2O", *ABSORBED}
    assert not crossing & {"N2", "O2", "H2", "AR"}
    held = one.species[:, CROSSES] > 0.0
    assert held.sum() == len(ABSORBED) + 1


def test_accommodation_of_a_nitrogen_species() -> None:
    usual, slow = bubble(), bubble(accommodation={"NO": 0.01})
    nitric, other = usual.phase.index("NO"), usual.phase.index("NO2")
    assert slow.species[nitric, SURFACE] == pytest.approx(40 * usual.species[nitric, SURFACE])
    assert slow.species[other, SURFACE] == usual.species[other, SURFACE]


def test_the_example_in_air_balances_and_reports_nitrogen() -> None:
    result = estimate(Protocol.load(EXAMPLES / "bench_355kHz_air.toml"))
    assert result.outcome.code.has_numbers
    assert result.balance.element_error < 1e-9
    assert result.counts is not None and set(NITROGEN) <= set(result.counts)
    argon = estimate(Protocol.load(EXAMPLES / "bench_355kHz_argon.toml"))
    assert argon.counts is not None and not set(NITROGEN) & set(argon.counts)
    assert result.as_dict()["inputs"]["mechanism"]["name"] == "h2o_o2_n2"
    assert argon.as_dict()["inputs"]["mechanism"]["name"] == "h2o_o2"


@pytest.mark.parametrize("gas", ["air", "nitrogen"])
def test_the_split_does_not_show(gas: str) -> None:
    one = bubble(gas)
    split, whole = follow(one), follow(one, accuracy=Accuracy(split=False))
    assert collapse_of(split).peak_temperature_K == pytest.approx(
        collapse_of(whole).peak_temperature_K, abs=1.0
    )
    many = counts_of(whole)["OH"].delivered
    assert many > 1e3
    assert counts_of(split)["OH"].delivered == pytest.approx(many, rel=0.01)


def test_hydrogen_and_oxygen_that_ignite_below_the_hand_over() -> None:
    """The compiled stage hands gas from rest to the reactor at 2000 K; detonating gas may react
    sooner, and does not do so by enough to show."""
    fuel = replace(bubble("argon"), mixture={"H2": 0.2, "O2": 0.1, "AR": 0.7})
    split, whole = follow(fuel), follow(fuel, accuracy=Accuracy(split=False))
    for name in ("OH", "H2O2", "HO2"):
        many = counts_of(whole)[name].delivered
        assert many > 1e4
        assert counts_of(split)[name].delivered == pytest.approx(many, rel=0.01)


def test_both_mechanisms_tell_the_same_of_argon() -> None:
    """The nitrogen mechanism holds all reactions of the other: without nitrogen nothing changes."""
    plain = counts_of(follow(bubble("argon")))
    more = counts_of(follow(bubble("argon", mechanism="h2o_o2_n2")))
    for name in ("OH", "H2O2", "H", "O"):
        assert more[name].delivered == pytest.approx(plain[name].delivered, rel=1e-3)
    assert all(more[name].peak < 1e-3 for name in NITROGEN)


def test_closure_in_air_and_hydrogen() -> None:
    for gas in ("air", "hydrogen"):
        closure = balance(follow(bubble(gas)))
        assert closure.closed
        assert np.isfinite(closure.energy_error)
