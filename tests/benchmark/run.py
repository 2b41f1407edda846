"""Speed of the product beside the plain baseline: ratios measured side by side in one process.

``python tests/benchmark/run.py [--runs N] [--case NAME] [--json PATH]``. The baseline is
``tests/second_opinion.py``: the same equations with SciPy's LSODA and Cantera in the right-hand
side. Rounds alternate product and baseline, and medians are compared. Start-up and compilation are
outside the ratios and reported on their own. Nothing here fails for being slow.

A second table sets the resolved gas, without and with its liquid film, beside the same baseline and
beside the product's mixed gas, and says where its time goes.
"""

from __future__ import annotations

import argparse
import json
import platform
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass
from functools import partial
from pathlib import Path
from statistics import median

BEFORE_IMPORT = time.perf_counter()

import cantera as ct  # noqa: E402 - imports are timed
import numpy as np  # noqa: E402

from sonoyield.collapse.bubble import Bubble  # noqa: E402
from sonoyield.collapse.compiled import is_cached  # noqa: E402
from sonoyield.collapse.follow import follow  # noqa: E402
from sonoyield.collapse.history import History  # noqa: E402
from sonoyield.collapse.ledger import balance  # noqa: E402
from sonoyield.collapse.reactor import HotStage  # noqa: E402
from sonoyield.describe.gas import AVOGADRO, load_phase, phase_for  # noqa: E402
from sonoyield.describe.gases import COMPOSITIONS  # noqa: E402
from sonoyield.describe.liquid import water  # noqa: E402

IMPORT_SECONDS = time.perf_counter() - BEFORE_IMPORT
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import resolved_rows  # noqa: E402

import second_opinion  # noqa: E402

ATMOSPHERE = 101325.0
WATER_MOLAR_MASS = 18.015268e-3  # kg/mol, IAPWS R6-95
# name: frequency Hz, pressure amplitude Pa, radius m, gas; in water at 25 degC
CASES = {
    "argon 355 kHz 2 bar 3 um": (355e3, 2.0e5, 3.0e-6, "argon"),
    "argon 20 kHz 1.5 bar 4.5 um": (20e3, 1.5e5, 4.5e-6, "argon"),
    "argon 1 MHz 4 bar 1.5 um": (1e6, 4.0e5, 1.5e-6, "argon"),
    "air 355 kHz 2 bar 3 um": (355e3, 2.0e5, 3.0e-6, "air"),
}
RESOLVED = ("argon 355 kHz 2 bar 3 um", "air 355 kHz 2 bar 3 um")
BARE_CALLS = 2000


@dataclass(frozen=True)
class Row:
    """One case: medians of the same rounds (s, us), ratios, counts and what both found.

    ``ratio``: baseline over product. ``ratio_lean``: the same with the baseline, too, on the phase
    without the absent noble gases. ``bare_us``: one state set and one call for the rates as the
    baseline makes them, ``bare_state_us`` with ``gas.state = ...``. ``over_bare``: the product's
    time over its evaluations times ``bare_us``; ``over_bare_state`` likewise;
    ``reactor_over_bare`` counts only the time inside the reactor network's steps.
    """

    case: str
    product_s: float
    baseline_s: float
    baseline_lean_s: float
    ratio: float
    ratio_lean: float
    product_evaluations: int
    baseline_evaluations: int
    baseline_lean_evaluations: int
    product_us: float
    baseline_us: float
    baseline_lean_us: float
    bare_us: float
    bare_state_us: float
    over_bare: float
    over_bare_state: float
    reactor_over_bare: float
    product_energy_error: float
    baseline_energy_error: float
    product_temperature: float
    baseline_temperature: float
    product_oh: float
    baseline_oh: float


def main(arguments: Sequence[str] | None = None) -> int:
    """Measure, print the table and, if asked, write it as JSON."""
    parser = argparse.ArgumentParser(description="Speed ratios of product and plain baseline.")
    parser.add_argument("--runs", type=int, default=7, help="rounds of each case (at least 1)")
    parser.add_argument("--case", choices=CASES, action="append", help="only this case")
    parser.add_argument("--json", type=Path, metavar="PATH", help="write the figures as JSON")
    chosen = parser.parse_args(arguments)
    start = first_call()
    rows = [measure(name, max(1, chosen.runs)) for name in chosen.case or CASES]
    print(table(start, rows, max(1, chosen.runs)))
    names = [name for name in RESOLVED if name in (chosen.case or CASES)]
    both = [(name, film) for name in names for film in (False, True)]
    resolved = [measure_resolved(name, film, max(1, chosen.runs)) for name, film in both]
    if resolved:
        print(resolved_rows.table(resolved))
    if chosen.json is not None:
        found = {
            "start_up": start,
            "cases": [asdict(row) for row in rows],
            "resolved": [asdict(row) for row in resolved],
        }
        chosen.json.write_text(json.dumps(found, indent=2) + "\n", encoding="utf-8")
    return 0


