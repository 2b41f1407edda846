"""Sentences for what the protocol format names and this version does not have."""

from __future__ import annotations

LATER_KEYS: dict[str, str] = {
    "drive.second": "a second drive tone is not in this version",
    "drive.intensity": "a drive given as intensity is not in this version; give drive.pressure",
    "gas.dissolved": "gas dissolved in the liquid is not in this version",
    "bubbles.sizes": "a spread of bubble sizes is not in this version; give bubbles.radius",
    "bubbles.power_density": (
        "bubble numbers from a power density are not in this version; give bubbles.number_density"
    ),
    "bubbles.calibration": (
        "bubble numbers from a calibration are not in this version; give bubbles.number_density"
    ),
    "dosimeter": "dosimeter readings are not in this version",
    "uncertainty": "uncertainty of the inputs is not in this version",
}

LATER_FIELDS: dict[str, str] = {
    kind: f"a {kind.replace('_', ' ')} pressure field is not in this version"
    for kind in ("standing_wave", "focal_beam", "histogram")
}

LATER_RADIAL = {"gilmore": "the Gilmore equation is not in this version"}

PERIODIC = "following the bubble to a periodic state is not in this version"
