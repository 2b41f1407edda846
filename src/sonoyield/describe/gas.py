"""The gas in the bubble: the Cantera phase and its data as plain arrays.

The phase stays the owner of the mechanism. What the compiled stages need (heat capacities,
enthalpies, transport, covolumes) is read out of the loaded phase and compared with it by a test.
"""

from __future__ import annotations

import hashlib
import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import cantera as ct

Array = NDArray[np.float64]

GAS_CONSTANT = 8.31446261815324  # J/mol/K, exact (SI 2019)
AVOGADRO = 6.02214076e23  # 1/mol, exact (SI 2019)

# Noble gases, which react with nothing.
NOBLE = ("AR", "HE", "KR", "XE")
# Species that the liquid takes up; the well-mixed gas holds them at zero at the wall.
ABSORBED = ("OH", "H", "O", "HO2", "H2O2", "O3")


@dataclass(frozen=True, eq=False)
class GasPhase:
    """A loaded mechanism and its data as arrays, species in the phase's order (K of them).

    ``molar_mass`` kg/mol, ``covolume`` m3/mol, ``source_limit`` K (top of each species' thermo in
    its *source*, not of the continuation). ``nasa`` (K, I, 11): nine NASA-9 coefficients and the
    bounds (K) of each interval. ``conductivity`` (K, 5) and ``diffusivity`` (K, K, 5): Cantera's
    polynomials in ln T, fitted up to ``transport_top`` K. ``atoms`` (elements, K).
    """

    name: str
    phase: str
    path: str
    sha256: str
    species: tuple[str, ...]
    elements: tuple[str, ...]
    molar_mass: Array
    covolume: Array
    source_limit: Array
    atoms: Array
    nasa: Array
    conductivity: Array
    diffusivity: Array
    transport_top: float

    def solution(self) -> ct.Solution:
        """The Cantera phase of this mechanism, loaded once in each process."""
        return _solution(self.path, self.phase)

    def index(self, species: str) -> int:
        """Position of a species in the phase's order."""
        return self.species.index(species)


@lru_cache(maxsize=8)
def load_phase(mechanism: str, noble: str | None = None) -> GasPhase:
    """Load a mechanism shipped with the package by its name (``"h2o_o2"``).

    With ``noble`` (``"AR"`` ...) its phase without the other noble gases, which react with nothing
    and cost time. Raises ``FileNotFoundError`` when there is no such file.
    """
    path = mechanism_path(mechanism)
    phase = f"gas-{noble}" if noble else "gas"
    gas = _solution(str(path), phase)
    names = tuple(gas.species_names)
    species = [gas.species(k) for k in range(gas.n_species)]
    extra: list[dict[str, Any]] = [dict(one.input_data) for one in species]
    count = range(gas.n_species)
    return GasPhase(
        name=mechanism,
        phase=phase,
        path=str(path),
        sha256=hashlib.sha256(path.read_bytes()).hexdigest(),
        species=names,
        elements=tuple(gas.element_names),
        molar_mass=np.asarray(gas.molecular_weights) * 1e-3,
        covolume=np.array([float(one["covolume"]) for one in extra]),
        source_limit=np.array([float(one["source-range"][1]) for one in extra]),
        atoms=np.array([[gas.n_atoms(k, e) for k in names] for e in gas.element_names]),
        nasa=_nasa9(species),
        conductivity=np.array([gas.get_thermal_conductivity_polynomial(k) for k in count]),
        diffusivity=np.array(
            [[gas.get_binary_diff_coeffs_polynomial(i, j) for j in count] for i in count]
        ),
        transport_top=float(gas.max_temp),
    )


def phase_for(mechanism: str, mixture: Mapping[str, float]) -> GasPhase:
    """The smallest phase of a mechanism that holds a dry mixture (mole fractions by species)."""
    noble = [name for name in NOBLE if mixture.get(name, 0.0) > 0.0]
    if len(noble) > 1:
        return load_phase(mechanism)
    return load_phase(mechanism, noble[0] if noble else NOBLE[0])


def mechanism_path(mechanism: str) -> Path:
    """Path of a mechanism shipped with the package."""
    path = Path(str(resources.files("sonoyield.mechanisms").joinpath(f"{mechanism}.yaml")))
    if not path.is_file():
        raise FileNotFoundError(f"no mechanism {mechanism!r} is installed with sonoyield")
    return path


@lru_cache(maxsize=8)
def _solution(path: str, phase: str) -> ct.Solution:
    import cantera as ct

    with warnings.catch_warnings():
        # Cantera 3.2 itself asks in an outdated way for the colliders that a lean phase leaves out.
        warnings.filterwarnings("ignore", "Kinetics::kineticsSpeciesIndex", DeprecationWarning)
        return ct.Solution(path, phase)


def _nasa9(species: list[Any]) -> Array:
    """NASA-9 coefficients and bounds of each interval; short tables repeat their last one."""
    tables = []
    for one in species:
        thermo = one.thermo.input_data
        if thermo["model"] != "NASA9":
            raise ValueError(f"{one.name}: thermo {thermo['model']} is not read, only NASA9")
        bounds = thermo["temperature-ranges"]
        tables.append([[*row, *bounds[i : i + 2]] for i, row in enumerate(thermo["data"])])
    most = max(map(len, tables))
    return np.array([rows + [rows[-1]] * (most - len(rows)) for rows in tables], dtype=float)
