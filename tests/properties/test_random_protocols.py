"""Any valid protocol gives an estimate with an outcome; any invalid one is refused with exit 2."""

import json
import time
from collections import Counter
from collections.abc import Callable, Iterator
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from typer.testing import CliRunner

from sonoyield import Protocol, estimate
from sonoyield.cli import app
from sonoyield.collapse.outcome import Code
from sonoyield.describe.liquid import liquid_state
from sonoyield.targets import BAD_INPUT

ATMOSPHERE = 101325.0  # Pa
SPECIES = ("AR", "HE", "KR", "XE", "O2", "N2", "H2")
NAMES = ("argon", "helium", "krypton", "xenon", "oxygen", "nitrogen", "hydrogen", "air")
ACCOMMODATION = ("water", "radicals", "OH", "H", "O", "HO2", "H2O2", "O3")
MOST_GAS = 0.0999  # of the liquid's volume; 0.1 is the limit
LEAST_SHARE_WITH_NUMBERS = 0.9  # the rest take the step limit or leave the ledger open

# Protocols are built inside the rules: nothing is drawn and thrown away.
RANDOM = settings(
    max_examples=200,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)


@st.composite
def protocols(draw: st.DrawFn) -> dict[str, Any]:
    """Any protocol inside the ranges and the rules."""
    hertz = draw(logarithmic(4.0, 7.0))
    micron = draw(logarithmic(-1.0, 2.301))
    bar = draw(st.just(0.0) | st.floats(0.001, 30.0) | logarithmic(-3.0, 1.477))
    most = min(1e18, MOST_GAS / (4.18879 * (micron * 1e-6) ** 3))
    return {
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


def logarithmic(low: float, high: float) -> st.SearchStrategy[float]:
    """Numbers between ten to the powers ``low`` and ``high``."""
    return st.floats(low, high).map(lambda power: 10.0**power)


@st.composite
def liquids(draw: st.DrawFn) -> dict[str, Any]:
    """Water or saline under a pressure above its vapour's."""
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
    """Continuous or pulsed, no pulse shorter than a period."""
    shortest = max(1e-6, 1.0 / hertz) * 1.001
    every = draw(st.floats(shortest, 10.0))
    data: dict[str, Any] = {"duration": f"{draw(st.floats(every * 1.01, 2.5e6))!r} s"}
    if draw(st.booleans()):
        length = draw(st.floats(shortest, every))
        data["pulse"] = {"length": f"{length!r} s", "every": f"{every!r} s"}
    return data


@st.composite
def mixtures(draw: st.DrawFn) -> dict[str, float]:
    """Shares of up to five gases."""
    parts = draw(
        st.dictionaries(st.sampled_from(SPECIES), st.floats(0.001, 1.0), min_size=1, max_size=5)
    )
    return {name: part / sum(parts.values()) for name, part in parts.items()}


@st.composite
def models(draw: st.DrawFn) -> dict[str, Any]:
    """Both couplings, every switch, some accommodation coefficients, one to three collapses."""
    shares = st.dictionaries(st.sampled_from(ACCOMMODATION), st.floats(0.001, 1.0), max_size=4)
    return {
        "interior": "mixed",
        "coupling": draw(st.sampled_from(["two_way", "one_way"])),
        "collapses": draw(st.sampled_from([1, 1, 2, 3])),
        "accommodation": draw(shares),
    } | {name: draw(st.booleans()) for name in ("excluded_volume", "vapour", "uptake")}


@pytest.mark.slow
def test_any_valid_protocol_gives_an_estimate(capfd: pytest.CaptureFixture[str]) -> None:
    outcomes: Counter[str] = Counter()
    slowest: list[tuple[float, str]] = []

    @RANDOM
    @given(protocols())
    def each(data: dict[str, Any]) -> None:
        began = time.perf_counter()
        outcomes[judged(data)] += 1
        slowest.append((time.perf_counter() - began, json.dumps(data)))

    each()
    with capfd.disabled():
        print(f"\n{dict(outcomes)}; slowest {max(slowest)}")
    with_numbers = sum(n for code, n in outcomes.items() if Code(code).has_numbers)
    assert with_numbers >= LEAST_SHARE_WITH_NUMBERS * outcomes.total()


def judged(data: dict[str, Any]) -> str:
    """Code of the outcome of one protocol, after looking through its result."""
    result = estimate(Protocol.from_dict(data))
    table = json.loads(json.dumps(result.as_dict(), allow_nan=False))
    assert table["outcome"]["sentence"].endswith(".")
    amounts = [*numbers(table["per_collapse"]), *numbers(table["per_exposure"])]
    amounts += numbers({key: table["oxidant"][key] for key in ("mol", "mol_per_L")})
    if result.outcome.code.has_numbers:
        collapse = table["collapse"]
        assert len(amounts) > 40
        assert min(amounts) >= 0.0
        assert collapse["peak_temperature_K"] > 0.0
        assert 0.0 < collapse["min_radius_m"] <= collapse["max_radius_m"]
        assert 0.0 <= collapse["vapour_fraction_at_peak"] <= 1.0
        assert table["balance"]["element_error"] <= 1e-9
        assert table["balance"]["energy_error"] <= 1e-5
    else:
        assert amounts == []
        assert table["collapse"] is None
    return str(table["outcome"]["code"])


def numbers(table: Any) -> Iterator[float]:
    """Every number in nested tables."""
    if isinstance(table, dict):
        for value in table.values():
            yield from numbers(value)
    elif isinstance(table, (int, float)):
        yield table


Fault = Callable[[dict[str, Any]], object]
FAULTS: dict[str, Fault] = {
    "drive.frequency": lambda data: data["drive"].update(frequency="355"),
    "drive.pressure": lambda data: data["drive"].update(pressure=2.0),
    "drive.freqency": lambda data: data["drive"].update(freqency="355 kHz"),
    "drive": lambda data: data.pop("drive"),
    "drive.second": lambda data: data["drive"].update(second={"frequency": "710 kHz"}),
    "bubble": lambda data: data.update(bubble=data["bubbles"]),
    "bubbles.radius": lambda data: data["bubbles"].update(radius="3 mm"),
    "bubbles.number_density": lambda data: data["bubbles"].update(number_density="1e19 / m^3"),
    "gas.mixture": lambda data: data["gas"].update(mixture="ozone"),
    "gas.mixture.CO2": lambda data: data["gas"].update(mixture={"AR": 0.5, "CO2": 0.5}),
    "liquid.temperature": lambda data: data["liquid"].update(temperature="25"),
    "liquid.ambient_pressure": lambda data: data["liquid"].update(ambient_pressure="11 atm"),
    "liquid.volume": lambda data: data["liquid"].pop("volume"),
    "liquid.salinity": lambda data: data["liquid"].update(kind="saline", salinity="61 g/L"),
    "schedule.duration": lambda data: data["schedule"].update(duration="0.5 us"),
    "schedule.pulse.length": lambda data: data["schedule"].update(
        duration="1 h", pulse={"length": "60 ms", "every": "50 ms"}
    ),
    "model.uptake": lambda data: data["model"].update(uptake="yes"),
    "model.collapses": lambda data: data["model"].update(collapses=0),
    "model.coupling": lambda data: data["model"].update(coupling="both"),
    "model.accommodation.OH": lambda data: data["model"].update(accommodation={"OH": float("nan")}),
}


@RANDOM
@given(data=protocols(), key=st.sampled_from(sorted(FAULTS)))
def test_any_invalid_protocol_exits_2(
    tmp_path_factory: pytest.TempPathFactory, data: dict[str, Any], key: str
) -> None:
    FAULTS[key](data)
    path = tmp_path_factory.getbasetemp() / "invalid.toml"
    path.write_text("\n".join(f"{name} = {toml(part)}" for name, part in data.items()))
    result = CliRunner().invoke(app, ["estimate", str(path)])
    assert result.exit_code == BAD_INPUT
    assert result.stdout == ""
    assert result.stderr.count("\n") == 1
    assert result.stderr.startswith(f"error: {path}: {key}")


def toml(value: Any) -> str:
    """A value as TOML on one line."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {toml(part)}" for key, part in value.items()) + "}"
    return repr(value) if isinstance(value, float) else json.dumps(value)
