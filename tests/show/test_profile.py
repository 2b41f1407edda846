"""The gas at the peak as a table: cells that fill the bubble, units in the names."""

from dataclasses import replace
from math import pi
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sonoyield import Protocol
from sonoyield.collapse import equations as eq
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.exchange import COVOLUME
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import CellRecord, History
from sonoyield.collapse.resolved import follow_resolved, mass_fractions
from sonoyield.describe.gas import GAS_CONSTANT
from sonoyield.expose.estimate import bubble_of, liquid_of
from sonoyield.show import profile

BENCH = {
    "drive": {"frequency": "355 kHz", "pressure": "2 bar"},
    "schedule": {"duration": "1 min"},
    "liquid": {"temperature": "25 degC", "volume": "100 mL"},
    "gas": {"mixture": "argon"},
    "bubbles": {"radius": "3 um", "number_density": "1e7 / m^3"},
}
CELLS = 12


@pytest.fixture(scope="module")
def bubble() -> Bubble:
    protocol = Protocol.from_dict(BENCH)
    return bubble_of(protocol, liquid_of(protocol))


@pytest.fixture(scope="module")
def resolved(bubble: Bubble) -> History:
    return follow_resolved(bubble, 1, Accuracy(tighten=0), cells=CELLS)


@pytest.fixture(scope="module")
def frame(resolved: History) -> pd.DataFrame:
    return profile.profile_frame(resolved)


def test_faces_of_a_gas_made_up_for_chosen_faces(bubble: Bubble) -> None:
    """n = p V / (R T + p b) per cell, the Noble-Abel gas solved for n, and back."""
    faces = 1e-6 * np.array([0.0, 0.3, 0.55, 0.7])
    temperature, pressure = np.array([6000.0, 4000.0, 500.0]), 1e9
    share = bubble.moles / bubble.moles.sum()
    covolume = float(share @ bubble.species[:, COVOLUME])
    volume = 4.0 / 3.0 * pi * np.diff(faces**3)
    amount = pressure * volume / (GAS_CONSTANT * temperature + pressure * covolume)
    row = bubble.at_rest()
    row[eq.RADIUS] = faces[-1]
    row[eq.TEMPERATURE] = amount @ temperature / amount.sum()
    moles = np.outer(amount, share)
    row[eq.MOLES : eq.MOLES + share.size] = moles.sum(axis=0)
    history = History(
        bubble,
        np.zeros(1),
        row[None],
        (0,),
        cells=CellRecord(np.array([0.0, 0.1, 0.5, 1.0]), temperature[None], moles[None]),
    )
    found = profile.profile_frame(history)
    assert found["r_inner_m"].to_numpy() == pytest.approx(faces[:-1], rel=1e-12)
    assert found["r_outer_m"].to_numpy() == pytest.approx(faces[1:], rel=1e-12)
    assert found["pressure_Pa"].to_numpy() == pytest.approx(pressure, rel=1e-12)
    inside = found["r_centre_m"] ** 3 - found["r_inner_m"] ** 3
    beyond = found["r_outer_m"] ** 3 - found["r_centre_m"] ** 3
    assert inside.to_numpy() == pytest.approx(beyond.to_numpy(), rel=1e-10)
    mass = amount * float(share @ bubble.phase.molar_mass)
    assert found["density_kg_m3"].to_numpy() == pytest.approx(mass / volume, rel=1e-12)


def test_cells_fill_the_bubble_at_its_peak(resolved: History, frame: pd.DataFrame) -> None:
    row = int(np.argmax(resolved.temperature))
    assert profile.peak_row(resolved) == row
    assert len(frame) == CELLS
    assert frame["r_inner_m"][0] == 0.0
    assert (frame["r_inner_m"][1:].to_numpy() == frame["r_outer_m"][:-1].to_numpy()).all()
    assert frame["r_outer_m"][CELLS - 1] == pytest.approx(resolved.radius[row], rel=1e-12)
    assert frame["pressure_Pa"].to_numpy() == pytest.approx(resolved.pressure[row], rel=1e-9)
    assert resolved.cells is not None
    assert frame["temperature_K"].to_numpy() == pytest.approx(resolved.cells.temperature[row])
    assert frame["temperature_K"][0] > resolved.temperature[row] > frame["temperature_K"][CELLS - 1]


def test_cells_hold_the_share_of_mass_that_the_solver_gives_them(frame: pd.DataFrame) -> None:
    """The solver moves the faces by mass; here the mass comes from the amounts."""
    shares = np.diff(mass_fractions(CELLS))
    assert frame["mass_fraction_of_gas"].to_numpy() == pytest.approx(shares, rel=1e-6)


def test_mole_fractions_are_shares(resolved: History, frame: pd.DataFrame) -> None:
    columns = [f"{name}_mole_fraction" for name in resolved.bubble.phase.species]
    assert list(frame.columns[7:]) == columns
    assert frame[columns].sum(axis=1).to_numpy() == pytest.approx(1.0, abs=1e-9)
    assert frame[columns].to_numpy().min() >= 0.0
    row = profile.peak_row(resolved)
    inside = resolved.moles[row] / resolved.moles[row].sum()
    assert resolved.cells is not None
    amounts = resolved.cells.moles[row].sum(axis=1)
    mean = amounts @ frame["OH_mole_fraction"] / amounts.sum()
    assert mean == pytest.approx(inside[resolved.bubble.phase.index("OH")], rel=1e-6)
    assert frame["OH_mole_fraction"][0] > 10.0 * frame["OH_mole_fraction"][CELLS - 1]


def test_the_peak_is_sought_in_the_windows(resolved: History) -> None:
    """A run that went on past its last window to a hotter moment does not count it."""
    beyond = resolved.states[-1:].copy()
    beyond[:, eq.TEMPERATURE] = 9e4
    longer = replace(
        resolved,
        times=np.append(resolved.times, resolved.times[-1] + 1e-6),
        states=np.concatenate([resolved.states, beyond]),
    )
    assert profile.peak_row(longer) == profile.peak_row(resolved)


def test_a_mixed_gas_is_one_cell(bubble: Bubble) -> None:
    history = follow(bubble)
    row = profile.peak_row(history)
    (one,) = profile.profile_frame(history).to_dict("records")
    assert one["r_outer_m"] == pytest.approx(history.radius[row], rel=1e-12)
    assert one["temperature_K"] == history.temperature[row]
    assert one["mass_fraction_of_gas"] == 1.0


def test_written_whole_and_read_back(
    resolved: History, frame: pd.DataFrame, tmp_path: Path
) -> None:
    profile.write_profile(resolved, tmp_path / "p.csv")
    profile.write_profile(resolved, tmp_path / "p.parquet")
    text = pd.read_csv(tmp_path / "p.csv")
    pd.testing.assert_frame_equal(text, frame, rtol=1e-14)
    pd.testing.assert_frame_equal(pd.read_parquet(tmp_path / "p.parquet"), frame, check_exact=True)
    assert sorted(one.name for one in tmp_path.iterdir()) == ["p.csv", "p.parquet"]


def test_no_folder_to_write_in(resolved: History, tmp_path: Path) -> None:
    path = tmp_path / "none" / "p.csv"
    with pytest.raises(FileNotFoundError) as caught:
        profile.write_profile(resolved, path)
    assert caught.value.filename == str(path)
