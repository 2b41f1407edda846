"""Predicts how much radical chemistry an ultrasound exposure makes.

>>> from sonoyield import Protocol, estimate
>>> result = estimate(Protocol.load("examples/bench_355kHz_argon.toml"))  # doctest: +SKIP
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from sonoyield._version import __version__

if TYPE_CHECKING:
    from sonoyield.describe.errors import ProtocolError
    from sonoyield.describe.protocol import Protocol
    from sonoyield.expose.estimate import estimate
    from sonoyield.expose.result import Estimate

__all__ = ["Estimate", "Protocol", "ProtocolError", "__version__", "estimate"]

_HOMES = {
    "Estimate": "sonoyield.expose.result",
    "Protocol": "sonoyield.describe.protocol",
    "ProtocolError": "sonoyield.describe.errors",
    "estimate": "sonoyield.expose.estimate",
}


def __getattr__(name: str) -> Any:
    """Import the public names when they are first used, so that start-up is quick."""
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    from importlib import import_module

    return getattr(import_module(_HOMES[name]), name)
