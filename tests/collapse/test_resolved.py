"""The resolved bubble: grid, what it conserves, its linear solver, and the film around it."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from math import log2, pi
from pathlib import Path

import numpy as np
import pytest

from sonoyield.collapse import cells as c
from sonoyield.collapse import resolved
from sonoyield.collapse.aqueous import FILM_OF_GAS, AqueousChemistry, aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.exchange import CROSSES
from sonoyield.collapse.film_grid import film_edges, volumes
from sonoyield.collapse.history import History
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.resolved import NO_FILM, follow_resolved, mass_fractions
from sonoyield.collapse.stage import Stage
from sonoyield.collapse.yields import counts_of
from sonoyield.describe.gas import AVOGADRO, GAS_CONSTANT, Array
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.estimate import bubble_of, liquid_of

EXAMPLES = Path(__file__).parents[2] / "examples"
NAMES = tuple(sorted(path.stem for path in EXAMPLES.glob("*.toml")))
ARGON, AIR = "bench_355kHz_argon", "bench_355kHz_air"
FEW = 8  # cells, where their number does not matter
LAST_OVER_FIRST = 0.1  # thickness of the shells, for the order of the scheme


@cache
def example(name: str) -> Bubble:
    protocol = Protocol.load(EXAMPLES / f"{name}.toml")
    return bubble_of(protocol, liquid_of(protocol))


@cache
def chemistry(name: str) -> AqueousChemistry:
    bubble = example(name)
    return aqueous_chemistry(bubble.liquid.temperature, nitrogen="N2" in bubble.mixture)


@cache
def followed(name: str, film: bool, cells: int = resolved.CELLS) -> History:
    return follow_resolved(example(name), cells=cells, chemistry=chemistry(name) if film else None)


def shells(cells: int) -> Array:
    """Mass fractions of shells whose thickness falls exponentially with the radius' place."""
    place = np.arange(cells + 1) / cells
    return ((1.0 - LAST_OVER_FIRST**place) / (1.0 - LAST_OVER_FIRST)) ** 3


def test_shells_narrow_to_the_wall() -> None:
    """Uniform gas: mass inside a radius goes with its cube; shells in a geometric series."""
    faces = mass_fractions(resolved.CELLS)
    assert faces.shape == (resolved.CELLS + 1,)
    assert faces[0] == 0.0
    assert faces[-1] == pytest.approx(1.0, rel=1e-14)
    thickness = np.diff(np.cbrt(faces))
    ratios = thickness[1:] / thickness[:-1]
    assert ratios[0] < 1.0
    np.testing.assert_allclose(ratios, ratios[0], rtol=1e-9)


def test_error_falls_with_the_square_of_the_cells(monkeypatch: pytest.MonkeyPatch) -> None:
    """Central differences on a smooth grid are of second order (LeVeque 2007, Finite Difference
    Methods, ch. 2): twice the cells, a quarter of the difference."""
    monkeypatch.setattr(resolved, "mass_fractions", lambda cells, *_: shells(cells))
    runs = [follow_resolved(example(ARGON), cells=cells) for cells in (8, 16, 32)]
    found = {
        "OH": [counts_of(run)["OH"].delivered for run in runs],
        "mean peak": [run.temperature.max() for run in runs],
        "centre peak": [run.cells.temperature[:, 0].max() for run in runs if run.cells],
    }
    for what, (coarse, middle, fine) in found.items():
        order = log2((coarse - middle) / (middle - fine))
        assert order == pytest.approx(2.0, abs=0.4), what
        assert abs(middle - fine) < 0.01 * abs(fine), what


