"""Mechanisms of the user's own: Cantera's shipped files, whole, altered and broken.

From outside: Cantera evaluates the same thermo itself; ``h2o2.yaml`` is, by its own header, the
hydrogen-oxygen part of GRI-Mech 3.0, so both must tell the same of an argon bubble.
"""

from __future__ import annotations

import hashlib
import re
import shutil
from math import pi
from pathlib import Path
from typing import Any

import cantera as ct
import numpy as np
import pytest
from typer.testing import CliRunner

from sonoyield import Protocol, ProtocolError, estimate
from sonoyield.cli import app
from sonoyield.collapse.properties import heat_capacity_and_enthalpy
from sonoyield.describe.gas import AVOGADRO, load_phase, phase_for

DATA = Path(ct.__file__).parent / "data"
SHIPPED = Path(load_phase("h2o_o2").path).parent
PROTOCOL = """
[drive]
frequency = "355 kHz"
pressure = "2 bar"
[schedule]
duration = "10 min"
[liquid]
temperature = "25 degC"
volume = "100 mL"
[gas]
mixture = "{gas}"
[bubbles]
radius = "3 um"
number_density = "1e7 / m^3"
[model]
mechanism = "{mechanism}"
"""


def protocol_file(folder: Path, mechanism: str, gas: str = "argon") -> Path:
    path = folder / "bench.toml"
    path.write_text(PROTOCOL.format(gas=gas, mechanism=mechanism), "utf-8")
    return path


def result(folder: Path, mechanism: str, gas: str = "argon") -> dict[str, Any]:
    return estimate(Protocol.load(protocol_file(folder, mechanism, gas))).as_dict()


def altered(folder: Path, *changes: tuple[str, str], source: Path = DATA / "h2o2.yaml") -> Path:
    """A copy of a mechanism with texts replaced by pattern; each must be found."""
    text = source.read_text("utf-8")
    for pattern, new in changes:
        text, found = re.subn(pattern, new, text)
        assert found, pattern
    path = folder / "mine.yaml"
    path.write_text(text, "utf-8")
    return path


# --- thermo, covolumes, transport ---------------------------------------------------------


@pytest.mark.parametrize("name", ["h2o2.yaml", "gri30.yaml"])
@pytest.mark.parametrize("temperature", [200.0, 300.0, 999.9, 1000.1, 2500.0, 6000.0])
def test_seven_coefficients_become_nine(name: str, temperature: float) -> None:
    phase = load_phase(str(DATA / name))
    capacity, enthalpy = np.empty(len(phase.species)), np.empty(len(phase.species))
    heat_capacity_and_enthalpy(temperature, phase.nasa, capacity, enthalpy)
    thermo = [one.thermo for one in phase.solution().species()]
    expected = np.array([one.cp(temperature) for one in thermo]) * 1e-3
    assert capacity == pytest.approx(expected, rel=1e-9)
    expected = np.array([one.h(temperature) for one in thermo]) * 1e-3
    assert enthalpy == pytest.approx(expected, rel=1e-9, abs=1e-4)  # J/mol; some pass zero


def test_nine_coefficients_in_a_file_of_ones_own(tmp_path: Path) -> None:
    copy = Path(shutil.copy(SHIPPED / "h2o_o2.yaml", tmp_path / "mine.yaml"))
    own, shipped = load_phase(str(copy)), load_phase("h2o_o2")
    assert own.species == shipped.species
    for name in ("nasa", "covolume", "source_limit", "conductivity", "diffusivity"):
        assert np.array_equal(getattr(own, name), getattr(shipped, name)), name
    assert own.notes == ()


def test_covolumes_that_a_file_lacks() -> None:
    phase = load_phase(str(DATA / "gri30.yaml"))
    shipped = load_phase("h2o_o2_n2")
    for name in ("AR", "H2O", "OH", "NO2", "NH3"):
        assert phase.covolume[phase.index(name)] == shipped.covolume[shipped.index(name)]
    diameter = 3.746e-10  # m, CH4 in the file's transport data
    expected = 2 / 3 * pi * AVOGADRO * diameter**3
    assert phase.covolume[phase.index("CH4")] == pytest.approx(expected, rel=1e-9)
    told = " ".join(phase.notes)
    assert "shipped table: H2, H, O" in told and "Lennard-Jones diameters: C, CH" in told
    assert "Species with C stay absent" in told


def test_ranges_that_a_file_lacks_are_its_thermo_s() -> None:
    phase = load_phase(str(DATA / "gri30.yaml"))
    assert phase.source_limit[phase.index("H2O")] == 3500.0
    assert phase.source_limit[phase.index("CH3O")] == 3000.0
    assert any("Thermo ends at 3000 K (CH3O)" in note for note in phase.notes)
    assert any("Transport is fitted up to 3000 K" in note for note in phase.notes)


def test_own_spelling_of_a_noble_gas(tmp_path: Path) -> None:
    path = altered(tmp_path, (r"\bAR\b", "Ar"))
    phase, usual = load_phase(str(path)), load_phase(str(DATA / "h2o2.yaml"))
    assert phase.species == usual.species
    assert np.array_equal(phase.covolume, usual.covolume)
    assert np.array_equal(phase.atoms, usual.atoms)
    assert "Ar" in phase.solution().species_names


def test_transport_fitted_too_far_is_told(tmp_path: Path) -> None:
    """The shipped file with its hydrogen atom's thermo to 20000 K again: argon is then 23 % off."""
    further = (r"6000\.0, 8000\.0", "6000.0, 20000.0")
    path = altered(tmp_path, further, source=SHIPPED / "h2o_o2.yaml")
    notes = load_phase(str(path)).notes
    assert len(notes) == 1
    error = re.search(r"up to 20000 K.*at 300 K: AR (-\d+) %", notes[0])
    assert error is not None and -26 <= int(error[1]) <= -20


