"""Gases a bubble may hold at rest: the names they go by, and why some are refused."""

from __future__ import annotations

from collections.abc import Mapping

# Species a bubble may hold at rest, in the order in which a mixture lists them.
AT_REST = ("N2", "O2", "H2", "HE", "AR", "KR", "XE")

_DRY_AIR = {"N2": 0.78084, "O2": 0.20946, "AR": 0.00934}
# IUPAC Gold Book C01214 (Pure Appl. Chem. 1990, 62, 2167), per volume. The 0.036 % left out are
# carbon dioxide and traces, which the mechanism does not hold; the rest is scaled to sum to one.
AIR = {name: share / sum(_DRY_AIR.values()) for name, share in _DRY_AIR.items()}

COMPOSITIONS: Mapping[str, Mapping[str, float]] = {
    "argon": {"AR": 1.0},
    "air": AIR,
    "nitrogen": {"N2": 1.0},
    "oxygen": {"O2": 1.0},
    "hydrogen": {"H2": 1.0},
    "helium": {"HE": 1.0},
    "krypton": {"KR": 1.0},
    "xenon": {"XE": 1.0},
}

_NO_CARBON = "is refused: it splits in a collapse, and the mechanisms here hold no carbon"
_TAKEN_UP = "is refused: the liquid takes it up, so no bubble of it is at rest"
_REASONS: dict[str, tuple[tuple[str, ...], str]] = {
    "carbon dioxide": (("carbon dioxide", "carbon_dioxide", "co2"), _NO_CARBON),
    "carbon monoxide": (("carbon monoxide", "carbon_monoxide", "co"), _NO_CARBON),
    "methane": (("methane", "ch4"), _NO_CARBON),
    "ozone": (("ozone", "o3"), _TAKEN_UP),
    "ammonia": (("ammonia", "nh3"), _TAKEN_UP),
    "nitric oxide": (("nitric oxide", "nitric_oxide", "no"), _TAKEN_UP),
    "nitrogen dioxide": (("nitrogen dioxide", "nitrogen_dioxide", "no2"), _TAKEN_UP),
    "nitrous oxide": (("nitrous oxide", "nitrous_oxide", "n2o"), _TAKEN_UP),
    "steam": (("steam", "water", "h2o"), "is refused: vapour comes by itself, see model.vapour"),
}
REFUSED_GASES: dict[str, str] = {
    name: f"{gas} as the gas at rest {reason}"
    for gas, (names, reason) in _REASONS.items()
    for name in names
}


def gas_name(name: str) -> str:
    """The one name of a gas: a key of ``COMPOSITIONS`` or, where it has none, the name in lower
    case; ``"Argon"`` and ``"AR"`` give ``"argon"``."""
    plain = name.strip().lower()
    return _OF_SPECIES.get(plain, plain)


_OF_SPECIES = {
    species.lower(): name
    for name, shares in COMPOSITIONS.items()
    if len(shares) == 1
    for species in shares
}