def first_call() -> dict[str, float | bool | str]:
    """What the ratios leave out: seconds to import, and of the first run of the product."""
    cached = is_cached()
    seconds, _ = timed(lambda: follow(bubble(next(iter(CASES)))))
    return {
        "import_s": IMPORT_SECONDS,
        "first_call_s": seconds,
        "compiled_before": cached,
        "python": platform.python_version(),
        "cantera": ct.__version__,
    }


def measure(name: str, runs: int) -> Row:
    """Time one case in alternating rounds: product, baseline, product, lean baseline, bare."""
    one = bubble(name)
    history = follow(one)
    end = float(history.times[history.marks[-1]])
    whole, lean = as_case(one, "gas"), as_case(one, one.phase.phase)
    second_opinion.run(whole, end)
    product, baseline, leaner, bare, bare_state, reactor = [], [], [], [], [], []
    for _ in range(runs):
        product.append(timed(lambda: follow(one))[0])
        found = second_opinion.run(whole, end)
        baseline.append(found.wall_seconds)
        product.append(timed(lambda: follow(one))[0])
        found_lean = second_opinion.run(lean, end)
        leaner.append(found_lean.wall_seconds)
        reactor.append(reactor_seconds(one))
        bare.append(bare_cost(history, as_baseline))
        bare_state.append(bare_cost(history, as_state))
    mine, theirs = counted(history), found
    seconds, whole_s, lean_s = median(product), median(baseline), median(leaner)
    oh = one.phase.index("OH")
    return Row(
        case=name,
        product_s=seconds,
        baseline_s=whole_s,
        baseline_lean_s=lean_s,
        ratio=whole_s / seconds,
        ratio_lean=lean_s / seconds,
        product_evaluations=mine,
        baseline_evaluations=theirs.evaluations,
        baseline_lean_evaluations=found_lean.evaluations,
        product_us=1e6 * seconds / mine,
        baseline_us=1e6 * whole_s / theirs.evaluations,
        baseline_lean_us=1e6 * lean_s / found_lean.evaluations,
        bare_us=1e6 * median(bare),
        bare_state_us=1e6 * median(bare_state),
        over_bare=seconds / (mine * median(bare)),
        over_bare_state=seconds / (mine * median(bare_state)),
        reactor_over_bare=median(reactor) / (mine * median(bare)),
        product_energy_error=balance(history).energy_error,
        baseline_energy_error=theirs.energy_error,
        product_temperature=float(history.temperature.max()),
        baseline_temperature=theirs.peak_temperature,
        product_oh=float(history.crossed[history.marks[-1], oh]) * AVOGADRO,
        baseline_oh=theirs.delivered["OH"],
    )


def measure_resolved(name: str, film: bool, runs: int) -> resolved_rows.ResolvedRow:
    """Time the resolved gas of one case in rounds with the mixed one and the baseline."""
    one = bubble(name)
    history = follow(one)
    whole, end = as_case(one, "gas"), float(history.times[history.marks[-1]])
    return resolved_rows.measure(
        name, one, film, runs, lambda: second_opinion.run(whole, end).wall_seconds
    )


def bubble(name: str) -> Bubble:
    """The product's bubble of a case: uptake on, accommodation 0.4, the defaults otherwise."""
    frequency, amplitude, radius, called = CASES[name]
    gas = COMPOSITIONS[called]
    return Bubble(
        phase_for("auto", gas), water(298.15), ATMOSPHERE, frequency, amplitude, radius, gas,
        {"water": 0.4, "radicals": 0.4},
    )  # fmt: skip


def as_case(one: Bubble, phase: str) -> second_opinion.Case:
    """The same bubble for the baseline, on the phase of that name."""
    liquid, whole = one.liquid, load_phase(one.phase.name)
    return second_opinion.Case(
        frequency=one.frequency,
        pressure=one.pressure_amplitude,
        radius=one.radius,
        temperature=liquid.temperature,
        ambient=one.ambient_pressure,
        density=liquid.density,
        sound_speed=liquid.sound_speed,
        viscosity=liquid.viscosity,
        surface_tension=liquid.surface_tension,
        saturation_pressure=liquid.saturation_pressure,
        mixture=dict(one.mixture),
        mechanism_path=whole.path,
        phase=phase,
        covolumes=dict(zip(whole.species, whole.covolume.tolist(), strict=True)),
        latent_heat=liquid.latent_heat * WATER_MOLAR_MASS,
    )


def counted(history: History) -> int:
    """Kinetics evaluations of a run of the product (the cold stage makes none)."""
    return history.counters["evaluations"]


def timed(work: Callable[[], object]) -> tuple[float, object]:
    before = time.perf_counter()
    result = work()
    return time.perf_counter() - before, result


