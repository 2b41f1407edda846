"""Flows between the cells of the resolved bubble and through its wall, compiled.

Conduction and mixture-averaged diffusion with a mass correction (Kee, Coltrin, Glarborg 2003,
ch. 12; no thermal diffusion). At the wall: half a cell of gas, the kinetic resistance of the
surface and, for what a liquid film follows, half a cell of liquid, in series.
"""

from __future__ import annotations

from math import exp, nan, pi, sqrt

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse.exchange import (
    CROSSES,
    ENTHALPY_AT_LIQUID,
    EQUILIBRIUM,
    MASS,
    SURFACE,
)
from sonoyield.collapse.kernel import inner
from sonoyield.collapse.properties import TRACE, mixture_conductivity, transport_logarithm
from sonoyield.describe.gas import GAS_CONSTANT, Array


@inner
def through_wall(state: Array, gas: c.Gas, film: c.Film, work: c.Work, out: Array) -> None:
    """Heat and species from the outermost cell into the liquid; the gas's gain of mass.

    Half-cell resistances are in mole fraction; water moves against gas that stays (Stefan flow).
    """
    cells, count = work.fractions.shape
    last = cells - 1
    at = c.CROSSED + count + last * (count + 1)
    pressure, area = work.whole[c.PRESSURE], work.face[last, c.AREA]
    _surface(state, gas, film, work)
    surface, saturation = work.whole[c.AT_WALL], work.whole[c.SATURATION]
    temperature = 0.5 * (state[at + count] + surface)
    thickness = work.whole[c.HALF]
    x, diffuses = work.row[0], work.row[1]
    mean_covolume = work.cell[last, c.COVOLUMES] / work.cell[last, c.AMOUNT]
    density = 1.0 / (GAS_CONSTANT * temperature / pressure + mean_covolume)
    at_surface = 1.0 / (GAS_CONSTANT * surface / pressure + mean_covolume)
    _wall_mixture(work.fractions[last], gas, at_surface, saturation, x)
    u = transport_logarithm(temperature, gas.constants[eq.TRANSPORT_TOP])
    conducts = mixture_conductivity(
        temperature, u, x, gas.conductivity, int(gas.constants[eq.WATER])
    )
    resists = thickness / conducts
    if gas.jump:
        resists += temperature_jump(
            surface, pressure, _mean_mass(x, gas), work.cell[last, c.CAPACITY]
        )
    resists += _liquid_resists(film, area)
    work.face[last, c.HEAT_CONDUCTANCE] = area / resists
    mixture_diffusivities(temperature, u, pressure, x, gas.species, gas.diffusivity, diffuses)
    work.whole[c.BY_SURFACE] = 1.0 / at_surface  # m3/mol
    weight = _mean_mass(x, gas)
    mass_rate = brought = 0.0
    for k in range(count):
        work.flow[last, k] = work.conductance[last, k] = 0.0
        if gas.species[k, CROSSES] == 0.0:
            continue
        stays = 1.0 - x[k] * gas.species[k, MASS] / weight
        resistance = thickness * stays / (density * diffuses[k])
        resistance += gas.species[k, SURFACE] / at_surface
        work.conductance[last, k] = area / resistance
        ahead = gas.species[k, EQUILIBRIUM] * saturation / at_surface
        work.flow[last, k] = work.conductance[last, k] * (work.fractions[last, k] - ahead)
    _into_film(state, film, work, area, at_surface)
    for k in range(count):
        flow = work.flow[last, k]
        if flow != 0.0:
            mass_rate -= gas.species[k, MASS] * flow
            out[at + k] -= flow
            work.cell[last, c.GAIN] -= flow
            carried = gas.species[k, ENTHALPY_AT_LIQUID]
            brought -= flow * (carried - work.enthalpy[last, k])
        out[c.CROSSED + k] = flow
    work.whole[c.MASS_RATE] = mass_rate
    heat = work.face[last, c.HEAT_CONDUCTANCE] * (surface - state[at + count])
    work.cell[last, c.HEATING] += heat + brought


@inner
def _surface(state: Array, gas: c.Gas, film: c.Film, work: c.Work) -> None:
    """Temperature of the surface, and vapour's density there over that at rest's temperature.

    Clausius and Clapeyron with the latent heat at rest; not-a-number where not physical.
    """
    cells, count = work.fractions.shape
    rest = gas.constants[eq.LIQUID_TEMPERATURE]
    work.whole[c.AT_WALL], work.whole[c.SATURATION] = rest, 1.0
    kinds = film.gas_index.size
    if film.edges.size < 2 or film.gas_index[kinds - 1] != c.WARMING:
        return
    warmed = rest + state[c.CROSSED + count + cells * (count + 1) + kinds - 1]
    if not 1.0 < warmed < eq.WARMEST_TRIAL:
        warmed = nan
    ease = film.layer[c.LATENT_HEAT] / GAS_CONSTANT * (1.0 / rest - 1.0 / warmed)
    work.whole[c.AT_WALL], work.whole[c.SATURATION] = warmed, rest / warmed * exp(ease)


