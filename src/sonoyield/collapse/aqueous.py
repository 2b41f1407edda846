"""Radical chemistry in the water around a bubble: species, reactions, and their compiled rates.

Water is the solvent: it and its ions at the film's pH are not followed. Superoxide and nitrite are
species beside their acids, HO2 and HNO2, which give up their proton in about a microsecond and in
40 ns: a burst of nanoseconds meets the acids, the rest of a cycle their ions. The pH is held; acid
made in the film is left out.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numba import njit
from numpy.typing import NDArray

from sonoyield.collapse import aqueous_tables as tables
from sonoyield.describe.gas import Array
from sonoyield.describe.scavengers import Scavenger

CAUGHT = "caught:"
INVOLATILE = 1e30  # liquid over gas: what never goes back

# Film species that the gas holds too, by the gas's name.
FILM_OF_GAS = {
    "OH": "OH", "H": "H", "O": "O", "HO2": "HO2", "H2O2": "H2O2", "O3": "O3", "H2": "H2",
    "O2": "O2", "NO": "NO", "NO2": "NO2", "HONO": "HNO2", "HONO2": "NO3-",
}  # fmt: skip
WATER_SPECIES = ("OH", "H", "O", "HO2", "O2-", "H2O2", "O3", "H2", "O2")
NITROGEN_SPECIES = ("NO", "NO2", "HNO2", "NO2-", "NO3-", "ONOOH", "HNO4")
# 2 O - H + charge: what a species holds in OH equivalents. Water, H+ and OH- hold none, so every
# reaction conserves the sum.
OXIDANT = {
    "OH": 1.0, "H": -1.0, "O": 2.0, "HO2": 3.0, "O2-": 3.0, "H2O2": 2.0, "O3": 6.0, "H2": -2.0,
    "O2": 4.0, "NO": 2.0, "NO2": 4.0, "HNO2": 3.0, "NO2-": 3.0, "NO3-": 5.0, "ONOOH": 5.0,
    "HNO4": 7.0,
}  # fmt: skip

# O(3P) + H2O -> 2 OH has never been measured in cold water. The table's own judgement is under
# 1 1/s ("persists": left out); radiation codes use up to this value, 1/s ("water").
OXYGEN_ATOM_WITH_WATER = 2e3
OXYGEN_ATOM = ("persists", "water")
_OXYGEN_ATOM_ROW = "O -> OH + OH"

Tables = tuple[Array, NDArray[np.int64], NDArray[np.int64], NDArray[np.int64], Array]


@dataclass(frozen=True, eq=False)
class AqueousChemistry:
    """Species (L of them) and reactions (J) of the film at one temperature.

    ``diffusivity`` (L,) m2/s; ``henry`` (L,) liquid over gas concentration at equilibrium,
    ``INVOLATILE`` for what stays in the liquid; ``bulk`` (L,) mol/m3 far from the bubble;
    ``oxidant`` (L,) OH equivalents. ``reactions`` name what each row of ``tables`` does; the
    compiled functions take ``tables``: rate constants (J,), reactants (J, 2) with -1 for none,
    and net stoichiometry as rows of a sparse matrix (starts, species, coefficients).
    """

    temperature: float
    acidity: float
    species: tuple[str, ...]
    diffusivity: Array
    henry: Array
    bulk: Array
    oxidant: Array
    reactions: tuple[str, ...]
    tables: Tables
    scavengers: Mapping[str, Scavenger]

    def index(self, species: str) -> int:
        """Position of a species by the film's name; raises ``ValueError`` if it has none."""
        return self.species.index(species)

    def stoichiometry(self) -> Array:
        """Net stoichiometric coefficients (J, L)."""
        _, _, start, member, coefficient = self.tables
        matrix = np.zeros((len(self.reactions), len(self.species)))
        for j in range(len(self.reactions)):
            part = slice(start[j], start[j + 1])
            matrix[j, member[part]] = coefficient[part]
        return matrix


