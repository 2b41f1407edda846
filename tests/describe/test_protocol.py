"""Protocol files: what a good one gives, and the one line each bad one gets."""

import copy
import pickle
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from sonoyield.describe.errors import ProtocolError
from sonoyield.describe.liquid import liquid_state
from sonoyield.describe.protocol import Protocol

HERE = Path(__file__).parent
BAD = sorted((HERE / "bad").glob("*.toml"))
EXAMPLES = sorted((HERE.parents[1] / "examples").glob("*.toml"))
QUANTITIES = {
    "drive.frequency": ("kHz", 1e3, "1 Hz"),
    "drive.pressure": ("bar", 1e5, "31 bar"),
    "schedule.duration": ("s", 1.0, "31 day"),
    "liquid.temperature": ("K", 1.0, "81 degC"),
    "liquid.ambient_pressure": ("atm", 101325.0, "11 atm"),
    "liquid.volume": ("mL", 1e-6, "2000 m^3"),
    "bubbles.radius": ("um", 1e-6, "300 um"),
    "bubbles.number_density": ("/ m^3", 1.0, "2e18 / m^3"),
}


def minimal() -> dict[str, Any]:
    return {
        "drive": {"frequency": "355 kHz", "pressure": "2 bar"},
        "schedule": {"duration": "10 min"},
        "liquid": {"temperature": "25 degC", "volume": "100 mL"},
        "gas": {"mixture": "argon"},
        "bubbles": {"radius": "3 um", "number_density": "1e9 / m^3"},
    }


def refusal(data: Any) -> ProtocolError:
    with pytest.raises(ProtocolError) as caught:
        Protocol.from_dict(data, file="bench.toml")
    return caught.value


def test_good_file_in_si() -> None:
    values = Protocol.load(HERE / "good.toml").dump()
    assert values == {
        "title": "Every key of this version",
        "drive": {"frequency": 355e3, "pressure": 2e5},
        "schedule": {"duration": 600.0, "pulse": {"length": 5e-3, "every": 50e-3}},
        "liquid": {
            "kind": "saline",
            "salinity": 9.0,
            "temperature": 298.15,
            "ambient_pressure": 101325.0,
            "volume": 1e-4,
            # terephthalate's row; iodide's row but for its diffusivity; the default diffusivity
            "scavengers": {
                "terephthalate": {"k": 4e6, "concentration": 2.0, "diffusivity": 7e-10},
                "iodide": {"k": 1.1e7, "concentration": 0.01, "diffusivity": 2e-9},
                "buffer.B-2": {"k": 5e6, "concentration": 10.0, "diffusivity": 1e-9},
            },
        },
        "gas": {"mixture": {"AR": 0.8, "O2": 0.2}},
        "bubbles": {"radius": 3e-6, "number_density": 1e9},
        "field": {"kind": "uniform"},
        "model": {
            "radial": "keller_miksis",
            "interior": "resolved",
            "cells": 24,
            "film": True,
            "wall": "thermal_layer",
            "temperature_jump": True,
            "oxygen_atom": "water",
            "coupling": "two_way",
            "mechanism": "auto",
            "excluded_volume": True,
            "vapour": True,
            "uptake": True,
            "accommodation": {"water": 0.35, "radicals": 0.4, "H2O2": 0.1},
            "collapses": 3,
        },
    }


def test_mixed_has_no_film_and_may_be_coupled_one_way() -> None:
    model = Protocol.load(HERE / "good_mixed.toml").model
    assert (model.interior, model.coupling, model.film) == ("mixed", "one_way", False)
    data = minimal() | {"model": {"interior": "mixed"}}
    assert not Protocol.from_dict(data).model.film
    assert data["model"] == {"interior": "mixed"}


def test_defaults() -> None:
    protocol = Protocol.from_dict(minimal())
    assert protocol.title == ""
    assert protocol.schedule.pulse is None
    assert protocol.schedule.duty == 1.0
    assert (protocol.liquid.kind, protocol.liquid.salinity) == ("water", 0.0)
    assert protocol.liquid.ambient_pressure == 101325.0
    assert protocol.gas.mixture == {"AR": 1.0}
    model = protocol.dump()["model"]
    assert model["accommodation"] == {"water": 0.4, "radicals": 0.4}
    assert (model["radial"], model["interior"]) == ("keller_miksis", "resolved")
    assert (model["cells"], model["film"], model["oxygen_atom"]) == (None, True, "persists")
    assert (model["wall"], model["temperature_jump"]) == ("liquid_temperature", False)
    assert protocol.liquid.scavengers == {}
    assert (model["coupling"], model["mechanism"], model["collapses"]) == ("two_way", "auto", 1)
    assert model["excluded_volume"] and model["vapour"] and model["uptake"]


