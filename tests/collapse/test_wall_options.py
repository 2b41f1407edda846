"""What the wall of the resolved bubble does to heat, against kinetic theory and closed forms."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from math import pi, sqrt
from pathlib import Path

import numpy as np
import pytest
from numba import njit
from scipy.integrate import solve_ivp
from scipy.special import erfcx

from sonoyield.collapse import cells as c
from sonoyield.collapse import equations as eq
from sonoyield.collapse import resolved
from sonoyield.collapse.aqueous import FILM_OF_GAS, aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.cells_flows import temperature_jump
from sonoyield.collapse.film_grid import film_edges, volumes
from sonoyield.collapse.follow import Accuracy
from sonoyield.collapse.history import History
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.resolved import NO_FILM, follow_resolved, mass_fractions, warmed
from sonoyield.collapse.stage import Stage
from sonoyield.collapse.yields import collapse_of
from sonoyield.describe.gas import GAS_CONSTANT, Array
from sonoyield.describe.liquid import WATER_MOLAR_MASS, saturation_pressure_wagner_pruss
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.estimate import bubble_of, liquid_of

ARGON = Path(__file__).parents[2] / "examples" / "bench_355kHz_argon.toml"
FEW = 8  # cells, where their number does not matter


@njit
def jump(temperature: float, pressure: float, mass: float, capacity: float) -> float:
    return temperature_jump(temperature, pressure, mass, capacity)


def test_jump_is_twice_the_mean_free_path_or_so() -> None:
    """Argon at 298.15 K and 1 atm: the jump's length, conductivity times resistance.

    Kinetic theory (Kennard 1938; full accommodation): 2 g/(g + 1) mean free path/Pr with
    mean free path = 2 viscosity/(density c). Viscosity 22.6 uPa s, conductivity 17.7 mW/m/K
    (Lemmon and Jacobsen 2004, from memory). The two forms agree where the conductivity is
    Eucken's 15/4 R/M viscosity; the measured one is within 1 %.
    """
    temperature, pressure, mass = 298.15, 101325.0, 39.948e-3
    viscosity, conductivity, ratio = 22.6e-6, 17.7e-3, 5.0 / 3.0
    capacity = 2.5 * GAS_CONSTANT
    speed = sqrt(8.0 * GAS_CONSTANT * temperature / (pi * mass))
    path = 2.0 * viscosity * GAS_CONSTANT * temperature / (pressure * mass * speed)
    prandtl = viscosity * capacity / mass / conductivity
    expected = 2.0 * ratio / (ratio + 1.0) * path / prandtl
    found = conductivity * jump(temperature, pressure, mass, capacity)
    assert found == pytest.approx(expected, rel=1e-3)


def test_a_resisting_surface_keeps_the_gas_hotter_and_the_ledger_closes() -> None:
    protocol = Protocol.load(ARGON)
    bubble = bubble_of(protocol, liquid_of(protocol))
    accuracy = Accuracy(relative=1e-6, tighten=0)
    plain, resists = (
        follow_resolved(bubble, 1, accuracy, temperature_jump=one) for one in (False, True)
    )
    assert balance(resists).closed
    peaks = [collapse_of(one).peak_temperature_K for one in (plain, resists)]
    assert 0.0 < peaks[1] / peaks[0] - 1.0 < 0.1  # mean free path over thermal layer, at most


@cache
def example() -> Bubble:
    protocol = Protocol.load(ARGON)
    return bubble_of(protocol, liquid_of(protocol))


@cache
def warming(film: bool) -> History:
    bubble = example()
    dissolved = aqueous_chemistry(bubble.liquid.temperature, nitrogen=False) if film else None
    accuracy = Accuracy(relative=1e-6, tighten=0)
    return follow_resolved(bubble, 1, accuracy, chemistry=dissolved, wall="thermal_layer")


def full_film(bubble: Bubble) -> c.Film:
    chemistry, species = aqueous_chemistry(bubble.liquid.temperature), bubble.phase.species
    index = np.full(len(chemistry.species), -1, dtype=np.int64)
    for gas, dissolved in FILM_OF_GAS.items():
        if gas in species and dissolved in chemistry.species:
            index[chemistry.index(dissolved)] = species.index(gas)
    edges = np.zeros(1)
    known = (chemistry.diffusivity, chemistry.henry, chemistry.bulk)
    return warmed(c.Film(edges, *known, index, chemistry.tables), bubble)


def quiet_state(stage: Stage, bubble: Bubble, warmer: float = 0.0) -> Array:
    head = np.zeros(c.CROSSED)
    head[c.RADIUS] = bubble.radius
    temperatures = np.full(stage.cells, bubble.liquid.temperature + warmer)
    moles = np.outer(np.diff(stage.faces), bubble.moles)
    return stage.compose(head, np.zeros(len(bubble.moles)), moles, temperatures)


def rates_at(stage: Stage, time: float, state: Array) -> Array:
    out = np.empty(stage.size)
    stage.rates(time, state, out)
    return out


def test_liquid_warms_as_around_a_heated_sphere() -> None:
    """Gas held 1 K warmer behind half a cell of it, still wall: region outside a sphere with heat
    transfer at its surface (Carslaw and Jaeger 1959, Conduction of Heat in Solids, sec. 9.10, from
    memory; in r T it is their half-space of sec. 2.7):
    T(a)/T0 = (H - 1)/H (1 - exp(H^2 s) erfc(H sqrt s)), H = 1 + a h/k, s = D t/a^2.
    2 % are taken for cells that each are 1.6 times as thick as the one before.
    """
    bubble = replace(example(), vapour=False)
    film = warmed(NO_FILM, bubble)
    species = range(len(bubble.moles))
    stage = Stage(bubble, species, mass_fractions(FEW), False, bubble.species, film)
    state = quiet_state(stage, bubble, 1.0)

    def warms(_: float, layer: Array) -> Array:
        state[stage.wet :] = layer
        return rates_at(stage, 0.0, state)[stage.wet :]

    times = np.geomspace(1e-10, 1e-4, 13)
    start = np.zeros(stage.size - stage.wet)
    warms(0.0, start)
    radius, liquid = bubble.radius, bubble.liquid
    area = 4.0 * pi * radius * radius
    transfer = stage.work.face[-1, c.HEAT_CONDUCTANCE] / area
    found = solve_ivp(
        warms, (0.0, times[-1]), start, "BDF", times, rtol=1e-6, atol=1e-12
    ).y[0]
    strength = 1.0 + radius * transfer / liquid.thermal_conductivity
    diffusivity = liquid.thermal_conductivity / (liquid.density * liquid.heat_capacity)
    place = strength * np.sqrt(diffusivity * times) / radius
    expected = (1.0 - 1.0 / strength) * (1.0 - erfcx(place))
    assert expected[-1] > 30.0 * expected[0] > 0.0
    np.testing.assert_allclose(found, expected, rtol=0.02)


@pytest.mark.parametrize("warmer", [5.0, 10.0])
def test_warm_surface_holds_the_vapour_of_its_temperature(warmer: float) -> None:
    """Vapour neither condenses nor leaves where its pressure is that of saturation, by Wagner and
    Pruss 1993; constant latent heat, here over few kelvins, is taken to cost 0.5 %."""
    bubble = example()
    film = warmed(NO_FILM, bubble)
    species = range(len(bubble.moles))
    stage = Stage(bubble, species, mass_fractions(FEW), False, bubble.species, film)
    state = quiet_state(stage, bubble, warmer)
    state[stage.wet :] = warmer
    water = bubble.phase.index("H2O")
    rates_at(stage, 0.0, state)
    pressure, conductance = stage.work.whole[c.PRESSURE], stage.work.conductance[-1, water]
    saturated = stage.work.fractions[-1, water] - stage.work.flow[-1, water] / conductance
    temperature = bubble.liquid.temperature + warmer
    # mole fraction at the surface is concentration over density, the latter without covolumes
    assert saturated * pressure == pytest.approx(
        saturation_pressure_wagner_pruss(temperature), rel=5e-3
    )


@pytest.mark.parametrize("film", [False, True], ids=["alone", "chemistry"])
def test_layer_holds_what_the_gas_gave(film: bool) -> None:
    """Conservation: heat capacity times warming is heat conducted plus latent heat of the vapour
    that condensed, at every step; nothing reaches the far end in a few periods."""
    history = warming(film)
    bubble, cells = history.bubble, history.cells
    assert not history.stopped and cells is not None and cells.warming is not None
    assert (cells.film is not None) == film
    assert cells.warming.shape == (len(history.times), resolved.LAYER_CELLS)
    edges = film_edges(0.2 * bubble.radius, bubble.radius, resolved.LAYER_CELLS)
    capacity = bubble.liquid.density * bubble.liquid.heat_capacity
    held = capacity * (cells.warming @ volumes(edges))
    water = history.crossed[:, bubble.phase.index("H2O")]
    latent = bubble.liquid.latent_heat * WATER_MOLAR_MASS * water
    conducted = history.ledger[:, eq.HEAT]
    assert min(np.abs(latent).max(), np.abs(conducted).max()) > 1e-12
    np.testing.assert_allclose(held, conducted + latent, atol=1e-8 * np.abs(held).max())
    closure = balance(history)
    assert closure.element_error <= 1e-9 and closure.energy_error <= 1e-4


def test_warm_wall_is_warm_and_changes_little() -> None:
    """Warmer at collapse, cooler while the bubble is large and water evaporates. The gas is held
    up by less than the share of the surface's warming in its own excess of temperature."""
    history = warming(False)
    plain = follow_resolved(example(), 1, Accuracy(relative=1e-6, tighten=0))
    assert history.cells is not None and history.cells.warming is not None
    surface = history.cells.warming[:, 0]
    assert surface.min() < 0.0 < 10.0 < surface.max()
    assert history.radius[np.argmax(surface)] < 0.3 * example().radius
    assert history.radius[np.argmin(surface)] > example().radius
    peak, other = (one.temperature.max() for one in (history, plain))
    assert peak != other
    assert abs(peak - other) < surface.max()


