"""Water and saline between 0 and 80 degC at about one atmosphere.

Coefficients were written down from memory of the named source unless the function says
otherwise; the water ones are checked in the tests against IAPWS-95 by an independent package.
The salt terms rest on the few numbers named beside them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

LOWEST, HIGHEST = 273.15, 353.15  # K
CRITICAL_TEMPERATURE = 647.096  # K, IAPWS-95
CRITICAL_PRESSURE = 22.064e6  # Pa
CRITICAL_DENSITY = 322.0  # kg/m3
NACL_MOLAR_MASS = 58.443e-3  # kg/mol
WATER_MOLAR_MASS = 18.015268e-3  # kg/mol


@dataclass(frozen=True)
class LiquidState:
    """Properties of the liquid at one temperature, all SI.

    ``density`` kg/m3, ``sound_speed`` m/s, ``viscosity`` Pa s, ``surface_tension`` N/m,
    ``saturation_pressure`` Pa, ``latent_heat`` J/kg of water, ``thermal_conductivity`` W/m/K,
    ``heat_capacity`` J/kg/K at constant pressure, ``temperature`` K.
    """

    density: float
    sound_speed: float
    viscosity: float
    surface_tension: float
    saturation_pressure: float
    latent_heat: float
    thermal_conductivity: float
    heat_capacity: float
    temperature: float


def liquid_state(kind: str, temperature: float, salinity: float = 0.0) -> LiquidState:
    """Properties of ``"water"`` or ``"saline"`` at a temperature in K, salinity in kg/m3.

    Raises ``ValueError`` for another kind or outside 273.15 to 353.15 K.
    """
    if kind == "water":
        return water(temperature)
    if kind == "saline":
        return saline(temperature, salinity)
    raise ValueError(f"liquid kind {kind!r}: allowed water, saline")


def water(temperature: float) -> LiquidState:
    """Pure water at a temperature in K (273.15 to 353.15) and about one atmosphere."""
    return LiquidState(
        density=density_kell1975(temperature),
        sound_speed=sound_speed_marczak1997(temperature),
        viscosity=viscosity_iapws2011(temperature),
        surface_tension=surface_tension_iapws2014(temperature),
        saturation_pressure=saturation_pressure_wagner_pruss(temperature),
        latent_heat=latent_heat(temperature),
        thermal_conductivity=thermal_conductivity_iapws2008(temperature),
        heat_capacity=heat_capacity(temperature),
        temperature=temperature,
    )


def saline(temperature: float, salinity: float) -> LiquidState:
    """Sodium chloride in water at a temperature in K, salinity in kg/m3 (g/L), 0 to 60.

    The salt terms are those of 25 degC (sound speed: 25 and 37 degC) kept at every temperature;
    away from there the density is uncertain by about 0.06 % at 9 g/L. The heat of dilution is
    left out of the latent heat; conductivity and heat capacity are those of water. Raises
    ``ValueError`` outside either range.
    """
    if not 0.0 <= salinity <= 60.0:
        raise ValueError(f"salinity {salinity} kg/m3: allowed 0 to 60 kg/m3")
    pure = water(temperature)
    molarity = salinity / NACL_MOLAR_MASS / 1e3  # mol/L
    water_mass = pure.density * (1.0 - molarity * _apparent_molar_volume(molarity))
    molality = 1e3 * molarity / water_mass  # mol/kg
    return replace(
        pure,
        density=water_mass + salinity,
        sound_speed=pure.sound_speed + _sound_speed_slope(temperature) * molality,
        viscosity=pure.viscosity * _jones_dole(molarity),
        surface_tension=pure.surface_tension + 1.64e-3 * molality,
        saturation_pressure=pure.saturation_pressure * _water_activity(molality),
    )


def density_kell1975(temperature: float) -> float:
    """Density of air-free water at 1 atm, kg/m3; Kell (1975), J. Chem. Eng. Data 20, 97.

    273.15 to 353.15 K; coefficients from memory, temperature scale IPTS-68.
    """
    t = _celsius(temperature)
    top = (999.83952, 16.945176, -7.9870401e-3, -46.170461e-6, 105.56302e-9, -280.54253e-12)
    return _polynomial(top, t) / (1.0 + 16.879850e-3 * t)


def sound_speed_marczak1997(temperature: float) -> float:
    """Speed of sound in water at 1 atm, m/s; Marczak (1997), J. Acoust. Soc. Am. 102, 2776.

    273.15 to 353.15 K; coefficients from memory.
    """
    a = (1402.385, 5.038813, -5.799136e-2, 3.287156e-4, -1.398845e-6, 2.787860e-9)
    return _polynomial(a, _celsius(temperature))


def viscosity_iapws2011(temperature: float) -> float:
    """Viscosity of water at 0.1 MPa, Pa s; IAPWS SR6-08 (2011).

    273.15 to 353.15 K; coefficients from memory.
    """
    s = _checked(temperature) / 300.0
    terms = ((280.68, -1.9), (511.45, -7.7), (61.131, -19.6), (0.45903, -40.0))
    return 1e-6 * sum(a * math.pow(s, b) for a, b in terms)


def thermal_conductivity_iapws2008(temperature: float) -> float:
    """Thermal conductivity of water at 0.1 MPa, W/m/K; IAPWS SR6-08 (2008, revised 2011).

    273.15 to 353.15 K; coefficients from memory.
    """
    s = _checked(temperature) / 300.0
    terms = ((1.6630, -1.15), (-1.7781, -3.4), (1.1567, -6.0), (-0.432115, -7.6))
    return sum(c * math.pow(s, d) for c, d in terms)


def heat_capacity(temperature: float) -> float:
    """Heat capacity of water at constant pressure and 1 atm, J/kg/K.

    273.15 to 353.15 K; own quartic fit to IAPWS-95 (Wagner and Pruss 2002), within 0.02 %.
    """
    a = (4218.59, -3.044928, 8.293745e-2, -9.605351e-4, 4.474215e-6)
    return _polynomial(a, _celsius(temperature))


def surface_tension_iapws2014(temperature: float) -> float:
    """Surface tension of water against its vapour, N/m; IAPWS R1-76 (1994, revised 2014).

    273.15 to 353.15 K; coefficients as in the source of the iapws package.
    """
    tau = _tau(temperature)
    return 0.2358 * math.pow(tau, 1.256) * (1.0 - 0.625 * tau)


def saturation_pressure_wagner_pruss(temperature: float) -> float:
    """Vapour pressure of water, Pa; Wagner and Pruss (1993), IAPWS SR1-86 (1992).

    273.15 to 353.15 K (0.01 K below the triple point by continuation); coefficients from memory.
    """
    tau = _tau(temperature)
    return CRITICAL_PRESSURE * math.exp(
        CRITICAL_TEMPERATURE / temperature * sum(a * math.pow(tau, k) for a, k in _VAPOUR_PRESSURE)
    )


def latent_heat(temperature: float) -> float:
    """Latent heat of evaporation of water, J/kg, by Clausius and Clapeyron.

    Slope of the vapour pressure and density of the vapour from Wagner and Pruss (1993), IAPWS
    SR1-86 (1992), density of the liquid from Kell (1975); 273.15 to 353.15 K; coefficients from
    memory.
    """
    tau = _tau(temperature)
    pressure = saturation_pressure_wagner_pruss(temperature)
    summed = sum(a * k * math.pow(tau, k - 1.0) for a, k in _VAPOUR_PRESSURE)
    slope = -pressure / temperature * (math.log(pressure / CRITICAL_PRESSURE) + summed)
    vapour = CRITICAL_DENSITY * math.exp(
        sum(c * math.pow(tau, k / 6.0) for c, k in _VAPOUR_DENSITY)
    )
    return temperature * slope * (1.0 / vapour - 1.0 / density_kell1975(temperature))


_VAPOUR_PRESSURE = (
    (-7.85951783, 1.0),
    (1.84408259, 1.5),
    (-11.7866497, 3.0),
    (22.6807411, 3.5),
    (-15.9618719, 4.0),
    (1.80122502, 7.5),
)
_VAPOUR_DENSITY = (
    (-2.03150240, 2.0),
    (-2.68302940, 4.0),
    (-5.38626492, 8.0),
    (-17.2991605, 18.0),
    (-44.7586581, 37.0),
    (-63.9201063, 71.0),
)


def _apparent_molar_volume(molarity: float) -> float:
    """NaCl at 25 degC, L/mol; Masson's law, 16.62 + 1.87 sqrt(c) cm3/mol (Millero; memory)."""
    return 1e-3 * (16.62 + 1.87 * math.sqrt(molarity))


