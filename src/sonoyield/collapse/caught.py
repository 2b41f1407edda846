"""What scavengers in the liquid catch of one collapse: the film behind a resolved run.

The run gives one cycle of the wall and of the gas beside it, which the film alone then repeats.
Streaming and the bubble's own motion renew the liquid, so the truth lies between a fresh film every
cycle, the most that can be caught, and the cycle that repeats in one place, which is the headline.
The gas is taken as the run left it: its film should hold the same scavengers, or more OH comes
through the wall than the gas had to give (10 % in argon at 355 kHz, 40 % in air, by 1 mmol/L).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from sonoyield.collapse import cells as c
from sonoyield.collapse.aqueous import FILM_OF_GAS, AqueousChemistry, aqueous_chemistry
from sonoyield.collapse.aqueous_tables import henry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.cells_flows import through_wall
from sonoyield.collapse.cells_rates import volumes
from sonoyield.collapse.exchange import CROSSES, SURFACE
from sonoyield.collapse.film import (
    FilmCourse,
    FilmCycle,
    FilmResult,
    WallHistory,
    follow_course,
    follow_film,
)
from sonoyield.collapse.history import History
from sonoyield.collapse.resolved import NO_FILM
from sonoyield.collapse.stage import Stage
from sonoyield.describe.gas import AVOGADRO, Array
from sonoyield.describe.scavengers import Scavenger

PER_LITRE = 1e-3  # mol/m3 in mol/L
LONGEST_STAY = 1e4  # cycles in one place, up to which the catch is followed
GROWTH = 4.0  # of the cycles from one to the next followed; at 1e4 the catch is 2 % above 2.0's
NITRIC = ("NO", "NO2")
BETWEEN_MAXIMA, FROM_REST = "between main maxima", "from rest"


@dataclass(frozen=True)
class Catch:
    """Molecules of one scavenger that meet OH in a cycle.

    ``molecules``, the headline, is that of the cycle ``repeating`` in one place; ``fresh`` is in
    fresh liquid. ``supply_limit``: what steady diffusion can bring to the wall. ``after_cycles``
    and ``molecules_then``: the catch after so many cycles in one place, empty if not asked for.
    """

    scavenger: str
    k_L_per_mol_s: float
    mol_per_L: float
    molecules: float
    fresh: float
    repeating: float
    supply_limit: float
    after_cycles: tuple[float, ...] = ()
    molecules_then: tuple[float, ...] = ()


@dataclass(frozen=True)
class Fate:
    """What a cycle leaves in the liquid, molecules.

    ``OH_entered`` through the wall. OH that reacted was ``OH_caught``, became H2O2, went to an
    oxide of nitrogen or was lost (to water, O2 or HO2); ``shares`` are those four over their sum.
    ``H2O2``, ``nitrite`` (with its acid) and ``nitrate``: what came in through the wall and was
    made there, net; ``nitric_oxides`` the same of NO and NO2, which in aerated water become
    nitrite and nitrate further out.
    """

    OH_entered: float
    OH_caught: float
    OH_to_H2O2: float
    OH_to_nitrogen: float
    OH_lost: float
    H2O2: float
    nitrite: float
    nitrate: float
    nitric_oxides: float

    @property
    def shares(self) -> dict[str, float]:
        """Of the OH that reacted: caught, in H2O2, with nitrogen, lost. Zeros where none did."""
        parts = {
            "caught": self.OH_caught,
            "H2O2": self.OH_to_H2O2,
            "nitrogen": self.OH_to_nitrogen,
            "lost": self.OH_lost,
        }
        whole = sum(parts.values())
        return {name: one / whole if whole > 0.0 else 0.0 for name, one in parts.items()}


@dataclass(frozen=True)
class InLiquid:
    """The liquid around one bubble, per cycle of the ``window`` that was taken to repeat.

    ``window``: ``BETWEEN_MAXIMA`` or, where there was none, ``FROM_REST``. ``fresh`` liquid and
    ``repeating`` cycle; ``repeats``: whether that was reached within 1 %. ``same_film``: whether
    the run had a film of as many species. ``OH_delivered``: molecules the run itself delivered in
    its window, to compare with what entered ``fresh`` liquid. ``catches``: one for each scavenger,
    in the order given. ``film``: all else about both cycles.
    """

    window: str
    same_film: bool
    OH_delivered: float
    fresh: Fate
    repeating: Fate
    repeats: bool
    catches: tuple[Catch, ...]
    film: FilmResult


def catches(
    history: History,
    scavengers: Mapping[str, Scavenger],
    oxygen_atom: str = "persists",
    longest_stay: float = LONGEST_STAY,
) -> InLiquid:
    """Follow the film behind a resolved run, with these scavengers (none is allowed).

    ``longest_stay``: cycles in one place up to which the catch is followed, zero for not at all.
    Raises ``ValueError`` for a run of mixed gas or an unknown ``oxygen_atom``, ``FilmError`` where
    the film cannot be followed.
    """
    bubble = history.bubble
    chemistry = aqueous_chemistry(
        bubble.liquid.temperature, scavengers, oxygen_atom,
        nitrogen="N2" in bubble.phase.species, dissolved=dissolved_gases(bubble),
    )  # fmt: skip
    span, window = repeating_span(history)
    wall = wall_history(history, chemistry, span)
    found = follow_film(chemistry, wall)
    course = None
    if scavengers and longest_stay >= 1.0:
        course = follow_course(chemistry, wall, longest_stay, growth=GROWTH)
    return InLiquid(
        window=window,
        same_film=_same_film(history, chemistry),
        OH_delivered=_delivered(history, "OH", span),
        fresh=_fate(found.first),
        repeating=_fate(found.last),
        repeats=bool(found.repeats),
        catches=tuple(_catch(name, one, found, course) for name, one in scavengers.items()),
        film=found,
    )


def dissolved_gases(bubble: Bubble) -> dict[str, float]:
    """Concentration far away of the film's species, mol/m3: O2 of a liquid saturated with the gas.

    Henry's law for the moist gas at ambient pressure. Nitrogen and noble gases take no part.
    """
    share = bubble.mixture.get("O2", 0.0)
    dry = max(bubble.ambient_pressure - bubble.liquid.saturation_pressure, 0.0)
    return {"O2": henry("O2", bubble.liquid.temperature) * share * dry} if share else {}


def repeating_span(history: History) -> tuple[tuple[int, int], str]:
    """First and last row of the cycle taken to repeat, and which it is.

    From the first main maximum to the second, else all that there is from rest.
    """
    if len(history.marks) > 2:
        return (history.marks[1], history.marks[2]), BETWEEN_MAXIMA
    return history.spans[0], FROM_REST


def wall_history(
    history: History, chemistry: AqueousChemistry, span: tuple[int, int]
) -> WallHistory:
    """The wall over rows ``span`` of a resolved run, as the film alone takes it.

    Concentrations are those of the outermost cell at the surface's density, so that conductance
    times their difference is the flow in the resolved gas. All that both gas and film know crosses
    here, also what a run without a film kept in the bubble. Raises ``ValueError`` for mixed gas.
    """
    cells = history.cells
    if cells is None:
        raise ValueError("what is caught needs a resolved gas")
    rows = _rows(history.times, span)
    radius = np.ascontiguousarray(history.radius[rows])
    names, places, table = _crossing(history.bubble, chemistry)
    whole = range(len(history.bubble.phase.species))
    stage = Stage(history.bubble, whole, cells.faces, False, table, NO_FILM)
    beside = np.zeros((2, len(radius), len(places)))
    _beside_wall(
        radius, cells.moles[rows], cells.temperature[rows], places, stage.gas, stage.film,
        stage.work, *beside,
    )  # fmt: skip
    return WallHistory(
        times=history.times[rows],
        radius=radius,
        species=names,
        gas=beside[0],
        gas_side=beside[1],
        speed=np.ascontiguousarray(history.speed[rows]),
    )


def _crossing(
    bubble: Bubble, chemistry: AqueousChemistry
) -> tuple[tuple[str, ...], NDArray[np.int64], Array]:
    """Film names and gas positions of what crosses, and the species' table with all of it."""
    species, table = bubble.phase.species, bubble.species.copy()
    pairs = {g: f for g, f in FILM_OF_GAS.items() if g in species and f in chemistry.species}
    places = np.array([species.index(gas) for gas in pairs], dtype=np.int64)
    for gas, k in zip(pairs, places, strict=True):
        table[k, CROSSES], table[k, SURFACE] = 1.0, bubble.surface_resistance(gas)
    return tuple(pairs.values()), places, table


