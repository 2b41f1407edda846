"""Bubbles of the outside checks: argon and other gases in water at 25 degC and 1 atm."""

from __future__ import annotations

from typing import Any

from sonoyield.collapse.bubble import Bubble
from sonoyield.describe.gas import load_phase
from sonoyield.describe.liquid import LiquidState, water

PHASE = load_phase("h2o_o2")
ATMOSPHERE = 101325.0
WATER = water(298.15)


def bubble(
    frequency: float,
    amplitude: float,
    radius: float,
    gas: str = "AR",
    liquid: LiquidState = WATER,
    **changes: Any,
) -> Bubble:
    """A bubble of one gas with accommodation 0.4 throughout (SI)."""
    return Bubble(
        PHASE, liquid, ATMOSPHERE, frequency, amplitude, radius, {gas: 1.0},
        {"water": 0.4, "radicals": 0.4}, **changes,
    )  # fmt: skip
