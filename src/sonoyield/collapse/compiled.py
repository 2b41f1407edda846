"""Whether the compiled stages are on disk already, asked before the compiler is imported."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path


def is_cached() -> bool:
    """Whether an earlier run left this version's compiled stages in any of numba's places."""
    return any(any(place.glob("cold.integrate_frozen-*.nbc")) for place in _places())


def _places() -> list[Path]:
    here = Path(__file__).parent
    places = [here / "__pycache__"]
    chosen = os.environ.get("NUMBA_CACHE_DIR")
    mark = f"collapse_{hashlib.sha1(str(here).encode()).hexdigest()}"
    if chosen:
        places = [Path(chosen) / mark]
    else:
        places.append(Path.home() / ".cache" / "numba" / mark)
    return places
