"""The gas from centre to wall at the peak, and where its cells stand at any step."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from sonoyield.collapse.exchange import COVOLUME
from sonoyield.describe.gas import GAS_CONSTANT, Array
from sonoyield.show.files import write_rows

if TYPE_CHECKING:
    import pandas as pd

    from sonoyield.collapse.history import History


@dataclass(frozen=True, eq=False)
class Shells:
    """The cells of P steps, centre first; a mixed gas is one cell.

    ``faces`` (P, N+1) m, from 0 to the wall; ``temperature`` (P, N) K; ``moles`` (P, N, K) mol;
    ``pressure`` (P,) Pa, that of all cells.
    """

    faces: Array
    temperature: Array
    moles: Array
    pressure: Array

    def fraction(self, species: int) -> Array:
        """Mole fraction of one species in each cell (P, N)."""
        # The tolerance may leave a little below zero.
        shares = self.moles[..., species].clip(min=0.0) / self.moles.sum(axis=-1)
        return np.asarray(shares)


def shells(history: History, rows: slice) -> Shells:
    """Faces of the cells at some steps: V_i = n_i R T_i / p + sum n_k b_k (Noble-Abel)."""
    if history.cells is None:
        temperature, moles = history.temperature[rows, None], history.moles[rows, None]
    else:
        temperature, moles = history.cells.temperature[rows], history.cells.moles[rows]
    thermal = GAS_CONSTANT * temperature * moles.sum(axis=-1)
    covolume = moles @ history.bubble.species[:, COVOLUME]
    whole = 4.0 / 3.0 * pi * history.radius[rows] ** 3
    pressure = thermal.sum(axis=1) / (whole - covolume.sum(axis=1))
    inside = np.cumsum(thermal / pressure[:, None] + covolume, axis=1)
    outer = np.cbrt(0.75 / pi * inside)
    faces = np.concatenate([np.zeros((len(outer), 1)), outer], axis=1)
    return Shells(faces, temperature, moles, pressure)


def peak_row(history: History) -> int:
    """Step of the largest (mole-mean) temperature over the run's windows, or over all of it."""
    end = history.spans[-1][1] + 1
    return int(np.argmax(history.temperature[:end]))


def profile_frame(history: History) -> pd.DataFrame:
    """One row a cell at the peak, centre first, units in the column names.

    The centre of a cell is the radius that halves its volume. A mixed gas gives one row.
    """
    import pandas as pd

    row = peak_row(history)
    gas, phase = shells(history, slice(row, row + 1)), history.bubble.phase
    cubes = gas.faces[0] ** 3
    mass = gas.moles[0] @ phase.molar_mass
    columns = {
        "r_inner_m": gas.faces[0, :-1],
        "r_outer_m": gas.faces[0, 1:],
        "r_centre_m": np.cbrt(0.5 * (cubes[1:] + cubes[:-1])),
        "mass_fraction_of_gas": mass / mass.sum(),
        "temperature_K": gas.temperature[0],
        "pressure_Pa": np.full(len(mass), gas.pressure[0]),
        "density_kg_m3": mass / (4.0 / 3.0 * pi * np.diff(cubes)),
    }
    columns |= {f"{name}_mole_fraction": gas.fraction(k)[0] for k, name in enumerate(phase.species)}
    return pd.DataFrame(columns)


def write_profile(history: History, path: Path) -> None:
    """Write the gas at the peak as CSV or Parquet, by the path's suffix.

    Raises ``OSError`` with the path as its ``filename``; what stood there is kept then.
    """
    frame = profile_frame(history)
    rows = (dict(zip(frame.columns, row, strict=True)) for row in frame.itertuples(index=False))
    write_rows(list(rows), path)