@pytest.mark.parametrize("film", [False, True], ids=["sink", "film"])
@pytest.mark.parametrize("name", NAMES)
def test_elements_and_energy_close(name: str, film: bool) -> None:
    """Conservation laws, and amounts of atoms added up here at every step."""
    history = followed(name, film)
    assert not history.stopped
    assert len(history.windows) == 1
    closure = balance(history)
    assert closure.element_error <= 1e-9
    assert closure.energy_error <= 1e-4
    atoms = history.bubble.phase.atoms
    assert history.cells is not None
    inside = history.cells.moles.sum(axis=1) + history.crossed
    whole = atoms @ (history.bubble.moles + np.abs(history.crossed).max(axis=0))
    there = whole > 0.0
    drift = np.abs(inside @ atoms.T - atoms @ history.bubble.moles)[:, there] / whole[there]
    assert drift.max() <= 1e-9


@pytest.mark.parametrize("name", NAMES)
def test_record_agrees_with_itself(name: str) -> None:
    """Sums of cells are the contents; each cell keeps its share of the mass; inert gas stays."""
    history = followed(name, False)
    bubble, cells = history.bubble, history.cells
    assert cells is not None and cells.film is None
    amounts = cells.moles.sum(axis=2)
    np.testing.assert_allclose(cells.moles.sum(axis=1), history.moles, rtol=1e-12)
    mean = (amounts * cells.temperature).sum(axis=1) / amounts.sum(axis=1)
    np.testing.assert_allclose(history.temperature, mean, rtol=1e-12)
    mass = cells.moles @ bubble.phase.molar_mass
    share = mass / mass.sum(axis=1)[:, None]
    np.testing.assert_allclose(share, np.diff(cells.faces)[None].repeat(len(mass), 0), rtol=5e-4)
    stay = bubble.species[:, CROSSES] == 0.0
    assert not history.crossed[:, stay].any()
    assert bubble.phase.index("H2O") not in np.flatnonzero(stay)
    if "AR" in bubble.mixture:
        argon = bubble.phase.index("AR")
        np.testing.assert_allclose(history.moles[:, argon], bubble.moles[argon], rtol=1e-12)


@pytest.mark.parametrize("name", [ARGON, AIR])
def test_uniform_bubble_without_sound_stays_as_it_is(name: str) -> None:
    """Young-Laplace equilibrium and saturated vapour: nothing has a reason to change."""
    quiet = replace(example(name), pressure_amplitude=0.0)
    stage = hot_stage(quiet, FEW, None)
    state = at_rest(stage, quiet)
    rates = np.empty(stage.size)
    stage.rates(0.0, state, rates)
    per_second = rates / (stage.floors + np.abs(state)) * quiet.period
    assert np.abs(np.delete(per_second, range(c.LEDGER, c.CROSSED))).max() < 1e-8
    warmer = state.copy()
    warmer[stage.start + stage.count] += 1.0  # of the innermost cell: now it must not rest
    stage.rates(0.0, warmer, rates)
    assert rates[stage.start + stage.count] < 0.0 < rates[stage.start + 2 * stage.count + 1]
    assert rates[c.SPEED] > 0.0


def hot_stage(bubble: Bubble, cells: int, film: c.Film | None, table: Array | None = None) -> Stage:
    table = bubble.species if table is None else table
    faces = mass_fractions(cells)
    return Stage(bubble, range(len(bubble.moles)), faces, True, table, film or NO_FILM)


def at_rest(stage: Stage, bubble: Bubble) -> Array:
    head = np.zeros(c.CROSSED)
    head[c.RADIUS] = bubble.radius
    moles = np.outer(np.diff(stage.faces), bubble.moles)
    temperatures = np.full(stage.cells, bubble.liquid.temperature)
    return stage.compose(head, np.zeros(len(bubble.moles)), moles, temperatures)


def film_of(bubble: Bubble, chemistry: AqueousChemistry) -> c.Film:
    species = bubble.phase.species
    index = np.full(len(chemistry.species), -1, dtype=np.int64)
    for gas, dissolved in FILM_OF_GAS.items():
        if gas in species and dissolved in chemistry.species:
            index[chemistry.index(dissolved)] = species.index(gas)
    edges = film_edges(0.2 * bubble.radius, bubble.radius, resolved.FILM_CELLS)
    return c.Film(
        edges, chemistry.diffusivity, chemistry.henry, chemistry.bulk, index, chemistry.tables
    )


