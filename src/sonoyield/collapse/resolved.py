"""Follow a bubble whose gas is resolved from centre to wall, with the liquid film around it.

While the gas is cold and fresh only what is there at rest is carried and nothing reacts; from
``WARM`` on all species, reactions and the film are.
"""

from __future__ import annotations

from dataclasses import replace
from math import inf
from time import monotonic
from typing import Any

import numpy as np

from sonoyield.collapse import cells as c
from sonoyield.collapse import cells_bdf as bdf
from sonoyield.collapse import equations as eq
from sonoyield.collapse.aqueous import FILM_OF_GAS, AqueousChemistry
from sonoyield.collapse.bubble import WATER_MOLAR_MASS, Bubble
from sonoyield.collapse.exchange import CROSSES, SURFACE
from sonoyield.collapse.film_grid import REACH, film_edges
from sonoyield.collapse.follow import (
    FAILED,
    NO_MAXIMUM,
    PATIENCE,
    STEP_LIMIT,
    TIME_LIMIT,
    Accuracy,
    at_rest,
)
from sonoyield.collapse.history import CellRecord, History, Recorder
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.marks import Marks
from sonoyield.collapse.stage import Stage
from sonoyield.describe.gas import Array

CELLS = 20
STEAMY, STEAMY_CELLS = 0.6, 40  # share of steam at the peak from which more cells are needed
NARROWEST = 0.05  # thickness of the outermost shell over that of the inmost, about, at rest
WARM = 1000.0  # K of the hottest cell, above which gas may react
COUNTERS = ("steps", "evaluations", "jacobians", "factorisations", "stages")
FIRST_STEP = 1e-5  # of the period
CHUNK = 256  # steps between looks at the clock
GROWN_REACH = 2.0  # of the film over the largest radius so far, where that is more than usual
GROWN_CELLS = 24
FILM_CELLS = 16
LAYER_CELLS = 32  # of a film that warms: with 16 its surface warms 5 % too much, now 1 %
LAYER = "thermal_layer"
WALLS = ("liquid_temperature", LAYER)  # what holds the surface's temperature


def follow_resolved(
    bubble: Bubble,
    collapses: int = 1,
    accuracy: Accuracy | None = None,
    cells: int | None = None,
    chemistry: AqueousChemistry | None = None,
    wall: str = "liquid_temperature",
    temperature_jump: bool = False,
    steam: float = 0.0,
) -> History:
    """Integrate from rest until ``collapses`` windows are complete, as ``follow`` does.

    Without ``cells`` as many are taken as ``cells_for`` says of ``steam``, the share at the peak
    that a mixed gas finds; where so many do not get through, ``CELLS``.
    ``chemistry`` of the liquid film; without it what crosses never comes back. With
    ``temperature_jump`` the surface resists heat as kinetic theory has it. With the ``wall``
    ``"thermal_layer"`` the liquid there warms by conduction and by what condenses; its properties
    stay those at rest, and vapour follows Clausius and Clapeyron with the latent heat at rest, by
    which it is twice too dense near the critical point. Raises ``ValueError`` for a ``wall`` that
    is not in ``WALLS``.
    """
    if wall not in WALLS:
        raise ValueError(f"wall {wall!r}: allowed {', '.join(WALLS)}")
    accuracy = accuracy or Accuracy()
    if bubble.pressure_amplitude == 0.0:
        return at_rest(bubble)
    tries = (cells,) if cells else dict.fromkeys((cells_for(steam), CELLS))
    for count in tries:
        given = (count, chemistry, temperature_jump, wall)
        history = _closed(bubble, collapses, accuracy, *given)
        if history.stopped not in (STEP_LIMIT, FAILED, TIME_LIMIT):
            break
    return history


def _closed(bubble: Bubble, collapses: int, accuracy: Accuracy, *given: Any) -> History:
    """A run, repeated with a tenth of the tolerance while its ledger stays open."""
    history = _Run(bubble, collapses, accuracy, *given).complete()
    for _ in range(accuracy.tighten):
        if history.stopped in (STEP_LIMIT, FAILED, TIME_LIMIT) or balance(history).closed:
            break
        accuracy = replace(accuracy, relative=0.1 * accuracy.relative)
        history = _Run(bubble, collapses, accuracy, *given).complete()
    return history


