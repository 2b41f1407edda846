"""One exposure as the user describes it: read from TOML, checked, kept in SI."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, ValidationError, model_validator

from sonoyield.describe import later, units
from sonoyield.describe.errors import MISSING, ProtocolError, RefusalError
from sonoyield.describe.fields import (
    ChoiceReader,
    CountReader,
    MechanismReader,
    MixtureReader,
    ShareReader,
    SwitchReader,
    TextReader,
)
from sonoyield.describe.rules import check_rules
from sonoyield.describe.scavengers import Scavenger, ScavengersReader
from sonoyield.describe.translate import protocol_error

LARGEST_FILE = 1_000_000  # bytes
SALINE_DEFAULT = "9 g/L"

Text = Annotated[str, BeforeValidator(TextReader())]
Switch = Annotated[bool, BeforeValidator(SwitchReader())]
Share = Annotated[float, BeforeValidator(ShareReader())]
LiquidKind = Annotated[str, BeforeValidator(ChoiceReader(("water", "saline")))]
Mixture = Annotated[dict[str, float], BeforeValidator(MixtureReader())]
FieldKind = Annotated[str, BeforeValidator(ChoiceReader(("uniform",), later.LATER_FIELDS))]
Radial = Annotated[str, BeforeValidator(ChoiceReader(("keller_miksis",), later.LATER_RADIAL))]
Interior = Annotated[str, BeforeValidator(ChoiceReader(("resolved", "mixed")))]
Cells = Annotated[int, BeforeValidator(CountReader(8, 80))]
Wall = Annotated[str, BeforeValidator(ChoiceReader(("liquid_temperature", "thermal_layer")))]
OxygenAtom = Annotated[str, BeforeValidator(ChoiceReader(("persists", "water")))]
Scavengers = Annotated[dict[str, Scavenger], BeforeValidator(ScavengersReader())]
Coupling = Annotated[str, BeforeValidator(ChoiceReader(("two_way", "one_way")))]
Mechanism = Annotated[str, BeforeValidator(MechanismReader())]
Collapses = Annotated[int, BeforeValidator(CountReader(1, 1000, {"periodic": later.PERIODIC}))]


class Section(BaseModel):
    """Base of every table of the protocol: frozen, unknown keys refused."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class Drive(Section):
    """Sound: frequency in Hz, peak acoustic pressure amplitude in Pa."""

    frequency: units.Frequency
    pressure: units.Pressure


class Pulse(Section):
    """Sound on for ``length``, repeated ``every``, both s."""

    length: units.Time
    every: units.Time


class Schedule(Section):
    """Length of the exposure in s; continuous without ``pulse``."""

    duration: units.Time
    pulse: Pulse | None = None

    @property
    def duty(self) -> float:
        """Share of time with sound on, 0 to 1."""
        return 1.0 if self.pulse is None else min(1.0, self.pulse.length / self.pulse.every)


class Liquid(Section):
    """Liquid: temperature in K, pressure in Pa, insonated volume in m3, salinity in kg/m3.

    ``scavengers`` of OH by name.
    """

    kind: LiquidKind = "water"
    salinity: units.Salinity = 0.0
    temperature: units.Temperature
    ambient_pressure: units.AmbientPressure = units.ATMOSPHERE
    volume: units.Volume
    scavengers: Scavengers = {}

    @model_validator(mode="before")
    @classmethod
    def _salinity_goes_with_saline(cls, data: Any) -> Any:
        if not isinstance(data, Mapping):
            return data
        kind = data.get("kind", "water")
        if kind == "water" and "salinity" in data:
            raise RefusalError("water has no salinity", 'with kind = "saline" only', "salinity")
        if kind == "saline" and "salinity" not in data:
            return {**data, "salinity": SALINE_DEFAULT}
        return data


class Gas(Section):
    """Dry gas in the bubble at rest, mole fractions by Cantera species name, sum 1."""

    mixture: Mixture


class Bubbles(Section):
    """Radius at rest in m, bubbles per volume of liquid in 1/m3."""

    radius: units.Radius
    number_density: units.NumberDensity


class Field(Section):
    """Pressure over the treated volume."""

    kind: FieldKind = "uniform"


