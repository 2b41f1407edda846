"""One cycle of the liquid around a bubble: what enters, what it becomes, what leaves."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from math import pi, sqrt

import numpy as np

from sonoyield.collapse import film_steps as steps
from sonoyield.collapse.aqueous import CAUGHT, AqueousChemistry
from sonoyield.collapse.film_grid import film_edges, volumes
from sonoyield.describe.gas import AVOGADRO, Array

MOST_STEPS = 20_000  # in one stretch between two marks
STRETCHES = 24  # of a cycle, each about as eventful: no step passes over a burst
REACH = 10.0  # mean radii; beyond, the film takes the steady profile

_ACIDS = ("HNO2", "NO2-", "NO3-", "NO2", "ONOOH", "HNO4")


class FilmError(Exception):
    """The film could not be followed; the message says when."""


@dataclass(frozen=True, eq=False)
class WallHistory:
    """One cycle of the bubble's wall, which then repeats.

    ``times`` (P,) s, increasing; ``radius`` (P,) m; ``species`` the film's names of the S that
    cross; ``gas`` (P, S) mol/m3 beside the wall; ``gas_side`` (P, S) m/s, conductance from there to
    the surface (half a cell of gas and accommodation). ``speed`` (P,) m/s of the wall, if known.
    Raises ``ValueError`` for shapes that do not fit, times not increasing, values not finite, or a
    radius or conductance not above zero.
    """

    times: Array
    radius: Array
    species: tuple[str, ...]
    gas: Array
    gas_side: Array
    speed: Array | None = None

    def __post_init__(self) -> None:
        shape = (self.times.size, len(self.species))
        if self.radius.shape != shape[:1] or self.gas.shape != shape or shape[0] < 2:
            raise ValueError(f"wall history: {shape[0]} times need rows of {shape[1]} species")
        if self.gas_side.shape != shape or (self.speed is not None and self.speed.size != shape[0]):
            raise ValueError("wall history: gas side or speed do not fit the times")
        if not (np.isfinite(self.gas).all() and np.isfinite(self.radius).all()):
            raise ValueError("wall history: radius and gas must be finite")
        if not (np.diff(self.times) > 0.0).all():
            raise ValueError("wall history: times must increase")
        if not ((self.radius > 0.0).all() and (self.gas_side > 0.0).all()):
            raise ValueError("wall history: radius and gas-side conductance must be above zero")

    @property
    def period(self) -> float:
        """Length of the cycle, s."""
        return float(self.times[-1] - self.times[0])

    @property
    def mean_radius(self) -> float:
        """Mean over time, m."""
        return float(np.trapezoid(self.radius, self.times)) / self.period

    def offered(self) -> Array:
        """Flow (P, S), mol/s, into a liquid that held each species at zero."""
        return 4.0 * pi * self.radius[:, None] ** 2 * self.gas_side * self.gas


@dataclass(frozen=True, eq=False)
class FilmCycle:
    """What one cycle does in the liquid, in molecules; each by name.

    ``entered`` through the wall, ``away`` to the liquid far off and ``made`` by reactions, all net;
    ``kept``: gain of the film. ``caught`` by each scavenger. ``oh``: OH that each reaction used up.
    ``budget_error``: largest of entered + made - away - kept over the species, as a share of the
    largest term of all species together.
    """

    entered: Mapping[str, float]
    made: Mapping[str, float]
    away: Mapping[str, float]
    kept: Mapping[str, float]
    caught: Mapping[str, float]
    oh: Mapping[str, float]
    budget_error: float

    @property
    def peroxide(self) -> float:
        """H2O2 made in the liquid, net; what the bubble delivers as H2O2 is not counted."""
        return self.made["H2O2"]

    @property
    def nitrite(self) -> float:
        """HNO2 and nitrite that reached the liquid or were made there, net."""
        return sum(self._total(name) for name in ("HNO2", "NO2-"))

    @property
    def nitrate(self) -> float:
        """Nitrate that reached the liquid or was made there, net.

        Peroxynitrous acid, which decays within a second far from the bubble, is not counted.
        """
        return self._total("NO3-")

    @property
    def lost(self) -> float:
        """OH that ended as water, O2 or HO2: neither caught nor in H2O2 or an oxide of nitrogen."""
        return sum(value for name, value in self.oh.items() if _is_loss(name))

    def _total(self, name: str) -> float:
        return self.made.get(name, 0.0) + self.entered.get(name, 0.0)


class FilmRun:
    """One film with its wall, and a count of what it took."""

    def __init__(
        self, chemistry: AqueousChemistry, wall: WallHistory, edges: Array, relative: float
    ) -> None:
        self.chemistry = chemistry
        self.liquid = steps.Liquid(
            edges, chemistry.diffusivity, chemistry.henry, chemistry.bulk, chemistry.tables
        )
        crossing = np.array([chemistry.index(name) for name in wall.species], dtype=np.int64)
        speed = _slopes(wall.times, wall.radius) if wall.speed is None else wall.speed
        self.wall = steps.Wall(
            wall.times - wall.times[0], wall.radius, speed, wall.gas, wall.gas_side, crossing
        )
        self.marks = _marks(wall)
        self.relative = relative
        self.absolute = relative * _smallest(chemistry, wall)
        self.stoichiometry = chemistry.stoichiometry()
        self.gained = np.zeros((edges.size - 1, len(chemistry.species)))
        self.cycles = self.steps = 0

    def cycle(self, c: Array) -> tuple[steps.Totals, FilmCycle]:
        """Carry ``c`` (M, L) over one cycle, in place; ``gained`` is its change."""
        before = c.copy()
        totals = steps.totals_for(c.shape[0], c.shape[1], self.stoichiometry.shape[0])
        step = 1e-2 * float(self.marks[1])
        for begin, end in pairwise(self.marks):
            why, tried, step = steps.integrate_film(
                begin, end, min(step, 0.1 * (end - begin)), MOST_STEPS, c, self.liquid, self.wall,
                self.relative, self.absolute, totals,
            )  # fmt: skip
            self.steps += tried
            if why != steps.DONE:
                reason = "no step is small enough" if why == steps.STUCK else "too many steps"
                raise FilmError(
                    f"film: {reason} between {begin:.6g} and {end:.6g} s of cycle {self.cycles + 1}"
                )
        self.cycles += 1
        self.gained = c - before
        return totals, _summary(self.chemistry, self.stoichiometry, totals, self._kept())

    def _kept(self) -> Array:
        return np.asarray(volumes(self.liquid.edges) @ self.gained)


def edges_for(wall: WallHistory, cells: int) -> Array:
    """Faces (cells + 1,), m3: fine where most crosses, out to ten mean radii."""
    busiest = int(np.argmax((wall.offered() / _whole(wall)).sum(axis=1)))
    narrow, mean = float(wall.radius[busiest]), wall.mean_radius
    between = sqrt(narrow * mean)
    return film_edges(narrow, between, cells, reach=REACH * mean / between)


def _summary(
    chemistry: AqueousChemistry, stoichiometry: Array, totals: steps.Totals, kept: Array
) -> FilmCycle:
    names = chemistry.species
    made = stoichiometry.T @ totals.reacted
    residual = totals.entered + made - totals.left - kept
    terms = (totals.entered, made, totals.left, kept)
    whole = max(1e-300, *(float(np.abs(term).sum()) for term in terms))
    oh = -stoichiometry[:, chemistry.index("OH")] * totals.reacted
    return FilmCycle(
        entered={n: v for n, v in _named(names, totals.entered).items() if v != 0.0},
        made=_named(names, made),
        away=_named(names, totals.left),
        kept=_named(names, kept),
        caught={n: float(AVOGADRO * made[names.index(CAUGHT + n)]) for n in chemistry.scavengers},
        oh={n: v for n, v in _named(chemistry.reactions, oh).items() if v > 0.0},
        budget_error=float(np.abs(residual).max()) / whole,
    )


def _named(names: tuple[str, ...], moles: Array) -> dict[str, float]:
    return {name: float(AVOGADRO * value) for name, value in zip(names, moles, strict=True)}


def _is_loss(reaction: str) -> bool:
    made = [one.strip() for one in reaction.partition("->")[2].split(" + ")]
    keeps = made == ["H2O2"] or any(one in _ACIDS or one.startswith(CAUGHT) for one in made)
    return not keeps


def _whole(wall: WallHistory) -> Array:
    """All that is offered of each species in a cycle, mol (S,); one where that is nothing."""
    offered = np.trapezoid(wall.offered(), wall.times, axis=0)
    return np.where(offered > 0.0, offered, 1.0)


def _marks(wall: WallHistory) -> Array:
    """Times (s from the start) that no step passes: each stretch has its share of what happens."""
    times = wall.times - wall.times[0]
    share = wall.offered() / _whole(wall)
    crossed = np.diff(times)[:, None] * 0.5 * (share[1:] + share[:-1])
    moved = np.abs(np.diff(np.log(wall.radius)))
    eventful = crossed.sum(axis=1) + moved / max(float(moved.sum()), 1e-300)
    eventful += np.diff(times) / times[-1]
    reached = np.concatenate([[0.0], np.cumsum(eventful)])
    return np.unique(np.interp(np.linspace(0.0, reached[-1], STRETCHES + 1), reached, times))


def _smallest(chemistry: AqueousChemistry, wall: WallHistory) -> float:
    """Concentration that does not matter, mol/m3: what enters, spread over a cycle, by a hundred.

    Only what the liquid takes up readily counts; without any, 1e-3 mol/m3 is spread.
    """
    places = [chemistry.index(name) for name in wall.species]
    taken = chemistry.henry[places] > 1.0
    amount = float(np.trapezoid(wall.offered()[:, taken].sum(axis=1), wall.times))
    depth = sqrt(float(chemistry.diffusivity.min()) * wall.period)
    spread = amount / (4.0 * pi * wall.mean_radius**2 * depth)
    return 1e-2 * (spread if spread > 0.0 else 1e-3)


def _slopes(x: Array, y: Array) -> Array:
    """Slopes at the nodes that keep a cubic monotone (Fritsch and Butland 1984, harmonic means)."""
    width = np.diff(x)
    chord = np.diff(y) / width
    before, after = chord[:-1], chord[1:]
    share = (width[:-1] + 2.0 * width[1:]) / (3.0 * (width[:-1] + width[1:]))
    mixed = share * after + (1.0 - share) * before
    same = before * after > 0.0
    inside = np.where(same, before * after / np.where(same, mixed, 1.0), 0.0)
    return np.concatenate([chord[:1], inside, chord[-1:]])