@inner
def _liquid_resists(film: c.Film, area: float) -> float:
    """Resistance of half a cell of liquid to heat, K m2/W, where the liquid warms."""
    kinds = film.gas_index.size
    if film.edges.size < 2 or film.gas_index[kinds - 1] != c.WARMING:
        return 0.0
    conducts = film.diffusivity[kinds - 1] * film.layer[c.HEAT_CAPACITY]
    return 0.5 * film.edges[1] / (area * conducts)


@inner
def temperature_jump(temperature: float, pressure: float, mass: float, capacity: float) -> float:
    """Resistance of a surface to heat, K m2/W, with full thermal accommodation.

    4 T/(p c) (g - 1)/(g + 1), c the mean speed of molecules of ``mass`` kg/mol, g the ratio of heat
    capacities from the molar one at constant pressure, ``capacity`` J/mol/K: the jump of
    Smoluchowski 1898, coefficient after Maxwell's argument (Kennard 1938, Kinetic Theory of Gases).
    """
    speed = sqrt(8.0 * GAS_CONSTANT * temperature / (pi * mass))
    share = GAS_CONSTANT / (2.0 * capacity - GAS_CONSTANT)  # (g - 1)/(g + 1)
    return 4.0 * temperature / (pressure * speed) * share


@inner
def _mean_mass(x: Array, gas: c.Gas) -> float:
    weight = 0.0
    for k in range(x.size):
        weight += x[k] * gas.species[k, MASS]
    return weight


@inner
def _wall_mixture(
    inside: Array, gas: c.Gas, density: float, saturation: float, x: Array
) -> None:
    """Mole fractions half-way between the outermost cell and the surface."""
    total = 0.0
    for k in range(x.size):
        x[k] = max(inside[k], 0.0)
        if gas.species[k, CROSSES] != 0.0:
            at_rest = gas.species[k, EQUILIBRIUM]
            x[k] = 0.5 * (x[k] + min(at_rest * saturation / density, 1.0))
        total += x[k]
    for k in range(x.size):
        x[k] /= total


@inner
def _into_film(state: Array, film: c.Film, work: c.Work, area: float, density: float) -> None:
    """Put the liquid's resistance and content into the flows of what the film follows."""
    cells, count = work.fractions.shape
    last = cells - 1
    if film.edges.size < 2:
        return
    thickness = 0.5 * (film.edges[1] - film.edges[0]) / area
    first = c.CROSSED + count + cells * (count + 1)
    for s in range(film.gas_index.size):
        k = film.gas_index[s]
        if k < 0:
            continue
        gaseous = work.conductance[last, k]
        if gaseous == 0.0:
            continue
        liquid = area * film.diffusivity[s] * film.henry[s] * density / thickness
        work.conductance[last, k] = 1.0 / (1.0 / gaseous + 1.0 / liquid)
        ahead = state[first + s] / (film.henry[s] * density)
        work.flow[last, k] = work.conductance[last, k] * (work.fractions[last, k] - ahead)


@inner
def through_faces(state: Array, gas: c.Gas, work: c.Work, out: Array) -> None:
    """Conduction and diffusion between neighbours, with the drift that keeps mass fractions."""
    cells, count = work.fractions.shape
    at = c.CROSSED + count
    for i in range(cells - 1):
        _face(i, state[at + count], state[at + 2 * count + 1], gas, work)
        hotter = state[at + count] - state[at + 2 * count + 1]
        lost = carries = 0.0
        for k in range(count):
            flow = work.flow[i, k]
            carries += flow * 0.5 * (work.capacity[i, k] + work.capacity[i + 1, k])
            out[at + k] -= flow
            out[at + count + 1 + k] += flow
            work.cell[i, c.GAIN] -= flow
            work.cell[i + 1, c.GAIN] += flow
            lost += flow * (work.enthalpy[i + 1, k] - work.enthalpy[i, k])
        heat = work.face[i, c.HEAT_CONDUCTANCE] * hotter
        share = leaning(carries, work.face[i, c.HEAT_CONDUCTANCE])
        work.face[i, c.LEANING_HEAT] = share
        work.cell[i, c.HEATING] -= heat + (1.0 - share) * lost
        work.cell[i + 1, c.HEATING] += heat - share * lost
        at += count + 1