def reactor_seconds(one: Bubble) -> float:
    """Seconds that a run of the product spends in the reactor network's steps."""
    spent = 0.0
    step = HotStage.step

    def timed_step(stage: HotStage) -> None:
        nonlocal spent
        before = time.perf_counter()
        step(stage)
        spent += time.perf_counter() - before

    HotStage.step = timed_step
    try:
        follow(one)
    finally:
        HotStage.step = step
    return spent


def bare_cost(history: History, setter: Callable[[ct.Solution, History], list]) -> float:
    """Seconds of one state set and one call for the rates, over hot states of a run."""
    calls = setter(history.bubble.phase.solution(), history)
    rounds = max(1, BARE_CALLS // len(calls))
    before = time.perf_counter()
    for _ in range(rounds):
        for call in calls:
            call()
    return (time.perf_counter() - before) / (rounds * len(calls))


def as_baseline(gas: ct.Solution, history: History) -> list:
    """Set fractions, then temperature and density, as the baseline does."""
    phase = history.bubble.phase
    calls = []
    for row in hot_rows(history):
        moles = np.maximum(history.moles[row], 0.0)
        volume = 4.0 / 3.0 * np.pi * history.radius[row] ** 3
        density = float(moles @ phase.molar_mass) / volume
        there = (float(history.temperature[row]), density)
        calls.append(partial(_set_baseline, gas, moles / moles.sum(), there))
    return calls


def as_state(gas: ct.Solution, history: History) -> list:
    """Set temperature, density and mass fractions at once."""
    calls = []
    for call in as_baseline(gas, history):
        call()
        calls.append(partial(_set_state, gas, gas.state.copy()))
    return calls


def hot_rows(history: History) -> np.ndarray:
    """Some hundred rows of the run where the gas is above 1000 K."""
    rows = np.flatnonzero(history.temperature > 1000.0)
    return rows[:: max(1, len(rows) // 100)]


def _set_baseline(gas: ct.Solution, x: np.ndarray, there: tuple[float, float]) -> np.ndarray:
    gas.set_unnormalized_mole_fractions(x)
    gas.TD = there
    return gas.net_production_rates


def _set_state(gas: ct.Solution, state: np.ndarray) -> np.ndarray:
    gas.state = state
    return gas.net_production_rates


def table(start: dict[str, float | bool | str], rows: Sequence[Row], runs: int) -> str:
    """The figures as text, one column a case."""
    lines = [
        f"import {start['import_s']:.2f} s, first call {start['first_call_s']:.2f} s "
        f"(compiled before: {'yes' if start['compiled_before'] else 'no'}); "
        f"Python {start['python']}, Cantera {start['cantera']}; medians of {runs} rounds",
        _line("", [row.case for row in rows]),
    ]
    lines += [_line(label, [form(row) for row in rows]) for label, form in LINES.items()]
    return "\n".join(lines)


def _line(label: str, cells: Sequence[str]) -> str:
    return f"{label:42s}" + "".join(f"{cell:>30s}" for cell in cells)


LINES: dict[str, Callable[[Row], str]] = {
    "product, ms": lambda r: f"{1e3 * r.product_s:.2f}",
    "baseline, ms (lean phase)": lambda r: (
        f"{1e3 * r.baseline_s:.1f} ({1e3 * r.baseline_lean_s:.1f})"
    ),
    "ratio baseline / product (lean phase)": lambda r: f"{r.ratio:.1f} ({r.ratio_lean:.1f})",
    "kinetics evaluations, product": lambda r: f"{r.product_evaluations}",
    "kinetics evaluations, baseline (lean)": lambda r: (
        f"{r.baseline_evaluations} ({r.baseline_lean_evaluations})"
    ),
    "us an evaluation, product": lambda r: f"{r.product_us:.2f}",
    "us an evaluation, baseline (lean)": lambda r: (
        f"{r.baseline_us:.1f} ({r.baseline_lean_us:.1f})"
    ),
    "us bare in Cantera, as baseline (state)": lambda r: f"{r.bare_us:.2f} ({r.bare_state_us:.2f})",
    "product / (evaluations x bare) (state)": lambda r: (
        f"{r.over_bare:.2f} ({r.over_bare_state:.2f})"
    ),
    "its reactor steps alone / (evaluations x bare)": lambda r: f"{r.reactor_over_bare:.2f}",
    "energy error, product": lambda r: f"{r.product_energy_error:.1e}",
    "energy error, baseline": lambda r: f"{r.baseline_energy_error:.1e}",
    "peak temperature, product / baseline": lambda r: (
        f"{r.product_temperature:.1f} / {r.baseline_temperature:.1f}"
    ),
    "OH delivered, product / baseline": lambda r: f"{r.product_oh:.3e} / {r.baseline_oh:.3e}",
}

if __name__ == "__main__":
    sys.exit(main())
