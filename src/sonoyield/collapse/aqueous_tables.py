"""Rate constants, diffusion and Henry's constants in water from the shipped tables.

Every number stands in `mechanisms/aqueous_reactions.csv` or `aqueous_transport.csv` with its
source; the forms of temperature dependence are those that the tables name.
"""

from __future__ import annotations

import csv
from functools import lru_cache
from importlib import resources
from math import exp, log

import numpy as np

from sonoyield.describe.gas import GAS_CONSTANT
from sonoyield.describe.liquid import viscosity_iapws2011

ROOM = 298.15  # K, where the tables hold
COLDEST_FIT = 293.15  # K: the fits of rate constants begin here
CUBIC_METRE = 1e-3  # m3 in a litre
PER_PASCAL = 1e-2  # mol/L/bar in mol/m3/Pa

Row = dict[str, str]


@lru_cache(maxsize=1)
def reaction_rows() -> tuple[Row, ...]:
    """Rows of ``aqueous_reactions.csv`` in file order."""
    return _read("aqueous_reactions.csv")


@lru_cache(maxsize=1)
def transport_rows() -> dict[tuple[str, str], Row]:
    """Rows of ``aqueous_transport.csv`` by kind and the film's name of the species."""
    return {(row["kind"], row["film"]): row for row in _read("aqueous_transport.csv")}


def rate_constant(row: Row, temperature: float) -> float:
    """Rate constant at a temperature in K, m3/mol/s (second order) or 1/s (first).

    Fits begin at 20 degC; below, they go on along their own slope there (Arrhenius), since the
    five-term ones run away. Rows without a temperature coefficient are constant.
    """
    scale = 1.0 if row["unit"] == "1/s" else CUBIC_METRE
    if temperature >= COLDEST_FIT:
        return scale * exp(_log_rate(row, temperature))
    step = 0.5
    at = _log_rate(row, COLDEST_FIT)
    slope = (at - _log_rate(row, COLDEST_FIT + step)) / (1 / COLDEST_FIT - 1 / (COLDEST_FIT + step))
    return scale * exp(at + slope * (1.0 / temperature - 1.0 / COLDEST_FIT))


def acidity_constant(row: Row, temperature: float) -> float:
    """Acid dissociation constant of a ``pKa`` row at a temperature in K, mol/m3."""
    known = _parameters(row)
    celsius = temperature - 273.15
    power = sum(value * celsius ** int(name[1:]) for name, value in known.items())
    return float(10.0 ** -(power if known else float(row["k_298K"])) / CUBIC_METRE)


def diffusivity(species: str, temperature: float) -> float:
    """Diffusion coefficient in water at a temperature in K, m2/s.

    Raises ``KeyError`` for a species without a row. Where the source gives no other dependence,
    Stokes and Einstein: proportional to T over viscosity.
    """
    row = transport_rows()["diffusion_in_water", species]
    known = _parameters(row)
    if row["T_form"] == "han_bartels":
        power = known["a"] + known["b"] / temperature - (known["c"] / temperature) ** 2
        return float(1e-4 * 10.0**power)
    if row["T_form"] == "arrhenius":
        return known["A"] * exp(-known["B_K"] / temperature)
    if row["T_form"] == "table":
        at = np.array([float(name) for name in known])
        nearest = min(max(temperature, float(at[0])), float(at[-1]))
        value = float(np.interp(nearest, at, np.array(list(known.values()))))
        return value * stokes_einstein(temperature, nearest)
    return float(row["value"]) * stokes_einstein(temperature)


def henry(species: str, temperature: float) -> float:
    """Henry's constant at a temperature in K, mol/m3/Pa of the undissociated species.

    Raises ``KeyError`` for a species without a row. The atoms H and O have only a guess of their
    order, without a temperature dependence.
    """
    row = transport_rows()["henry_Hcp", species]
    known = _parameters(row)
    if row["T_form"] == "ln3":
        value = exp(known["a"] + known["b"] / temperature + known["c"] * log(temperature))
    else:
        coefficient = known.get("B_K", 0.0)
        value = float(row["value"]) * exp(coefficient * (1.0 / temperature - 1.0 / ROOM))
    return PER_PASCAL * value


def henry_dimensionless(species: str, temperature: float) -> float:
    """Concentration in the liquid over that in the gas at equilibrium, at a temperature in K."""
    return henry(species, temperature) * GAS_CONSTANT * temperature


def stokes_einstein(temperature: float, reference: float = ROOM) -> float:
    """Ratio of a diffusion coefficient at a temperature in K to that at ``reference``.

    T over viscosity (Einstein 1905), viscosity of water by IAPWS (2011).
    """
    viscosity = viscosity_iapws2011(reference) / viscosity_iapws2011(temperature)
    return temperature / reference * viscosity


def _log_rate(row: Row, temperature: float) -> float:
    known = _parameters(row)
    if row["T_form"] == "arrhenius":
        return log(known["A"]) - known["B_K"] / temperature
    if row["T_form"] == "log10poly_invT":
        return log(10.0) * sum(a / temperature ** int(name[1:]) for name, a in known.items())
    coefficient = known.get("B_K", 0.0)
    return log(float(row["k_298K"])) - coefficient * (1.0 / temperature - 1.0 / ROOM)


def _parameters(row: Row) -> dict[str, float]:
    items = (item.partition("=") for item in row["parameters"].split(";") if item.strip())
    return {name.strip(): float(value) for name, _, value in items}


def _read(name: str) -> tuple[Row, ...]:
    table = resources.files("sonoyield.mechanisms").joinpath(name)
    return tuple(csv.DictReader(table.read_text("utf-8").splitlines()))
