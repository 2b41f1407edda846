"""Radial motion of one spherical bubble, compiled.

Keller and Miksis 1980 (J. Acoust. Soc. Am. 68, 628), to first order in the wall Mach number.
"""

from __future__ import annotations

from numba import njit


@njit(cache=True, error_model="numpy")
def keller_miksis(
    radius: float,
    speed: float,
    gas_pressure: float,
    gas_pressure_rate: float,
    far_pressure: float,
    far_pressure_rate: float,
    density: float,
    sound_speed: float,
    viscosity: float,
    surface_tension: float,
) -> float:
    """Wall acceleration, m/s2.

    ``far_pressure`` is the ambient plus the acoustic pressure, Pa, and the rates are in Pa/s. The
    equation is linear in the acceleration, also through the viscous part of the wall pressure.
    """
    wall = gas_pressure - (2.0 * surface_tension + 4.0 * viscosity * speed) / radius
    wall_rate = (
        gas_pressure_rate
        + (2.0 * surface_tension + 4.0 * viscosity * speed) * speed / radius**2
    )
    mach = speed / sound_speed
    left = (1.0 - mach) * radius + 4.0 * viscosity / (density * sound_speed)
    right = (
        -1.5 * (1.0 - mach / 3.0) * speed**2
        + (1.0 + mach) * (wall - far_pressure) / density
        + radius / (density * sound_speed) * (wall_rate - far_pressure_rate)
    )
    return right / left
