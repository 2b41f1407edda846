"""Readers for values without units; each has ``allowed``, the words for what it takes."""

from __future__ import annotations

import difflib
import os
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from typing import Any

from pydantic import ValidationInfo

from sonoyield.describe.errors import RefusalError, show_value
from sonoyield.describe.gases import AT_REST, COMPOSITIONS, REFUSED_GASES, gas_name

SUM_TOLERANCE = 1e-6
AUTO = "auto"
SHIPPED = ("h2o_o2", "h2o_o2_n2")  # mechanisms that come with the package


@dataclass(frozen=True)
class ChoiceReader:
    """Takes one of a few words; ``later`` maps words of later versions to their sentence."""

    options: tuple[str, ...]
    later: Mapping[str, str] = field(default_factory=dict, hash=False)

    def __call__(self, value: Any) -> str:
        if not isinstance(value, str):
            raise RefusalError("a text is due", self.allowed)
        if value in self.options:
            return value
        if value in self.later:
            raise RefusalError(self.later[value], self.allowed)
        raise RefusalError(
            "not one of the choices" + did_you_mean(value, self.options), self.allowed
        )

    @property
    def allowed(self) -> str:
        return ", ".join(f'"{option}"' for option in self.options)


@dataclass(frozen=True)
class ShareReader:
    """Takes a number above 0 and at most 1."""

    allowed: str = "a number above 0 and at most 1, e.g. 0.4"

    def __call__(self, value: Any) -> float:
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise RefusalError("a plain number is due", self.allowed)
        if not 0 < value <= 1:
            raise RefusalError("out of range", self.allowed)
        return float(value)


@dataclass(frozen=True)
class CountReader:
    """Takes a whole number in a range; ``later`` maps words of later versions to a sentence."""

    low: int
    high: int
    later: Mapping[str, str] = field(default_factory=dict, hash=False)

    def __call__(self, value: Any) -> int:
        if isinstance(value, str) and value in self.later:
            raise RefusalError(self.later[value], self.allowed)
        if isinstance(value, bool) or not isinstance(value, int):
            raise RefusalError("a whole number is due", self.allowed)
        if not self.low <= value <= self.high:
            raise RefusalError("out of range", self.allowed)
        return value

    @property
    def allowed(self) -> str:
        return f"a whole number from {self.low} to {self.high}"


@dataclass(frozen=True)
class SwitchReader:
    """Takes true or false."""

    allowed: str = "true or false"

    def __call__(self, value: Any) -> bool:
        if not isinstance(value, bool):
            raise RefusalError("true or false is due", self.allowed)
        return value


@dataclass(frozen=True)
class TextReader:
    """Takes any text of at most 200 characters."""

    allowed: str = "a text of at most 200 characters"

    def __call__(self, value: Any) -> str:
        if not isinstance(value, str) or len(value) > 200:
            raise RefusalError("a short text is due", self.allowed)
        return value


@dataclass(frozen=True)
class MechanismReader:
    """Takes ``auto``, a shipped mechanism or the path of a Cantera file.

    A relative path counts from the folder of the protocol file, which comes as the context of the
    validation; the file itself is checked once the gas is known.
    """

    allowed: str = '"auto", "h2o_o2", "h2o_o2_n2", or the path of a Cantera file (.yaml)'

    def __call__(self, value: Any, info: ValidationInfo) -> str:
        if not isinstance(value, str):
            raise RefusalError("a text is due", self.allowed)
        names = (AUTO, *SHIPPED)
        if value in names:
            return value
        if not is_file(value):
            raise RefusalError("not a mechanism" + did_you_mean(value, names), self.allowed)
        return os.path.join((info.context or {}).get("folder", ""), value)


@dataclass(frozen=True)
class MixtureReader:
    """Takes a gas name or a table of shares; gives mole fractions by species that sum to 1."""

    @property
    def allowed(self) -> str:
        names = ", ".join(f'"{name}"' for name in COMPOSITIONS)
        return f"{names}, or a table of shares that sum to 1, e.g. {{ AR = 0.8, O2 = 0.2 }}"

    def __call__(self, value: Any) -> dict[str, float]:
        if isinstance(value, str):
            return self._sum({self._gas(value): 1.0})
        if not isinstance(value, Mapping):
            raise RefusalError("a gas name or a table of shares is due", self.allowed)
        shares = self._shares(value)
        total = sum(shares.values())
        if not abs(total - 1.0) <= SUM_TOLERANCE:
            raise RefusalError(f"the shares sum to {total:.9g}", self.allowed)
        return self._sum({name: share / total for name, share in shares.items()})

    def _sum(self, shares: Mapping[str, float]) -> dict[str, float]:
        """Mole fractions by species of what gases of given shares make together."""
        parts = {
            species: sum(part * COMPOSITIONS[gas].get(species, 0.0) for gas, part in shares.items())
            for species in AT_REST
        }
        return {species: part for species, part in parts.items() if part > 0.0}

    def _shares(self, table: Mapping[Any, Any]) -> dict[str, float]:
        shares: dict[str, float] = {}
        for name, share in table.items():
            gas = self._gas(str(name), key=str(name))
            if gas in shares:
                raise RefusalError(f"{gas} is given twice", self.allowed)
            shares[gas] = _share(share, str(name))
        return shares

    def _gas(self, name: str, key: str = "") -> str:
        gas = gas_name(name)
        if gas in COMPOSITIONS:
            return gas
        if gas in REFUSED_GASES:
            raise RefusalError(REFUSED_GASES[gas], self.allowed, key)
        near = did_you_mean(gas, (*COMPOSITIONS, *AT_REST))
        problem = f"{show_value(name)} is not a gas of this version{near}"
        raise RefusalError(problem, self.allowed, key)


def is_file(mechanism: str) -> bool:
    """Whether a mechanism is the path of a Cantera file, rather than a name."""
    return mechanism.lower().endswith((".yaml", ".yml"))


def did_you_mean(word: str, known: Collection[str]) -> str:
    """Ask after the nearest known word; empty when none is near."""
    near = nearest(word, known)
    return f" (did you mean {near}?)" if near else ""


def nearest(word: str, known: Collection[str]) -> str:
    """Find the known word nearest to the one given, whatever its case; empty when none is near."""
    by_small = {name.lower(): name for name in known}
    found = difflib.get_close_matches(word[:80].lower(), by_small, n=1)
    return by_small[found[0]] if found else ""


def _share(value: Any, key: str) -> float:
    allowed = "a number from 0 to 1"
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise RefusalError("a plain number is due", allowed, key)
    if not 0 <= value <= 1 + SUM_TOLERANCE:
        raise RefusalError("out of range", allowed, key)
    return float(value)