class Accommodation(Section):
    """Chance, above 0 and at most 1, that a molecule that meets the wall passes it.

    A species of its own name goes before ``radicals``.
    """

    water: Share = 0.4
    radicals: Share = 0.4
    OH: Share | None = None
    H: Share | None = None
    O: Share | None = None  # noqa: E741 -- the species is called that
    HO2: Share | None = None
    H2O2: Share | None = None
    O3: Share | None = None
    N: Share | None = None
    NH: Share | None = None
    NH2: Share | None = None
    NH3: Share | None = None
    NNH: Share | None = None
    NO: Share | None = None
    NO2: Share | None = None
    NO3: Share | None = None
    N2O: Share | None = None
    HNO: Share | None = None
    HONO: Share | None = None
    HONO2: Share | None = None

    def of(self, species: str) -> float:
        """Value for one species, ``"H2O"`` included; ``radicals`` where none is given."""
        if species == "H2O":
            return self.water
        own: float | None = getattr(self, species, None)
        return self.radicals if own is None else own


class Model(Section):
    """Choices of the bubble model.

    ``cells`` in the gas, None for the solver's own number. ``film`` follows what crossed into the
    liquid; the mixed interior has none. ``wall``: held at the liquid's temperature, or warmed
    through a thermal layer in the liquid. ``oxygen_atom``: what O(3P) does in cold water, which is
    not known; it persists until it meets something, or reacts with the water.
    """

    radial: Radial = "keller_miksis"
    interior: Interior = "resolved"
    cells: Cells | None = None
    film: Switch = True
    wall: Wall = "liquid_temperature"
    temperature_jump: Switch = False
    oxygen_atom: OxygenAtom = "persists"
    coupling: Coupling = "two_way"
    mechanism: Mechanism = "auto"
    excluded_volume: Switch = True
    vapour: Switch = True
    uptake: Switch = True
    accommodation: Accommodation = Accommodation()
    collapses: Collapses = 1

    @model_validator(mode="before")
    @classmethod
    def _film_goes_with_resolved(cls, data: Any) -> Any:
        if isinstance(data, Mapping) and data.get("interior") == "mixed":
            return {"film": False, **data}
        return data


class Protocol(Section):
    """One exposure; every value in SI. Make it with ``load`` or ``from_dict``.

    Both raise ``ProtocolError``, one line that names file, key, value and what is allowed.
    """

    title: Text = ""
    drive: Drive
    schedule: Schedule
    liquid: Liquid
    gas: Gas
    bubbles: Bubbles
    field: Field = Field()
    model: Model = Model()

    @model_validator(mode="after")
    def _fields_agree(self) -> Protocol:
        check_rules(self)
        return self

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Protocol:
        """Read a TOML file; raises ``ProtocolError`` for anything that is wrong with it."""
        return cls.from_dict(_read_toml(Path(path)), file=str(path))

    @classmethod
    def from_dict(cls, data: Mapping[str, Any], file: str = "") -> Protocol:
        """Check a table as TOML gives it, quantities as texts with units.

        ``file`` is named in messages, and paths in the table count from its folder; raises
        ``ProtocolError``.
        """
        if not isinstance(data, Mapping):
            raise ProtocolError(file, "", MISSING, "a table of tables is due")
        try:
            return cls.model_validate(dict(data), context={"folder": os.path.dirname(file)})
        except ValidationError as error:
            raise protocol_error(error, cls, data, file) from None

    def dump(self) -> dict[str, Any]:
        """Give every value, defaults included, in SI."""
        values = self.model_dump()
        own = values["model"]["accommodation"]
        values["model"]["accommodation"] = {k: v for k, v in own.items() if v is not None}
        return values


def _read_toml(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(_read_text(path))
    except RecursionError:
        raise ProtocolError(str(path), "", MISSING, "broken TOML: tables nested too deep") from None
    except tomllib.TOMLDecodeError as error:
        raise ProtocolError(str(path), "", MISSING, f"broken TOML: {error}") from None
    except ValueError as error:
        if isinstance(error, ProtocolError):
            raise
        raise ProtocolError(str(path), "", MISSING, "broken TOML: a number too long") from None


def _read_text(path: Path) -> str:
    try:
        with path.open("rb") as handle:
            data = handle.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        raise ProtocolError(str(path), "", MISSING, _why_unreadable(error), _A_FILE) from None
    if len(data) > LARGEST_FILE:
        raise ProtocolError(str(path), "", MISSING, "too large for a protocol", "up to 1 MB")
    try:
        return data.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        problem = f"not UTF-8 text at byte {error.start}"
        raise ProtocolError(str(path), "", MISSING, problem, "TOML in UTF-8") from None


_A_FILE = "a readable TOML file"


def _why_unreadable(error: Exception) -> str:
    if isinstance(error, FileNotFoundError):
        return "there is no such file"
    if isinstance(error, IsADirectoryError):
        return "this is a folder"
    if isinstance(error, PermissionError):
        return "this file may not be read"
    return f"cannot be read ({getattr(error, 'strerror', None) or 'not a file name'})"
