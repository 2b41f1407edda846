"""The gas in the bubble: the Cantera phase and its data as plain arrays.

The phase stays the owner of the mechanism. What the compiled stages need (heat capacities,
enthalpies, transport, covolumes) is read out of the loaded phase and compared with it by a test.
"""

from __future__ import annotations

import hashlib
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from sonoyield.describe import own_mechanism as own
from sonoyield.describe.fields import AUTO, is_file

if TYPE_CHECKING:
    import cantera as ct

Array = NDArray[np.float64]

GAS_CONSTANT = 8.31446261815324  # J/mol/K, exact (SI 2019)
AVOGADRO = 6.02214076e23  # 1/mol, exact (SI 2019)

# Noble gases, which react with nothing.
NOBLE = ("AR", "HE", "KR", "XE")
# Species that the liquid takes up, of those a phase holds; the well-mixed gas holds them at zero at
# the wall, which is an upper bound for the sparingly soluble ones.
ABSORBED = (
    "OH", "H", "O", "HO2", "H2O2", "O3",
    "N", "NH", "NH2", "NH3", "NNH", "NO", "NO2", "NO3", "N2O", "HNO", "HONO", "HONO2",
)  # fmt: skip
SPARINGLY_SOLUBLE = ("H", "O", "O3", "N", "NO", "NO2", "N2O")


@dataclass(frozen=True, eq=False)
class GasPhase:
    """A loaded mechanism and its data as arrays, species in the phase's order (K of them).

    ``molar_mass`` kg/mol, ``covolume`` m3/mol, ``source_limit`` K (top of each species' thermo in
    its *source*, not of the continuation). ``nasa`` (K, I, 11): nine NASA-9 coefficients and the
    bounds (K) of each interval. ``conductivity`` (K, 5) and ``diffusivity`` (K, K, 5): Cantera's
    polynomials in ln T, fitted up to ``transport_top`` K. ``atoms`` (elements, K). ``species`` are
    named as in the shipped tables (``AR``), however the file spells them. ``notes``: what was
    filled in or may mislead in a file of the user's own.
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
    notes: tuple[str, ...] = ()

    def solution(self) -> ct.Solution:
        """The Cantera phase of this mechanism, loaded once in each process."""
        if is_file(self.name):
            return _open_own(self.path, self.sha256)[0]
        return _solution(self.path, self.phase, self.sha256)

    def index(self, species: str) -> int:
        """Position of a species in the phase's order."""
        return self.species.index(species)


def load_phase(mechanism: str, noble: str | None = None) -> GasPhase:
    """Load a shipped mechanism by its name (``"h2o_o2"``), or any Cantera file by its path.

    With ``noble`` (``"AR"`` ...) a shipped one's phase without the other noble gases, which react
    with nothing and cost time. Raises ``FileNotFoundError`` when a shipped one is not installed,
    and ``RefusalError`` for a file that cannot be used.
    """
    if is_file(mechanism):
        path = Path(mechanism)
        return _load_own(str(path.resolve()), _sha256(path) if path.is_file() else "")
    path = mechanism_path(mechanism)
    return _load_shipped(str(path), f"gas-{noble}" if noble else "gas", _sha256(path))


def phase_for(mechanism: str, mixture: Mapping[str, float]) -> GasPhase:
    """The smallest phase of a mechanism that holds a dry mixture (mole fractions by species).

    ``"auto"`` takes ``h2o_o2_n2`` where there is nitrogen, else ``h2o_o2``. Raises as
    ``load_phase``, and ``RefusalError`` when the mechanism lacks a species of the mixture.
    """
    if mechanism == AUTO:
        mechanism = "h2o_o2_n2" if mixture.get("N2", 0.0) > 0.0 else "h2o_o2"
    if is_file(mechanism):
        phase = load_phase(mechanism)
        own.check_species(phase.species, tuple(mixture), phase.name)
        return phase
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


def _sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


@lru_cache(maxsize=8)
def _load_shipped(path: str, phase: str, sha256: str) -> GasPhase:
    gas = _solution(path, phase, sha256)
    species = gas.species()
    extra: list[dict[str, Any]] = [dict(one.input_data) for one in species]
    return GasPhase(
        name=Path(path).stem,
        phase=phase,
        path=path,
        sha256=sha256,
        species=tuple(gas.species_names),
        covolume=np.array([float(one["covolume"]) for one in extra]),
        source_limit=np.array([float(one["source-range"][1]) for one in extra]),
        **_arrays(gas),
    )


@lru_cache(maxsize=8)
def _load_own(path: str, sha256: str) -> GasPhase:
    gas, told = _open_own(path, sha256)
    name = Path(path).name
    species, names = gas.species(), own.usual_names(gas.species_names)
    own.check_species(names, (), name)
    covolume, filled = own.covolumes(species, names)
    limits = own.source_limits(species)
    notes = [f"{name}: {note}" for note in (*filled, *own.range_notes(gas, names, limits))]
    return GasPhase(
        name=name,
        phase=gas.name,
        path=path,
        sha256=sha256,
        species=names,
        covolume=covolume,
        source_limit=limits,
        notes=(*told, *notes),
        **_arrays(gas),
    )


@lru_cache(maxsize=8)
def _open_own(path: str, sha256: str) -> tuple[ct.Solution, list[str]]:  # noqa: ARG001 - of the key
    """A user's file, loaded once; ``sha256`` makes a file that has changed another one."""
    return own.open_file(Path(path))


def _arrays(gas: ct.Solution) -> dict[str, Any]:
    """The fields of ``GasPhase`` that Cantera itself answers for."""
    count, names = range(gas.n_species), gas.species_names
    return {
        "elements": tuple(gas.element_names),
        "molar_mass": np.asarray(gas.molecular_weights) * 1e-3,
        "atoms": np.array([[gas.n_atoms(k, e) for k in names] for e in gas.element_names]),
        "nasa": _nasa9(gas.species()),
        "conductivity": np.array([gas.get_thermal_conductivity_polynomial(k) for k in count]),
        "diffusivity": np.array(
            [[gas.get_binary_diff_coeffs_polynomial(i, j) for j in count] for i in count]
        ),
        "transport_top": float(gas.max_temp),
    }


@lru_cache(maxsize=8)
def _solution(path: str, phase: str, sha256: str) -> ct.Solution:  # noqa: ARG001 - of the key
    """A phase by its file; ``sha256`` makes a file that has changed another one."""
    import cantera as ct

    with warnings.catch_warnings():
        # Cantera 3.2 itself asks in an outdated way for the colliders that a lean phase leaves out.
        warnings.filterwarnings("ignore", "Kinetics::kineticsSpeciesIndex", DeprecationWarning)
        return ct.Solution(path, phase)


def _nasa9(species: Sequence[Any]) -> Array:
    """NASA-9 coefficients and bounds of each interval; short tables repeat their last one.

    NASA-7 is NASA-9 without its two inverse powers of T.
    """
    tables = []
    for one in species:
        thermo = one.thermo.input_data
        bounds, lacking = thermo["temperature-ranges"], [0.0] * INVERSE_POWERS[thermo["model"]]
        tables.append(
            [[*lacking, *row, *bounds[i : i + 2]] for i, row in enumerate(thermo["data"])]
        )
    most = max(map(len, tables))
    return np.array([rows + [rows[-1]] * (most - len(rows)) for rows in tables], dtype=float)


INVERSE_POWERS = {"NASA9": 0, "NASA7": 2}  # that a thermo model lacks