def test_saline_default_and_duty_and_accommodation() -> None:
    data = minimal()
    data["liquid"]["kind"] = "saline"
    data["schedule"]["pulse"] = {"length": "5 ms", "every": "50 ms"}
    data["model"] = {"accommodation": {"radicals": 0.2, "H2O2": 0.1}}
    protocol = Protocol.from_dict(data)
    assert protocol.liquid.salinity == 9.0
    assert protocol.schedule.duty == pytest.approx(0.1, rel=1e-12)
    accommodation = protocol.model.accommodation
    assert [accommodation.of(name) for name in ("H2O", "OH", "H2O2")] == [0.4, 0.2, 0.1]


SINGLE = {"argon": "AR", "Argon": "AR", "Ar": "AR", "helium": "HE", "krypton": "KR", "xenon": "XE"}
SINGLE |= {"oxygen": "O2", "hydrogen": "H2", "h2": "H2", "nitrogen": "N2", "N2": "N2"}


@pytest.mark.parametrize("name", SINGLE)
def test_single_gases(name: str) -> None:
    data = minimal()
    data["gas"]["mixture"] = name
    assert Protocol.from_dict(data).gas.mixture == {SINGLE[name]: 1.0}


def test_air_is_dry_air_without_its_carbon_dioxide() -> None:
    """Volume per cent of IUPAC Gold Book C01214, which leave 0.036 % to CO2 and traces."""
    data = minimal()
    data["gas"]["mixture"] = "air"
    air = Protocol.from_dict(data).gas.mixture
    assert sum(air.values()) == pytest.approx(1.0, abs=1e-12)
    for name, per_cent in {"N2": 78.084, "O2": 20.946, "AR": 0.934}.items():
        assert 100 * air[name] == pytest.approx(per_cent * 100 / 99.964, rel=1e-9)


def test_air_in_a_mixture() -> None:
    data = minimal()
    data["gas"]["mixture"] = {"air": 0.5, "argon": 0.5}
    mixture = Protocol.from_dict(data).gas.mixture
    assert list(mixture) == ["N2", "O2", "AR"]
    assert sum(mixture.values()) == pytest.approx(1.0, abs=1e-12)
    assert mixture["AR"] == pytest.approx(0.5 + 0.00467, abs=1e-5)


def test_mechanism_by_name() -> None:
    data = minimal()
    data["model"] = {"mechanism": "h2o_o2_n2"}
    assert Protocol.from_dict(data).model.mechanism == "h2o_o2_n2"
    data["model"] = {"accommodation": {"NO": 0.01, "radicals": 0.3}}
    accommodation = Protocol.from_dict(data).model.accommodation
    assert [accommodation.of(name) for name in ("NO", "NO2")] == [0.01, 0.3]


def test_mixture_is_normalised() -> None:
    data = minimal()
    data["gas"]["mixture"] = {"xenon": 0.3, "o2": 0.7 + 5e-7, "HE": 0}
    mixture = Protocol.from_dict(data).gas.mixture
    assert list(mixture) == ["O2", "XE"]
    assert sum(mixture.values()) == pytest.approx(1.0, abs=1e-15)


def test_no_sound_is_allowed() -> None:
    data = minimal()
    data["drive"]["pressure"] = "0 bar"
    assert Protocol.from_dict(data).drive.pressure == 0.0


def test_frozen_and_copied() -> None:
    protocol = Protocol.from_dict(minimal())
    with pytest.raises(ValidationError):
        protocol.drive.pressure = 1.0
    assert pickle.loads(pickle.dumps(protocol)) == protocol


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_examples_load(path: Path) -> None:
    model = Protocol.load(path).model
    assert (model.interior, model.film) == ("resolved", True)