def aqueous_chemistry(
    temperature: float,
    scavengers: Mapping[str, Scavenger] | None = None,
    oxygen_atom: str = "persists",
    nitrogen: bool = False,
    dissolved: Mapping[str, float] | None = None,
    acidity: float = 7.0,
) -> AqueousChemistry:
    """The film's chemistry at a temperature in K (273.15 to 353.15) and a pH (``acidity``).

    ``scavengers`` of OH by name: D goes with the temperature as that of the others, the rate
    constant is taken as it is. ``oxygen_atom``: what O(3P) does to water, ``"persists"`` (nothing)
    or ``"water"`` (2 OH, at 2e3 1/s). ``nitrogen`` adds its oxides and acids. ``dissolved``: mol/m3
    of film species far away. Sources: `mechanisms/SOURCES.md`. Raises ``ValueError`` for another
    ``oxygen_atom``, a dissolved species that the film lacks, or a scavenger named as one of the
    film's own.
    """
    if oxygen_atom not in OXYGEN_ATOM:
        raise ValueError(f"oxygen_atom {oxygen_atom!r}: allowed {', '.join(OXYGEN_ATOM)}")
    names = WATER_SPECIES + (NITROGEN_SPECIES if nitrogen else ())
    catches = dict(scavengers or {})
    if taken := set(names) & set(catches):
        raise ValueError(f"scavengers {', '.join(taken)}: the film has these names already")
    names += tuple(catches) + tuple(CAUGHT + name for name in catches)
    reactions = _reactions(names, temperature, oxygen_atom, acidity)
    for name, one in catches.items():
        reactions[f"OH + {name} -> {CAUGHT}{name}"] = one.k
    return AqueousChemistry(
        temperature=temperature,
        acidity=acidity,
        species=names,
        diffusivity=_diffusivities(names, catches, temperature),
        henry=_henry(names, temperature),
        bulk=_bulk(names, catches, dissolved or {}),
        oxidant=np.array([_oxidant(name) for name in names]),
        reactions=tuple(reactions),
        tables=_compile(reactions, names),
        scavengers=MappingProxyType(catches),
    )


@njit(cache=True, error_model="numpy")
def aqueous_rates(c: Array, tables: Tables, rates: Array) -> None:
    """Fill ``rates`` (J,) mol/m3/s from concentrations ``c`` (L,) mol/m3.

    Slightly negative concentrations pull back towards zero; two negative ones do not react.
    """
    constant, reactants = tables[0], tables[1]
    for j in range(constant.size):
        a = c[reactants[j, 0]]
        second = reactants[j, 1]
        if second < 0:
            rates[j] = constant[j] * a
            continue
        b = c[second]
        if second == reactants[j, 0]:
            rates[j] = constant[j] * a * abs(a)
        elif a < 0.0 and b < 0.0:
            rates[j] = 0.0
        else:
            rates[j] = constant[j] * a * b


@njit(cache=True, error_model="numpy")
def aqueous_production(c: Array, tables: Tables, out: Array) -> None:
    """Fill ``out`` (L,), net production mol/m3/s, from concentrations ``c`` (L,) mol/m3."""
    constant, reactants, start, member, coefficient = tables
    for k in range(out.size):
        out[k] = 0.0
    for j in range(constant.size):
        a = c[reactants[j, 0]]
        second = reactants[j, 1]
        rate = constant[j] * a
        if second >= 0:
            b = c[second]
            if second == reactants[j, 0]:
                rate *= abs(a)
            elif a < 0.0 and b < 0.0:
                rate = 0.0
            else:
                rate *= b
        for at in range(start[j], start[j + 1]):
            out[member[at]] += coefficient[at] * rate


@njit(cache=True, error_model="numpy")
def aqueous_slopes(c: Array, change: Array, tables: Tables, slopes: Array) -> None:
    """Fill ``slopes`` (J,): derivative of each reaction's rate along ``change`` (L,) of ``c``."""
    constant, reactants = tables[0], tables[1]
    for j in range(constant.size):
        first, second = reactants[j, 0], reactants[j, 1]
        if second < 0:
            slopes[j] = constant[j] * change[first]
        elif second == first:
            slopes[j] = 2.0 * constant[j] * abs(c[first]) * change[first]
        elif c[first] < 0.0 and c[second] < 0.0:
            slopes[j] = 0.0
        else:
            slopes[j] = constant[j] * (c[second] * change[first] + c[first] * change[second])