# --- which mechanism, and what the result says of it ----------------------------------------


@pytest.mark.parametrize(
    ("mixture", "name"),
    [
        ({"AR": 1.0}, "h2o_o2"),
        ({"O2": 1.0}, "h2o_o2"),
        ({"H2": 1.0}, "h2o_o2"),
        ({"N2": 0.01, "AR": 0.99}, "h2o_o2_n2"),
    ],
)
def test_auto(mixture: dict[str, float], name: str) -> None:
    assert phase_for("auto", mixture).name == name


def test_path_counts_from_the_protocol(tmp_path: Path) -> None:
    (tmp_path / "mechanisms").mkdir()
    copy = Path(shutil.copy(DATA / "h2o2.yaml", tmp_path / "mechanisms"))
    told = result(tmp_path, "mechanisms/h2o2.yaml")
    sha = hashlib.sha256(copy.read_bytes()).hexdigest()
    assert told["inputs"]["mechanism"] == {"name": "h2o2.yaml", "sha256": sha}
    assert told["per_collapse"]["O3"] == {"peak": 0.0, "delivered": 0.0, "left": 0.0}
    assert "NO" not in told["per_collapse"]
    assert "O3" not in told["inputs"]["accommodation"]
    assert any("Covolumes from the shipped table" in warning for warning in told["warnings"])
    # 4889 K is above the 3500 K where this file's thermo ends
    assert told["outcome"]["code"] == "out_of_range"


def test_gri_and_its_hydrogen_part_agree_in_argon(tmp_path: Path) -> None:
    """Within 1 %: GRI also holds nitrogen and carbon, which stay absent, and ends transport
    fits at 3000 instead of 3500 K."""
    part = result(tmp_path, str(DATA / "h2o2.yaml"))
    whole = result(tmp_path, str(DATA / "gri30.yaml"))
    for name in ("OH", "H2O2", "O", "H"):
        one, two = (r["per_collapse"][name]["delivered"] for r in (part, whole))
        assert one > 1e4
        assert two == pytest.approx(one, rel=0.01)
    assert whole["per_collapse"]["NO"]["peak"] < 1e-3


def test_changed_file_is_read_anew(tmp_path: Path) -> None:
    path = altered(tmp_path, (r"diameter: 3\.33", "diameter: 3.34"))
    first = load_phase(str(path))
    altered(tmp_path, (r"diameter: 3\.33", "diameter: 3.9"))
    second = load_phase(str(path))
    assert first.sha256 != second.sha256
    argon = first.index("AR")
    assert second.conductivity[argon, 0] != first.conductivity[argon, 0]


# --- refused --------------------------------------------------------------------------------

NO_TRANSPORT = ((r"  transport:\n(?:    .*\n)+", ""), (r"  transport: mixture-averaged\n", ""))
NASA7 = r"model: NASA7\n    temperature-ranges: .*\n    data:\n(?:    [-\s].*\n)+?"
REFUSED: dict[str, tuple[tuple[tuple[str, str], ...], str]] = {
    "species": (((r"\bH2O2\b", "H2O9"),), "mine.yaml has no H2O2; allowed a Cantera file"),
    "gas": (((r"\bAR\b", "AX"),), "mine.yaml has no AR;"),
    "transport": (NO_TRANSPORT, "mine.yaml has no transport data of H2, H, O"),
    "thermo": (
        ((NASA7 + "    note: TPIS78", "model: constant-cp\n    note: none"),),
        "is not NASA7 or NASA9",
    ),
    "reactions": (((r"(?s)\nreactions:\n.*", "\nreactions: []\n"),), "mine.yaml has no reactions"),
    "phase": (
        ((r"thermo: ideal-gas", "thermo: Redlich-Kwong"),),
        "its first phase is Redlich-Kwong, no ideal gas",
    ),
    "rate": (((r"b: -1\.0", "b: fish"),), "cannot be loaded: Error on line"),
    "yaml": (((r"(?s)^.*$", "phases: [\n"),), "end of sequence flow not found"),
    "text": (((r"(?s)^.*$", "hello\n"),), "cannot be loaded"),
}  # fmt: skip


@pytest.mark.parametrize("case", REFUSED)
def test_refused_in_one_line(tmp_path: Path, case: str) -> None:
    changes, expected = REFUSED[case]
    altered(tmp_path, *changes)
    path = protocol_file(tmp_path, "mine.yaml")
    with pytest.raises(ProtocolError) as caught:
        Protocol.load(path)
    text = str(caught.value)
    assert text.startswith(f'{path}: model.mechanism = "mine.yaml": ')
    assert expected in text
    assert "\n" not in text and len(text) < 700


def test_bytes_that_are_no_text(tmp_path: Path) -> None:
    (tmp_path / "mine.yaml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(ProtocolError, match="cannot be loaded"):
        Protocol.load(protocol_file(tmp_path, "mine.yaml"))


def test_ions_are_refused(tmp_path: Path) -> None:
    with pytest.raises(ProtocolError, match="has ions"):
        Protocol.load(protocol_file(tmp_path, str(DATA / "gri30_ion.yaml")))


def test_exit_code(tmp_path: Path) -> None:
    altered(tmp_path, *REFUSED["species"][0])
    done = CliRunner().invoke(app, ["estimate", str(protocol_file(tmp_path, "mine.yaml"))])
    assert done.exit_code == 2
    assert "model.mechanism" in done.stderr and "Traceback" not in done.output
