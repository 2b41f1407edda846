"""A second opinion on the radially resolved bubble: its equations on another grid, written plainly.

Cells of fixed share of the bubble's volume, through whose faces the gas flows, against the
product's cells of gas; the equations are in ``second_opinion_cells.py``.  Cantera gives the rates
cell by cell, CVODE (scikit-sundae) integrates.  Nothing of the product is imported.

Slow: at 355 kHz, 2 bar, 3 um, 40 cells and `rtol` 1e-7 argon takes about 20 s, air 45 s, on a quiet
core and with one BLAS thread.  At 1e-6 the energy closes to some 2e-4 of the work only, and OH in
air is 0.5 % off.
"""

import time
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from sksundae.cvode import CVODE

import second_opinion as mixed
from second_opinion_cells import Array, Cells, P, R, U

NOX = ("NO", "NO2", "HONO")
MEAN = 3  # column of what is seen at a step: mean temperature
EVENT = 2  # CVODE's status where a step ended at an event


@dataclass(frozen=True)
class Result:
    """What one run from rest to the second main expansion maximum gave: SI, molecules, joules."""

    t_end: float
    peak_temperature: float  # of the mole mean
    centre_temperature: float  # highest of the innermost cell
    time_of_peak: float
    lowest_temperature: float  # of any cell
    peak_pressure: float
    max_radius: float
    min_radius: float
    vapour_fraction: float  # mole fraction of H2O when the mean is hottest
    delivered: dict[str, float]
    peak: dict[str, float]
    left: dict[str, float]
    energy: dict[str, float]
    element_error: float
    energy_error: float  # of the work
    profile_radius: Array  # of cells at the step of the highest mean
    profile_temperature: Array
    profile_fractions: Array
    steps: int
    evaluations: int
    jacobians: int
    wall_seconds: float


def run(case: mixed.Case, cells: int = 40, t_end: float | None = None) -> Result:
    """Integrate from rest to `t_end` (s), by default the second main expansion maximum.

    Where no second one comes within four periods, the four periods are the end.
    """
    bubble = Cells(case, cells)
    started = time.perf_counter()
    rows, end = _follow(bubble, t_end)
    return _summary(bubble, rows, end, time.perf_counter() - started)


@dataclass(frozen=True)
class _Mark:
    """Where a run stands: time, state, and the largest of what it has seen."""

    t: float
    y: Array
    steps: int
    most: Array  # largest inventories, fractions of the first contents
    hottest: Array  # state at the step of the highest mean temperature


def _steps(bubble: Cells, limit: float) -> Iterator[tuple[float, Array, bool]]:
    """Time and state of each step of CVODE; true where the radius turns from growing to falling."""

    def rhs(t: float, y: Array, out: Array) -> None:
        out[:] = bubble.slopes(t, y)

    def jac(t: float, y: Array, _slopes: Array, out: Array) -> None:
        out[:, :] = bubble.jacobian(t, y)

    def turning(_t: float, y: Array, out: Array) -> None:
        out[0] = y[U]

    turning.terminal, turning.direction = [True], [-1]  # type: ignore[attr-defined]
    solver = CVODE(
        rhs,
        jacfn=jac,
        linsolver="lapackdense",
        rtol=bubble.case.rtol,
        atol=bubble.tolerances(),
        eventsfn=turning,
        num_events=1,
        first_step=1e-4 / bubble.case.frequency,
    )
    solver.init_step(0.0, bubble.start)
    t = 0.0
    while t < limit:
        found = solver.step(limit, method="onestep", tstop=limit)
        if not found.success:
            raise RuntimeError(f"CVODE stopped at t = {t:.6g} s: {found.message}")
        t = float(found.t)
        yield t, np.array(found.y), found.status == EVENT