@njit(cache=True, error_model="numpy")
def aqueous_jacobian(c: Array, tables: Tables, jac: Array) -> None:
    """Fill ``jac`` (L, L) 1/s: derivative of each species' production by each concentration."""
    constant, reactants, start, member, coefficient = tables
    for k in range(c.size):
        for n in range(c.size):
            jac[k, n] = 0.0
    for j in range(constant.size):
        first, second = reactants[j, 0], reactants[j, 1]
        a = c[first]
        by_first = constant[j]
        by_second = 0.0
        if second == first:
            by_first *= 2.0 * abs(a)
        elif second >= 0:
            b = c[second]
            dead = a < 0.0 and b < 0.0
            by_first = 0.0 if dead else constant[j] * b
            by_second = 0.0 if dead else constant[j] * a
        for at in range(start[j], start[j + 1]):
            jac[member[at], first] += coefficient[at] * by_first
            if by_second != 0.0:
                jac[member[at], second] += coefficient[at] * by_second


def _reactions(
    names: Sequence[str], temperature: float, oxygen_atom: str, acidity: float
) -> dict[str, float]:
    """Rate constants (m3/mol/s or 1/s) of the tabled reactions among ``names``, by equation."""
    rows = {row["film"]: row for row in tables.reaction_rows()}
    found: dict[str, float] = {}
    proton = tables.rate_constant(rows["O2- -> HO2"], temperature)  # by diffusion, for both ions
    outside = 1e3 * 10.0**-acidity  # mol/m3 of H+
    for equation, row in rows.items():
        left, right = _sides(equation)
        if not {*left, *right} <= set(names):
            continue
        if row["class"] == "pKa":
            acid, ion = left[0], right[0]
            found[f"{acid} -> {ion}"] = proton * tables.acidity_constant(row, temperature)
            found[f"{ion} -> {acid}"] = proton * outside
        elif equation == _OXYGEN_ATOM_ROW:
            if oxygen_atom == "water":
                found[equation] = OXYGEN_ATOM_WITH_WATER
        elif equation != "O2- -> HO2":
            found[equation] = tables.rate_constant(row, temperature)
    return found


def _compile(reactions: Mapping[str, float], names: Sequence[str]) -> Tables:
    reactants = np.full((len(reactions), 2), -1, dtype=np.int64)
    start, member, coefficient = [0], [], []
    for j, equation in enumerate(reactions):
        left, right = _sides(equation)
        reactants[j, : len(left)] = [names.index(one) for one in left]
        for name in dict.fromkeys([*left, *right]):
            net = right.count(name) - left.count(name)
            if net:
                member.append(names.index(name))
                coefficient.append(float(net))
        start.append(len(member))
    return (
        np.array(list(reactions.values())),
        reactants,
        np.array(start, dtype=np.int64),
        np.array(member, dtype=np.int64),
        np.array(coefficient),
    )


def _sides(equation: str) -> tuple[list[str], list[str]]:
    left, _, right = equation.partition("->")
    return _terms(left), _terms(right)


def _terms(side: str) -> list[str]:
    return [one.strip() for one in side.split(" + ") if one.strip()]


def _diffusivities(
    names: Sequence[str], scavengers: Mapping[str, Scavenger], temperature: float
) -> Array:
    """What has been caught diffuses as its scavenger does."""
    warmer = tables.stokes_einstein(temperature)
    own = {name: one.diffusivity * warmer for name, one in scavengers.items()}
    own |= {CAUGHT + name: value for name, value in own.items()}
    return np.array([own[n] if n in own else tables.diffusivity(n, temperature) for n in names])


def _henry(names: Sequence[str], temperature: float) -> Array:
    known = tables.transport_rows()
    return np.array(
        [
            tables.henry_dimensionless(name, temperature)
            if ("henry_Hcp", name) in known
            else INVOLATILE
            for name in names
        ]
    )


def _bulk(
    names: Sequence[str], scavengers: Mapping[str, Scavenger], dissolved: Mapping[str, float]
) -> Array:
    bulk = np.zeros(len(names))
    for name, value in dissolved.items():
        if name not in names:
            raise ValueError(f"dissolved {name!r}: the film holds {', '.join(names)}")
        bulk[names.index(name)] = value
    for name, one in scavengers.items():
        bulk[names.index(name)] = one.concentration
    return bulk


def _oxidant(name: str) -> float:
    return 1.0 if name.startswith(CAUGHT) else OXIDANT.get(name, 0.0)
