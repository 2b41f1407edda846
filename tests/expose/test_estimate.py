"""From a protocol to an estimate: what is handed on, and what the exposure follows from."""

from typing import Any

import pytest

from sonoyield import Estimate, Protocol, estimate
from sonoyield.collapse.follow import Accuracy
from sonoyield.expose.estimate import bubble_of, liquid_of

AVOGADRO = 6.02214076e23  # 1/mol, exact: SI brochure (2019)


def protocol(**changes: dict[str, Any]) -> Protocol:
    data: dict[str, Any] = {
        "drive": {"frequency": "355 kHz", "pressure": "1.2 bar"},
        "schedule": {"duration": "10 min", "pulse": {"length": "5 ms", "every": "50 ms"}},
        "liquid": {"temperature": "25 degC", "volume": "100 mL"},
        "gas": {"mixture": "argon"},
        "bubbles": {"radius": "3 um", "number_density": "1e9 / m^3"},
    }
    return Protocol.from_dict({key: data.get(key, {}) | changes.get(key, {}) for key in
                               (*data, *changes)})  # fmt: skip


@pytest.fixture(scope="module")
def result() -> Estimate:
    return estimate(protocol())


def test_exposure_follows_from_the_collapse(result: Estimate) -> None:
    """Worked by hand: 0.1 of 600 s, 355 000 a second, 1e9 bubbles per m3, 0.1 L."""
    assert result.counts is not None
    assert result.doses is not None
    delivered = result.counts["OH"].delivered
    dose = result.doses["OH"]
    collapses = 0.1 * 600 * 355e3
    assert delivered > 0.0
    assert dose.mol == pytest.approx(delivered / AVOGADRO * collapses * 1e9 * 1e-4, rel=1e-12)
    assert dose.mol_per_L == pytest.approx(dose.mol / 0.1, rel=1e-12)
    assert dose.mol_per_L_per_s == pytest.approx(dose.mol_per_L / 600, rel=1e-12)
    assert dose.mol_per_L_per_s_on == pytest.approx(10 * dose.mol_per_L_per_s, rel=1e-12)


def test_dissipated_energy_is_what_does_not_come_back(result: Estimate) -> None:
    assert result.energy is not None
    assert result.counts is not None
    assert result.doses is not None
    energy = result.energy
    dissipated = energy.viscous + energy.radiation + energy.heat + energy.carried
    expected = result.counts["OH"].delivered / AVOGADRO / dissipated
    assert result.doses["OH"].mol_per_J == pytest.approx(expected, rel=1e-12)


def test_oxidant_of_the_exposure(result: Estimate) -> None:
    assert result.doses is not None
    assert result.oxidant is not None
    weights = {"OH": 1, "H2O2": 2, "HO2": 1, "O": 2, "O3": 2}
    total = sum(weight * result.doses[name].mol for name, weight in weights.items())
    assert result.oxidant.mol == pytest.approx(total, rel=1e-12)


def test_more_bubbles_scale_the_exposure_only(result: Estimate) -> None:
    more = estimate(protocol(bubbles={"number_density": "3e9 / m^3"}))
    assert more.counts == result.counts
    assert more.doses is not None
    assert result.doses is not None
    assert more.doses["OH"].mol == pytest.approx(3 * result.doses["OH"].mol, rel=1e-12)


def test_bubble_of_the_protocol() -> None:
    model = {
        "vapour": False,
        "uptake": False,
        "excluded_volume": False,
        "accommodation": {"water": 0.3, "radicals": 0.2, "H2O2": 0.1},
    }
    one = protocol(model=model, gas={"mixture": {"XE": 0.25, "O2": 0.75}})
    bubble = bubble_of(one, liquid_of(one))
    assert (bubble.vapour, bubble.uptake, bubble.excluded_volume) == (False, False, False)
    assert bubble.mixture == {"XE": 0.25, "O2": 0.75}
    assert bubble.accommodation["water"] == 0.3
    assert bubble.accommodation["OH"] == 0.2
    assert bubble.accommodation["H2O2"] == 0.1
    assert (bubble.radius, bubble.frequency, bubble.pressure_amplitude) == (3e-6, 355e3, 1.2e5)


def test_without_uptake_nothing_is_delivered() -> None:
    one = estimate(protocol(model={"uptake": False}))
    assert one.counts is not None
    assert {name: count.delivered for name, count in one.counts.items()} == dict.fromkeys(
        one.counts, 0.0
    )


def test_no_sound_no_work() -> None:
    one = estimate(protocol(drive={"pressure": "0 bar"}))
    assert one.outcome.code == "no_inertial_collapse"
    assert one.collapse is not None
    assert one.collapse.peak_temperature_K == pytest.approx(298.15, abs=1e-6)
    assert one.collapse.max_radius_m == pytest.approx(3e-6, rel=1e-6)


def test_the_other_coupling_is_named() -> None:
    one = estimate(protocol(model={"coupling": "one_way", "interior": "mixed"}), both=True)
    assert one.coupling_difference is not None
    assert one.coupling_difference["other"] == "two_way"


def test_accuracy_asked_for_is_reported(result: Estimate) -> None:
    assert result.as_dict()["provenance"]["tolerance"] == 1e-6
    tight = estimate(protocol(), accuracy=Accuracy(relative=1e-7))
    assert tight.as_dict()["provenance"]["tolerance"] == 1e-7


def test_inputs_hold_every_default(result: Estimate) -> None:
    inputs = result.as_dict()["inputs"]
    assert inputs["model"]["coupling"] == "two_way"
    assert inputs["liquid"]["ambient_pressure"] == 101325.0
    assert inputs["liquid_properties"]["density"] == pytest.approx(997.05, rel=1e-4)  # IAPWS-95
    uptaken = {"OH", "H", "O", "HO2", "H2O2", "O3"}
    assert set(inputs["accommodation"]) == {"water", "radicals"} | uptaken