def _follow(bubble: Cells, t_end: float | None) -> tuple[Array, _Mark]:
    """What was seen at each step, and the end: `t_end`, else the second main maximum."""
    limit = 4.0 / bubble.case.frequency if t_end is None else t_end
    rows, maxima = [_seen(bubble, 0.0, bubble.start)], []
    highest, most, hottest = 0.0, np.zeros(bubble.count), bubble.start
    for t, y, turned in _steps(bubble, limit):
        rows.append(_seen(bubble, t, y))
        most = np.maximum(most, bubble.amounts(y).sum(axis=0) / bubble.total)
        if rows[-1][MEAN] > highest:
            highest, hottest = rows[-1][MEAN], y
        last = _Mark(t, y, len(rows), most, hottest)
        if turned:
            maxima.append(last)
        main = [] if t_end is not None else _main_maxima(maxima, t, bubble.case.frequency)
        if len(main) > 1:
            last = main[1]
            break
    return np.array(rows[: last.steps]), last


def _main_maxima(maxima: list[_Mark], t: float, frequency: float) -> list[_Mark]:
    """Those of the maxima that are known at time `t` to be main ones."""
    times = np.array([one.t for one in maxima])
    radii = np.array([one.y[R] for one in maxima])
    main = mixed._main_maxima(times, radii, t, 1.0 / frequency)
    return [one for one in maxima if one.t in main]


def _seen(bubble: Cells, t: float, y: Array) -> list[float]:
    """Time, R, p, temperatures (mean, centre, lowest) and mole fraction of steam."""
    n, temperature = bubble.amounts(y), bubble.temperatures(y)
    amount = n.sum(axis=1)
    mean = amount @ temperature / amount.sum()
    vapour = n[:, bubble.water].sum() / amount.sum()
    lowest = temperature.min()
    return [t, y[R], y[P] * bubble.case.ambient, mean, temperature[0], lowest, vapour]


def _summary(bubble: Cells, rows: Array, end: _Mark, seconds: float) -> Result:
    t, radius, pressure, mean, centre, lowest, vapour = rows.T
    last, molecules = end.y, bubble.total * mixed.AVOGADRO
    crossed = [bubble.names[k] for k in bubble.crossing]
    delivered = last[bubble.inside.stop : -5] * molecules
    left = bubble.amounts(last).sum(axis=0) * mixed.AVOGADRO
    energy = dict(zip(mixed.ENERGIES, (last[-5:] * bubble.energy).tolist(), strict=True))
    energy["stored"] = bubble.stored(last) - bubble.stored(bubble.start)
    spent = sum(value for name, value in energy.items() if name != "work")
    energy["residual"] = energy["work"] - spent
    time_of_peak, hottest = mixed._peak(t, mean)
    at_peak = bubble.amounts(end.hottest)
    return Result(
        t_end=float(t[-1]),
        peak_temperature=hottest,
        centre_temperature=mixed._peak(t, centre)[1],
        time_of_peak=time_of_peak,
        lowest_temperature=float(lowest.min()),
        peak_pressure=mixed._peak(t, pressure)[1],
        max_radius=mixed._peak(t, radius)[1],
        min_radius=-mixed._peak(t, -radius)[1],
        vapour_fraction=float(np.interp(time_of_peak, t, vapour)),
        delivered=dict(zip(crossed, delivered.tolist(), strict=True)),
        peak=dict(zip(bubble.names, (end.most * molecules).tolist(), strict=True)),
        left=dict(zip(bubble.names, left.tolist(), strict=True)),
        energy=energy,
        element_error=bubble.element_error(last),
        energy_error=abs(energy["residual"]) / abs(energy["work"]),
        profile_radius=bubble.centres * end.hottest[R],
        profile_temperature=bubble.temperatures(end.hottest),
        profile_fractions=at_peak / at_peak.sum(axis=1)[:, None],
        steps=len(t) - 1,
        evaluations=bubble.evaluations,
        jacobians=bubble.jacobians,
        wall_seconds=seconds,
    )
