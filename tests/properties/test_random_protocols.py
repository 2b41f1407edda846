"""Any valid protocol gives an estimate with an outcome; any invalid one is refused with exit 2."""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from typer.testing import CliRunner

from sonoyield import Protocol, estimate
from sonoyield.cli import app
from sonoyield.collapse.outcome import Code
from sonoyield.describe.liquid import liquid_state
from sonoyield.expose.estimate import Estimate

ATMOSPHERE = 101325.0
SPECIES = ("AR", "HE", "KR", "XE", "O2")
NAMES = ("argon", "helium", "krypton", "xenon", "oxygen")
OWN_ACCOMMODATION = ("water", "radicals", "OH", "H", "O", "HO2", "H2O2", "O3")
MORE_THAN_GAS_MAY_FILL = 0.0999  # of the liquid's volume; 0.1 is refused

# Nothing is assumed away: every draw is a protocol, so no more than 0 % is filtered.
LONG = settings(
    max_examples=200,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)


@st.composite
def protocols(draw: st.DrawFn) -> dict[str, Any]:
    """Any protocol inside the ranges and the rules, the pressure above the vapour's."""
    hertz = 10.0 ** draw(st.floats(4.0, 7.0))
    micron = 10.0 ** draw(st.floats(-1.0, 2.301))
    bar = draw(st.just(0.0) | st.floats(0.001, 30.0) | st.floats(-3.0, 1.477).map(lambda x: 10**x))
    most = min(1e18, MORE_THAN_GAS_MAY_FILL / (4.18879 * (micron * 1e-6) ** 3))
    data: dict[str, Any] = {
        "drive": {"frequency": f"{hertz!r} Hz", "pressure": f"{bar!r} bar"},
        "schedule": draw(schedules(hertz)),
        "liquid": draw(liquids()),
        "gas": {"mixture": draw(st.sampled_from(NAMES) | mixtures())},
        "bubbles": {
            "radius": f"{micron!r} um",
            "number_density": f"{draw(st.floats(1.0, most))!r} / m^3",
        },
        "model": draw(models()),
    }
    return data


@st.composite
def liquids(draw: st.DrawFn) -> dict[str, Any]:
    kind = draw(st.sampled_from(["water", "saline"]))
    salinity = draw(st.floats(0.0, 60.0)) if kind == "saline" else 0.0
    kelvin = draw(st.floats(273.15, 353.15))
    boils = liquid_state(kind, kelvin, salinity).saturation_pressure / ATMOSPHERE
    data = {
        "kind": kind,
        "temperature": f"{kelvin!r} K",
        "ambient_pressure": f"{draw(st.floats(max(0.1, boils * 1.001), 10.0))!r} atm",
        "volume": f"{draw(st.floats(1e-6, 1e9))!r} mL",
    }
    return data | ({"salinity": f"{salinity!r} g/L"} if kind == "saline" else {})


@st.composite
def schedules(draw: st.DrawFn, hertz: float) -> dict[str, Any]:
    shortest = max(1e-6, 1.0 / hertz) * 1.001
    every = draw(st.floats(shortest, 10.0))
    data: dict[str, Any] = {"duration": f"{draw(st.floats(every * 1.01, 2.5e6))!r} s"}
    if draw(st.booleans()):
        length = draw(st.floats(shortest, every))
        data["pulse"] = {"length": f"{length!r} s", "every": f"{every!r} s"}
    return data


@st.composite
def mixtures(draw: st.DrawFn) -> dict[str, float]:
    parts = draw(
        st.dictionaries(st.sampled_from(SPECIES), st.floats(0.001, 1.0), min_size=1, max_size=5)
    )
    return {name: part / sum(parts.values()) for name, part in parts.items()}


@st.composite
def models(draw: st.DrawFn) -> dict[str, Any]:
    switches = ("excluded_volume", "vapour", "uptake")
    shares = st.dictionaries(
        st.sampled_from(OWN_ACCOMMODATION), st.floats(0.001, 1.0), max_size=4
    )
    return {
        "coupling": draw(st.sampled_from(["two_way", "one_way"])),
        "collapses": draw(st.sampled_from([1, 1, 2, 3])),
        "accommodation": draw(shares),
    } | {name: draw(st.booleans()) for name in switches}
