"""What is compiled from other sources is thrown away, and nothing else."""

from __future__ import annotations

from pathlib import Path

import pytest

from sonoyield.collapse import compiled


@pytest.fixture
def place(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setenv("NUMBA_CACHE_DIR", str(tmp_path))
    (place,) = compiled._places()
    return place


def test_a_fresh_place_is_stamped_and_kept(place: Path) -> None:
    compiled.discard_stale()
    for name in compiled.OUTERMOST:
        assert not compiled.is_cached()
        built = place / f"{name}-1.py311.1.nbc"
        built.write_bytes(b"compiled")
    compiled.discard_stale()
    assert built.is_file()
    assert compiled.is_cached()


def test_other_sources_are_noticed(place: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    compiled.discard_stale()
    built = place / "cold.integrate_frozen-1.py311.1.nbc"
    built.write_bytes(b"compiled")
    monkeypatch.setattr(compiled, "_fingerprint", lambda: "others")
    compiled.discard_stale()
    assert not built.exists()
    assert not compiled.is_cached()


def test_a_place_that_cannot_be_written_is_left(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "file").write_text("not a folder")
    monkeypatch.setenv("NUMBA_CACHE_DIR", str(tmp_path / "file"))
    compiled.discard_stale()
    assert (tmp_path / "file").read_text() == "not a folder"