def cells_for(steam: float) -> int:
    """Cells that a bubble needs, by the share of ``steam`` at the peak that the mixed gas finds.

    Nearly pure steam condenses in a layer thinner than the outermost of 20 cells: these leave 40 %
    too much OH there, 40 cells 5 %; elsewhere 20 leave less than 1 %.
    """
    return CELLS if steam < STEAMY else STEAMY_CELLS


def mass_fractions(cells: int, narrowest: float = NARROWEST) -> Array:
    """Mass inside each face over that of the bubble (cells + 1,): shells thinner to the wall."""
    thickness = narrowest ** (np.arange(cells) / cells)
    radii = np.concatenate([[0.0], np.cumsum(thickness) / thickness.sum()])
    return radii**3


def warmed(film: c.Film, bubble: Bubble) -> c.Film:
    """The film with the warming of its liquid as what spreads last, by conduction."""
    liquid = bubble.liquid
    capacity = liquid.density * liquid.heat_capacity
    return film._replace(
        edges=_edges(bubble, LAYER_CELLS),
        diffusivity=np.append(film.diffusivity, liquid.thermal_conductivity / capacity),
        henry=np.append(film.henry, 1.0),
        bulk=np.append(film.bulk, 0.0),
        gas_index=np.append(film.gas_index, c.WARMING),
        layer=np.array([capacity, liquid.latent_heat * WATER_MOLAR_MASS]),
    )


def _edges(bubble: Bubble, cells: int, reach: float = REACH) -> Array:
    return film_edges(0.2 * bubble.radius, bubble.radius, cells, reach=reach)


