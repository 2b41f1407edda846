"""When the mixed gas may stand for the resolved one, and by how much it is off where it may not.

From 35 bubbles of seven gases, 20 kHz to 2 MHz (``tests/outside/mixed_or_resolved.csv``): mixed is
off in two ways. Where a bubble holds nearly only steam at its peak, a mixed gas lets too little of
it condense on the way in and makes too much OH; where its one temperature stays low, the core that
it does not have would have made more. The limits and spreads are the table's; a test finds them
anew.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from sonoyield.collapse.yields import Collapse

LEAST_PEAK = 3167.0  # K, of the mixed run
MOST_STEAM = 0.8229  # mole fraction at its peak
# Resolved over mixed delivered OH in the table: least and most of each class.
SPREAD = {"safe": (0.506, 1.01), "steam": (0.0354, 0.341), "cool": (1.04, 481.0)}
SPREAD_OF_NITROGEN = (6.46, 341.0)  # resolved over mixed nitrogen oxides, over all classes
REASON = {
    "safe": f"Its peak is above {LEAST_PEAK:.0f} K and holds less than {MOST_STEAM:.0%} steam",
    "steam": f"At its peak it holds {MOST_STEAM:.0%} steam or more, of which too little condensed",
    "cool": f"Its peak stays below {LEAST_PEAK:.0f} K, where a hotter core makes the radicals",
}


@dataclass(frozen=True)
class Safety:
    """Whether the mixed gas's OH may be used, and why.

    ``low`` to ``high``: resolved over mixed delivered OH in the table for bubbles of this ``kind``
    (``safe``, ``steam``, ``cool``).
    """

    safe: bool
    sentence: str
    kind: str
    low: float
    high: float


def mixed_is_safe(collapse: Collapse, mixture: Mapping[str, float]) -> Safety:
    """Judge a mixed run by its peak temperature and the steam in it (delivered OH within 2-fold).

    ``collapse`` of the mixed run, ``mixture`` the dry gas at rest. A rule from 35 bubbles, not a
    bound: judged on gases left out, it called no unsafe bubble safe and four safe ones unsafe.
    """
    kind = _kind(collapse)
    low, high = SPREAD[kind]
    return Safety(kind == "safe", _sentence(kind, "N2" in mixture), kind, low, high)


def _kind(collapse: Collapse) -> str:
    if collapse.vapour_fraction_at_peak >= MOST_STEAM:
        return "steam"
    return "safe" if collapse.peak_temperature_K > LEAST_PEAK else "cool"


def _sentence(kind: str, nitrogen: bool) -> str:
    low, high = SPREAD[kind]
    verdict = "within a factor 2 of" if kind == "safe" else "no measure of"
    least, most = SPREAD_OF_NITROGEN
    oxides = f"; nitrogen oxides {least:.2g} to {most:.3g} times, whatever the peak"
    return (
        f"{REASON[kind]}: OH of a mixed gas is {verdict} that of the resolved one, which delivered "
        f"{low:.2g} to {high:.3g} times as much on such bubbles{oxides if nitrogen else ''}."
    )