@inner
def leaning(carried: float, conductance: float) -> float:
    """Weight of the cell inside in what a flow outwards of ``carried`` takes along.

    One half, but no more of the cell downstream than diffusion allows without undershoot: the
    hybrid scheme (Spalding 1972, Int. J. Numer. Methods Eng. 4, 551).
    """
    if abs(carried) <= 2.0 * conductance:
        return 0.5
    downstream = conductance / abs(carried)
    return 1.0 - downstream if carried > 0.0 else downstream


@inner
def _face(i: int, inner: float, outer: float, gas: c.Gas, work: c.Work) -> None:
    """Conductances and flows of the face outside cell ``i``, from the temperatures beside it."""
    count = work.fractions.shape[1]
    x, diffuses = work.row[0], work.row[1]
    cell, area = work.cell, work.face[i, c.AREA]
    temperature = 0.5 * (inner + outer)
    for k in range(count):
        x[k] = 0.5 * (work.fractions[i, k] + work.fractions[i + 1, k])
    u = transport_logarithm(temperature, gas.constants[eq.TRANSPORT_TOP])
    conducts = mixture_conductivity(
        temperature, u, x, gas.conductivity, int(gas.constants[eq.WATER])
    )
    per_length = area / (cell[i + 1, c.CENTRE] - cell[i, c.CENTRE])
    work.face[i, c.HEAT_CONDUCTANCE] = conducts * per_length
    mixture_diffusivities(
        temperature, u, work.whole[c.PRESSURE], x, gas.species, gas.diffusivity, diffuses
    )
    amount = cell[i, c.AMOUNT] + cell[i + 1, c.AMOUNT]
    density = amount / (cell[i, c.VOLUME] + cell[i + 1, c.VOLUME])
    drift = 0.0
    for k in range(count):
        conductance = density * diffuses[k] * per_length
        flow = conductance * (work.fractions[i, k] - work.fractions[i + 1, k])
        work.conductance[i, k] = conductance
        work.flow[i, k] = flow
        drift += gas.species[k, MASS] * flow
    drift += gas.faces[i + 1] * work.whole[c.MASS_RATE]
    work.face[i, c.DRIFT] = drift
    _at_face(i, gas, work)
    for k in range(count):
        work.flow[i, k] -= work.per_mass[i, k] * drift


@inner
def _at_face(i: int, gas: c.Gas, work: c.Work) -> None:
    """What a kilogram holds at the face outside cell ``i``: harmonic means, scaled to a kilogram.

    Of second order as plain means are, and nothing is taken from a cell that has none of it.
    """
    count = work.fractions.shape[1]
    cell = work.cell
    inside = cell[i, c.AMOUNT] / cell[i, c.WEIGHT]
    outside = cell[i + 1, c.AMOUNT] / cell[i + 1, c.WEIGHT]
    whole = 0.0
    for k in range(count):
        a, b = work.fractions[i, k] * inside, work.fractions[i + 1, k] * outside
        mean, share = 0.0, 0.5
        if a > 0.0 and b > 0.0:
            mean, share = 2.0 * a * b / (a + b), a / (a + b)
        work.per_mass[i, k], work.share[i, k] = mean, share
        whole += gas.species[k, MASS] * mean
    for k in range(count):
        work.per_mass[i, k] /= whole


@inner
def mixture_diffusivities(
    temperature: float, u: float, pressure: float, x: Array, species: Array, diffusivity: Array,
    out: Array,
) -> None:
    """Fill ``out`` (K,), m2/s, as ``properties.mixture_diffusivity`` does for one species."""
    count = x.size
    whole = 0.0
    for k in range(count):
        out[k] = 0.0
        whole += max(x[k], 0.0) * species[k, MASS]
    for j in range(count):
        if x[j] <= TRACE_IN_CELLS:
            continue
        for k in range(count):
            if k != j:
                c = diffusivity[k, j]
                out[k] += x[j] / (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
    scale = temperature * temperature**0.5 / pressure
    for k in range(count):
        if out[k] <= 0.0:  # the pure gas: self-diffusion
            c = diffusivity[k, k]
            out[k] = scale * (c[0] + u * (c[1] + u * (c[2] + u * (c[3] + u * c[4]))))
        else:
            out[k] = scale * (whole - max(x[k], 0.0) * species[k, MASS]) / (whole * out[k])


TRACE_IN_CELLS = 1e3 * TRACE  # mole fraction; what is rarer does not slow the others down
