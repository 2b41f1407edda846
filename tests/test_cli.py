"""The command line: what it prints where, the files it writes, and its exit codes."""

import json
import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from typer.testing import CliRunner

from sonoyield import Protocol, __version__, cli, estimate
from sonoyield.collapse import ledger
from sonoyield.collapse.follow import Accuracy
from sonoyield.expose import estimate as expose
from sonoyield.targets import BAD_INPUT

HERE = Path(__file__).parent
EXAMPLES = sorted((HERE.parent / "examples").glob("*.toml"))
BENCH = HERE.parent / "examples" / "bench_355kHz_argon.toml"
BAD = HERE / "describe" / "bad"
COMMAND = (sys.executable, "-c", "from sonoyield.cli import main; main()")

# Documented: design of the result, "Numbers that must come out"; more are said in the README.
KEYS = [
    "title", "version", "schema", "warnings", "outcome", "inputs", "collapse", "per_collapse",
    "energy_per_window_J", "balance", "uniformity", "caught", "in_liquid", "driving",
    "per_exposure", "oxidant", "mechanical_index", "thermo_range", "ionisation", "provenance",
    "mixed",
]  # fmt: skip
COLLAPSE = {
    "peak_temperature_K", "peak_pressure_Pa", "max_radius_m", "min_radius_m",
    "compression_ratio", "time_of_peak_s", "peak_wall_speed_m_s", "vapour_fraction_at_peak",
    "inertial",
}  # fmt: skip
BALANCE = {"element_error", "energy_error", "element_limit", "energy_limit"}
NUMBERS = ("collapse", "per_collapse", "energy_per_window_J", "driving", "per_exposure")
UNIT = re.compile(r".+_(s|m|m_s|K|Pa|mol)$")
# Half a bar moves the bubble and makes nothing: quick.
WEAK = """
title = "weak"
drive = { frequency = "355 kHz", pressure = "0.5 bar" }
schedule = { duration = "1 min" }
liquid = { temperature = "25 degC", volume = "100 mL" }
gas = { mixture = "argon" }
bubbles = { radius = "3 um", number_density = "1e7 / m^3" }
"""


def run(*arguments: object) -> Any:
    return CliRunner().invoke(cli.app, ["estimate", *map(str, arguments)])


def process(*arguments: object) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*COMMAND, *map(str, arguments)], capture_output=True, text=True, timeout=120, check=False
    )


def refused(result: Any) -> str:
    assert result.exit_code == BAD_INPUT
    assert result.stdout == ""
    assert result.stderr.count("\n") == 1
    assert "Traceback" not in result.stderr
    return result.stderr


