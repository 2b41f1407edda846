"""One bubble at rest: its contents, and everything the equations need about it as arrays."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from math import pi, sqrt

import numpy as np
from numpy.typing import NDArray

from sonoyield.collapse import equations as eq
from sonoyield.collapse.exchange import (
    COVOLUME,
    CROSSES,
    ENTHALPY_AT_LIQUID,
    EQUILIBRIUM,
    MASS,
    SURFACE,
)
from sonoyield.collapse.properties import heat_capacity_and_enthalpy
from sonoyield.describe.gas import ABSORBED, GAS_CONSTANT, Array, GasPhase
from sonoyield.describe.liquid import LiquidState

WATER_MOLAR_MASS = 18.015268e-3  # kg/mol, IAPWS R6-95


@dataclass(frozen=True, eq=False)
class Bubble:
    """A spherical bubble at rest in a driven liquid (SI, mol).

    ``mixture`` gives mole fractions of the dry gas; ``accommodation`` one value for ``"water"``,
    one for ``"radicals"`` and, if wanted, one for single species.
    """

    phase: GasPhase
    liquid: LiquidState
    ambient_pressure: float
    frequency: float
    pressure_amplitude: float
    radius: float
    mixture: Mapping[str, float]
    accommodation: Mapping[str, float]
    excluded_volume: bool = True
    dense_equilibrium: bool = True
    vapour: bool = True
    uptake: bool = True

    @property
    def period(self) -> float:
        """Acoustic period, s."""
        return 1.0 / self.frequency

    @property
    def dense(self) -> bool:
        """Whether excluded volume shifts the chemical equilibrium, as ``dense`` says."""
        return self.excluded_volume and self.dense_equilibrium

    @property
    def rest_pressure(self) -> float:
        """Pressure of gas and vapour at rest, Pa (Young-Laplace)."""
        return self.ambient_pressure + 2.0 * self.liquid.surface_tension / self.radius

    @cached_property
    def moles(self) -> Array:
        """Contents at rest, mol (K,): saturated vapour, the rest dry gas (Noble-Abel)."""
        volume = 4.0 / 3.0 * pi * self.radius**3
        thermal = GAS_CONSTANT * self.liquid.temperature
        covolume = self.species[:, COVOLUME]
        water = self.phase.index("H2O")
        dry = np.zeros(len(self.phase.species))
        for name, share in self.mixture.items():
            dry[self.phase.index(name)] = share
        vapour = self.liquid.saturation_pressure / thermal * volume if self.vapour else 0.0
        free = volume - vapour * covolume[water]
        amount = (self.rest_pressure * free - vapour * thermal) / (
            thermal + self.rest_pressure * float(dry @ covolume)
        )
        contents = amount * dry
        contents[water] += vapour
        return contents

    @cached_property
    def crossing(self) -> NDArray[np.intp]:
        """Indices of the species that cross the wall."""
        return np.flatnonzero(self.species[:, CROSSES])

    @cached_property
    def species(self) -> Array:
        """Table (K, 6) of the species, columns as named in ``exchange``."""
        phase, temperature = self.phase, self.liquid.temperature
        table = np.zeros((len(phase.species), 6))
        table[:, MASS] = phase.molar_mass
        if self.excluded_volume:
            table[:, COVOLUME] = phase.covolume
        capacity = np.empty(len(table))
        enthalpy = np.empty(len(table))
        heat_capacity_and_enthalpy(temperature, phase.nasa, capacity, enthalpy)
        table[:, ENTHALPY_AT_LIQUID] = enthalpy
        for k, name in enumerate(phase.species):
            if self._crosses(name):
                table[k, SURFACE] = self.surface_resistance(name)
                table[k, CROSSES] = 1.0
        table[phase.index("H2O"), EQUILIBRIUM] = (
            self.liquid.saturation_pressure / (GAS_CONSTANT * temperature)
        )
        return table

    @cached_property
    def zero_enthalpy(self) -> Array:
        """Enthalpy zero of each species, J/mol (K,), linear in its elements.

        Zero are liquid water and, at the liquid's temperature, O2, N2 and the noble gases; the
        zero of hydrogen follows from water, so that H2 carries its heat of combustion. Elements
        that no gas at rest holds (carbon) keep Cantera's zero.
        """
        phase = self.phase
        enthalpy = self.species[:, ENTHALPY_AT_LIQUID]
        water = phase.index("H2O")
        of: dict[str, float] = {}
        for element in phase.elements:
            row = phase.atoms[phase.elements.index(element)]
            pure = [
                k
                for k in np.flatnonzero(row)
                if row[k] == phase.atoms[:, k].sum() and phase.species[k] in _STANDARD
            ]
            if pure:
                of[element] = float(enthalpy[pure[0]] / row[pure[0]])
        liquid_water = float(enthalpy[water]) - self.liquid.latent_heat * WATER_MOLAR_MASS
        of["H"] = 0.5 * (liquid_water - of["O"])
        return np.array([of.get(e, 0.0) for e in phase.elements]) @ phase.atoms

    @cached_property
    def constants(self) -> Array:
        """The bubble's and the liquid's numbers in the order that ``equations`` names."""
        liquid = self.liquid
        table = np.zeros(eq.CONSTANTS)
        table[eq.DENSITY] = liquid.density
        table[eq.SOUND_SPEED] = liquid.sound_speed
        table[eq.VISCOSITY] = liquid.viscosity
        table[eq.SURFACE_TENSION] = liquid.surface_tension
        table[eq.LIQUID_TEMPERATURE] = liquid.temperature
        table[eq.AMBIENT_PRESSURE] = self.ambient_pressure
        table[eq.PRESSURE_AMPLITUDE] = self.pressure_amplitude
        table[eq.ANGULAR_FREQUENCY] = 2.0 * pi * self.frequency
        table[eq.WATER] = self.phase.index("H2O")
        table[eq.TRANSPORT_TOP] = self.phase.transport_top
        return table

    @cached_property
    def tables(self) -> tuple[Array, ...]:
        """The arrays that every compiled stage takes, in its order of arguments."""
        phase = self.phase
        return (self.constants, self.species, phase.nasa, phase.conductivity, phase.diffusivity)

    def at_rest(self) -> Array:
        """State vector at rest, laid out as ``equations`` says."""
        count = len(self.phase.species)
        state = np.zeros(eq.state_size(count))
        state[eq.RADIUS] = self.radius
        state[eq.TEMPERATURE] = self.liquid.temperature
        state[eq.MOLES : eq.MOLES + count] = self.moles
        return state

    def tolerances(self, relative: float) -> Array:
        """Absolute tolerance of each state, for a given relative one."""
        count = len(self.phase.species)
        contents = float(self.moles.sum())
        floor = np.empty(eq.state_size(count))
        floor[eq.RADIUS] = 1e-3 * self.radius
        floor[eq.SPEED] = self.speed_scale
        floor[eq.TEMPERATURE] = 1.0
        floor[eq.MOLES : eq.MOLES + 2 * count] = CONTENTS_FLOOR * contents
        floor[eq.MOLES + 2 * count :] = self.energy_scale
        return relative * floor

    @property
    def speed_scale(self) -> float:
        """Wall speed below which relative accuracy is not asked for, m/s."""
        drive = self.pressure_amplitude / self.ambient_pressure
        return 0.1 * max(drive, 1e-4) * self.radius * 2.0 * pi * self.frequency

    @property
    def energy_scale(self) -> float:
        """Energy below which relative accuracy is not asked for, J."""
        drive = min(self.pressure_amplitude / self.ambient_pressure, 1.0)
        return 30.0 * max(drive, 1e-3) ** 2 * self.ambient_pressure * self.radius**3

    def surface_resistance(self, species: str) -> float:
        """Kinetic resistance of the surface, s/m: 4/(alpha c), c at the liquid's temperature."""
        if species == "H2O":
            share = self.accommodation["water"]
        else:
            share = self.accommodation.get(species, self.accommodation["radicals"])
        mass = self.phase.molar_mass[self.phase.index(species)]
        speed = sqrt(8.0 * GAS_CONSTANT * self.liquid.temperature / (pi * mass))
        return float(4.0 / (share * speed))

    def _crosses(self, name: str) -> bool:
        return self.vapour if name == "H2O" else name in ABSORBED and self.uptake


CONTENTS_FLOOR = 1e-3  # of the contents; times the relative tolerance it is a few molecules
_STANDARD = ("O2", "N2", "AR", "HE", "KR", "XE")
