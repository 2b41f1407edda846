"""The resolved gas in the benchmark: beside the baseline and the mixed gas, and where time goes."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from statistics import median

import numpy as np
from numba import njit

from sonoyield.collapse import cells as c
from sonoyield.collapse import cells_bdf as bdf
from sonoyield.collapse import cells_newton as newton
from sonoyield.collapse.aqueous import aqueous_chemistry
from sonoyield.collapse.bubble import Bubble
from sonoyield.collapse.follow import follow
from sonoyield.collapse.history import History
from sonoyield.collapse.kernel import call
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.resolved import CELLS, follow_resolved
from sonoyield.collapse.stage import Stage
from sonoyield.describe.gas import AVOGADRO

PARTS = ("rates", "jacobian", "factorisation", "solution")  # of a step of the resolved gas
PART_CALLS = 200
SCALED_STEP = 1e-12  # s, at which the matrix of a step is factorised; its cost does not hang on it


@dataclass(frozen=True)
class ResolvedRow:
    """One case of the resolved gas: medians of the same rounds, ratios, and where time goes.

    ``to_baseline``: its time over that of the plain mixed baseline; ``to_mixed``: over that of the
    product's mixed gas. ``*_share``: calls of the reacting stage times the cost of one at states of
    it, over the whole run, in processor time; what is left are norms, predictions, record, setting
    up and the cold stage.
    """

    case: str
    film: bool
    cells: int
    resolved_s: float
    baseline_s: float
    mixed_s: float
    to_baseline: float
    to_mixed: float
    steps: int
    evaluations: int
    jacobians: int
    factorisations: int
    rates_share: float
    jacobian_share: float
    factorisation_share: float
    solution_share: float
    energy_error: float
    oh: float
    mixed_oh: float


def measure(
    name: str, one: Bubble, film: bool, runs: int, baseline_seconds: Callable[[], float]
) -> ResolvedRow:
    """Time the resolved gas of a bubble in rounds with the mixed one and the baseline."""
    chemistry = aqueous_chemistry(298.15, {}, nitrogen="N2" in one.mixture) if film else None
    run = partial(follow_resolved, one, chemistry=chemistry)
    history, stage, states = observed(run)
    resolved, mixed, baseline = [], [], []
    for _ in range(runs):
        resolved.append(seconds_of(run))
        mixed.append(seconds_of(lambda: follow(one)))
        baseline.append(baseline_seconds())
    seconds, whole_s, mixed_s = median(resolved), median(baseline), median(mixed)
    counters, hot, costs = history.counters, stage.counts, costs_of(stage, states)
    spent = processor(run)
    oh = one.phase.index("OH")
    return ResolvedRow(
        case=name,
        film=film,
        cells=CELLS,
        resolved_s=seconds,
        baseline_s=whole_s,
        mixed_s=mixed_s,
        to_baseline=seconds / whole_s,
        to_mixed=seconds / mixed_s,
        steps=counters["steps"],
        evaluations=counters["evaluations"],
        jacobians=counters["jacobians"],
        factorisations=counters["factorisations"],
        rates_share=hot["evaluations"] * costs["rates"] / spent,
        jacobian_share=hot["jacobians"] * costs["jacobian"] / spent,
        factorisation_share=hot["factorisations"] * costs["factorisation"] / spent,
        solution_share=hot["evaluations"] * costs["solution"] / spent,
        energy_error=balance(history).energy_error,
        oh=delivered(history, oh),
        mixed_oh=delivered(follow(one), oh),
    )


def observed(run: Callable[[], History]) -> tuple[History, Stage, np.ndarray]:
    """A resolved run, its last stage and the states that it went through there."""
    seen: list[tuple[Stage, np.ndarray]] = []
    advance = Stage.advance

    def watched(
        stage: Stage, stop: float, relative: float, warm: float, most: int
    ) -> tuple[int, np.ndarray, np.ndarray]:
        why, times, states = advance(stage, stop, relative, warm, most)
        seen.append((stage, states.copy()))
        return why, times, states

    Stage.advance = watched
    try:
        history = run()
    finally:
        Stage.advance = advance
    last = seen[-1][0]
    return history, last, np.concatenate([states for stage, states in seen if stage is last])


def costs_of(stage: Stage, states: np.ndarray) -> dict[str, float]:
    """Seconds of one call of each compiled part of a step, over states of the run."""
    some = np.ascontiguousarray(states[:: max(1, len(states) // PART_CALLS)])
    out, costs = np.zeros(stage.size), {}
    fixed = (stage.gas, stage.film, stage.work, stage.blocks, stage.calls, out)
    for which, name in enumerate(PARTS):
        call_all = partial(repeat, which, some, *fixed)
        call_all()
        costs[name] = processor(call_all) / len(some)
    return costs


@njit(error_model="numpy")
def repeat(
    which: int, states: np.ndarray, gas: c.Gas, film: c.Film, work: c.Work, blocks: newton.Blocks,
    calls: bdf.Calls, out: np.ndarray,
) -> None:  # fmt: skip
    """Call one of ``PARTS`` at each state as a step does, without what a call from Python costs."""
    known = (SCALED_STEP, blocks, film.gas_index, calls.substitute)
    for i in range(states.shape[0]):
        if which == 0:
            call(calls.rates, (0.0, states[i], gas, film, work, out))
        elif which == 1:
            call(calls.evaluate, (0.0, states[i], gas, film, work, blocks, calls.rates, out))
        elif which == 2:
            call(calls.factorise, known)
        else:
            call(calls.solve, (
                SCALED_STEP, blocks, film.gas_index, calls.substitute, states[i], out,
            ))  # fmt: skip


def seconds_of(work: Callable[[], object]) -> float:
    """Seconds by the clock."""
    before = time.perf_counter()
    work()
    return time.perf_counter() - before


def delivered(history: History, k: int) -> float:
    """Molecules of species ``k`` that crossed by the end of the window."""
    return float(history.crossed[history.marks[-1], k]) * AVOGADRO


def processor(work: Callable[[], object]) -> float:
    """Processor seconds, which what else runs does not touch: least of three."""
    spent = []
    for _ in range(3):
        before = time.process_time()
        work()
        spent.append(time.process_time() - before)
    return min(spent)


def table(rows: Sequence[ResolvedRow]) -> str:
    """The figures of the resolved gas as text, one column a case."""
    names = [f"{row.case}{', film' if row.film else ''}" for row in rows]
    lines = [_line(f"resolved, {CELLS} cells", names)]
    lines += [_line(label, [form(row) for row in rows]) for label, form in LINES.items()]
    return "\n".join(lines)


def _line(label: str, cells: Sequence[str]) -> str:
    return f"{label:42s}" + "".join(f"{cell:>32s}" for cell in cells)


LINES: dict[str, Callable[[ResolvedRow], str]] = {
    "resolved, ms": lambda r: f"{1e3 * r.resolved_s:.1f}",
    "ratio resolved / mixed baseline": lambda r: f"{r.to_baseline:.2f}",
    "ratio resolved / mixed product": lambda r: f"{r.to_mixed:.1f}",
    "steps, evaluations": lambda r: f"{r.steps}, {r.evaluations}",
    "Jacobians, factorisations": lambda r: f"{r.jacobians}, {r.factorisations}",
    "time in rates, Jacobians": lambda r: (
        f"{100 * r.rates_share:.0f} %, {100 * r.jacobian_share:.0f} %"
    ),
    "time in factorisations, solutions": lambda r: (
        f"{100 * r.factorisation_share:.0f} %, {100 * r.solution_share:.0f} %"
    ),
    "energy error of the resolved gas": lambda r: f"{r.energy_error:.1e}",
    "OH delivered, resolved / mixed": lambda r: f"{r.oh:.3e} / {r.mixed_oh:.3e}",
}