class _Run:
    def __init__(
        self,
        bubble: Bubble,
        collapses: int,
        accuracy: Accuracy,
        cells: int,
        chemistry: AqueousChemistry | None,
        temperature_jump: bool,
        wall: str,
    ) -> None:
        self.jump, self.layer = temperature_jump, wall == LAYER
        self.bubble, self.accuracy, self.chemistry = bubble, accuracy, chemistry
        self.dry = warmed(NO_FILM, bubble) if self.layer else NO_FILM  # nothing dissolves
        self.faces = mass_fractions(cells)
        self.most = accuracy.steps * collapses
        self.record = Recorder(bubble.at_rest())
        self.marks = Marks(bubble, self.record, collapses + 2)
        self.moles = [np.outer(np.diff(self.faces), bubble.moles)[None]]
        self.temperatures = [np.full((1, cells), bubble.liquid.temperature)]
        self.concentrations: list[Array] = []
        self.warming = [np.zeros((1, LAYER_CELLS))]
        self.counters = dict.fromkeys(COUNTERS, 0)

    def complete(self) -> History:
        fresh = np.flatnonzero(self.bubble.moles > 0.0)
        water = self.bubble.phase.index("H2O")
        stage = Stage(
            self.bubble, sorted({*fresh, water}), self.faces, False, self.bubble.species,
            self.dry, self.jump,
        )  # fmt: skip
        stopped = self._carry(
            stage, self._beginning(stage), FIRST_STEP * self.bubble.period
        )
        if not stopped and not self.marks.complete:
            film, table = self._film()
            hot = Stage(
                self.bubble, range(len(self.bubble.moles)), self.faces, True, table, film, self.jump
            )
            crossed = np.zeros(len(self.bubble.moles))
            crossed[stage.kept] = stage.state[c.CROSSED : stage.start]
            state = hot.compose(
                stage.state[: c.CROSSED], crossed, self.moles[-1][-1],
                self.temperatures[-1][-1], self.warming[-1][-1] if self.layer else None,
            )  # fmt: skip
            hot.time = stage.time
            stopped = self._carry(hot, state, stage.last_step)
        return self._history(stopped)

    def _beginning(self, stage: Stage) -> Array:
        head = np.zeros(c.CROSSED)
        head[c.RADIUS] = self.bubble.radius
        nothing = np.zeros(len(self.bubble.moles))
        return stage.compose(head, nothing, self.moles[0][0], self.temperatures[0][0])

    def _carry(self, stage: Stage, state: Array, step: float) -> str:
        """Step until all marks are there, fresh gas is warm, or the run must stop."""
        stage.begin(stage.time, step, state)
        warm = np.inf if stage.gas.reactive else WARM
        stopped, before, began = "", self.counters["steps"], inf
        self.counters["stages"] += 1
        while not stopped and not self.marks.complete:
            deadline = self.marks.latest + PATIENCE * self.bubble.period
            why, times, states = stage.advance(deadline, self.accuracy.relative, warm, CHUNK)
            self._keep(stage, times, states, why == bdf.MAXIMUM)
            if why == bdf.WARM:
                break
            if why == bdf.FAILED:
                stopped = FAILED
            elif why == bdf.END:
                stopped = NO_MAXIMUM
            elif before + stage.counts["steps"] >= self.most:
                stopped = STEP_LIMIT
            elif monotonic() - began > self.accuracy.seconds:
                stopped = TIME_LIMIT
            began = min(began, monotonic())  # the first stretch may have had to compile
        for name, count in stage.counts.items():
            self.counters[name] += count
        return stopped

    def _keep(self, stage: Stage, times: Array, states: Array, crest: bool) -> None:
        """Record the rows of a stretch; a maximum is the last but one."""
        for row, (time, state) in enumerate(zip(times, states, strict=True)):
            self.record.add(float(time), stage.summary(state))
            if crest and row == len(times) - 2:
                self.marks.crest(float(time), self.record.states[self.record.last])
                if self.marks.complete:
                    states = states[: row + 1]
                    break
        self.moles.append(stage.moles(states))
        self.temperatures.append(stage.temperatures(states).copy())
        if stage.film.dissolved:
            self.concentrations.append(stage.concentrations(states).copy())
        if stage.film.warms:
            self.warming.append(stage.warming(states).copy())

    def _film(self) -> tuple[c.Film, Array]:
        """The film, and the table of species in which what it follows crosses."""
        table = self.bubble.species
        if self.chemistry is None:
            return self.dry, table
        table = table.copy()
        species, chemistry = self.bubble.phase.species, self.chemistry
        index = np.full(len(chemistry.species), -1, dtype=np.int64)
        for gas, dissolved in FILM_OF_GAS.items():
            if gas in species and dissolved in chemistry.species:
                k = species.index(gas)
                index[chemistry.index(dissolved)] = k
                if table[k, CROSSES] == 0.0:
                    table[k, CROSSES] = 1.0
                    table[k, SURFACE] = self.bubble.surface_resistance(gas)
        film = c.Film(
            self._edges(), chemistry.diffusivity, chemistry.henry,
            chemistry.bulk, index, chemistry.tables,
        )  # fmt: skip
        return (warmed(film, self.bubble) if self.layer else film), table

    def _edges(self) -> Array:
        """Faces of the film: thin layers around a bubble that has grown hold too little."""
        grown = float(self.record.states[: self.record.size, eq.RADIUS].max()) / self.bubble.radius
        if GROWN_REACH * grown <= REACH:
            return _edges(self.bubble, FILM_CELLS)
        return _edges(self.bubble, GROWN_CELLS, GROWN_REACH * grown)

    def _history(self, stopped: str) -> History:
        times, states = self.record.arrays()
        record = CellRecord(
            self.faces,
            np.concatenate(self.temperatures),
            np.concatenate(self.moles),
            np.concatenate(self.concentrations) if self.concentrations else None,
            np.concatenate(self.warming) if self.layer else None,
        )
        return History(
            self.bubble, times, states, tuple(self.marks.rows), stopped, dict(self.counters), record
        )


NO_FILM = c.Film(
    np.zeros(1),
    np.zeros(0),
    np.zeros(0),
    np.zeros(0),
    np.zeros(0, dtype=np.int64),
    (
        np.zeros(0),
        np.zeros((0, 2), dtype=np.int64),
        np.zeros(1, dtype=np.int64),
        np.zeros(0, dtype=np.int64),
        np.zeros(0),
    ),
)