@pytest.mark.parametrize("cells", [8, 80])
def test_ends_of_the_range_of_cells(cells: int) -> None:
    assert Protocol.from_dict(minimal() | {"model": {"cells": cells}}).model.cells == cells


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_bad_file(path: Path) -> None:
    expected = path.read_text("utf-8").splitlines()[0].removeprefix("# expect: ")
    with pytest.raises(ProtocolError) as caught:
        Protocol.load(path)
    text = str(caught.value)
    assert expected in text
    assert text.startswith(f"{path}: ")
    assert "\n" not in text


def test_error_fields() -> None:
    data = minimal()
    data["drive"]["frequency"] = "355"
    error = refusal(data)
    assert (error.file, error.key, error.value) == ("bench.toml", "drive.frequency", "355")
    assert error.allowed == '10 kHz to 10 MHz, e.g. "355 kHz"'
    assert str(error) == (
        'bench.toml: drive.frequency = "355": a unit is due; '
        'allowed 10 kHz to 10 MHz, e.g. "355 kHz"'
    )
    assert str(pickle.loads(pickle.dumps(error))) == str(error)


def test_missing_file(tmp_path: Path) -> None:
    with pytest.raises(ProtocolError, match="there is no such file"):
        Protocol.load(tmp_path / "none.toml")


def test_folder(tmp_path: Path) -> None:
    with pytest.raises(ProtocolError, match="this is a folder"):
        Protocol.load(tmp_path)


def test_impossible_name() -> None:
    with pytest.raises(ProtocolError, match="cannot be read"):
        Protocol.load("a\0b")


@pytest.mark.parametrize(
    ("content", "fragment"),
    [
        (b"[drive\n", "broken TOML: "),
        (b"[drive]\n[drive]\n", "broken TOML: "),
        (b'title = "\xff\xfe"\n', "not UTF-8 text at byte 9"),
        (b"x = " + b"[" * 50_000, "nested too deep"),
        (b"x = " + b"9" * 5_000, "a number too long"),
        (b"#" * 1_000_001, "too large for a protocol"),
        (b"", "drive: missing"),
    ],
)
def test_broken_file(tmp_path: Path, content: bytes, fragment: str) -> None:
    path = tmp_path / "broken.toml"
    path.write_bytes(content)
    with pytest.raises(ProtocolError) as caught:
        Protocol.load(path)
    assert fragment in str(caught.value)
    assert "\n" not in str(caught.value)


def test_byte_order_mark_and_line_ends_of_other_systems(tmp_path: Path) -> None:
    path = tmp_path / "bench.toml"
    text = (HERE / "good.toml").read_text("utf-8").replace("\n", "\r\n")
    path.write_bytes(b"\xef\xbb\xbf" + text.encode("utf-8"))
    assert Protocol.load(path) == Protocol.load(HERE / "good.toml")


@pytest.mark.parametrize(
    "value",
    ["a\nb", 10**6000, float("nan"), "x" * 500, {"a": [1, None]}, []],
    ids=lambda value: type(value).__name__,
)
def test_any_value_is_shown_on_one_line(value: object) -> None:
    data = minimal()
    data["model"] = {"accommodation": {"water": value}}
    text = str(refusal(data))
    assert "model.accommodation.water" in text
    assert "\n" not in text
    assert len(text) < 300


@pytest.mark.parametrize("data", [None, [], "x", 3])
def test_not_a_table(data: object) -> None:
    assert "a table of tables is due" in str(refusal(data))


def test_light_import() -> None:
    heavy = "{'cantera', 'scipy', 'pandas', 'numba', 'pint', 'numpy'}"
    code = f"import sys, sonoyield.describe.protocol as _; print({heavy} & set(sys.modules))"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout.strip() == "set()"


def resolved() -> st.SearchStrategy[dict[str, Any]]:
    """Choices that go with the resolved interior and its film, each given or left out."""
    return st.fixed_dictionaries(
        {},
        optional={
            "interior": st.just("resolved"),
            "cells": st.integers(8, 80),
            "film": st.just(True),
            "wall": st.sampled_from(["liquid_temperature", "thermal_layer"]),
            "temperature_jump": st.booleans(),
            "oxygen_atom": st.sampled_from(["persists", "water"]),
            "coupling": st.just("two_way"),
        },
    )


