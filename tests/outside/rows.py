"""The figures from outside (``data.csv``): each row with its source and its own tolerance.

``tight`` rows must agree within the tolerance written in the row; ``model`` and ``trend`` rows are
reported or checked for sign. The tolerance is read from the row, so no test can widen it.
"""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass
from pathlib import Path

FOLDER = Path(__file__).parent


@dataclass(frozen=True)
class Row:
    """One figure. ``provenance`` says whether it was seen, computed or remembered."""

    id: str
    quantity: str
    conditions: str
    value: str
    unit: str
    source: str
    provenance: str
    tolerance: str
    note: str

    @property
    def number(self) -> float:
        return float(self.value)

    @property
    def percents(self) -> list[float]:
        """Relative tolerances in the row, in its order, as fractions."""
        return [float(one) / 100.0 for one in re.findall(r"([\d.]+) %", self.tolerance)]

    @property
    def absolutes(self) -> list[float]:
        """Absolute tolerances in ln Kp: the general one and that of steam above 4000 K."""
        return [float(one) for one in re.findall(r"(?:\+-|\()(\d\.\d+)", self.tolerance)]

    def noted(self, pattern: str) -> float:
        """A further figure of the row, found in its note after ``pattern``."""
        found = re.search(pattern + r"([-+\d.eE]*\d)", self.note)
        assert found is not None, (self.id, pattern)
        return float(found.group(1))

    def agrees(self, found: float, printed: float | None = None, which: int = 0) -> None:
        """Assert agreement with the value, or another figure of the row, within its tolerance."""
        value = self.number if printed is None else printed
        within = self.percents[which]
        assert abs(found / value - 1.0) <= within, f"{self}: found {found}, printed {value}"


def _load() -> dict[str, Row]:
    with (FOLDER / "data.csv").open(newline="", encoding="utf-8") as handle:
        return {line["id"]: Row(**line) for line in csv.DictReader(handle)}


ROWS = _load()
