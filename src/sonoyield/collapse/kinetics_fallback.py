"""The kinetics that a resolved bubble's cells call: compiled or, for kinds unknown, Cantera's own.

A mechanism with a reaction that ``kinetics_tables`` refuses runs as well, only slower: compiled
code calls back into Python, which asks Cantera for one cell at a time, and takes differences for
the Jacobian.
"""

from __future__ import annotations

import ctypes
from dataclasses import dataclass

import numpy as np
from numba import njit

from sonoyield.collapse import kinetics as compiled
from sonoyield.collapse.kernel import address_of
from sonoyield.collapse.kinetics_arrays import Scratch, Tables, new_scratch
from sonoyield.collapse.kinetics_tables import (
    UnknownKineticsError,
    cantera_production,
    compile_kinetics,
)
from sonoyield.describe.gas import Array, GasPhase

NUDGE = 1e-6  # of a concentration, and of the temperature, in the differences
FLOOR = 1e-9  # of all concentrations together, the least step of one of them


@dataclass(frozen=True, eq=False)
class CellKinetics:
    """Tables, and the addresses (see ``kernel``) of what reads them.

    ``production`` and ``derivatives`` are called as ``kinetics.production`` and
    ``kinetics.production_and_jacobian`` are. ``known``: whether all of it is compiled.
    """

    tables: Tables
    scratch: Scratch
    production: int
    derivatives: int
    known: bool


def cell_kinetics(phase: GasPhase) -> CellKinetics:
    """A phase's kinetics, with the rate multipliers that are set in it now.

    Raises ``DisagreementError`` where compiled rates differ from Cantera's.
    """
    try:
        found = compile_kinetics(phase)
    except UnknownKineticsError:
        return _asked(phase)
    functions = compiled.production, compiled.production_and_jacobian
    return _with_addresses(found.tables, len(phase.species), *functions, True)


def _asked(phase: GasPhase) -> CellKinetics:
    if phase not in _phases:
        _phases.append(phase)
    tables = _blank(float(_phases.index(phase)), len(phase.species))
    return _with_addresses(tables, len(phase.species), _production, _derivatives, False)


def _with_addresses(
    tables: Tables, species: int, production: object, derivatives: object, known: bool
) -> CellKinetics:
    row, square, room = np.zeros(species), np.zeros((species, species)), new_scratch(tables)
    made = address_of(production, 0.0, row, row, row, True, tables, room, row)
    derived = address_of(
        derivatives, 0.0, row, row, row, row, True, tables, room, row, square, row
    )
    return CellKinetics(tables, room, made, derived, known)


def _blank(number: float, species: int) -> Tables:
    """Tables without reactions; ``unit`` holds the phase's number among ``_phases``."""
    shapes = {
        "reactants": (0, 3), "products": (0, 3), "slope_owner": (0, 2), "slope_place": (0, 2),
        "colliding": (species, 0), "varied": (0, 2), "variation": (0, 3), "helped": (0, 2),
        "efficiency": (0, species), "falling": (0, 2), "low": (0, 3), "centre": (0, 5),
    }  # fmt: skip
    places = (
        "reactants", "products", "scaled", "owner", "member", "slope_owner", "slope_place",
        "bodies", "varied", "helped", "falling",
    )  # fmt: skip
    arrays = {
        name: np.zeros(shapes.get(name, (0,)), dtype=np.uint32 if name in places else float)
        for name in Tables._fields
    }
    return Tables(**(arrays | {"bodies": np.zeros(1, dtype=np.uint32), "unit": np.array([number])}))


_phases: list[GasPhase] = []


@ctypes.CFUNCTYPE(
    None, ctypes.c_double, ctypes.c_double, ctypes.c_int64, ctypes.c_int64,
    *[ctypes.c_void_p] * 5,
)  # fmt: skip
def _answer(
    number: float, temperature: float, count: int, dense: int, concentrations: int,
    crowding: int, out: int, by_concentration: int, by_temperature: int,
) -> None:  # fmt: skip
    """Fill ``out`` and, unless they are the same place, the derivatives.

    What Cantera refuses comes back as not-a-number, so that the step is taken anew, shorter.
    """
    phase, made = _phases[int(number)], _view(out, count)
    c, crowd = np.maximum(_view(concentrations, count), 0.0), _view(crowding, count)
    try:
        if by_temperature == out:
            made[:] = _made(phase, np.array([temperature]), c[None, :], crowd, dense)[0]
        else:
            slopes = _view(by_concentration, count * count).reshape(count, count)
            _differ(phase, temperature, c, crowd, dense, made, slopes, _view(by_temperature, count))
    except Exception:  # of whatever kind: it must not pass through compiled code
        made[:] = np.nan


def _differ(
    phase: GasPhase, temperature: float, c: Array, crowding: Array, dense: int,
    out: Array, by_concentration: Array, by_temperature: Array,
) -> None:  # fmt: skip
    """Production and its derivatives by one-sided differences, crowding held."""
    steps = NUDGE * c + FLOOR * c.sum()
    several = np.vstack([c, c, c + np.diag(steps)])
    temperatures = np.full(len(several), temperature)
    temperatures[1] *= 1.0 + NUDGE
    made = _made(phase, temperatures, several, crowding, dense)
    out[:] = made[0]
    by_temperature[:] = (made[1] - made[0]) / (NUDGE * temperature)
    by_concentration[:] = ((made[2:] - made[0]) / steps[:, None]).T


def _made(
    phase: GasPhase, temperatures: Array, several: Array, crowding: Array, dense: int
) -> Array:
    crowd = np.tile(crowding, (len(several), 1))
    return cantera_production(phase, temperatures, several, crowd, bool(dense))


def _view(place: int, count: int) -> Array:
    return np.ctypeslib.as_array(ctypes.cast(place, ctypes.POINTER(ctypes.c_double)), (count,))


@njit(error_model="numpy")  # never on disk: it holds this process's address of ``_answer``
def _production(
    temperature: float, concentrations: Array, _gibbs: Array, crowding: Array, dense: bool,
    tables: Tables, _scratch: Scratch, out: Array,
) -> None:  # fmt: skip
    _answer(
        tables.unit[0], temperature, out.size, int(dense), concentrations.ctypes, crowding.ctypes,
        out.ctypes, out.ctypes, out.ctypes,
    )  # fmt: skip


@njit(error_model="numpy")
def _derivatives(
    temperature: float, concentrations: Array, _gibbs: Array, _enthalpy: Array, crowding: Array,
    dense: bool, tables: Tables, _scratch: Scratch, out: Array, by_concentration: Array,
    by_temperature: Array,
) -> None:  # fmt: skip
    _answer(
        tables.unit[0], temperature, out.size, int(dense), concentrations.ctypes, crowding.ctypes,
        out.ctypes, by_concentration.ctypes, by_temperature.ctypes,
    )  # fmt: skip
