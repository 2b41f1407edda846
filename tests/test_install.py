"""The installed wheel: complete, usable away from the sources, and with its own mechanism."""

import json
import os
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
SOURCES = ("src", "mechanisms", "pyproject.toml", "README.md", "LICENSE")
# What is needed beside the wheel is found where this very interpreter finds it, but not the
# editable install: -S leaves out the hooks of site-packages.
BOOT = """
import sys
sys.path[:0] = [{target!r}]
sys.path += {libraries!r}
{code}
"""
RUN = "from sonoyield.cli import main; main()"
WHERE = """
import json, sonoyield, sonoyield.mechanisms
from sonoyield.describe.gas import mechanism_path
print(json.dumps([sonoyield.__file__, str(mechanism_path("h2o_o2"))]))
"""


def pip(*arguments: object) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "pip", *map(str, arguments)],
        capture_output=True, text=True, timeout=300, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A wheel built from a copy, so that the sources stay clean."""
    here = tmp_path_factory.mktemp("wheel")
    for name in SOURCES:
        if (ROOT / name).is_dir():
            clean = shutil.ignore_patterns("__pycache__", "*.egg-info")
            shutil.copytree(ROOT / name, here / "copy" / name, ignore=clean)
        else:
            shutil.copy(ROOT / name, here / "copy" / name)
    pip("wheel", here / "copy", "--no-deps", "--no-build-isolation", "--wheel-dir", here / "dist",
        "--no-index", "--disable-pip-version-check")  # fmt: skip
    (found,) = (here / "dist").glob("*.whl")
    return found


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    target = tmp_path_factory.mktemp("installed")
    pip("install", wheel, "--no-deps", "--no-index", "--target", target,
        "--disable-pip-version-check")  # fmt: skip
    return target


def python(installed: Path, code: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    libraries = [path for path in sys.path if path.rstrip(os.sep).endswith("site-packages")]
    boot = BOOT.format(target=str(installed), libraries=libraries, code=code)
    return subprocess.run(
        [sys.executable, "-I", "-S", "-c", boot, *arguments],
        capture_output=True, text=True, timeout=300, check=False, cwd=installed,
    )  # fmt: skip


@pytest.mark.slow
def test_wheel_is_complete(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        names = set(archive.namelist())
    modules = {
        f"sonoyield/{path.relative_to(ROOT / 'src' / 'sonoyield')}"
        for path in (ROOT / "src" / "sonoyield").rglob("*.py")
    }
    assert modules <= names
    data = {"h2o_o2.yaml", "SOURCES.md", "__init__.py", "thermo.csv", "reactions.csv"}
    assert {f"sonoyield/mechanisms/{name}" for name in data} <= names
    assert "sonoyield/py.typed" in names
    assert any(name.endswith("licenses/LICENSE") for name in names)
    assert any(name.endswith("entry_points.txt") for name in names)
    assert not any(name.startswith(("tests/", "examples/")) for name in names)


@pytest.mark.slow
def test_installed_copy_uses_its_own_files(installed: Path) -> None:
    done = python(installed, WHERE)
    assert done.returncode == 0, done.stderr
    for path in json.loads(done.stdout):
        assert Path(path).is_relative_to(installed)


@pytest.mark.slow
def test_installed_copy_estimates(installed: Path) -> None:
    example = str(ROOT / "examples" / "bench_355kHz_argon.toml")
    done = python(installed, RUN, "estimate", example, "--json")
    assert done.returncode == 0, done.stderr
    table = json.loads(done.stdout)
    assert table["outcome"]["code"] == "ok"
    # The same numbers as the sources give.
    from sonoyield import Protocol, estimate

    here = estimate(Protocol.load(example)).as_dict()
    assert table["inputs"]["mechanism"] == here["inputs"]["mechanism"]
    assert table["per_collapse"]["OH"]["delivered"] == pytest.approx(
        here["per_collapse"]["OH"]["delivered"], rel=1e-9
    )


def test_public_face() -> None:
    import sonoyield
    from sonoyield import Estimate, Protocol, ProtocolError, estimate

    protocol = Protocol.load(ROOT / "examples" / "bench_355kHz_argon.toml")
    result = estimate(protocol)
    assert isinstance(result, Estimate)
    assert result.counts is not None
    assert result.counts["OH"].delivered > 0.0
    assert issubclass(ProtocolError, ValueError)
    assert set(sonoyield.__all__) <= {*dir(sonoyield), *sonoyield._HOMES}
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        sonoyield.nothing  # noqa: B018