def _sound_speed_slope(temperature: float) -> float:
    """m/s per mol/kg: +10 m/s at 25 degC and +9 at 37 degC for 0.154 mol/kg.

    Increments after Chen, Chen and Millero (1978), J. Acoust. Soc. Am. 63, 1795, from memory
    (9 to 10 m/s); linear in temperature through the two.
    """
    return (10.0 - (temperature - 298.15) / 12.0) / 0.154


def _jones_dole(molarity: float) -> float:
    """Relative viscosity, 1 + A sqrt(c) + B c (Jones and Dole 1929); A, B at 25 degC, memory."""
    return 1.0 + 0.0062 * math.sqrt(molarity) + 0.0793 * molarity


def _water_activity(molality: float) -> float:
    """From the osmotic coefficient 0.93 of 0.1 to 1 mol/kg NaCl at 25 degC (memory)."""
    return math.exp(-2.0 * 0.93 * molality * WATER_MOLAR_MASS)


def _checked(temperature: float) -> float:
    if not LOWEST <= temperature <= HIGHEST:
        raise ValueError(
            f"liquid temperature {temperature} K: allowed 273.15 to 353.15 K (0 to 80 degC)"
        )
    return temperature


def _celsius(temperature: float) -> float:
    return _checked(temperature) - LOWEST


def _tau(temperature: float) -> float:
    return 1.0 - _checked(temperature) / CRITICAL_TEMPERATURE


def _polynomial(coefficients: tuple[float, ...], x: float) -> float:
    total = 0.0
    for a in reversed(coefficients):
        total = total * x + a
    return total
