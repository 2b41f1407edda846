"""A mechanism of the user's own: any Cantera file with the species that the model needs.

What the file lacks is filled from the shipped tables and said in a note; what cannot be filled is
refused in one line.
"""

from __future__ import annotations

import csv
import warnings
from collections.abc import Collection, Sequence
from functools import cache
from importlib import resources
from math import pi
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from sonoyield.describe.errors import RefusalError, one_line

if TYPE_CHECKING:
    import cantera as ct

Array = NDArray[np.float64]

AVOGADRO = 6.02214076e23  # 1/mol, exact (SI 2019)
NEEDED = ("H2O", "OH", "H", "O", "HO2", "H2O2", "H2", "O2")
THERMO_MODELS = ("NASA7", "NASA9")
ALLOWED = "a Cantera file with an ideal gas that holds " + ", ".join(NEEDED) + " and the gas"
HIGHEST_GOOD_FIT = 8000.0  # K: see TRANSPORT_TOP in mechanisms/build.py
ELEMENTS = ("H", "O", "N", "He", "Ar", "Kr", "Xe")  # of the gases a bubble may hold at rest
ROOM = 273.0  # K; expansion cools every gas below its liquid's temperature
LOW_FIT, LOW_THERMO = 5000.0, 6000.0  # K, below what hot bubbles reach
# W/m/K at 300 K and 1 bar by CoolProp 8.0.0 (Lemmon, Jacobsen 2004), as the source tables print it.
CONDUCTIVITY = {"AR": 0.01784, "N2": 0.02597}


def open_file(path: Path) -> tuple[ct.Solution, list[str]]:
    """Load the first phase of a Cantera file, with what Cantera itself warned of.

    Raises ``RefusalError`` when it cannot be read or is not an ideal gas with reactions, NASA-7 or
    NASA-9 thermo and transport data.
    """
    import cantera as ct

    if not path.is_file():
        raise RefusalError(f"{path.name} is no file that can be found", ALLOWED)
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            gas = ct.Solution(str(path.resolve()))
            _check_kind(gas, path.name)
            gas.transport_model = "mixture-averaged"
        except (ct.CanteraError, ValueError, OSError, UnicodeError) as error:
            if isinstance(error, RefusalError):
                raise
            problem = f"{path.name} cannot be loaded: {plain_message(error)}"
            raise RefusalError(problem, ALLOWED) from None
    told = [one for one in caught if not issubclass(one.category, DeprecationWarning)]
    return gas, [f"{path.name}: {one_line(str(one.message))[:200]}" for one in told[:1]]


def check_species(species: Collection[str], mixture: Collection[str], file: str) -> None:
    """Refuse a mechanism without a species that the model or the gas needs (``RefusalError``)."""
    missing = [name for name in (*NEEDED, *mixture) if name not in species]
    if missing:
        raise RefusalError(f"{file} has no {', '.join(dict.fromkeys(missing))}", ALLOWED)


def usual_names(names: Sequence[str]) -> tuple[str, ...]:
    """Species names as the shipped tables write them (``Ar`` becomes ``AR``), others unchanged."""
    known = shipped_covolumes()
    return tuple(
        name.upper()
        if name not in known and name.upper() in known and name.upper() not in names
        else name
        for name in names
    )


def covolumes(species: Sequence[ct.Species], names: Sequence[str]) -> tuple[Array, list[str]]:
    """Covolume of each species, m3/mol: the file's, the shipped table's, or 2 pi N sigma^3 / 3 of
    its Lennard-Jones diameter; with notes on those not from the file."""
    found, borrowed, computed = [], [], []
    for one, name in zip(species, names, strict=True):
        own = one.input_data.get("covolume")
        if isinstance(own, (int, float)) and own > 0.0:
            found.append(float(own))
        elif name in shipped_covolumes():
            found.append(shipped_covolumes()[name])
            borrowed.append(name)
        else:
            found.append(2.0 / 3.0 * pi * AVOGADRO * one.transport.diameter**3)
            computed.append(name)
    notes = []
    if borrowed:
        notes.append(f"Covolumes from the shipped table: {_some(borrowed)}.")
    if computed:
        notes.append(f"Covolumes from Lennard-Jones diameters: {_some(computed)}.")
    return np.array(found), notes


