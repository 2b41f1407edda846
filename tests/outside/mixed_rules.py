"""The rule that says when the mixed gas is safe, found anew from the table.

A rule is two limits: a mixed peak temperature to exceed and a share of steam at the peak to stay
below. Taken are those that judge the most bubbles rightly; of equally good ones those with the
fewest unsafe bubbles called safe, then those in the widest gaps. The limits tried lie half-way
between neighbours in the table, so that no number is chosen by hand. That it is these two
quantities was chosen with the whole table in view, which leaving out a gas does not undo.
"""

from __future__ import annotations

import csv
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise, product
from pathlib import Path

FACTOR = 2.0  # within which mixed counts as safe
Row = dict[str, str]


@dataclass(frozen=True)
class Rule:
    """Safe above ``temperature`` (K) with less than ``vapour`` (mole fraction)."""

    temperature: float
    vapour: float

    def says(self, row: Row) -> bool:
        """Whether the rule calls a bubble safe."""
        hot = float(row["mixed_peak_K"]) > self.temperature
        return hot and float(row["mixed_vapour"]) < self.vapour


def rows_of(path: Path) -> list[Row]:
    """The table's rows."""
    with path.open(newline="", encoding="utf-8") as handle:
        return list(csv.DictReader(handle))


def ratio(row: Row, species: str = "OH", model: str = "resolved") -> float:
    """Delivered by the resolved gas over delivered by the mixed one."""
    return float(row[f"{model}_{species}"]) / float(row[f"mixed_{species}"])


def safe(row: Row) -> bool:
    """Whether mixed is within the factor for OH."""
    return 1.0 / FACTOR <= ratio(row) <= FACTOR


def fitted(rows: Sequence[Row]) -> Rule:
    """The rule that these rows give."""
    peaks, shares = _gaps(rows, "mixed_peak_K"), _gaps(rows, "mixed_vapour")
    best = max(
        product(peaks, shares),
        key=lambda pair: (
            -_missed(Rule(pair[0][0], pair[1][0]), rows),
            -_false(Rule(pair[0][0], pair[1][0]), rows),
            pair[0][1] * pair[1][1],
        ),
    )
    return Rule(best[0][0], best[1][0])


def left_out(rows: Sequence[Row]) -> dict[str, tuple[int, int, int]]:
    """By gas, judged by the rule of the others: hits, unsafe called safe, safe called unsafe."""
    found = {}
    for gas in dict.fromkeys(row["gas"] for row in rows):
        rule = fitted([row for row in rows if row["gas"] != gas])
        mine = [row for row in rows if row["gas"] == gas]
        false = _false(rule, mine)
        missed = _missed(rule, mine)
        found[gas] = (len(mine) - missed, false, missed - false)
    return found


def _missed(rule: Rule, rows: Sequence[Row]) -> int:
    return sum(rule.says(row) != safe(row) for row in rows)


def _false(rule: Rule, rows: Sequence[Row]) -> int:
    return sum(rule.says(row) and not safe(row) for row in rows)


def _gaps(rows: Sequence[Row], name: str) -> list[tuple[float, float]]:
    """Middles of the gaps between neighbours, and the gaps' widths over the range."""
    values = sorted({float(row[name]) for row in rows})
    whole = values[-1] - values[0]
    return [(0.5 * (a + b), (b - a) / whole) for a, b in pairwise(values)]