@njit(cache=True, error_model="numpy")
def _beside_wall(
    radius: Array,
    moles: Array,
    temperature: Array,
    places: NDArray[np.int64],
    gas: c.Gas,
    film: c.Film,
    work: c.Work,
    beside: Array,
    side: Array,
) -> None:
    """Fill ``beside`` (P, S) mol/m3 and ``side`` (P, S) m/s with the resolved gas's own flows."""
    steps, cells, count = moles.shape
    state = np.zeros(c.CROSSED + count + cells * (count + 1))
    unused = np.zeros(state.size)
    inside = state[c.CROSSED + count :].reshape((cells, count + 1))
    last = cells - 1
    for p in range(steps):
        state[c.RADIUS] = radius[p]
        inside[:, :count] = moles[p]
        inside[:, count] = temperature[p]
        volumes(state, gas, work)
        through_wall(state, gas, film, work, unused)
        density = 1.0 / work.whole[c.BY_SURFACE]
        for s in range(places.size):
            k = places[s]
            beside[p, s] = max(work.fractions[last, k], 0.0) * density
            side[p, s] = work.conductance[last, k] / (work.face[last, c.AREA] * density)


def _rows(times: Array, span: tuple[int, int]) -> NDArray[np.int64]:
    """Rows from the first to the last of ``span`` without those that repeat a time."""
    rows = np.arange(span[0], span[1] + 1)
    later = np.concatenate([[True], np.diff(times[rows]) > 0.0])
    return rows[later]


