"""Quantities with units, read once at the door: ``"355 kHz"`` becomes ``355000.0``."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from functools import cache
from typing import Annotated, Any

from pydantic import BeforeValidator

from sonoyield.describe.errors import RefusalError

ZERO_CELSIUS = 273.15  # K
ATMOSPHERE = 101325.0  # Pa
SMALLEST_PRESSURE_AMPLITUDE = 100.0  # Pa; less but not zero is read as a slip of units
SMALLEST_PRESSURE_HINT = 1e4  # Pa; nobody means less when a slip is to be explained
ROUNDING = 1e-12  # a bound written in other units may miss itself by rounding

_NUMBER = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)(.*)", re.DOTALL)
_UNIT_TEXT = re.compile(r"[A-Za-zµμ°%0-9/*^()+.·²³⁻¹\s-]{1,40}")
_SUPERSCRIPTS = str.maketrans("²³¹⁻", "231-")
_RAISED = re.compile(r"[²³¹⁻]+")
_BARE_POWER = re.compile(r"(?<=[A-Za-zµμ])([+-]?\d)")
_PLAIN_POWER = re.compile(r"(?<=[A-Za-zµμ])(?:\^|\*\*)[+-]?\d{1,2}(?!\d)(?!\^|\*\*)")


@dataclass(frozen=True)
class Dimension:
    """What a kind of quantity is measured in.

    Parameters
    ----------
    word : its name in a message.
    si : SI unit as pint writes it.
    scales : friendly units with their size in SI, smallest first.
    slips : factors by which people err (kilo forgotten, Pa for bar).
    """

    word: str
    si: str
    scales: tuple[tuple[str, float], ...]
    slips: tuple[float, ...] = ()


DIMENSIONS: dict[str, Dimension] = {
    "frequency": Dimension(
        "a frequency", "Hz", (("Hz", 1.0), ("kHz", 1e3), ("MHz", 1e6)), slips=(1e3,)
    ),
    "pressure": Dimension("a pressure", "Pa", (("Pa", 1.0), ("bar", 1e5)), slips=(1e5, 1e3)),
    "ambient": Dimension("a pressure", "Pa", (("atm", ATMOSPHERE),), slips=(1e5, 1e3)),
    "length": Dimension("a length", "m", (("um", 1e-6), ("mm", 1e-3), ("m", 1.0)), slips=(1e3,)),
    "temperature": Dimension("a temperature", "K", (("degC", 1.0),)),
    "volume": Dimension(
        "a volume",
        "m^3",
        (("nL", 1e-12), ("uL", 1e-9), ("mL", 1e-6), ("L", 1e-3), ("m^3", 1.0)),
    ),
    "number_density": Dimension("a number per volume", "1/m^3", (("/ m^3", 1.0),)),
    "time": Dimension(
        "a time",
        "s",
        (("us", 1e-6), ("ms", 1e-3), ("s", 1.0), ("min", 60.0), ("h", 3600.0), ("day", 86400.0)),
    ),
    "salinity": Dimension("a mass per volume", "kg/m^3", (("g/L", 1.0),)),
    "concentration": Dimension(
        "an amount per volume",
        "mol/m^3",
        (("pmol/L", 1e-9), ("nmol/L", 1e-6), ("umol/L", 1e-3), ("mmol/L", 1.0), ("mol/L", 1e3)),
        slips=(1e3,),
    ),
    "rate_constant": Dimension(
        "a second-order rate constant", "m^3/mol/s", (("L/mol/s", 1e-3),), slips=(1e3,)
    ),
    "diffusivity": Dimension("a diffusivity", "m^2/s", (("m^2/s", 1.0),), slips=(1e4,)),
}


def parse_quantity(text: object, dimension: str, low: float, high: float, example: str) -> float:
    """Read a number with its unit and check its range.

    Parameters
    ----------
    text : such as ``"355 kHz"``; a bare number is refused.
    dimension : a key of ``DIMENSIONS``.
    low, high : bounds in SI, both allowed.
    example : shown when the text is refused.

    Returns
    -------
    The value in SI.

    Raises
    ------
    RefusalError : (a ``ValueError``) not a text, no unit, unknown unit, other dimension, not
        finite, or out of range; the message gives the range and, for a likely slip, the value
        meant.
    """
    kind = DIMENSIONS[dimension]
    allowed = describe_range(dimension, low, high, example)
    number, unit = _split(text, allowed)
    value = _to_si(number, unit, kind, allowed)
    if dimension == "pressure" and 0.0 < value < SMALLEST_PRESSURE_AMPLITUDE:
        problem = "too small for a pressure amplitude" + _meant(value, number, kind, low, high)
        raise RefusalError(problem, allowed)
    slack = ROUNDING * max(abs(low), abs(high)) if dimension == "temperature" else 0.0
    if not low * (1 - ROUNDING) - slack <= value <= high * (1 + ROUNDING) + slack:
        raise RefusalError("out of range" + _meant(value, number, kind, low, high), allowed)
    return min(max(value, low), high)


def describe_range(dimension: str, low: float, high: float, example: str) -> str:
    """Range in friendly units with an example, as shown after the word ``allowed``."""
    kind = DIMENSIONS[dimension]
    return f'{format_quantity(low, kind)} to {format_quantity(high, kind)}, e.g. "{example}"'


def format_quantity(value: float, kind: Dimension) -> str:
    """Write an SI value in the largest friendly unit that keeps it at or above one."""
    if kind.si == "K":
        return f"{value - ZERO_CELSIUS:.6g} degC"
    fitting = [scale for scale in kind.scales if abs(value) >= scale[1] * (1 - ROUNDING)]
    name, size = fitting[-1] if fitting else kind.scales[-1 if value == 0.0 else 0]
    return f"{value / size:.6g} {name}"


@dataclass(frozen=True)
class QuantityReader:
    """Reads one kind of quantity within one range; ``allowed`` says which."""

    dimension: str
    low: float
    high: float
    example: str

    def __call__(self, value: Any) -> float:
        return parse_quantity(value, self.dimension, self.low, self.high, self.example)

    @property
    def allowed(self) -> str:
        return describe_range(self.dimension, self.low, self.high, self.example)


READERS: dict[str, QuantityReader] = {
    "frequency": QuantityReader("frequency", 1e4, 1e7, "355 kHz"),
    "pressure": QuantityReader("pressure", 0.0, 30e5, "2 bar"),
    "ambient_pressure": QuantityReader("ambient", 0.1 * ATMOSPHERE, 10 * ATMOSPHERE, "1 atm"),
    "radius": QuantityReader("length", 0.1e-6, 200e-6, "3 um"),
    "temperature": QuantityReader("temperature", ZERO_CELSIUS, ZERO_CELSIUS + 80.0, "25 degC"),
    "volume": QuantityReader("volume", 1e-12, 1e3, "100 mL"),
    "number_density": QuantityReader("number_density", 1.0, 1e18, "1e9 / m^3"),
    "time": QuantityReader("time", 1e-6, 30 * 86400.0, "10 min"),
    "salinity": QuantityReader("salinity", 0.0, 60.0, "9 g/L"),
    "concentration": QuantityReader("concentration", 1e-9, 1e4, "2 mmol/L"),
    "rate_constant": QuantityReader("rate_constant", 1.0, 1e8, "4e9 L/mol/s"),
    "diffusivity": QuantityReader("diffusivity", 1e-12, 1e-7, "1e-9 m^2/s"),
}

Frequency = Annotated[float, BeforeValidator(READERS["frequency"])]
Pressure = Annotated[float, BeforeValidator(READERS["pressure"])]
AmbientPressure = Annotated[float, BeforeValidator(READERS["ambient_pressure"])]
Radius = Annotated[float, BeforeValidator(READERS["radius"])]
Temperature = Annotated[float, BeforeValidator(READERS["temperature"])]
Volume = Annotated[float, BeforeValidator(READERS["volume"])]
NumberDensity = Annotated[float, BeforeValidator(READERS["number_density"])]
Time = Annotated[float, BeforeValidator(READERS["time"])]
Salinity = Annotated[float, BeforeValidator(READERS["salinity"])]


@cache
def _registry() -> Any:
    import pint  # a third of a second: only when a quantity is read

    return pint.UnitRegistry()


def _split(text: object, allowed: str) -> tuple[float, str]:
    if isinstance(text, (int, float)) and not isinstance(text, bool):
        raise RefusalError("a unit is due", allowed)
    if not isinstance(text, str):
        raise RefusalError("a text with a number and a unit is due", allowed)
    found = _NUMBER.fullmatch(text)
    if not found:
        raise RefusalError("this does not begin with a finite number", allowed)
    number, unit = float(found[1]), found[2].strip()
    if not math.isfinite(number):
        raise RefusalError("the number is not finite", allowed)
    if not unit:
        raise RefusalError("a unit is due", allowed)
    if not _UNIT_TEXT.fullmatch(unit):
        raise RefusalError("a number, a space and a unit are due", allowed)
    return number, unit


def _to_si(number: float, unit: str, kind: Dimension, allowed: str) -> float:
    registry = _registry()
    try:
        parsed = registry.parse_units(_plain_unit(unit))
        right = parsed.is_compatible_with(kind.si) and not _is_angular(parsed)
    except Exception:  # pint lets parser, assertion, type and arithmetic errors of any kind through
        raise RefusalError(f'"{unit}" is not a known unit', allowed) from None
    if not right:
        raise RefusalError(f"the unit is not that of {kind.word}", allowed)
    try:
        value = float(registry.Quantity(number, parsed).to(kind.si).magnitude)
    except (OverflowError, ZeroDivisionError, ValueError):
        value = math.inf
    if not math.isfinite(value):
        raise RefusalError("the number is not finite", allowed)
    return float(f"{value:.15g}")  # 100 mL is 1e-4 m3, not 1.0000000000000002e-4


def _plain_unit(unit: str) -> str:
    """Write powers in one way; a tower of powers would keep the parser busy for ever."""
    raised = _RAISED.sub(lambda m: "^" + m[0].translate(_SUPERSCRIPTS), unit.replace("·", "*"))
    written = _BARE_POWER.sub(r"^\1", re.sub(r"\s*(\^|\*\*)\s*", r"\1", raised))
    rest = _PLAIN_POWER.sub("", written)
    if "^" in rest or "**" in rest:
        raise ValueError(unit)
    return "1" + written if written.startswith("/") else written


def _is_angular(unit: Any) -> bool:
    """Radians and turns count as plain numbers in pint: 1 rad/s must not pass for 1 Hz."""
    names = ("radian", "revolution", "turn", "degree", "cycle", "becquerel", "curie", "baud")
    return any(
        name in part and "degree_" not in part for part in dict(unit._units) for name in names
    )


def _meant(value: float, number: float, kind: Dimension, low: float, high: float) -> str:
    """Ask after the value that a usual slip would explain; empty when none does."""
    if kind.si == "K":
        guesses = [number, number + ZERO_CELSIUS]
    else:
        guesses = [guess for slip in kind.slips for guess in (value * slip, value / slip)]
    least = SMALLEST_PRESSURE_HINT if kind.word == "a pressure" else low
    fitting = [guess for guess in guesses if max(low, least) <= guess <= high and guess != value]
    if not fitting:
        return ""
    return f" (did you mean {format_quantity(fitting[0], kind)}?)"