@cache
def at_peak(film: bool) -> tuple[Stage, float, Array]:
    """A stage with the state of a run where its surface is hottest."""
    history, bubble = warming(film), example()
    cells = history.cells
    assert cells is not None and cells.warming is not None
    row = int(np.argmax(cells.warming[:, 0]))
    layer = full_film(bubble) if film else warmed(NO_FILM, bubble)
    table = bubble.species
    stage = Stage(bubble, range(len(bubble.moles)), cells.faces, True, table, layer)
    head = np.zeros(c.CROSSED)
    head[c.RADIUS], head[c.SPEED] = history.radius[row], history.speed[row]
    head[c.LEDGER :] = history.ledger[row]
    state = stage.compose(
        head, history.crossed[row], cells.moles[row], cells.temperature[row], cells.warming[row]
    )
    if cells.film is not None:
        wet = state[stage.wet :].reshape(stage.spots)
        wet[:, :-1] = np.abs(cells.film[row - len(history.times)]) + 1e-3  # c |c| has a kink
    return stage, float(history.times[row]), state


def sizes(stage: Stage, state: Array) -> Array:
    """What a change of each state is measured by."""
    size = np.maximum(stage.floors, np.abs(state))
    size[c.LEDGER : c.CROSSED] = stage.bubble.energy_scale
    size[c.CROSSED : stage.start] = stage.bubble.moles.sum()
    return size