def source_limits(species: Sequence[ct.Species]) -> Array:
    """Top of each species' thermo source, K: ``source-range`` of the file, else the thermo's."""
    extra: list[dict[str, Any]] = [dict(one.input_data) for one in species]
    ranges = [fields.get("source-range") for fields in extra]
    return np.array(
        [
            float(own[1]) if own else float(one.thermo.max_temp)
            for own, one in zip(ranges, species, strict=True)
        ]
    )


def range_notes(gas: ct.Solution, names: Sequence[str], limits: Array) -> list[str]:
    """What the user must know of where thermo and transport of a file end, one sentence each."""
    notes = []
    absent = [one for one in gas.element_names if one not in ELEMENTS and _holds(gas, one)]
    if absent:
        notes.append(f"Species with {', '.join(absent)} stay absent: no gas at rest holds it.")
    coldest = max(one.thermo.min_temp for one in gas.species())
    if coldest > ROOM:
        notes.append(f"Thermo of some species begins at {coldest:.0f} K and is extended below.")
    if limits.min() < LOW_THERMO:
        notes.append(
            f"Thermo ends at {limits.min():.0f} K ({names[int(limits.argmin())]}) or above; "
            "beyond, its polynomials run on unchecked."
        )
    if gas.max_temp < LOW_FIT:
        notes.append(
            f"Transport is fitted up to {gas.max_temp:.0f} K; beyond, conductivity goes on as "
            "T^0.5 and diffusivity as T^1.5."
        )
    if gas.max_temp > HIGHEST_GOOD_FIT:
        notes.append(
            f"Transport is fitted up to {gas.max_temp:.0f} K, which may spoil conductivities at "
            f"room temperature{_conductivity_error(gas, names)}."
        )
    return notes


def plain_message(error: Exception) -> str:
    """What Cantera says, on one line, without its banner."""
    lines = [line.strip() for line in str(error).splitlines()]
    kept = [line for line in lines if line and not line.startswith("***")]
    kept = [line for line in kept if "thrown by" not in line and not line.startswith("|")]
    return one_line(" ".join(kept))[:200] or type(error).__name__


@cache
def shipped_covolumes() -> dict[str, float]:
    """Covolumes of the shipped table, m3/mol by species; sources in the table."""
    table = resources.files("sonoyield.mechanisms").joinpath("covolumes.csv")
    rows = csv.DictReader(table.read_text("utf-8").splitlines())
    return {row["species"]: float(row["b_recommended_m3_mol"]) for row in rows}


def _check_kind(gas: ct.Solution, file: str) -> None:
    if gas.thermo_model != "ideal-gas":
        raise RefusalError(f"{file}: its first phase is {gas.thermo_model}, no ideal gas", ALLOWED)
    if gas.n_reactions == 0:
        raise RefusalError(f"{file} has no reactions", ALLOWED)
    species: list[Any] = gas.species()
    charged = [one.name for one in species if one.charge]
    if charged:
        raise RefusalError(f"{file} has ions ({_some(charged)}), which are not modelled", ALLOWED)
    strange = [
        one.name for one in species if one.thermo.input_data.get("model") not in THERMO_MODELS
    ]
    if strange:
        raise RefusalError(f"{file}: thermo of {_some(strange)} is not NASA7 or NASA9", ALLOWED)
    immobile = [one.name for one in species if one.transport is None]
    if immobile:
        raise RefusalError(f"{file} has no transport data of {_some(immobile)}", ALLOWED)


def _holds(gas: ct.Solution, element: str) -> bool:
    return any(gas.n_atoms(name, element) for name in gas.species_names)


def _conductivity_error(gas: ct.Solution, names: Sequence[str]) -> str:
    errors = []
    for name, reference in CONDUCTIVITY.items():
        if name in names:
            composition = np.zeros(len(names))
            composition[names.index(name)] = 1.0
            gas.TPX = 300.0, 1e5, composition
            errors.append(f"{name} {100.0 * (gas.thermal_conductivity / reference - 1.0):+.0f} %")
    return f" (at 300 K: {', '.join(errors)})" if errors else ""


def _some(names: Sequence[str]) -> str:
    most = 8
    more = f" and {len(names) - most} more" if len(names) > most else ""
    return ", ".join(names[:most]) + more