@cache
def at_peak(name: str, film: bool) -> tuple[Stage, float, Array]:
    """A stage with the state of a run where its mean is hottest."""
    history = followed(name, film, FEW)
    cells, bubble = history.cells, history.bubble
    assert cells is not None
    stage = hot_stage(bubble, FEW, film_of(bubble, chemistry(name)) if film else None)
    row = int(np.argmax(history.temperature))
    head = np.zeros(c.CROSSED)
    head[c.RADIUS], head[c.SPEED] = history.radius[row], history.speed[row]
    head[c.LEDGER :] = history.ledger[row]
    state = stage.compose(head, history.crossed[row], cells.moles[row], cells.temperature[row])
    if cells.film is not None:
        place = row - len(history.times)
        state[stage.wet :] = cells.film[place].ravel()
    return stage, float(history.times[row]), state


def sizes(stage: Stage, state: Array) -> Array:
    """What a change of each state is measured by."""
    size = np.maximum(stage.floors, np.abs(state))
    size[c.LEDGER : c.CROSSED] = stage.bubble.energy_scale
    size[c.CROSSED : stage.start] = stage.bubble.moles.sum()
    return size


def prepared(stage: Stage, time: float, state: Array) -> None:
    stage.evaluate(time, state, np.empty(stage.size))


def times(stage: Stage, x: Array) -> Array:
    out = np.empty(stage.size)
    stage.multiply(x, out)
    return out


@pytest.mark.parametrize("film", [False, True], ids=["sink", "film"])
@pytest.mark.parametrize("gamma", [1e-14, 1e-12, 1e-10])
def test_solver_inverts_what_is_multiplied(film: bool, gamma: float) -> None:
    """(I - gamma J) applied to a solution gives back the right-hand side."""
    stage, time, state = at_peak(ARGON, film)
    prepared(stage, time, state)
    stage.factorise(gamma)
    size = sizes(stage, state)
    right = np.random.default_rng(5).normal(size=stage.size) * size
    x = np.empty(stage.size)
    stage.solve(gamma, right, x)
    moved = gamma * times(stage, x)
    scale = size + np.abs(x) + np.abs(moved)
    assert np.abs((x - moved - right) / scale).max() < 1e-8
    assert np.abs(moved / size).max() > 1e-3  # the equation is not that of the identity


@pytest.mark.parametrize(
    ("name", "film"), [(ARGON, False), (ARGON, True), (AIR, True)], ids=["sink", "film", "air"]
)
def test_newton_with_this_jacobian_converges(name: str, film: bool) -> None:
    """Against central differences of the rates: Newton's error shrinks by the spectral radius of
    (I - gamma J)^-1 gamma (F - J) a turn (Kelley 1995, Iterative Methods, ch. 5)."""
    stage, time, state = at_peak(name, film)
    state = state.copy()
    state[stage.wet :] = np.abs(state[stage.wet :]) + 1e-3  # mol/m3: c |c| has a kink at nothing
    prepared(stage, time, state)
    size = sizes(stage, state)
    exact, used = (np.empty((stage.size, stage.size)) for _ in range(2))
    for a in range(stage.size):
        step = np.zeros(stage.size)
        step[a] = 1e-5 * size[a]
        apart = rates_at(stage, time, state + step) - rates_at(stage, time, state - step)
        exact[:, a] = apart / (2e-5 * size)
        used[:, a] = times(stage, step) / (1e-5 * size)
    gamma = 1e-11
    left = np.linalg.solve(np.eye(stage.size) - gamma * used, gamma * (exact - used))
    assert np.abs(np.linalg.eigvals(gamma * exact)).max() > 5.0  # no solution without a Jacobian
    # The face means' scaling to a kilogram has no derivative in it: 0.0154 found, 0.002 without.
    assert np.abs(np.linalg.eigvals(left)).max() < 0.02
    for a in (c.RADIUS, c.SPEED, *range(stage.wet, stage.size)):
        assert np.abs(used[:, a] - exact[:, a]).max() < 1e-5 * np.abs(exact[:, a]).max()


