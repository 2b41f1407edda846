"""What is known of one exposure once it has been estimated, and its keys in JSON."""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict, dataclass
from importlib.metadata import version
from math import isfinite
from typing import Any

from sonoyield._version import __version__
from sonoyield.collapse.caught import InLiquid
from sonoyield.collapse.follow import Accuracy
from sonoyield.collapse.history import History
from sonoyield.collapse.ionisation import IonisationEstimate
from sonoyield.collapse.ledger import Balance, Energies
from sonoyield.collapse.outcome import Outcome
from sonoyield.collapse.thermo_range import ThermoRange
from sonoyield.collapse.uniformity import Uniformity
from sonoyield.collapse.yields import OXIDANT_FORMULA, Collapse, Counts
from sonoyield.describe.liquid import LiquidState
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.dose import Dose
from sonoyield.expose.schedule import Driving

SCHEMA = 1
LIBRARIES = ("cantera", "numba", "numpy", "pydantic", "pint")


@dataclass(frozen=True, eq=False)
class Estimate:
    """Everything known about one exposure.

    ``collapse``, ``counts``, ``energy``, ``doses``, ``oxidant`` and ``ionisation`` are ``None``
    when the numerics failed (``outcome.code.has_numbers`` is false), and ``thermo_range`` empty.
    ``counts`` in molecules per collapse, by species. ``history`` holds the run itself,
    ``accuracy`` what was asked of it. Of a resolved bubble ``in_liquid`` says what scavengers
    catch and what becomes of OH in the liquid film, and ``mixed`` is the estimate of the well-mixed
    gas beside it.
    """

    protocol: Protocol
    liquid: LiquidState
    history: History
    outcome: Outcome
    warnings: tuple[str, ...]
    balance: Balance
    collapse: Collapse | None
    counts: dict[str, Counts] | None
    energy: Energies | None
    driven: Driving | None
    doses: dict[str, Dose] | None
    oxidant: Dose | None
    mechanical_index: float | None
    accuracy: Accuracy
    uniformity: Uniformity | None
    thermo_range: tuple[ThermoRange, ...]
    ionisation: IonisationEstimate | None
    coupling_difference: dict[str, Any] | None = None
    in_liquid: InLiquid | None = None
    mixed: Estimate | None = None

    def over_mixed(self) -> dict[str, float | None] | None:
        """Delivered, this over the well-mixed gas; ``None`` where either has no numbers."""
        if self.mixed is None or self.counts is None or self.mixed.counts is None:
            return None
        there = {name: one.delivered for name, one in self.mixed.counts.items()}
        return {
            name: one.delivered / there[name] if there[name] > 0.0 else None
            for name, one in self.counts.items()
        }

    def as_dict(self) -> dict[str, Any]:
        """The result by its documented keys, ready for JSON (no not-a-number)."""
        return _as_dict(self)


def _as_dict(result: Estimate) -> dict[str, Any]:
    def plain(value: Any) -> Any:
        return None if value is None else asdict(value)

    def each(values: dict[str, Any] | None) -> Any:
        return None if values is None else {name: asdict(one) for name, one in values.items()}

    oxidant, film = plain(result.oxidant) or {}, result.in_liquid
    table = {
        "title": result.protocol.title,
        "version": __version__,
        "schema": SCHEMA,
        "warnings": list(result.warnings),
        "outcome": {"code": str(result.outcome.code), "sentence": result.outcome.sentence},
        "inputs": _inputs(result),
        "collapse": plain(result.collapse),
        "per_collapse": each(result.counts),
        "energy_per_window_J": plain(result.energy),
        "balance": {key: _finite(value) for key, value in asdict(result.balance).items()},
        "uniformity": plain(result.uniformity),
        "caught": [] if film is None else [asdict(one) for one in film.catches],
        "in_liquid": None if film is None else _in_liquid(film),
        "driving": plain(result.driven),
        "per_exposure": each(result.doses),
        "oxidant": {
            "mol_per_L": oxidant.get("mol_per_L"),
            "mol_per_J": oxidant.get("mol_per_J"),
            "mol": oxidant.get("mol"),
            "formula": OXIDANT_FORMULA,
        },
        "mechanical_index": result.mechanical_index,
        "thermo_range": [asdict(one) for one in result.thermo_range],
        "ionisation": plain(result.ionisation),
        "provenance": _provenance(result),
    }
    if result.coupling_difference is not None:
        table["coupling_difference"] = result.coupling_difference
    if result.mixed is not None:
        table["mixed"] = _beside(result, result.mixed)
    return table


def _in_liquid(film: InLiquid) -> dict[str, Any]:
    """The film's cycle in fresh liquid and the one that repeats, molecules."""
    return {
        "window": film.window,
        "OH_delivered": film.OH_delivered,
        "fresh": asdict(film.fresh) | {"OH_shares": film.fresh.shares},
        "repeating": asdict(film.repeating) | {"OH_shares": film.repeating.shares},
        "repeats": film.repeats,
    }


def _beside(result: Estimate, mixed: Estimate) -> dict[str, Any]:
    """The well-mixed gas beside the headline, and headline over mixed."""
    counts = mixed.counts
    return {
        "outcome": {"code": str(mixed.outcome.code), "sentence": mixed.outcome.sentence},
        "collapse": None if mixed.collapse is None else asdict(mixed.collapse),
        "per_collapse": None if counts is None else {k: asdict(v) for k, v in counts.items()},
        "headline_over_mixed": result.over_mixed(),
    }


def _finite(value: float) -> float | None:
    """A number for JSON, which knows no infinity: that of a ledger that cannot be added up."""
    return value if isfinite(value) else None


def _inputs(result: Estimate) -> dict[str, Any]:
    phase = result.history.bubble.phase
    return result.protocol.dump() | {
        "liquid_properties": asdict(result.liquid),
        "mechanism": {"name": phase.name, "sha256": phase.sha256},
        "accommodation": dict(result.history.bubble.accommodation),
    }


def _provenance(result: Estimate) -> dict[str, Any]:
    described = json.dumps(result.protocol.dump(), sort_keys=True)
    return {
        "input_sha256": hashlib.sha256(described.encode()).hexdigest(),
        "libraries": {name: version(name) for name in LIBRARIES},
        "tolerance": result.accuracy.relative,
        "windows": len(result.history.windows),
        "counters": result.history.counters,
    }
