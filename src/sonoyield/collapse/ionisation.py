"""How much of the gas would be ionised: a Saha estimate. The model itself carries no ions.

Saha 1920; for several species at once, n_e = sum_i n_i S_i / (n_e + S_i) with
S_i = 2 (U+/U) (2 pi m_e k T / h^2)^(3/2) exp(-E_i / kT). U is the electronic partition function of
the low states alone; rotation and vibration of an ion are taken as those of its molecule. The
lowering of E in dense plasma is left out, so that above 10^3 bar the figure errs low.

One per cent is where it begins to matter: at 12 000 K, 1 % of argon ionised holds 0.16 eV for each
atom, a tenth of what its motion holds.

Constants: CODATA 2018. Energies of atoms: NIST Atomic Spectra Database, for H, He, N, O and Ar
seen as tables quote it, Kr and Xe from memory, as are the splittings of the noble-gas ions.
Energies of molecules: NIST Chemistry WebBook, from memory; those of NNH, NO3, HNO and HONO are
the least sure (0.1 to 0.3 eV). Degeneracies: of the ground terms.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import exp, pi

import numpy as np

from sonoyield.collapse.history import History
from sonoyield.describe.gas import AVOGADRO, GAS_CONSTANT

THRESHOLD = 0.01  # ionised share from which leaving it out is said
BOLTZMANN = GAS_CONSTANT / AVOGADRO  # J/K
PLANCK = 6.62607015e-34  # J s, exact
ELECTRON_MASS = 9.1093837015e-31  # kg
ELECTRONVOLT = 1.602176634e-19  # J, exact
COLDEST, HOTTEST = 1000.0, 1e5  # K, where the temperature is sought


@dataclass(frozen=True)
class Ionisation:
    """First ionisation: energy (eV), degeneracies of the neutral and of the ion's low levels.

    ``upper`` is the degeneracy of the ion's second level, ``split_K`` its height in K.
    """

    energy_eV: float
    neutral: float
    ion: float
    upper: float = 0.0
    split_K: float = 0.0

    def ratio(self, temperature: float) -> float:
        """Partition function of the ion over that of the neutral."""
        return (self.ion + self.upper * exp(-self.split_K / temperature)) / self.neutral


FIRST = {
    "H": Ionisation(13.5984, 2, 1),
    "O": Ionisation(13.6181, 9, 4),
    "N": Ionisation(14.5341, 4, 9),
    "HE": Ionisation(24.5874, 1, 2),
    "AR": Ionisation(15.7596, 1, 4, 2, 2060.0),
    "KR": Ionisation(13.9996, 1, 4, 2, 7727.0),
    "XE": Ionisation(12.1298, 1, 4, 2, 15160.0),
    "H2": Ionisation(15.4259, 1, 2),
    "N2": Ionisation(15.581, 1, 2),
    "O2": Ionisation(12.0697, 3, 4),
    "OH": Ionisation(13.017, 4, 3),
    "NH": Ionisation(13.48, 3, 4),
    "NO": Ionisation(9.2642, 4, 1),
    "H2O": Ionisation(12.621, 1, 2),
    "HO2": Ionisation(11.35, 2, 3),
    "H2O2": Ionisation(10.58, 1, 2),
    "O3": Ionisation(12.53, 1, 2),
    "NO2": Ionisation(9.586, 2, 1),
    "N2O": Ionisation(12.889, 1, 4),
    "NO3": Ionisation(12.57, 2, 1),
    "HNO": Ionisation(10.1, 1, 2),
    "HONO": Ionisation(11.3, 1, 2),
    "HONO2": Ionisation(11.95, 1, 2),
    "NH2": Ionisation(11.14, 2, 3),
    "NH3": Ionisation(10.07, 1, 2),
    "NNH": Ionisation(7.8, 2, 1),
}


@dataclass(frozen=True)
class IonisationEstimate:
    """The gas at the hottest moment of a run: ``number_density_per_m3`` of atoms and molecules,
    ``onset_temperature_K`` where ``THRESHOLD`` of it would be ionised, ``ionised_share`` there."""

    peak_temperature_K: float
    number_density_per_m3: float
    onset_temperature_K: float
    ionised_share: float

    @property
    def matters(self) -> bool:
        """Whether the gas gets hotter than where ionisation begins to matter."""
        return self.peak_temperature_K > self.onset_temperature_K


def ionisation_of(history: History) -> IonisationEstimate:
    """The estimate for the hottest moment of a run, with the gas there and its true density."""
    hottest = int(np.argmax(history.temperature))
    moles = np.maximum(history.moles[hottest], 0.0)
    volume = 4.0 / 3.0 * pi * float(history.radius[hottest]) ** 3
    density = float(moles.sum()) * AVOGADRO / volume
    fractions = dict(zip(history.bubble.phase.species, (moles / moles.sum()).tolist(), strict=True))
    peak = float(history.temperature[hottest])
    return IonisationEstimate(
        peak,
        density,
        ionisation_temperature(density, fractions),
        ionised_share(peak, density, fractions),
    )


def ionised_share(temperature: float, density: float, fractions: Mapping[str, float]) -> float:
    """Electrons for each molecule or atom of a gas in Saha equilibrium.

    ``temperature`` K; ``density`` 1/m3, of neutrals and ions together; ``fractions`` mole fractions
    by species. Species whose ionisation energy is not in ``FIRST`` count as never ionised.
    """
    known = [name for name in fractions if name in FIRST and fractions[name] > 0.0]
    share = np.array([fractions[name] for name in known])
    constant = np.array([saha_constant(name, temperature) for name in known]) / density
    low, high = 0.0, 1.0
    while high - low > 1e-12 * high and high > 1e-300:
        middle = 0.5 * (low + high)
        if float((share * constant / (middle + constant)).sum()) > middle:
            low = middle
        else:
            high = middle
    return high


def ionisation_temperature(
    density: float, fractions: Mapping[str, float], threshold: float = THRESHOLD
) -> float:
    """Temperature, K, at which ``threshold`` of a gas is ionised; ``density`` 1/m3.

    Sought between 1000 and 100 000 K; the upper bound where it is not reached.
    """
    low, high = COLDEST, HOTTEST
    while high - low > 0.1:
        middle = 0.5 * (low + high)
        if ionised_share(middle, density, fractions) < threshold:
            low = middle
        else:
            high = middle
    return high


def saha_constant(species: str, temperature: float) -> float:
    """n_ion n_e / n_neutral of a species, 1/m3, at ``temperature`` in K. Saha 1920."""
    one = FIRST[species]
    wave = (2.0 * pi * ELECTRON_MASS * BOLTZMANN * temperature / PLANCK**2) ** 1.5
    boltzmann = exp(-one.energy_eV * ELECTRONVOLT / (BOLTZMANN * temperature))
    return 2.0 * one.ratio(temperature) * wave * boltzmann
