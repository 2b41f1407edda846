"""Quantities with units: what is read, what is refused, and in which words."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sonoyield.describe.errors import RefusalError
from sonoyield.describe.units import READERS, parse_quantity

# Conversions are definitions: SI brochure, 9th edition (2019), and 1 atm = 101325 Pa.
READ = [
    ("frequency", "355 kHz", 355e3),
    ("frequency", "1MHz", 1e6),
    ("frequency", "3.55e2 kHz", 355e3),
    ("frequency", "355 1/ms", 355e3),
    ("pressure", "2.0 bar", 2e5),
    ("pressure", "0 bar", 0.0),
    ("pressure", "2 atm", 202650.0),
    ("pressure", "0.2 MPa", 2e5),
    ("ambient_pressure", "1 atm", 101325.0),
    ("ambient_pressure", "1 bar", 1e5),
    ("temperature", "25 degC", 298.15),
    ("temperature", "25 °C", 298.15),
    ("temperature", "298.15 K", 298.15),
    ("temperature", "77 degF", 298.15),
    ("temperature", "0 degC", 273.15),
    ("temperature", "80 degC", 353.15),
    ("radius", "3 um", 3e-6),
    ("radius", "3 \u00b5m", 3e-6),
    ("radius", "3 \u03bcm", 3e-6),
    ("radius", "0.1 um", 1e-7),
    ("radius", "200 um", 2e-4),
    ("number_density", "1e9 / m^3", 1e9),
    ("number_density", "1e9 /m3", 1e9),
    ("number_density", "1e9 m-3", 1e9),
    ("number_density", "1e9 1/m³", 1e9),
    ("number_density", "1e9 m⁻³", 1e9),
    ("number_density", "1000 / mL", 1e9),
    ("volume", "100 mL", 1e-4),
    ("volume", "1 nL", 1e-12),
    ("volume", "1000 m^3", 1e3),
    ("time", "5 ms", 5e-3),
    ("time", "10 min", 600.0),
    ("time", "30 day", 2592000.0),
    ("salinity", "9 g/L", 9.0),
    ("salinity", "0.009 g/mL", 9.0),
    ("concentration", "2 mmol/L", 2.0),
    ("concentration", "2 mM", 2.0),
    ("concentration", "2 umol/mL", 2.0),
    ("concentration", "2 mol/m³", 2.0),
    ("concentration", "1 pmol/L", 1e-9),
    ("concentration", "10 mol/L", 1e4),
    ("rate_constant", "4e9 L/mol/s", 4e6),
    ("rate_constant", "4e9 L mol-1 s-1", 4e6),
    ("rate_constant", "4e9 L·mol⁻¹·s⁻¹", 4e6),
    ("rate_constant", "4e9 M^-1 s^-1", 4e6),
    ("rate_constant", "4e9 /M/s", 4e6),
    ("rate_constant", "4e6 m3/mol/s", 4e6),
    ("rate_constant", "1e3 L/mol/s", 1.0),
    ("rate_constant", "1e11 L/mol/s", 1e8),
    ("diffusivity", "1e-9 m^2/s", 1e-9),
    ("diffusivity", "1e-5 cm²/s", 1e-9),
    ("diffusivity", "1000 um^2/s", 1e-9),
]

REFUSED = [
    ("frequency", 355000, "a unit is due"),
    ("frequency", 355e3, "a unit is due"),
    ("frequency", "355", "a unit is due"),
    ("frequency", "355 ", "a unit is due"),
    ("frequency", True, "a text with a number and a unit is due"),
    ("frequency", None, "a text with a number and a unit is due"),
    ("frequency", ["355 kHz"], "a text with a number and a unit is due"),
    ("frequency", "", "does not begin with a finite number"),
    ("frequency", "kHz", "does not begin with a finite number"),
    ("frequency", "nan kHz", "does not begin with a finite number"),
    ("frequency", "inf kHz", "does not begin with a finite number"),
    ("frequency", "1e999 kHz", "not finite"),
    ("frequency", "355 khz", "not a known unit"),
    ("frequency", "355 ((", "not a known unit"),
    ("frequency", "355 kHz^", "not a known unit"),
    ("frequency", "1 Hz*9^9^9^9^9", "not a known unit"),
    ("frequency", "1 Hz*((99³³)³³)³³", "not a known unit"),
    ("frequency", "355 kHz" + " " * 50 + "x", "a number, a space and a unit are due"),
    ("frequency", "355 mm", "not that of a frequency"),
    ("frequency", "1e6 rad/s", "not that of a frequency"),
    ("frequency", "1e6 Bq", "not that of a frequency"),
    ("temperature", "25 C", "not that of a temperature"),
    ("salinity", "154 mmol/L", "not that of a mass per volume"),
    ("frequency", "355 Hz", "did you mean 355 kHz?"),
    ("frequency", "355 MHz", "did you mean 355 kHz?"),
    ("pressure", "2 Pa", "did you mean 2 bar?"),
    ("pressure", "0.5 mbar", "too small for a pressure amplitude"),
    ("pressure", "200000 bar", "did you mean 2 bar?"),
    ("pressure", "2000 bar", "did you mean 2 bar?"),
    ("pressure", "40 bar", "allowed 0 bar to 30 bar"),
    ("ambient_pressure", "1 Pa", "did you mean 0.986923 atm?"),
    ("temperature", "25 K", "did you mean 25 degC?"),
    ("temperature", "298.15 degC", "did you mean 25 degC?"),
    ("temperature", "90 degC", "allowed 0 degC to 80 degC"),
    ("radius", "3 mm", "did you mean 3 um?"),
    ("volume", "1e7 L", "allowed 1 nL to 1000 m^3"),
    ("number_density", "0.5 / m^3", "allowed 1 / m^3 to 1e+18 / m^3"),
    ("time", "31 day", "allowed 1 us to 30 day"),
    ("salinity", "61 g/L", "allowed 0 g/L to 60 g/L"),
    ("concentration", "0 mmol/L", "allowed 1 pmol/L to 10 mol/L"),
    ("concentration", "-2 mmol/L", "out of range"),
    ("concentration", "11 mol/L", "did you mean 11 mmol/L?"),
    ("concentration", "2 g/L", "not that of an amount per volume"),
    ("concentration", "2 mmol/kg", "not that of an amount per volume"),
    ("rate_constant", "4e9 m^3/mol/s", "did you mean 4e+09 L/mol/s?"),
    ("rate_constant", "999 L/mol/s", "allowed 1000 L/mol/s to 1e+11 L/mol/s"),
    ("rate_constant", "1.01e11 L/mol/s", "out of range"),
    ("rate_constant", "4e9 1/s", "not that of a second-order rate constant"),
    ("rate_constant", "7e-12 cm^3/s", "not that of a second-order rate constant"),
    ("diffusivity", "1e-5 m^2/s", "did you mean 1e-09 m^2/s?"),
    ("diffusivity", "1e-9 m/s", "not that of a diffusivity"),
]


@pytest.mark.parametrize(("name", "text", "value"), READ)
def test_read(name: str, text: str, value: float) -> None:
    assert READERS[name](text) == pytest.approx(value, rel=1e-14, abs=0.0)


@pytest.mark.parametrize(("name", "text", "fragment"), REFUSED)
def test_refused(name: str, text: object, fragment: str) -> None:
    with pytest.raises(RefusalError) as caught:
        READERS[name](text)
    assert fragment in str(caught.value)
    assert READERS[name].example in str(caught.value)
    assert "\n" not in str(caught.value)


def test_no_hint_where_no_slip_explains() -> None:
    with pytest.raises(RefusalError) as caught:
        READERS["frequency"]("3 GHz")
    assert "did you mean 3 MHz" in str(caught.value)
    with pytest.raises(RefusalError) as caught:
        READERS["frequency"]("3 THz")
    assert "did you mean" not in str(caught.value)


def test_own_range() -> None:
    assert parse_quantity("5 cm", "length", 0.0, 1.0, "1 cm") == pytest.approx(0.05, rel=1e-14)


@settings(max_examples=100, deadline=None)  # the first loads pint
@given(st.text(max_size=30))
def test_any_text_gives_a_finite_number_or_a_refusal(text: str) -> None:
    try:
        value = READERS["pressure"](text)
    except RefusalError as refusal:
        assert "allowed 0 bar to 30 bar" in str(refusal)
    else:
        assert math.isfinite(value)


@settings(max_examples=100, deadline=None)  # the first loads pint
@given(st.sampled_from("kmnu% "), st.text("Hzbarsm/*^()+-0123456789. ³²µ°", max_size=12))
def test_any_unit_is_read_or_refused(prefix: str, unit: str) -> None:
    try:
        value = READERS["frequency"](f"1 {prefix}{unit}")
    except RefusalError as refusal:
        assert "allowed 10 kHz to 10 MHz" in str(refusal)
    else:
        assert 1e4 <= value <= 1e7


@settings(max_examples=100, deadline=None)  # the first loads pint
@given(st.floats(1e4, 1e7))
def test_value_survives_its_unit(hertz: float) -> None:
    assert READERS["frequency"](f"{hertz / 1e3!r} kHz") == pytest.approx(hertz, rel=1e-13)
