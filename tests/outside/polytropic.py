"""A polytropic bubble around the product's wall acceleration, for the reference integrations.

The gas law of the rows, pg = pg0 ((R0^3 - a^3) / (R^3 - a^3))^kappa, integrated with SciPy's
DOP853; only ``keller_miksis`` is the product's.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import cos, nan, pi, sin
from typing import Any

import numpy as np
from scipy.integrate import solve_ivp

from sonoyield.collapse.radial import keller_miksis


@dataclass(frozen=True)
class Polytropic:
    """Rest radius (m), gas pressure there (Pa), exponent, hard core (m), liquid and drive (SI)."""

    rest: float
    gas: float
    kappa: float
    core: float = 0.0
    density: float = 998.2071505
    sound_speed: float = 1482.34617
    viscosity: float = 1.0015961e-3
    tension: float = 0.0727361404
    pressure: float = 101325.0
    amplitude: float = 0.0
    frequency: float = 0.0

    def in_liquid(self, **changes: float) -> Polytropic:
        return replace(self, **changes)

    def rates(self, time: float, y: Any) -> tuple[float, float]:
        radius, speed = float(y[0]), float(y[1])
        if not (self.core < radius < 1e3 * self.rest and abs(speed) < 1e6):
            return nan, nan  # a trial step that overshoots: the integrator takes a smaller one
        free = radius**3 - self.core**3
        pg = self.gas * ((self.rest**3 - self.core**3) / free) ** self.kappa
        pg_rate = -3.0 * self.kappa * pg * radius**2 * speed / free
        omega = 2.0 * pi * self.frequency
        far = self.pressure - self.amplitude * sin(omega * time)
        far_rate = -self.amplitude * omega * cos(omega * time)
        return speed, keller_miksis(
            radius, speed, pg, pg_rate, far, far_rate, self.density, self.sound_speed,
            self.viscosity, self.tension,
        )  # fmt: skip

    def follow(self, end: float, events: Any = None) -> Any:
        """Integrate from rest to ``end`` (s)."""
        return solve_ivp(
            self.rates, (0.0, end), (self.rest, 0.0), method="DOP853", rtol=1e-10,
            atol=(1e-9 * self.rest, 1e-9), events=events, dense_output=True,
        )  # fmt: skip

    def time_to_radius(self, radius: float, end: float) -> float:
        """Time (s) at which a collapsing cavity passes ``radius``."""

        def passed(_time: float, y: Any) -> float:
            return float(y[0]) - radius

        passed.terminal = True  # type: ignore[attr-defined]
        return float(self.follow(end, passed).t_events[0][0])

    def heating(self, radius: float) -> float:
        """Temperature over that at rest, were the changes adiabatic."""
        free = radius**3 - self.core**3
        return float(((self.rest**3 - self.core**3) / free) ** (self.kappa - 1.0))


def driven(
    rest: float, frequency: float, amplitude: float, kappa: float, core: float = 0.0
) -> Polytropic:
    """A bubble of the rows: water at 20 degC, no vapour, Laplace pressure at rest."""
    one = Polytropic(rest, 0.0, kappa, core)
    gas = one.pressure + 2.0 * one.tension / rest
    return replace(one, gas=gas, frequency=frequency, amplitude=amplitude)


def first_extreme(bubble: Polytropic, end: float, largest: bool) -> tuple[float, float]:
    """Time (s) and radius (m) of the largest radius up to ``end``, or of the first collapse.

    A collapse is a minimum below half the radius at rest; the rebounds after it may go deeper.
    """

    def turning(_time: float, y: Any) -> float:
        return float(y[1])

    turning.direction = -1.0 if largest else 1.0  # type: ignore[attr-defined]
    found = bubble.follow(end, turning)
    times, radii = found.t_events[0], np.array([y[0] for y in found.y_events[0]])
    at = int(radii.argmax() if largest else (radii < 0.5 * bubble.rest).argmax())
    return float(times[at]), float(radii[at])
