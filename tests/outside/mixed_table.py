"""Bubbles on which the mixed and the resolved gas are compared, and what each of them finds.

``python tests/outside/mixed_table.py PATH`` writes the table anew. Drawn by a fixed seed over the
ranges below; kept where the mixed run collapses inertially below Mach 1 and delivers at least
``LEAST`` OH, which the resolved run has no part in. Both are ours: the table says how far two
models differ, not how far either is from a bubble.
"""

from __future__ import annotations

import csv
import sys
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path

import numpy as np

from sonoyield.collapse.aqueous import aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.outcome import Code, outcome_of
from sonoyield.collapse.resolved import follow_resolved
from sonoyield.collapse.yields import collapse_of, counts_of
from sonoyield.describe.gas import AVOGADRO, phase_for
from sonoyield.describe.gases import COMPOSITIONS
from sonoyield.describe.liquid import water

TABLE = Path(__file__).with_name("mixed_or_resolved.csv")
SEED, EACH = 5, 5  # bubbles of each gas
LEAST = 1e3  # OH molecules of the mixed run
ATMOSPHERE = 101325.0
GASES: Mapping[str, Mapping[str, float]] = {
    name: COMPOSITIONS[name] for name in ("argon", "helium", "xenon", "oxygen", "air", "nitrogen")
} | {"argon and oxygen": {"AR": 0.7, "O2": 0.3}}
INPUTS = ("gas", "frequency_Hz", "pressure_Pa", "radius_m", "temperature_K")
COUNTED = ("_OH", "_H2O2", "_NOx")
NITROGEN = ("NO", "NO2", "HONO", "HONO2")
ONCE = Accuracy(relative=1e-6, tighten=0, seconds=600.0)
Case = dict[str, str]


def drawn() -> Iterator[Case]:
    """The bubbles, gas after gas."""
    rng = np.random.default_rng(SEED)
    for gas in GASES:
        kept = 0
        while kept < EACH:
            case = {"gas": gas} | {
                "frequency_Hz": _round(2e4 * 100.0 ** rng.random()),
                "pressure_Pa": _round(1.2e5 * 5.0 ** rng.random()),
                "radius_m": _round(0.5e-6 * 16.0 ** rng.random()),
                "temperature_K": _round(278.15 + 45.0 * rng.random()),
            }
            if _wanted(follow(bubble(case))):
                kept += 1
                yield case


def bubble(case: Case) -> Bubble:
    """A row's bubble in pure water at one atmosphere, accommodation 0.4."""
    gas = GASES[case["gas"]]
    frequency, pressure, radius, temperature = (float(case[name]) for name in INPUTS[1:])
    return Bubble(
        phase_for("auto", gas), water(temperature), ATMOSPHERE, frequency, pressure, radius, gas,
        {"water": 0.4, "radicals": 0.4},
    )  # fmt: skip


def mixed_of(case: Case) -> Case:
    """What the mixed gas finds, with what a rule may know of it."""
    history = follow(bubble(case))
    found = collapse_of(history)
    return {
        "mixed_peak_K": _round(found.peak_temperature_K),
        "mixed_vapour": _round(found.vapour_fraction_at_peak),
        "mixed_compression": _round(found.compression_ratio),
        **_delivered("mixed", history),
    }


def resolved_of(case: Case) -> Case:
    """What the resolved gas finds, the liquid a perfect sink as in the mixed one."""
    history = follow_resolved(bubble(case), accuracy=ONCE, steam=float(case["mixed_vapour"]))
    assert history.cells is not None
    return {
        "resolved_peak_K": _round(collapse_of(history).peak_temperature_K),
        "resolved_centre_K": _round(float(history.cells.temperature.max())),
        **_delivered("resolved", history),
    }


def film_of(case: Case) -> Case:
    """What the resolved gas finds with the liquid film around it."""
    nitrogen = "N2" in GASES[case["gas"]]
    chemistry = aqueous_chemistry(float(case["temperature_K"]), {}, nitrogen=nitrogen)
    steam = float(case["mixed_vapour"])
    history = follow_resolved(bubble(case), accuracy=ONCE, chemistry=chemistry, steam=steam)
    return _delivered("film", history)


def _wanted(history: History) -> bool:
    found = collapse_of(history)
    ended = outcome_of(history, found, balance(history)).code
    return ended is Code.OK and counts_of(history)["OH"].delivered >= LEAST


def _delivered(model: str, history: History) -> Case:
    """Molecules that crossed, net: negative where the film gave more back than it took."""
    span = history.spans[0]
    found = {name: _net(history, [name], span) for name in ("OH", "H2O2")}
    found["NOx"] = _net(history, NITROGEN, span)
    return {
        **{f"{model}_{name}": _round(value) for name, value in found.items()},
        f"{model}_ended": history.stopped or "complete",
    }


def _net(history: History, names: Iterable[str], span: tuple[int, int]) -> float:
    species = history.bubble.phase.species
    kept = [species.index(name) for name in names if name in species]
    return float((history.crossed[span[1]] - history.crossed[span[0]])[kept].sum()) * AVOGADRO


def _round(value: float) -> str:
    return f"{value:.4g}"


def main(path: Path) -> None:
    """Write the table."""
    rows: list[Case] = []
    for case in drawn():
        case = case | mixed_of(case)
        rows.append(case | resolved_of(case) | film_of(case))
        with path.open("w", newline="", encoding="utf-8") as handle:
            writer = csv.DictWriter(handle, rows[0], lineterminator="\n")
            writer.writeheader()
            writer.writerows(rows)


if __name__ == "__main__":
    main(Path(sys.argv[1]))
