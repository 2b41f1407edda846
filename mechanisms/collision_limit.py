"""List the rate constants above the Lennard-Jones collision limit, from the generated mechanism.

``python mechanisms/collision_limit.py`` writes ``collision_limit.csv`` beside it; ``build.py``
then prints that table in SOURCES.md. A step that needs two molecules to meet cannot run faster
than they meet. Nothing is capped: see the text in SOURCES.md.
"""

from __future__ import annotations

import csv
from collections.abc import Mapping
from pathlib import Path
from typing import Any, NamedTuple

import cantera as ct
import numpy as np

HERE = Path(__file__).resolve().parent
MECHANISM = "h2o_o2_n2"  # holds the reactions of the smaller one too
BATH = {"H2O": 1.0}  # the most effective collider there is in a bubble
CONDITIONS = ((8000.0, 1e9), (2000.0, 1e9), (1000.0, 1e8), (1000.0, 1e9))  # K, Pa
BOLTZMANN, AVOGADRO = 1.380649e-23, 6.02214076e23  # SI, exact


class Excess(NamedTuple):
    """One direction of a reaction above the limit: ``ratio`` of its rate constant to the limit."""

    temperature_K: float
    pressure_Pa: float
    id: str
    equation: str
    direction: str
    ratio: float


def above_limit(gas: ct.Solution) -> list[Excess]:
    """Directions above the limit at each of ``CONDITIONS``, the largest first.

    A three-body step is compared as a bimolecular one: its rate constant times the colliders.
    """
    found: list[Excess] = []
    for temperature, pressure in CONDITIONS:
        gas.TPX = temperature, pressure, BATH
        found += sorted(_above_limit(gas), key=lambda one: -one.ratio)
    return found


def collision_limit(gas: ct.Solution, pair: Mapping[str, float]) -> float:
    """Rate constant of a step at every Lennard-Jones collision, m3/kmol/s, at ``gas.T``.

    Hirschfelder, Curtiss, Bird 1954: sigma^2 Omega(2,2) (8 pi k T / mu)^(1/2), sigma and epsilon
    by the usual means of the two molecules; half of it for two of a kind, as each pair counts once.
    """
    names = [name for name, count in pair.items() for _ in range(round(count))]
    one, two = (gas.species(name) for name in names)
    diameter = 0.5 * (one.transport.diameter + two.transport.diameter)
    well = float(np.sqrt(one.transport.well_depth * two.transport.well_depth))
    mass = one.molecular_weight * two.molecular_weight
    mass /= (one.molecular_weight + two.molecular_weight) * 1e3 * AVOGADRO
    speed = np.sqrt(8.0 * np.pi * BOLTZMANN * gas.T / mass)
    limit = 1e3 * AVOGADRO * diameter**2 * omega_22(BOLTZMANN * gas.T / well) * speed
    return float(limit) * (0.5 if one.name == two.name else 1.0)


def omega_22(reduced: float) -> float:
    """Reduced collision integral; ``reduced`` is kT / epsilon. Neufeld, Janzen, Aziz 1972."""
    value = 1.16145 * reduced**-0.14874 + 0.52487 * np.exp(-0.77320 * reduced)
    return float(value + 2.16178 * np.exp(-2.43787 * reduced))


def write(folder: Path = HERE) -> None:
    """Write the table from the mechanism in ``folder``."""
    gas = ct.Solution(str(folder / f"{MECHANISM}.yaml"), "gas")
    with (folder / "collision_limit.csv").open("w", newline="", encoding="utf-8") as handle:
        table = csv.writer(handle, lineterminator="\n")
        table.writerow(Excess._fields)
        for one in above_limit(gas):
            state = (f"{one.temperature_K:.0f}", f"{one.pressure_Pa:.0e}")
            table.writerow([*state, *one[2:5], f"{one.ratio:.2g}"])


def _above_limit(gas: ct.Solution) -> list[Excess]:
    colliders = np.nan_to_num(gas.third_body_concentrations, nan=1.0)
    found = []
    for i, reaction in enumerate(gas.reactions()):
        # all other rate constants with colliders (falloff, linear Burke) already hold them
        density = colliders[i] if reaction.reaction_type == "three-body-Arrhenius" else 1.0
        sides: dict[str, tuple[Mapping[str, float], Any]] = {
            "forward": (reaction.reactants, gas.forward_rate_constants[i]),
            "reverse": (reaction.products, gas.reverse_rate_constants[i]),
        }
        for direction, (pair, rate) in sides.items():
            if sum(pair.values()) != 2.0:
                continue
            ratio = float(rate) * density / collision_limit(gas, pair)
            if ratio > 1.0:
                label = str(dict(reaction.input_data)["id"])
                found.append(Excess(gas.T, gas.P, label, reaction.equation, direction, ratio))
    return found


if __name__ == "__main__":
    write()