def rates_at(stage: Stage, time: float, state: Array) -> Array:
    out = np.empty(stage.size)
    stage.rates(time, state, out)
    return out


@pytest.mark.parametrize("film", [False, True], ids=["sink", "film"])
def test_jacobian_and_solver_keep_atoms(film: bool) -> None:
    """What one cell loses another gains or the wall lets through, whatever the state's change."""
    stage, time, state = at_peak(AIR, film)
    prepared(stage, time, state)
    stage.factorise(1e-11)
    x = np.random.default_rng(7).normal(size=stage.size) * sizes(stage, state)
    solved = np.empty(stage.size)
    stage.solve(1e-11, x, solved)
    atoms = stage.bubble.phase.atoms
    for change in (times(stage, x), solved - x):
        moles = change[stage.start : stage.wet].reshape(stage.cells, -1)[:, : stage.count]
        gone = change[c.CROSSED : stage.start]
        gross = atoms @ np.abs(moles).sum(axis=0)
        assert gross.min() > 0.0
        assert np.abs(atoms @ (moles.sum(axis=0) + gone) / gross).max() < 1e-10


@pytest.mark.parametrize("name", [ARGON, AIR])
def test_film_holds_what_crossed(name: str) -> None:
    """Water, H+ and OH- hold no oxidant, so reactions in the film keep 2 O - H + charge: what
    crossed is in the film, whose far end, 20 radii away, nothing reaches in a few periods."""
    history, dissolved = followed(name, True), chemistry(name)
    bubble, cells = history.bubble, history.cells
    assert cells is not None and cells.film is not None
    edges = film_edges(0.2 * bubble.radius, bubble.radius, resolved.FILM_CELLS)
    species = bubble.phase.species
    rows = len(cells.film)
    crossed, gross = np.zeros(rows), np.zeros(rows)
    for gas, liquid in FILM_OF_GAS.items():
        if gas in species and liquid in dissolved.species:
            moles = history.crossed[-rows:, species.index(gas)]
            share = dissolved.oxidant[dissolved.index(liquid)] * moles
            crossed += share
            gross += np.abs(share)
    held = cells.film @ dissolved.oxidant @ volumes(edges)
    assert gross[-1] > 1e6 / AVOGADRO
    assert np.abs(held - crossed).max() < 1e-12 * gross[-1]
    made = cells.film[-1, :, dissolved.index("O2-")]  # by no gas: the film's own chemistry
    assert volumes(edges) @ made > 1e-3 * history.crossed[-1, species.index("HO2")] > 0.0


def test_without_excluded_volume_the_gas_is_ideal() -> None:
    """p V = sum n_k R T over the cells, and argon at its smallest is denser than with covolumes."""
    bubble = replace(example(ARGON), excluded_volume=False)
    history, other = follow_resolved(bubble, cells=FEW), followed(ARGON, False, FEW)
    closure = balance(history)
    assert not history.stopped
    assert closure.element_error <= 1e-9 and closure.energy_error <= 1e-4
    assert history.cells is not None
    thermal = (history.cells.moles.sum(axis=2) * history.cells.temperature).sum(axis=1)
    volume = 4.0 / 3.0 * pi * history.radius**3
    np.testing.assert_allclose(history.pressure * volume, GAS_CONSTANT * thermal, rtol=1e-10)
    assert history.radius.min() < 0.99 * other.radius.min()
    assert not np.isclose(history.temperature.max(), other.temperature.max(), rtol=1e-4)
