"""The compiled stages on disk: whether they are there, and that they are not out of date.

The compiler keeps what it has compiled for a function until that function's own file changes. A
function called from another file is compiled into its caller, so a change there would go unseen:
whatever was compiled from other sources than those that are here is thrown away.
"""

from __future__ import annotations

import hashlib
import os
from contextlib import suppress
from pathlib import Path

HERE = Path(__file__).parent
STAMP = "sonoyield-sources.txt"
OUTERMOST = ("cold.integrate_frozen", "cells_bdf.integrate")


def is_cached() -> bool:
    """Whether an earlier run left this version's compiled stages in any of numba's places.

    Of each kind of run, well mixed and resolved, the outermost function is looked for: it is
    compiled last.
    """
    return any(all(any(place.glob(f"{one}-*.nbc")) for one in OUTERMOST) for place in _places())


def discard_stale() -> None:
    """Delete compiled stages that were made from other sources than these."""
    sources = _fingerprint()
    for place in _places():
        with suppress(OSError):  # not ours to write to: the compiler takes the next place too
            _discard(place, sources)
            return


def _discard(place: Path, sources: str) -> None:
    place.mkdir(parents=True, exist_ok=True)
    stamp = place / STAMP
    if stamp.is_file() and stamp.read_text() == sources:
        return
    stamp.write_text(sources)
    for pattern in ("*.nbi", "*.nbc"):
        for file in place.glob(pattern):
            file.unlink(missing_ok=True)


def _fingerprint() -> str:
    digest = hashlib.sha256()
    for file in sorted([*HERE.glob("*.py"), HERE.parent / "describe" / "gas.py"]):
        digest.update(file.read_bytes())
    return digest.hexdigest()


def _places() -> list[Path]:
    mark = f"collapse_{hashlib.sha1(str(HERE).encode()).hexdigest()}"
    chosen = os.environ.get("NUMBA_CACHE_DIR")
    if chosen:
        return [Path(chosen) / mark]
    return [HERE / "__pycache__", Path.home() / ".cache" / "numba" / mark]
