"""Heat capacity, enthalpy, conductivity and diffusivity of the gas, compiled.

Coefficients come from the loaded Cantera phase (``GasPhase``); a test compares the values with
Cantera's own. Steam conducts as IAPWS R15-11 says, since the transport model overestimates it by
20-40 %. Below 200 K, where the polynomials end, heat capacities are held at their 200 K value:
the vibrations are frozen there, so this is what the physics gives within a few per cent.
"""

from __future__ import annotations

from math import log, sqrt

from numba import njit

from sonoyield.describe.gas import GAS_CONSTANT, Array

COLDEST = 200.0  # K, lowest temperature of the thermo polynomials
HOTTEST = 20_000.0  # K, highest: beyond it they run through zero
COLDEST_TRANSPORT = 100.0  # K; the transport fits, made from 200 K up, are smooth down to here
TRACE = 1e-9  # mole fraction; what is rarer does not count in the transport of the mixture
LOW, HIGH = 9, 10  # columns of an interval's bounds


@njit(cache=True, error_model="numpy")
def heat_capacity_and_enthalpy(
    temperature: float, nasa: Array, capacity: Array, enthalpy: Array
) -> None:
    """Fill molar ``capacity`` (J/mol/K) and ``enthalpy`` (J/mol) of each species, shape (K,).

    McBride, Zehe, Gordon 2002 (NASA/TP-2002-211556), nine-coefficient form.
    """
    t = min(max(temperature, COLDEST), HOTTEST)
    inverse = 1.0 / t
    logarithm = log(t)
    last = nasa.shape[1] - 1
    for k in range(nasa.shape[0]):
        i = 0
        while i < last and t > nasa[k, i, HIGH]:
            i += 1
        a = nasa[k, i]
        cp = (a[0] * inverse + a[1]) * inverse + a[2]
        cp += t * (a[3] + t * (a[4] + t * (a[5] + t * a[6])))
        h = (-a[0] * inverse + a[1] * logarithm + a[7]) * inverse + a[2]
        h += t * (a[3] / 2 + t * (a[4] / 3 + t * (a[5] / 4 + t * a[6] / 5)))
        capacity[k] = cp * GAS_CONSTANT
        enthalpy[k] = h * GAS_CONSTANT * t + capacity[k] * (temperature - t)


@njit(cache=True, error_model="numpy")
def steam_conductivity(temperature: float) -> float:
    """Conductivity of dilute steam, W/m/K, from ``temperature`` in K.

    IAPWS R15-11, dilute-gas term; the release holds it to 1173 K, above that it is extrapolated.
    """
    r = 647.096 / temperature
    series = 2.443221e-3 + r * (
        1.323095e-2 + r * (6.770357e-3 + r * (-3.454586e-3 + r * 4.096266e-4))
    )
    return 1e-3 / (sqrt(r) * series)


@njit(cache=True, error_model="numpy")
def transport_logarithm(temperature: float, top: float) -> float:
    """Argument of the transport polynomials, ln(T/K), held below 100 K and above ``top``.

    Beyond those conductivity goes on as T^0.5 and diffusivity as T^1.5, a little slower than
    kinetic theory (8 % at 12 000 K), where the polynomials themselves would run away.
    """
    return log(min(max(temperature, COLDEST_TRANSPORT), top))


@njit(cache=True, error_model="numpy")
def mixture_conductivity(
    temperature: float, u: float, x: Array, conductivity: Array, water: int
) -> float:
    """Conductivity of the mixture, W/m/K, mole fractions ``x`` (K,).

    ``u`` is the transport logarithm. Mathur, Tondon, Saxena 1967: mean of the arithmetic and the
    harmonic average.
    """
    root = sqrt(temperature)
    arithmetic = 0.0
    harmonic = 0.0
    for k in range(x.size):
        if x[k] <= TRACE:
            continue
        if k == water:
            one = steam_conductivity(temperature)
        else:
            c = conductivity[k]
            one = root * (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
        arithmetic += x[k] * one
        harmonic += x[k] / one
    return 0.5 * (arithmetic + 1.0 / harmonic)


@njit(cache=True, error_model="numpy")
def mixture_diffusivity(
    k: int,
    temperature: float,
    u: float,
    pressure: float,
    x: Array,
    molar_mass: Array,
    diffusivity: Array,
) -> float:
    """Mixture-averaged diffusivity of species ``k``, m2/s; ``u`` is the transport logarithm.

    Kee, Coltrin, Glarborg 2003, eq. 12.178: (1 - Y_k) / sum_j x_j / D_jk.
    """
    mass = 0.0
    resistance = 0.0
    for j in range(x.size):
        if j == k or x[j] <= TRACE:
            continue
        c = diffusivity[k, j]
        mass += x[j] * molar_mass[j]
        resistance += x[j] / (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
    whole = mass + max(x[k], 0.0) * molar_mass[k]
    scale = temperature * sqrt(temperature) / pressure
    if resistance <= 0.0:  # the pure gas: self-diffusion
        c = diffusivity[k, k]
        return scale * (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
    return scale * mass / (whole * resistance)
