"""Closed forms that a bubble is judged by: resonance, thresholds, collapse time, indices."""

from __future__ import annotations

from math import gamma, pi, sqrt

INERTIAL_RATIO = 2.0  # largest radius over rest radius, Flynn 1975
INDEX_RANGE = (0.5e6, 15e6)  # Hz, where the mechanical index is defined


def minnaert_frequency(
    radius: float, ambient_pressure: float, density: float, exponent: float = 1.4
) -> float:
    """Natural frequency of a large gas bubble, Hz, without surface tension, vapour and damping.

    sqrt(3 kappa p0 / rho) / (2 pi R0), polytropic ``exponent`` kappa (1 to 5/3); SI. Minnaert 1933
    (Phil. Mag. 16, 235). Meant for radii above some 20 um, where the Laplace pressure is small.
    """
    return sqrt(3.0 * exponent * ambient_pressure / density) / (2.0 * pi * radius)


def linear_resonance_frequency(
    radius: float,
    ambient_pressure: float,
    density: float,
    surface_tension: float,
    saturation_pressure: float = 0.0,
    exponent: float = 1.4,
) -> float:
    """Natural frequency of small oscillations, Hz, undamped; SI.

    rho w^2 R0^2 = 3 kappa pg - 2 sigma / R0 with pg = p0 - pv + 2 sigma / R0; Plesset and
    Prosperetti 1977 (Annu. Rev. Fluid Mech. 9, 145). For any radius that holds gas: raises
    ``ValueError`` where the right-hand side is not positive.
    """
    laplace = 2.0 * surface_tension / radius
    stiffness = 3.0 * exponent * (ambient_pressure - saturation_pressure + laplace) - laplace
    if stiffness <= 0.0:
        raise ValueError(f"a bubble of {radius} m is not stable at rest: it has no resonance")
    return sqrt(stiffness / density) / (2.0 * pi * radius)


def rayleigh_collapse_time(largest_radius: float, overpressure: float, density: float) -> float:
    """Time in which an empty cavity at rest collapses, s; SI.

    sqrt(pi/6) Gamma(5/6) / Gamma(4/3) Rm sqrt(rho / dp), about 0.9147 Rm sqrt(rho / dp); Rayleigh
    1917 (Phil. Mag. 34, 94). Inviscid, incompressible liquid, constant overpressure above zero.
    """
    factor = sqrt(pi / 6.0) * gamma(5.0 / 6.0) / gamma(4.0 / 3.0)
    return factor * largest_radius * sqrt(density / overpressure)


def blake_critical_radius(
    radius: float,
    ambient_pressure: float,
    surface_tension: float,
    saturation_pressure: float = 0.0,
) -> float:
    """Radius beyond which an isothermal bubble grows without bound, m; SI.

    sqrt(3 pg R0^3 / (2 sigma)) with pg = p0 - pv + 2 sigma / R0; Blake 1949 (Harvard Acoustics
    Laboratory TM12), as in Brennen 1995. Quasi-static: frequency far below resonance.
    """
    gas = ambient_pressure - saturation_pressure + 2.0 * surface_tension / radius
    return sqrt(3.0 * gas * radius**3 / (2.0 * surface_tension))


def blake_threshold(
    radius: float,
    ambient_pressure: float,
    surface_tension: float,
    saturation_pressure: float = 0.0,
) -> float:
    """Acoustic amplitude from which a bubble grows without bound, Pa; SI.

    p0 - pv + 4 sigma / (3 Rc) with the critical radius Rc; Blake 1949, as in Brennen 1995.
    Quasi-static: frequency far below resonance, radii up to some 20 um.
    """
    critical = blake_critical_radius(radius, ambient_pressure, surface_tension, saturation_pressure)
    return ambient_pressure - saturation_pressure + 4.0 * surface_tension / (3.0 * critical)


def inertial(expansion_ratio: float) -> bool:
    """Whether a collapse counts as inertial: largest over rest radius at least 2.

    Flynn 1975 (J. Acoust. Soc. Am. 57, 1379); others set the limit as high as 2.3.
    """
    return expansion_ratio >= INERTIAL_RATIO


def mechanical_index(frequency: float, peak_negative_pressure: float) -> float | None:
    """Mechanical index, peak negative pressure (Pa, derated) in MPa over the root of MHz.

    Apfel and Holland 1991 (Ultrasound Med. Biol. 17, 179), as in IEC 62359. ``None`` outside
    0.5 to 15 MHz, where it is not defined. It says nothing about safety elsewhere.
    """
    if not INDEX_RANGE[0] <= frequency <= INDEX_RANGE[1]:
        return None
    return peak_negative_pressure * 1e-6 / sqrt(frequency * 1e-6)
