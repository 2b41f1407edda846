"""Results and histories written to files, whole or not at all."""

from __future__ import annotations

import csv
import errno
import json
import os
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

    from sonoyield.collapse.history import History

HISTORY_SUFFIXES = (".csv", ".parquet")
RESULT_SUFFIXES = (".json", ".csv", ".parquet")
CHART_SUFFIXES = (".png", ".svg")


def to_json(table: dict[str, Any]) -> str:
    """A result as JSON text; raises ``ValueError`` for a number that is not finite."""
    return json.dumps(table, indent=2, allow_nan=False)


def write_result(table: dict[str, Any], path: Path) -> None:
    """Write a result as JSON, or flat as one row of CSV or Parquet, by the path's suffix.

    Raises ``OSError`` with the path as its ``filename``; what stood there is kept then.
    """
    if path.suffix == ".json":
        write_whole(path, lambda target: target.write_text(to_json(table) + "\n"))
    elif path.suffix == ".csv":
        write_whole(path, lambda target: _write_row(flat(table), target))
    else:
        import pandas as pd

        frame = pd.DataFrame([flat(table)])
        write_whole(path, lambda target: frame.to_parquet(target, index=False))


def write_rows(rows: list[dict[str, Any]], path: Path) -> None:
    """Write rows of equal keys as CSV or Parquet, by the path's suffix."""
    import pandas as pd

    frame = pd.DataFrame(rows)
    if path.suffix == ".csv":
        write_whole(path, lambda target: frame.to_csv(target, index=False))
    else:
        write_whole(path, lambda target: frame.to_parquet(target, index=False))


def write_history(history: History, path: Path) -> None:
    """Write R, U, T, p and composition against time as CSV or Parquet, by the path's suffix.

    Raises ``OSError`` with the path as its ``filename``; what stood there is kept then.
    """
    frame = history_frame(history)
    if path.suffix == ".csv":
        write_whole(path, lambda target: frame.to_csv(target, index=False))
    else:
        write_whole(path, lambda target: frame.to_parquet(target, index=False))


def history_frame(history: History) -> pd.DataFrame:
    """One row a step, units in the column names; amounts in the gas and crossed, in mol."""
    import pandas as pd

    names = history.bubble.phase.species
    columns = {
        "time_s": history.times,
        "radius_m": history.radius,
        "wall_speed_m_s": history.speed,
        "temperature_K": history.temperature,
        "pressure_Pa": history.pressure,
    }
    inside = history.moles.clip(min=0.0)  # the tolerance may leave a little below zero
    columns |= {f"{name}_gas_mol": inside[:, k] for k, name in enumerate(names)}
    columns |= {
        f"{names[k]}_crossed_mol": history.crossed[:, k] for k in history.bubble.crossing
    }
    return pd.DataFrame(columns)


def flat(table: dict[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested tables as one row, keys joined by dots; lists as JSON text."""
    row: dict[str, Any] = {}
    for key, value in table.items():
        if isinstance(value, dict):
            row |= flat(value, f"{prefix}{key}.")
        else:
            row[prefix + key] = json.dumps(value) if isinstance(value, list) else value
    return row


def write_whole(path: Path, fill: Callable[[Path], object]) -> None:
    """Let ``fill`` write a temporary file and put it in the place of ``path`` when it is whole.

    Raises ``OSError`` with the path as its ``filename``; what stood there is kept then.
    """
    try:
        _fill_and_place(path, fill)
    except OSError as error:  # name the user's file, not the temporary one
        reason = error.strerror or str(error)
        raise OSError(error.errno or errno.EIO, reason, str(path)) from error


def _write_row(row: dict[str, Any], target: Path) -> None:
    with target.open("w", newline="") as file:
        writer = csv.DictWriter(file, list(row))
        writer.writeheader()
        writer.writerow(row)


def _fill_and_place(path: Path, fill: Callable[[Path], object]) -> None:
    """Fill a temporary file beside ``path``, flush it to disk and put it in place."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=".sonoyield-", suffix=path.suffix)
    os.close(handle)
    temporary = Path(name)
    try:
        fill(temporary)
        with temporary.open("rb") as written:
            os.fsync(written.fileno())
        temporary.chmod(0o666 & ~_umask())
        temporary.replace(path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
