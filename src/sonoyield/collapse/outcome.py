"""How a run ended: one code, and a sentence that a person can act on."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from sonoyield.collapse.follow import FAILED, NO_MAXIMUM, PATIENCE, STEP_LIMIT, TIME_LIMIT
from sonoyield.collapse.history import History
from sonoyield.collapse.ledger import Balance
from sonoyield.collapse.thermo_range import thermo_range
from sonoyield.collapse.yields import Collapse

MACH_LIMIT = 1.0  # of the sound speed in the liquid; Keller-Miksis is first order in it


class Code(StrEnum):
    """Codes of an outcome, from best to worst."""

    OK = "ok"
    NO_INERTIAL_COLLAPSE = "no_inertial_collapse"
    OUT_OF_RANGE = "out_of_range"
    NO_WINDOW = "no_window"
    LEDGER_OPEN = "ledger_open"
    STEP_LIMIT = "step_limit"
    TIME_LIMIT = "time_limit"
    INTEGRATION_FAILED = "integration_failed"

    @property
    def has_numbers(self) -> bool:
        """Whether the numbers of such a run may be shown."""
        return self not in NUMBERLESS


NUMBERLESS = (Code.LEDGER_OPEN, Code.STEP_LIMIT, Code.TIME_LIMIT, Code.INTEGRATION_FAILED)


@dataclass(frozen=True)
class Outcome:
    """Code and sentence."""

    code: Code
    sentence: str


def outcome_of(history: History, collapse: Collapse, balance: Balance) -> Outcome:
    """Judge a run; the first that applies, worst first."""
    if history.stopped == STEP_LIMIT:
        return Outcome(
            Code.STEP_LIMIT,
            "The integration took its limit of steps before the window was complete; no number is "
            "given. Try a lower pressure or a larger bubble.",
        )
    if history.stopped == TIME_LIMIT:
        return Outcome(
            Code.TIME_LIMIT,
            "The integration took its limit of time before the window was complete; no number is "
            "given. Try a lower pressure, a larger bubble or fewer cells.",
        )
    if history.stopped == FAILED:
        return Outcome(
            Code.INTEGRATION_FAILED,
            f"The integration failed at {history.times[-1]:.4g} s; no number is given. The "
            "collapse is likely beyond this model: try a lower pressure or, with one-way coupling, "
            "the two-way one (split steam may not fit into the volume of the frozen gas).",
        )
    if not balance.closed:
        return Outcome(
            Code.LEDGER_OPEN,
            f"Energy closes to {balance.energy_error:.1e} of the work "
            f"(limit {balance.energy_limit:.0e}) and elements to {balance.element_error:.1e} "
            f"(limit {balance.element_limit:.0e}); no number is given.",
        )
    if history.stopped == NO_MAXIMUM and not history.windows and collapse.inertial:
        return Outcome(
            Code.NO_WINDOW,
            f"No second main expansion came within {PATIENCE} periods, so the counts cover "
            f"{history.times[-1]:.4g} s from rest instead of a whole window.",
        )
    return _judged_by_range(history, collapse)


def _judged_by_range(history: History, collapse: Collapse) -> Outcome:
    mach = collapse.peak_wall_speed_m_s / history.bubble.liquid.sound_speed
    if mach > MACH_LIMIT:
        return Outcome(
            Code.OUT_OF_RANGE,
            f"The wall reaches {mach:.2f} times the liquid's sound speed, beyond the radial "
            "equation's range (1); read temperatures and yields as orders of magnitude.",
        )
    beyond = [one for one in thermo_range(history) if one.matters]
    if beyond:
        names = ", ".join(one.species for one in beyond)
        return Outcome(
            Code.OUT_OF_RANGE,
            f"The gas reaches {collapse.peak_temperature_K:.0f} K, above the "
            f"{min(one.limit_K for one in beyond):.0f} K where the thermo data of {names} end; "
            "beyond it they are extrapolated, and yields carry that error.",
        )
    if not collapse.inertial:
        return Outcome(
            Code.NO_INERTIAL_COLLAPSE,
            f"The bubble grows only {collapse.max_radius_m / history.bubble.radius:.2f}-fold and "
            "does not collapse inertially (2-fold): raise the pressure or lower the frequency.",
        )
    return Outcome(Code.OK, "The bubble collapses inertially within the range of the model.")
