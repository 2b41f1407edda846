"""How uncertain each rate constant is, and perturbed rates on the phase already loaded.

Distribution, a choice of this project: ln k is normal about the mechanism's value; the published
factor f is read as two standard deviations, sigma = ln(f) / 2, and the normal is truncated there,
so that every rate stays within k / f and k f and its median is k. The multiplier acts on the rate
of progress, forward and reverse alike: equilibrium stays what thermo says.

What shares one draw: terms of one rate constant (duplicates) that the table gives one factor, for
a factor speaks of their sum; and the versions of a reaction with different noble gases as
collider, which evaluations copy from argon. Duplicates with different factors were evaluated over
different temperatures and collider-specific pairs (M and argon) in different experiments: each
has a draw of its own. What can be reached by one draw is one *uncertain rate* here.
"""

from __future__ import annotations

import csv
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache
from hashlib import blake2b
from importlib import resources
from math import exp, log
from pathlib import Path
from statistics import NormalDist

from sonoyield.describe.gas import NOBLE, GasPhase

DEFAULT_FACTOR = 2.0  # of a rate whose mechanism gives none: an assumption, marked as such
DEFAULT_SOURCE = "assumed: the mechanism gives no factor"
WIDTH = 2.0  # standard deviations that the factor stands for, and where the normal is cut


@dataclass(frozen=True)
class RateUncertainty:
    """One uncertain rate: the reactions that share one draw, and how far it may be off.

    ``reaction_id``: ids joined by ``+``; ``rows``: their places in the phase; ``factor`` f >= 1;
    ``source``: where f comes from; ``assumed``: the mechanism gives none. ``key`` names the draw
    and is the same in every phase that holds the reaction.
    """

    reaction_id: str
    equation: str
    factor: float
    source: str
    assumed: bool
    rows: tuple[int, ...]
    key: str

    @property
    def sigma(self) -> float:
        """Standard deviation of ln k before truncation."""
        return log(self.factor) / WIDTH


@lru_cache(maxsize=16)
def rate_uncertainties(phase: GasPhase) -> tuple[RateUncertainty, ...]:
    """The uncertain rates of a phase, in its order; every reaction is in exactly one.

    Raises ``ValueError`` where a factor is not a number of at least 1.
    """
    gas = phase.solution()
    sources = _published_sources(phase)
    groups: dict[str, list[tuple[int, str]]] = {}
    kept: dict[str, tuple[str, float, bool]] = {}
    for row, reaction in enumerate(gas.reactions()):
        extra = reaction.input_data
        name = str(extra.get("id", f"#{row + 1}"))
        given = extra.get("uncertainty-factor")
        factor = DEFAULT_FACTOR if given is None else _checked(given, name)
        key = f"{_without_noble(reaction)} f={factor:g}"
        groups.setdefault(key, []).append((row, name))
        kept.setdefault(key, (reaction.equation, factor, given is None))
    return tuple(
        _rate(key, members, *kept[key], sources.get(members[0][1], "the mechanism file"))
        for key, members in groups.items()
    )


def deviation(rate: RateUncertainty, seed: int) -> float:
    """The draw of one rate for a seed, in standard deviations, within -2 and 2.

    It depends on seed and rate alone, not on order, phase or what else is drawn.
    """
    digest = blake2b(f"{seed}|{rate.key}".encode(), digest_size=8).digest()
    share = (int.from_bytes(digest, "big") + 0.5) / 2.0**64
    return _NORMAL.inv_cdf(_TAIL + share * (1.0 - 2.0 * _TAIL))


def multipliers(phase: GasPhase, seed: int) -> dict[int, float]:
    """Multiplier of each reaction, by its place in the phase, for a seed."""
    found: dict[int, float] = {}
    for rate in rate_uncertainties(phase):
        value = exp(rate.sigma * deviation(rate, seed))
        found |= dict.fromkeys(rate.rows, value)
    return found


@contextmanager
def perturbed(phase: GasPhase, seed: int) -> Iterator[None]:
    """Within it the phase of this process has the rates of ``seed``; nothing is read anew."""
    with multiplied(phase, multipliers(phase, seed)):
        yield


@contextmanager
def multiplied(phase: GasPhase, factors: Mapping[int, float]) -> Iterator[None]:
    """Within it the given reactions are that many times faster, forward and reverse.

    They multiply what is set already and are taken back at the end, whatever happens within. The
    phase is the process's own: not for threads that share it.
    """
    gas = phase.solution()
    before = {row: gas.multiplier(row) for row in factors}
    try:
        for row, factor in factors.items():
            gas.set_multiplier(before[row] * factor, row)
        yield
    finally:
        for row, value in before.items():
            gas.set_multiplier(value, row)


def _checked(given: object, name: str) -> float:
    try:
        factor = float(str(given))
    except ValueError:
        factor = 0.0
    if not 1.0 <= factor < float("inf"):
        raise ValueError(f"reaction {name}: uncertainty-factor {given!r}; a number of at least 1")
    return factor


def _without_noble(reaction: object) -> str:
    """The equation with one name for any noble gas that only collides."""
    body = getattr(reaction, "third_body", None)
    equation = str(getattr(reaction, "equation", ""))
    if body is None or body.name not in NOBLE:
        return equation
    return " ".join("noble" if word == body.name else word for word in equation.split())


def _rate(
    key: str, members: list[tuple[int, str]], equation: str, factor: float, assumed: bool,
    source: str,
) -> RateUncertainty:  # fmt: skip
    return RateUncertainty(
        reaction_id="+".join(name for _, name in members),
        equation=equation,
        factor=factor,
        source=DEFAULT_SOURCE if assumed else source,
        assumed=assumed,
        rows=tuple(row for row, _ in members),
        key=key,
    )


def _published_sources(phase: GasPhase) -> dict[str, str]:
    """Where each factor of a mechanism of ours comes from, by reaction id; empty for others."""
    table = Path(str(resources.files("sonoyield.mechanisms").joinpath("reactions.csv")))
    if Path(phase.path).parent != table.parent or not table.is_file():
        return {}
    with table.open(newline="") as file:
        return {row["id"]: row["f_source"] for row in csv.DictReader(file)}


_NORMAL = NormalDist()
_TAIL = _NORMAL.cdf(-WIDTH)
