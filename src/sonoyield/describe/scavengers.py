"""What in the liquid catches OH: read from ``[liquid.scavengers]``, known or described."""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib import resources
from types import MappingProxyType
from typing import Any

from sonoyield.describe.errors import RefusalError, show_value
from sonoyield.describe.fields import did_you_mean
from sonoyield.describe.units import READERS

MOST = 8  # each is a further species of the film
DEFAULT_DIFFUSIVITY = 1e-9  # m2/s at 25 degC: of most small molecules 0.6e-9 to 1.5e-9
TABLE = "scavengers.csv"
KEYS = ("k", "concentration", "diffusivity")
ENTRY = 'a concentration, e.g. "2 mmol/L", or a table with ' + ", ".join(KEYS)

_NAME = re.compile(r"[A-Za-z0-9_.-]{1,40}")
# The film makes or dissolves these itself; a scavenger of that name would be another species.
_OF_THE_FILM = (
    "OH", "H", "O", "HO2", "O2-", "H2O2", "O3", "H2", "O2", "H2O", "N2",
    "NO", "NO2", "NO2-", "NO3-", "HNO2", "HNO3", "HNO4", "HONO", "HONO2", "ONOOH",
)  # fmt: skip
# Jayson, Parsons and Swallow 1973 (chloride), Zehavi and Rabani 1972 (bromide): the adduct falls
# apart into OH again, at pH 7 far more often than it goes on.
_GIVES_BACK = "at pH 7 gives most of the OH back that it takes, so no rate constant is filled in"
REVERSIBLE = {"chloride": f"chloride {_GIVES_BACK}", "bromide": f"bromide {_GIVES_BACK}"}


@dataclass(frozen=True)
class Scavenger:
    """One scavenger of OH.

    ``k`` rate constant with OH in m3/mol/s, taken as it is at any temperature (the table's hold at
    25 degC); ``concentration`` far from the bubble in mol/m3; ``diffusivity`` in m2/s at 25 degC.
    """

    k: float
    concentration: float
    diffusivity: float = DEFAULT_DIFFUSIVITY


@dataclass(frozen=True)
class KnownScavenger:
    """A row of the shipped table: ``k`` m3/mol/s and ``diffusivity`` m2/s at 25 degC.

    The factors are the multiplicative uncertainties of both; ``note`` warns of what else the
    substance does, and may be empty.
    """

    k: float
    k_factor: float
    k_source: str
    diffusivity: float
    diffusivity_factor: float
    diffusivity_source: str
    note: str


@cache
def known_scavengers() -> Mapping[str, KnownScavenger]:
    """Scavengers whose rate constant need not be given, by name."""
    table = resources.files("sonoyield.mechanisms").joinpath(TABLE)
    rows = csv.DictReader(table.read_text("utf-8").splitlines())
    return MappingProxyType({row["name"]: _known(row) for row in rows})


@dataclass(frozen=True)
class ScavengersReader:
    """Takes a table of scavengers by name; gives ``Scavenger`` by name, in the order written."""

    allowed: str = f'up to {MOST} names, each with {ENTRY}, e.g. terephthalate = "2 mmol/L"'

    def __call__(self, value: Any) -> dict[str, Scavenger]:
        if not isinstance(value, Mapping):
            raise RefusalError("a table of scavengers is due", self.allowed)
        if len(value) > MOST:
            raise RefusalError(f"{len(value)} scavengers are too many", self.allowed)
        return {_name(name): _scavenger(name, entry) for name, entry in value.items()}


def _known(row: Mapping[str, str]) -> KnownScavenger:
    return KnownScavenger(
        k=float(row["k_25C_L_mol_s"]) / 1e3,
        k_factor=float(row["k_uncertainty_factor"]),
        k_source=f"{row['k_source']} ({row['k_provenance']})",
        diffusivity=float(row["diffusivity_25C_m2_s"]),
        diffusivity_factor=float(row["diffusivity_uncertainty_factor"]),
        diffusivity_source=f"{row['diffusivity_source']} ({row['diffusivity_provenance']})",
        note=row["note"],
    )


def _name(name: Any) -> str:
    if not isinstance(name, str) or not _NAME.fullmatch(name):
        problem = f"{show_value(name)} is not a name"
        raise RefusalError(problem, "up to 40 letters, digits, dots, hyphens and underscores")
    if name in _OF_THE_FILM:
        raise RefusalError("the film holds this species already", "another name", name)
    return name


def _scavenger(name: str, entry: Any) -> Scavenger:
    known = known_scavengers().get(name)
    if isinstance(entry, Mapping):
        return _described(name, entry, known)
    if known is None:
        raise RefusalError(_unknown(name), _names_or_table(), name)
    concentration = _read("concentration", entry, name)
    return Scavenger(known.k, concentration, known.diffusivity)


def _described(name: str, table: Mapping[str, Any], known: KnownScavenger | None) -> Scavenger:
    """A scavenger given as a table; what a known one's lacks comes from its row."""
    _check_keys(name, table)
    concentration = _read("concentration", table["concentration"], f"{name}.concentration")
    k = _own(name, table, "k", "rate_constant", known.k if known else 0.0)
    usual = known.diffusivity if known else DEFAULT_DIFFUSIVITY
    return Scavenger(k, concentration, _own(name, table, "diffusivity", "diffusivity", usual))


def _check_keys(name: str, table: Mapping[str, Any]) -> None:
    for key in table:
        if key not in KEYS:
            problem = "unknown key" + did_you_mean(str(key), KEYS)
            raise RefusalError(problem, ", ".join(KEYS), f"{name}.{key}")
    if "concentration" not in table:
        allowed = READERS["concentration"].allowed
        raise RefusalError("missing", allowed, f"{name}.concentration")
    if "k" not in table and name not in known_scavengers():
        problem = f"missing, and {_unknown(name)}"
        raise RefusalError(problem, READERS["rate_constant"].allowed, f"{name}.k")


def _own(name: str, table: Mapping[str, Any], key: str, dimension: str, usual: float) -> float:
    return _read(dimension, table[key], f"{name}.{key}") if key in table else usual


def _read(dimension: str, value: Any, key: str) -> float:
    try:
        return READERS[dimension](value)
    except RefusalError as error:
        raise RefusalError(error.problem, error.allowed, key) from None


def _unknown(name: str) -> str:
    if name.lower() in REVERSIBLE:
        return REVERSIBLE[name.lower()]
    return "no rate constant is known for this name" + did_you_mean(name, known_scavengers())


def _names_or_table() -> str:
    return ", ".join(known_scavengers()) + ", or any name with a table of " + ", ".join(KEYS)