def strict(text: str) -> dict[str, Any]:
    """JSON without the words for what is not a number."""

    def never(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    table: dict[str, Any] = json.loads(text, parse_constant=never)
    return table


def numbers(table: Any) -> Iterator[float]:
    if isinstance(table, dict):
        for value in table.values():
            yield from numbers(value)
    elif isinstance(table, (int, float)) and not isinstance(table, bool):
        yield table


@pytest.fixture
def weak(tmp_path: Path) -> Path:
    path = tmp_path / "weak.toml"
    path.write_text(WEAK)
    return path


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_examples_as_table(path: Path) -> None:
    result = run(path)
    assert result.exit_code == 0
    assert result.stderr == ""
    for part in ("Outcome:", "Assumed", "Collapse", "Molecules per collapse", "Per exposure",
                 "oxidant = OH + 2 H2O2", "Energy of one window", "Mechanical index:",
                 "Caution: Research estimate"):  # fmt: skip
        assert part in result.stdout
    assert Protocol.load(path).title in result.stdout
    assert "nan" not in result.stdout.lower().split()


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_examples_as_json(path: Path) -> None:
    result = run(path, "--json")
    assert result.exit_code == 0
    table = strict(result.stdout)
    assert list(table) == KEYS
    assert set(table["collapse"]) >= COLLAPSE
    assert set(table["outcome"]) == {"code", "sentence"}
    nitrogen = {"NO", "NO2", "HONO", "HONO2", "N2O"} if "air" in path.stem else set()
    assert {"OH", "H2O2", "HO2", "O", "O3", "H", "H2"} | nitrogen == set(table["per_collapse"])
    for counts in table["per_collapse"].values():
        assert set(counts) == {"peak", "delivered", "left"}
        assert all(value >= 0.0 for value in counts.values())
    for dose in table["per_exposure"].values():
        assert set(dose) == {
            "mol", "mol_per_L", "mol_per_L_per_s", "mol_per_L_per_s_on", "mol_per_J",
        }  # fmt: skip
    assert {"mol_per_L", "mol_per_J"} <= set(table["oxidant"])
    assert set(table["balance"]) == BALANCE
    assert table["version"] == __version__
    assert result.stderr.count("\n") == len(table["warnings"])


def test_the_well_known_case_is_ok() -> None:
    table = strict(run(BENCH, "--json").stdout)
    assert table["outcome"]["code"] == "ok"
    assert table["inputs"]["mechanism"]["name"] == "h2o_o2"
    assert re.fullmatch(r"[0-9a-f]{64}", table["inputs"]["mechanism"]["sha256"])
    # Independent slow reference (SciPy, ideal steam transport): OH peak 6.9e7, delivered 2.0e7.
    assert table["per_collapse"]["OH"]["delivered"] == pytest.approx(2.0e7, rel=0.2)
    assert table["per_collapse"]["OH"]["peak"] == pytest.approx(6.9e7, rel=0.3)


def test_weak_sound_is_shown_with_its_numbers(weak: Path) -> None:
    result = run(weak, "--json")
    assert result.exit_code == 0
    table = strict(result.stdout)
    assert table["outcome"]["code"] == "no_inertial_collapse"
    assert table["collapse"]["inertial"] is False
    assert table["per_collapse"]["OH"]["delivered"] < 1.0


@pytest.mark.parametrize("suffix", [".json", ".csv", ".parquet"])
def test_out(weak: Path, tmp_path: Path, suffix: str) -> None:
    target = tmp_path / f"result{suffix}"
    result = run(weak, "--out", target, "--quiet")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")
    if suffix == ".json":
        found = strict(target.read_text())["collapse"]["max_radius_m"]
    elif suffix == ".csv":
        found = pd.read_csv(target)["collapse.max_radius_m"][0]
    else:
        found = pd.read_parquet(target)["collapse.max_radius_m"][0]
    wanted = strict(run(weak, "--json").stdout)["collapse"]["max_radius_m"]
    assert found == pytest.approx(wanted, rel=1e-15)
    assert sorted(tmp_path.iterdir()) == sorted([weak, target])


def test_out_beside_json(weak: Path, tmp_path: Path) -> None:
    target = tmp_path / "result.json"
    result = run(weak, "--out", target, "--json")
    assert strict(result.stdout) == strict(target.read_text())


@pytest.mark.parametrize("suffix", [".csv", ".parquet"])
def test_history(weak: Path, tmp_path: Path, suffix: str) -> None:
    target = tmp_path / f"history{suffix}"
    result = run(weak, "--history", target)
    assert result.exit_code == 0
    assert "Molecules per collapse" in result.stdout
    frame = pd.read_csv(target) if suffix == ".csv" else pd.read_parquet(target)
    assert list(frame)[:5] == [
        "time_s", "radius_m", "wall_speed_m_s", "temperature_K", "pressure_Pa",
    ]  # fmt: skip
    assert all(UNIT.fullmatch(name) for name in frame)
    assert {"AR_gas_mol", "H2O_gas_mol", "OH_gas_mol", "OH_crossed_mol"} <= set(frame)
    assert "AR_crossed_mol" not in frame
    assert frame["time_s"].iloc[0] == 0.0
    assert frame["time_s"].is_monotonic_increasing
    assert frame["radius_m"].iloc[0] == pytest.approx(3e-6, rel=1e-12)
    assert not frame.isna().any(axis=None)


def test_both(weak: Path) -> None:
    table = strict(run(weak, "--both", "--json").stdout)
    assert set(table) == {*KEYS, "coupling_difference"}
    difference = table["coupling_difference"]
    assert difference["other"] == "one_way"
    assert set(difference["peak_temperature_K"]) == {"this", "other", "ratio"}
    # Where nothing reacts the wall has nothing to feel.
    assert difference["peak_temperature_K"]["ratio"] == pytest.approx(1.0, rel=1e-4)
    shown = run(weak, "--both").stdout
    assert "one_way / this" in shown
    assert "Outcome of one_way: no_inertial_collapse." in shown


def test_both_says_when_the_other_failed(weak: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def failing(bubble: Any, collapses: int, accuracy: Accuracy) -> Any:  # noqa: ARG001
        return expose.follow(bubble, collapses, Accuracy(steps=10, split=False))

    monkeypatch.setattr(expose, "follow_one_way", failing)
    result = run(weak, "--both")
    assert result.exit_code == 0
    assert "Outcome of one_way: step_limit; there are no numbers to compare." in result.stdout


def test_warnings_go_to_stderr_unless_quiet() -> None:
    path = HERE.parent / "examples" / "focus_1MHz_pulsed.toml"
    loud, quiet = run(path, "--json"), run(path, "--json", "--quiet")
    assert "warning: The wall reaches Mach" in loud.stderr
    assert quiet.stderr == ""
    assert loud.stdout == quiet.stdout


def test_same_protocol_same_numbers(weak: Path) -> None:
    assert run(weak, "--json").stdout == run(weak, "--json").stdout


def test_title_is_text_not_markup(tmp_path: Path) -> None:
    path = tmp_path / "odd.toml"
    odd = r'title = "[/bold] [red]:smile: \u001b[31m\nBench"'
    path.write_text(WEAK.replace('title = "weak"', odd))
    result = run(path)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[0] == "[/bold] [red]:smile:  [31m Bench"


def test_saline_is_told(tmp_path: Path) -> None:
    path = tmp_path / "saline.toml"
    path.write_text(WEAK.replace("liquid = {", 'liquid = { kind = "saline", salinity = "9 g/L",'))
    assert "saline of 9 g/L, 25 degC" in run(path).stdout


@pytest.mark.parametrize("path", sorted(BAD.glob("*.toml")), ids=lambda path: path.stem)
def test_bad_file(path: Path) -> None:
    expected = path.read_text("utf-8").splitlines()[0].removeprefix("# expect: ")
    message = refused(run(path))
    assert message.startswith(f"error: {path}: ")
    assert expected in message


@pytest.mark.parametrize("name", ["bare_number", "unknown_key", "gas_carbon_dioxide", "boiling"])
def test_bad_file_in_a_process_of_its_own(name: str) -> None:
    done = process("estimate", BAD / f"{name}.toml", "--json")
    expected = (BAD / f"{name}.toml").read_text("utf-8").splitlines()[0]
    assert done.returncode == BAD_INPUT
    assert done.stdout == ""
    assert done.stderr.count("\n") == 1
    assert f"{name}.toml: " in done.stderr
    assert expected.removeprefix("# expect: ") in done.stderr


def test_no_such_file_and_folder(tmp_path: Path) -> None:
    assert "none.toml: there is no such file" in refused(run(tmp_path / "none.toml"))
    assert "this is a folder" in refused(run(tmp_path))


def test_broken_toml(tmp_path: Path) -> None:
    path = tmp_path / "broken.toml"
    path.write_text("[drive\n")
    assert f"{path}: broken TOML: " in refused(run(path))


@pytest.mark.parametrize(
    ("option", "name", "fragment"),
    [
        ("--out", "result.txt", "suffix '.txt'; allowed .json, .csv, .parquet"),
        ("--out", "result", "suffix ''; allowed .json, .csv, .parquet"),
        ("--history", "history.json", "suffix '.json'; allowed .csv, .parquet"),
        ("--out", "nowhere/result.json", "there is no folder"),
        ("--out", "folder.csv", "is a folder"),
    ],
)
def test_target_refused_before_the_run(
    weak: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, option: str, name: str,
    fragment: str,
) -> None:  # fmt: skip
    (tmp_path / "folder.csv").mkdir()
    monkeypatch.setattr(expose, "estimate", None)
    message = refused(run(weak, option, tmp_path / name))
    assert message.startswith(f"error: {option} {tmp_path / name}: ")
    assert fragment in message


def test_one_path_for_two_files_is_refused(weak: Path, tmp_path: Path) -> None:
    target = tmp_path / "both.csv"
    message = refused(run(weak, "--out", target, "--history", target))
    assert "is the path of --out too" in message
    assert not target.exists()


def test_folder_that_may_not_be_written(
    weak: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("os.access", lambda path, mode: mode != os.W_OK)  # noqa: ARG005
    message = refused(run(weak, "--out", tmp_path / "result.json"))
    assert f"the folder {tmp_path} may not be written to" in message


def test_disk_full(weak: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(handle: int) -> None:  # noqa: ARG001
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    target = tmp_path / "result.json"
    message = refused(run(weak, "--out", target))
    assert message == f"error: {target}: cannot be written: No space left on device\n"
    assert list(tmp_path.iterdir()) == [weak]


def test_step_limit_gives_no_number() -> None:
    accuracy = Accuracy(steps=10)
    result = estimate(Protocol.load(BENCH), accuracy=accuracy)
    table = strict(json.dumps(result.as_dict(), allow_nan=False))
    assert table["outcome"]["code"] == "step_limit"
    assert "no number is given" in table["outcome"]["sentence"]
    assert list(table) == KEYS
    assert [table[key] for key in NUMBERS] == [None] * len(NUMBERS)
    assert list(numbers(table["oxidant"])) == []
    assert (result.collapse, result.counts, result.doses) == (None, None, None)


def test_step_limit_exits_3(monkeypatch: pytest.MonkeyPatch) -> None:
    few = Accuracy(steps=10)
    monkeypatch.setattr(expose, "Accuracy", lambda: few)
    for shown in (run(BENCH), run(BENCH, "--json", "--quiet")):
        assert shown.exit_code == cli.NUMERICS
        assert shown.stderr.startswith("The integration took its limit of steps")
    assert strict(shown.stdout)["per_collapse"] is None
    assert "Molecules per collapse" not in run(BENCH).stdout


def test_open_ledger_exits_3_without_numbers(weak: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(ledger, "RESOLVED_ENERGY_LIMIT", 1e-30)
    shown = run(weak, "--json")
    assert shown.exit_code == cli.NUMERICS
    table = strict(shown.stdout)
    assert table["outcome"]["code"] == "ledger_open"
    assert [table[key] for key in NUMBERS] == [None] * len(NUMBERS)
    assert table["balance"]["energy_error"] > 0.0
    assert "no number is given" in shown.stderr


def test_ledger_that_is_not_a_number(weak: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    broken = ledger.Balance(float("inf"), float("inf"))
    monkeypatch.setattr(expose, "balance", lambda history: broken)  # noqa: ARG005
    shown = run(weak, "--json")
    assert shown.exit_code == cli.NUMERICS
    balance = strict(shown.stdout)["balance"]
    assert (balance["element_error"], balance["energy_error"]) == (None, None)


def test_interrupt(weak: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(expose, "estimate", interrupted)
    result = run(weak)
    assert (result.exit_code, result.stdout) == (cli.INTERRUPTED, "")
    assert result.stderr == "interrupted\n"
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


@pytest.mark.skipif(sys.platform == "win32", reason="no such signal there")
def test_signal_while_the_integrator_runs(tmp_path: Path) -> None:
    path = tmp_path / "long.toml"
    path.write_text(BENCH.read_text() + "\n[model]\ncollapses = 1000\n")
    started = subprocess.Popen(
        [*COMMAND, "estimate", str(path), "--json", "--quiet"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    time.sleep(2.5)  # compiled stages loaded; the run itself takes several seconds
    started.send_signal(signal.SIGINT)
    out, err = started.communicate(timeout=60)
    assert (started.returncode, out, err) == (cli.INTERRUPTED, "", "interrupted\n")


def test_library_chatter_stays_off_stdout(tmp_path: Path) -> None:
    """A dry argon bubble that no steam cools: SUNDIALS warns of steps too small to add."""
    path = tmp_path / "dry.toml"
    path.write_text(
        """
        drive = { frequency = "26292.375284220983 Hz", pressure = "1.0 bar" }
        schedule = { duration = "1 s" }
        liquid = { temperature = "273.15 K", ambient_pressure = "0.1 atm", volume = "1 mL" }
        gas = { mixture = "argon" }
        bubbles = { radius = "1 um", number_density = "1 / m^3" }
        model = { vapour = false, uptake = false, excluded_volume = false }
        """
    )
    done = process("estimate", path, "--json", "--quiet")
    assert done.returncode in (0, cli.NUMERICS)
    strict(done.stdout)
    assert "WARNING" not in done.stderr


def test_screen_without_the_letters_of_the_title(tmp_path: Path) -> None:
    path = tmp_path / "greek.toml"
    path.write_text(WEAK.replace("weak", "Bench Ω"), "utf-8")
    done = subprocess.run(
        [*COMMAND, "estimate", str(path)], capture_output=True, text=True, timeout=120,
        check=False, env=os.environ | {"PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"},
    )  # fmt: skip
    assert done.returncode == 0
    assert done.stdout.startswith("Bench \\u03a9\n")


def test_version() -> None:
    done = process("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, f"sonoyield {__version__}\n", "")


@pytest.mark.parametrize("arguments", [["--help"], ["estimate", "--help"], ["--version"]])
def test_help_is_light(arguments: list[str]) -> None:
    heavy = "{'cantera', 'numba', 'numpy', 'pandas', 'matplotlib', 'scipy', 'pint'}"
    code = (
        "import sys\nfrom sonoyield.cli import main\n"
        f"try:\n    sys.argv[1:] = {arguments!r}\n    main()\n"
        f"finally:\n    print({heavy} & set(sys.modules), file=sys.stderr)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0
    assert done.stderr.strip() == "set()"
    assert done.stdout


def test_unknown_option_and_command() -> None:
    assert CliRunner().invoke(cli.app, ["estimate", "x.toml", "--jsn"]).exit_code == BAD_INPUT
    assert CliRunner().invoke(cli.app, ["estimat", "x.toml"]).exit_code == BAD_INPUT