def mixed() -> st.SearchStrategy[dict[str, Any]]:
    """Choices that go with the mixed interior."""
    return st.fixed_dictionaries(
        {"interior": st.just("mixed")},
        optional={
            "film": st.just(False),
            "coupling": st.sampled_from(["two_way", "one_way"]),
        },
    )


@st.composite
def valid(draw: st.DrawFn) -> dict[str, Any]:
    """Any protocol inside the ranges and the rules, made so rather than filtered."""
    kind = draw(st.sampled_from(["water", "saline"]))
    salinity = draw(st.floats(0.0, 60.0)) if kind == "saline" else 0.0
    kelvin = draw(st.floats(273.15, 353.15))
    lowest = max(0.1, liquid_state(kind, kelvin, salinity).saturation_pressure / 101325 * 1.001)
    hertz = 10.0 ** draw(st.floats(4.0, 7.0))
    micron = 10.0 ** draw(st.floats(-1.0, 2.3))
    most = min(1e18, 0.0999 / (4.18879 * (micron * 1e-6) ** 3))
    shortest = max(1e-6, 1.0 / hertz) * 1.001
    every = draw(st.floats(shortest, 10.0))
    length = draw(st.floats(shortest, every))
    duration = draw(st.floats(every * 1.01, 2.5e6))
    shares = draw(
        st.dictionaries(
            st.sampled_from(["AR", "HE", "KR", "XE", "O2", "N2", "H2", "air"]),
            st.floats(0.01, 1.0),
        )
    )
    total = sum(shares.values())
    data: dict[str, Any] = {
        "drive": {
            "frequency": f"{hertz / 1e3!r} kHz",
            "pressure": f"{draw(st.just(0.0) | st.floats(0.001, 30.0))!r} bar",
        },
        "schedule": {"duration": f"{duration!r} s"},
        "liquid": {
            "kind": kind,
            "temperature": f"{kelvin!r} K",
            "ambient_pressure": f"{draw(st.floats(lowest, 10.0))!r} atm",
            "volume": f"{draw(st.floats(1e-6, 1e9))!r} mL",
        },
        "gas": {"mixture": {k: v / total for k, v in shares.items()} if shares else "argon"},
        "bubbles": {
            "radius": f"{micron!r} um",
            "number_density": f"{draw(st.floats(1.0, most))!r} / m^3",
        },
        "model": {"collapses": draw(st.integers(1, 1000)), "vapour": draw(st.booleans())},
    }
    data["model"] |= draw(resolved() | mixed())
    if kind == "saline":
        data["liquid"]["salinity"] = f"{salinity!r} g/L"
    if draw(st.booleans()):
        data["schedule"]["pulse"] = {"length": f"{length!r} s", "every": f"{every!r} s"}
    return data


@settings(max_examples=200, deadline=None)  # the first loads pint
@given(valid())
def test_any_valid_protocol_loads(data: dict[str, Any]) -> None:
    before = copy.deepcopy(data)
    values = Protocol.from_dict(data).dump()
    assert data == before
    for key, (_, size, _) in QUANTITIES.items():
        section, name = key.split(".")
        number = float(data[section][name].split()[0])
        assert values[section][name] == pytest.approx(number * size, rel=1e-12)
    assert values["model"]["film"] == (values["model"]["interior"] == "resolved")


@settings(max_examples=200, deadline=None)  # the first loads pint
@given(valid(), st.sampled_from(sorted(QUANTITIES)), st.integers(0, 3))
def test_any_fault_is_named(data: dict[str, Any], key: str, fault: int) -> None:
    section, name = key.split(".")
    text = data[section][name]
    if fault == 0:  # the unit is stripped
        data[section][name] = text.split()[0]
    elif fault == 1:  # the unit is stripped and the number bare
        data[section][name] = float(text.split()[0])
    elif fault == 2:  # the key is misspelt
        data[section][name[:-1] + "x"] = data[section].pop(name)
        key = f"{section}.{name[:-1]}x"
    else:
        data[section][name] = QUANTITIES[key][2]
    error = refusal(data)
    assert error.key == key
    assert f"bench.toml: {key} = " in str(error)
    if fault == 2:
        assert f"did you mean {section}.{name}?" in str(error)
