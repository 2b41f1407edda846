"""What the result says of thermo ranges and ionisation, for two hot bubbles of xenon at 1 MHz."""

from __future__ import annotations

import json
from functools import cache

import pytest

from sonoyield import Protocol, estimate
from sonoyield.collapse.ionisation import ionisation_temperature
from sonoyield.collapse.outcome import Code
from sonoyield.expose.result import Estimate


@cache
def hot(vapour: bool) -> Estimate:
    return estimate(
        Protocol.model_validate({
            "drive": {"frequency": "1 MHz", "pressure": "5 bar"},
            "schedule": {"duration": "1 min"},
            "liquid": {"kind": "water", "temperature": "5 degC", "volume": "1 mL"},
            "gas": {"mixture": {"XE": 1.0}},
            "bubbles": {"radius": "1 um", "number_density": "1e9 / m^3"},
            "model": {"vapour": vapour},
        })
    )  # fmt: skip


def test_wet_bubble_is_above_the_range_of_steam() -> None:
    result = hot(vapour=True)
    assert result.outcome.code is Code.OUT_OF_RANGE
    table = {one["species"]: one for one in result.as_dict()["thermo_range"]}
    assert {"H2O", "HO2", "H2O2", "O3"} == set(table)
    steam = table["H2O"]
    assert steam["limit_K"] == 6000.0
    assert 1e-3 < steam["mean_share"] < steam["largest_share"] < 0.2
    assert f"H2O is above the 6000 K of its thermo source for {steam['time_s']:.2g} s" in " ".join(
        result.warnings
    )
    assert not any(warning.startswith(("HO2", "O3", "H2O2")) for warning in result.warnings)
    json.dumps(result.as_dict(), allow_nan=False)


def test_wet_bubble_is_too_cool_to_ionise() -> None:
    """Xenon at that density ionises by one per cent near 13 000 K."""
    result = hot(vapour=True)
    assert result.ionisation is not None and not result.ionisation.matters
    density = result.ionisation.number_density_per_m3
    xenon = ionisation_temperature(density, {"XE": 1.0})
    assert result.ionisation.onset_temperature_K == pytest.approx(xenon, rel=0.1)
    assert not any("onisation" in warning for warning in result.warnings)


def test_dry_bubble_would_ionise_and_says_so() -> None:
    result = hot(vapour=False)
    ions = result.as_dict()["ionisation"]
    assert ions["peak_temperature_K"] > ions["onset_temperature_K"] > 10000.0
    (told,) = (one for one in result.warnings if one.startswith("Ionisation is not modelled"))
    assert f"{ions['onset_temperature_K']:.0f} K" in told
    assert f"{100 * ions['ionised_share']:.2g} %" in told
    assert result.thermo_range == ()  # xenon's source reaches 20000 K
