"""Files of results and histories: whole or not at all, units in the names of columns."""

import json
import os
import stat
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sonoyield import Protocol, estimate
from sonoyield.collapse import equations as eq
from sonoyield.expose.result import Estimate
from sonoyield.show import files

TABLE: dict[str, Any] = {
    "title": 'a, "b"',
    "outcome": {"code": "ok"},
    "collapse": None,
    "warnings": ["one", "two"],
    "inputs": {"gas": {"mixture": {"AR": 1.0}}},
    "count": 3,
}


@pytest.fixture(scope="module")
def weak() -> Estimate:
    return estimate(
        Protocol.from_dict(
            {
                "drive": {"frequency": "355 kHz", "pressure": "0.5 bar"},
                "schedule": {"duration": "1 min"},
                "liquid": {"temperature": "25 degC", "volume": "100 mL"},
                "gas": {"mixture": "argon"},
                "bubbles": {"radius": "3 um", "number_density": "1e7 / m^3"},
            }
        )
    )


def test_flat() -> None:
    assert files.flat(TABLE) == {
        "title": 'a, "b"',
        "outcome.code": "ok",
        "collapse": None,
        "warnings": '["one", "two"]',
        "inputs.gas.mixture.AR": 1.0,
        "count": 3,
    }


@pytest.mark.parametrize("number", [float("nan"), float("inf"), float("-inf")])
def test_no_json_without_a_number(number: float) -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        files.to_json({"a": {"b": number}})


def test_result_in_three_formats(tmp_path: Path) -> None:
    for suffix in files.RESULT_SUFFIXES:
        files.write_result(TABLE, tmp_path / f"r{suffix}")
    assert json.loads((tmp_path / "r.json").read_text()) == TABLE
    row = pd.read_csv(tmp_path / "r.csv").iloc[0]
    assert (row["title"], row["count"]) == (TABLE["title"], 3)
    assert pd.isna(row["collapse"])
    assert len((tmp_path / "r.csv").read_text().splitlines()) == 2
    frame = pd.read_parquet(tmp_path / "r.parquet")
    assert len(frame) == 1
    assert frame["inputs.gas.mixture.AR"][0] == 1.0


def test_csv_keeps_every_digit(tmp_path: Path) -> None:
    number = 0.1 + 0.2
    files.write_result({"a": number}, tmp_path / "r.csv")
    assert float((tmp_path / "r.csv").read_text().splitlines()[1]) == number


@pytest.mark.parametrize("suffix", files.RESULT_SUFFIXES)
@pytest.mark.parametrize("there", [True, False])
def test_failing_write_leaves_what_was(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, suffix: str, there: bool
) -> None:
    path = tmp_path / f"r{suffix}"
    if there:
        path.write_text("before")

    def full(handle: int) -> None:  # noqa: ARG001
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OSError, match="No space left") as caught:
        files.write_result(TABLE, path)
    assert caught.value.filename == str(path)
    assert [one.name for one in tmp_path.iterdir()] == ([path.name] if there else [])
    assert not there or path.read_text() == "before"


def test_interrupted_write_leaves_what_was(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "r.json"
    path.write_text("before")

    def interrupted(self: Path, text: str) -> None:
        with self.open("w") as file:
            file.write(text[:5])
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(Path, "write_text", interrupted)
        with pytest.raises(KeyboardInterrupt):
            files.write_result(TABLE, path)
    assert path.read_text() == "before"
    assert list(tmp_path.iterdir()) == [path]


def test_no_folder(tmp_path: Path) -> None:
    path = tmp_path / "none" / "r.json"
    with pytest.raises(FileNotFoundError) as caught:
        files.write_result(TABLE, path)
    assert caught.value.filename == str(path)


def test_longest_name_that_the_disk_takes(tmp_path: Path) -> None:
    path = tmp_path / ("r" * 250 + ".json")
    files.write_result(TABLE, path)
    assert json.loads(path.read_text()) == TABLE


def test_earlier_file_is_replaced_with_usual_rights(tmp_path: Path) -> None:
    path, plain = tmp_path / "r.json", tmp_path / "plain"
    path.write_text("before" * 1000)
    plain.touch()
    files.write_result(TABLE, path)
    assert json.loads(path.read_text()) == TABLE
    assert stat.S_IMODE(path.stat().st_mode) == stat.S_IMODE(plain.stat().st_mode)


def test_history_frame(weak: Estimate) -> None:
    history = weak.history
    frame = files.history_frame(history)
    names = history.bubble.phase.species
    crossing = ["H", "H2O", "H2O2", "HO2", "O", "O3", "OH"]
    assert list(frame)[:5] == [
        "time_s", "radius_m", "wall_speed_m_s", "temperature_K", "pressure_Pa",
    ]  # fmt: skip
    assert list(frame)[5 : 5 + len(names)] == [f"{name}_gas_mol" for name in names]
    assert set(list(frame)[5 + len(names) :]) == {f"{name}_crossed_mol" for name in crossing}
    assert len(frame) == len(history.times)
    assert np.array_equal(frame["radius_m"], history.states[:, eq.RADIUS])
    water = names.index("H2O")
    assert np.array_equal(frame["H2O_gas_mol"], history.moles[:, water])
    assert np.array_equal(frame["H2O_crossed_mol"], history.crossed[:, water])


def test_history_begins_at_rest(weak: Estimate) -> None:
    """Young and Laplace: 1 atm + 2 x 0.07198 N/m / 3 um (surface tension: IAPWS R1-76)."""
    first = files.history_frame(weak.history).iloc[0]
    assert (first["time_s"], first["wall_speed_m_s"]) == (0.0, 0.0)
    assert first["temperature_K"] == pytest.approx(298.15, rel=1e-12)
    assert first["pressure_Pa"] == pytest.approx(101325 + 2 * 0.07198 / 3e-6, rel=1e-4)


@pytest.mark.parametrize("suffix", files.HISTORY_SUFFIXES)
def test_history_file(weak: Estimate, tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"h{suffix}"
    files.write_history(weak.history, path)
    frame = pd.read_csv(path) if suffix == ".csv" else pd.read_parquet(path)
    pd.testing.assert_frame_equal(frame, files.history_frame(weak.history), rtol=1e-15)
    assert list(tmp_path.iterdir()) == [path]