def _same_film(history: History, chemistry: AqueousChemistry) -> bool:
    film = history.cells.film if history.cells else None
    return film is not None and film.shape[2] == len(chemistry.species)


def _delivered(history: History, species: str, span: tuple[int, int]) -> float:
    crossed = history.crossed[:, history.bubble.phase.index(species)]
    return float(AVOGADRO * (crossed[span[1]] - crossed[span[0]]))


def _catch(name: str, one: Scavenger, found: FilmResult, course: FilmCourse | None) -> Catch:
    return Catch(
        scavenger=name,
        k_L_per_mol_s=one.k / PER_LITRE,
        mol_per_L=one.concentration * PER_LITRE,
        molecules=found.last.caught[name],
        fresh=found.first.caught[name],
        repeating=found.last.caught[name],
        supply_limit=found.supply[name],
        after_cycles=tuple(course.cycles.tolist()) if course else (),
        molecules_then=tuple(course.caught[name].tolist()) if course else (),
    )


def _fate(cycle: FilmCycle) -> Fate:
    caught, lost = float(sum(cycle.caught.values())), cycle.lost
    peroxide = sum(n for name, n in cycle.oh.items() if name.split("->")[1].strip() == "H2O2")
    return Fate(
        OH_entered=cycle.entered.get("OH", 0.0),
        OH_caught=caught,
        OH_to_H2O2=peroxide,
        OH_to_nitrogen=max(sum(cycle.oh.values()) - caught - lost - peroxide, 0.0),
        OH_lost=lost,
        H2O2=cycle.peroxide + cycle.entered.get("H2O2", 0.0),
        nitrite=cycle.nitrite,
        nitrate=cycle.nitrate,
        nitric_oxides=sum(cycle.made.get(x, 0.0) + cycle.entered.get(x, 0.0) for x in NITRIC),
    )
