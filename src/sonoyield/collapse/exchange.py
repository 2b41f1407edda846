"""Heat, vapour and radicals through the bubble wall, compiled.

Boundary layers of Toegel, Gompf, Pecha, Lohse 2000 (Phys. Rev. Lett. 85, 3165): a layer of
thickness min(sqrt(R D / |U|), R / pi) in the gas, in series with the kinetic resistance of the
surface. What crosses carries its enthalpy at the liquid's temperature.
"""

from __future__ import annotations

from math import pi, sqrt

from numba import njit

from sonoyield.collapse.properties import mixture_diffusivity
from sonoyield.describe.gas import Array

# Columns of the table of species that the compiled stages read.
MASS, COVOLUME, SURFACE, EQUILIBRIUM, ENTHALPY_AT_LIQUID, CROSSES = range(6)


@njit(cache=True, error_model="numpy")
def layer_thickness(radius: float, speed: float, diffusivity: float) -> float:
    """Thickness of the boundary layer in the gas, m."""
    thickest = radius / pi
    if abs(speed) * thickest * thickest < radius * diffusivity:
        return thickest
    return sqrt(radius * diffusivity / abs(speed))


@njit(cache=True, error_model="numpy")
def species_flow(
    radius: float,
    speed: float,
    temperature: float,
    u: float,
    pressure: float,
    volume: float,
    moles: Array,
    fractions: Array,
    species: Array,
    diffusivity: Array,
    flow: Array,
) -> None:
    """Fill ``flow`` (K,), mol/s into the gas of each species; zero for those that do not cross.

    ``u`` is the transport logarithm.
    4 pi R^2 (c_eq - n/V) / (l/D + 4/(alpha c)), with the mean speed c at the liquid temperature.
    """
    area = 4.0 * pi * radius * radius
    for k in range(moles.size):
        absent = moles[k] == 0.0 and species[k, EQUILIBRIUM] == 0.0
        if absent or species[k, CROSSES] == 0.0:
            flow[k] = 0.0
            continue
        d = mixture_diffusivity(
            k, temperature, u, pressure, fractions, species[:, MASS], diffusivity
        )
        resistance = layer_thickness(radius, speed, d) / d + species[k, SURFACE]
        flow[k] = area * (species[k, EQUILIBRIUM] - moles[k] / volume) / resistance
