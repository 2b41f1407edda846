"""The gas resolved from centre to wall: its state, and what its equations know and keep.

Spherical cells of fixed mass fraction at one pressure (Prosperetti 1991, J. Fluid Mech. 222, 587,
for the uniform pressure), so that a compression moves no gas through their faces. In each cell:
amounts n_k and a temperature; Noble-Abel gas, chemistry at the true density. Between cells:
conduction and mixture-averaged diffusion with a mass correction (Kee, Coltrin, Glarborg 2003,
ch. 12; no thermal diffusion). At the wall: half a cell of gas, the kinetic resistance of the
surface and, for what a liquid film follows, half a cell of liquid, in series. Where the liquid at
the wall warms, its warming (K) spreads in the film as one more of what is dissolved.

State: radius, wall speed, the ledger's integrals, what has crossed (K), then for each cell its
amounts (K) and temperature, then the film's concentrations (M, L), the warming last among them.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from sonoyield.collapse import equations as eq
from sonoyield.collapse.kinetics_arrays import Scratch, Tables
from sonoyield.describe.gas import Array

RADIUS, SPEED, LEDGER = 0, 1, 2
CROSSED = LEDGER + eq.LEDGER  # then the cells, from CROSSED + K on

# Columns of ``Work.cell``: totals of a cell, its molar heat capacity, what heats it, what it gains.
AMOUNT, WEIGHT, COVOLUMES, VOLUME, CAPACITY, HEATING, GAIN, CENTRE = range(8)
# Columns of ``Work.face``; face i lies outside cell i, the last one is the wall.
# LEANING_HEAT: weight of the cell inside in the heat that flows carry; 1/2 is central.
AREA, HEAT_CONDUCTANCE, DRIFT, LEANING_HEAT = range(4)
# Entries of ``Work.whole``.
# TRIAL multiplies the pressure (1, but for the Jacobian).
# AT_WALL is the surface's temperature, SATURATION what its warming multiplies vapour's density by.
(
    PRESSURE,
    FREE,
    STIFFNESS,
    PRESSURE_RATE,
    TRIAL,
    MASS_RATE,
    BY_SURFACE,
    HALF,
    AT_WALL,
    SATURATION,
) = range(10)
WHOLE = 10

WARMING = -2  # in ``Film.gas_index``: not a species but how much warmer the liquid is
# Entries of ``Film.layer``.
HEAT_CAPACITY, LATENT_HEAT = range(2)


class Gas(NamedTuple):
    """What the equations know of bubble, liquid and gas.

    ``faces`` (N+1,) mass fraction inside each face; ``kinetics`` the compiled mechanism's tables;
    ``production`` and ``derivatives`` addresses of the functions that read them, called as
    ``kinetics.production`` and ``kinetics.production_and_jacobian`` are. ``jump``: the surface
    resists heat.
    """

    constants: Array
    species: Array
    nasa: Array
    conductivity: Array
    diffusivity: Array
    faces: Array
    reactive: bool
    dense: bool
    kinetics: Tables
    production: int
    derivatives: int
    jump: bool


class Film(NamedTuple):
    """The liquid film: volume coordinate of its cells' edges (M+1,), dissolved species (L).

    ``gas_index`` (L,) position of each in the gas, -1 for those of the liquid alone; ``WARMING``
    for the last where the liquid warms. ``layer``: the liquid's heat capacity in J/m3/K and latent
    heat in J/mol, used there only.
    """

    edges: Array
    diffusivity: Array
    henry: Array
    bulk: Array
    gas_index: NDArray[np.int64]
    aqueous: Any
    layer: Array = np.zeros(2)

    @property
    def dissolved(self) -> int:
        """Number of species, without the warming."""
        return int((self.gas_index != WARMING).sum())

    @property
    def warms(self) -> bool:
        """Whether the liquid at the wall warms."""
        return self.dissolved < len(self.gas_index)


class Work(NamedTuple):
    """Room for what one evaluation finds, kept for the Jacobian."""

    whole: Array  # (10,)
    cell: Array  # (N, 8)
    face: Array  # (N, 4)
    fractions: Array  # (N, K)
    capacity: Array  # (N, K)
    enthalpy: Array  # (N, K)
    made: Array  # (N, K), mol/s by chemistry
    conductance: Array  # (N, K), mol/s per mole fraction, each face
    per_mass: Array  # (N, K), mol/kg at each face
    flow: Array  # (N, K), mol/s outwards through each face
    share: Array  # (N, K), of the two neighbours' mol/kg that is inside each face
    row: Array  # (6, K)
    kinetics: Scratch
    film: Array  # (M, L)


def work_for(cells: int, species: int, scratch: Scratch, film: tuple[int, int]) -> Work:
    """Room for ``cells`` of ``species``; ``scratch`` of the kinetics, ``film`` (M, L)."""
    each = np.zeros((8, cells, species))
    whole = np.zeros(WHOLE)
    whole[TRIAL] = 1.0
    return Work(
        whole, np.zeros((cells, 8)), np.zeros((cells, 4)), each[0], each[1], each[2], each[3],
        each[4], each[5], each[6], each[7], np.zeros((6, species)), scratch, np.zeros(film),
    )  # fmt: skip