@pytest.mark.parametrize("film", [False, True], ids=["alone", "chemistry"])
@pytest.mark.parametrize("gamma", [1e-14, 1e-11, 1e-9])
def test_solver_inverts_what_is_multiplied_where_the_liquid_warms(
    film: bool, gamma: float
) -> None:
    """(I - gamma J) applied to a solution gives back the right-hand side."""
    stage, time, state = at_peak(film)
    stage.evaluate(time, state, np.empty(stage.size))
    stage.factorise(gamma)
    size = sizes(stage, state)
    right = np.random.default_rng(5).normal(size=stage.size) * size
    x, moved = np.empty(stage.size), np.empty(stage.size)
    stage.solve(gamma, right, x)
    stage.multiply(x, moved)
    moved *= gamma
    assert np.abs((x - moved - right) / (size + np.abs(x) + np.abs(moved))).max() < 1e-8
    assert np.abs(moved / size).max() > 1e-3  # the equation is not that of the identity


@pytest.mark.parametrize("film", [False, True], ids=["alone", "chemistry"])
def test_newton_converges_where_the_liquid_warms(film: bool) -> None:
    """Against central differences: Newton's error shrinks by the spectral radius of
    (I - gamma J)^-1 gamma (F - J) a turn (Kelley 1995, Iterative Methods, ch. 5).

    That is 0.0136 here without the warming, and must not be more with it. J holds conductances,
    which follow the surface's temperature too: 2 % are taken for the warming's column.
    """
    stage, time, state = at_peak(film)
    stage.evaluate(time, state, np.empty(stage.size))
    size = sizes(stage, state)
    exact, used = (np.empty((stage.size, stage.size)) for _ in range(2))
    for a in range(stage.size):
        step, moved = np.zeros(stage.size), np.empty(stage.size)
        step[a] = 1e-5 * size[a]
        apart = rates_at(stage, time, state + step) - rates_at(stage, time, state - step)
        exact[:, a] = apart / (2e-5 * size)
        stage.multiply(step, moved)
        used[:, a] = moved / (1e-5 * size)
    gamma = 1e-11
    left = np.linalg.solve(np.eye(stage.size) - gamma * used, gamma * (exact - used))
    assert np.abs(np.linalg.eigvals(gamma * exact)).max() > 5.0
    assert np.abs(np.linalg.eigvals(left)).max() < 0.02
    kinds = len(stage.film.gas_index)
    warming_column = stage.wet + kinds - 1
    off = np.abs(used - exact)[:, warming_column] / np.abs(exact[:, warming_column]).max()
    assert off.max() < 0.02


def test_a_wall_of_another_name_is_refused() -> None:
    with pytest.raises(ValueError, match="liquid_temperature, thermal_layer"):
        follow_resolved(example(), wall="adiabatic")
