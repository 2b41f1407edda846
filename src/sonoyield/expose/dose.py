"""From yields per collapse to concentrations in the insonated liquid."""

from __future__ import annotations

from dataclasses import dataclass

from sonoyield.describe.gas import AVOGADRO
from sonoyield.expose.schedule import Driving

LITRE = 1e-3  # m3


@dataclass(frozen=True)
class Dose:
    """What one exposure delivers of a species into the insonated liquid.

    Rates are per second of total time; ``_on`` while the sound is on. ``mol_per_J`` is per joule
    of sound that the bubbles dissipate, or ``None`` where that is not positive.
    """

    mol: float
    mol_per_L: float
    mol_per_L_per_s: float
    mol_per_L_per_s_on: float
    mol_per_J: float | None


def dose(
    delivered: float,
    number_density: float,
    volume: float,
    driven: Driving,
    dissipated: float,
) -> Dose:
    """Dose from ``delivered`` molecules per collapse.

    ``number_density`` of bubbles 1/m3, ``volume`` m3, ``dissipated`` J per collapse. Every bubble
    collapses alike and independently, and the liquid is well mixed.
    """
    per_collapse = delivered / AVOGADRO
    per_litre = per_collapse * number_density * LITRE
    return Dose(
        mol=per_litre * driven.per_second * driven.duration * volume / LITRE,
        mol_per_L=per_litre * driven.per_second * driven.duration,
        mol_per_L_per_s=per_litre * driven.per_second,
        mol_per_L_per_s_on=per_litre * driven.per_second_on,
        mol_per_J=per_collapse / dissipated if dissipated > 0.0 else None,
    )
