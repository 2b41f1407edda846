"""The Saha estimate against textbook hydrogen and an independent estimate of dense gas."""

from __future__ import annotations

from math import exp, log10

import pytest

from sonoyield.collapse.ionisation import (
    BOLTZMANN,
    ELECTRONVOLT,
    FIRST,
    ionisation_temperature,
    ionised_share,
    saha_constant,
)
from sonoyield.describe.gas import load_phase


@pytest.mark.parametrize(
    ("temperature", "share", "within"), [(8300.0, 0.05, 0.01), (9600.0, 0.5, 0.04),
                                         (11300.0, 0.95, 0.01)],
)  # fmt: skip
def test_hydrogen_at_an_electron_pressure_of_20_pascal(
    temperature: float, share: float, within: float
) -> None:
    """Carroll & Ostlie, Introduction to Modern Astrophysics, example 8.1.4 (from memory): hydrogen
    is 5 % ionised at 8300 K, half at 9600 K, 95 % at 11300 K."""
    electrons = 20.0 / (BOLTZMANN * temperature)
    constant = saha_constant("H", temperature)
    assert constant / (constant + electrons) == pytest.approx(share, abs=within)


def test_prefactor() -> None:
    """Kielkopf's notes (louisville.edu, Saha equation): (2 pi m_e)^(3/2) / h^3 is 4.70679e55 SI."""
    energy = BOLTZMANN * 1e4
    bare = saha_constant("H", 1e4) * exp(13.5984 * ELECTRONVOLT / energy)
    assert bare / energy**1.5 == pytest.approx(4.70679e55, rel=1e-4)


@pytest.mark.parametrize("species", ["H", "AR", "XE", "NO", "H2O"])
def test_logarithmic_form(species: str) -> None:
    """log N+ Pe / N = -5040 E / T + 2.5 log T - 0.48 + log 2 U+ / U, Pe in dyn/cm2 (a usual form
    of the equation, seen in the BYU physics 427 pages; its figures carry two decimals)."""
    temperature, one = 9000.0, FIRST[species]
    ours = log10(saha_constant(species, temperature) * BOLTZMANN * temperature * 10.0)
    ratio = log10(2.0 * one.ratio(temperature))
    theirs = -5040.0 / temperature * one.energy_eV + 2.5 * log10(temperature) - 0.48 + ratio
    assert ours == pytest.approx(theirs, abs=0.01)


def test_half_ionised_hydrogen_at_low_density() -> None:
    """Pure hydrogen of 1e20 atoms/m3 is half ionised around 10 000 K (studylib.net/doc/8862335,
    figure 1, read to 10 %)."""
    assert ionisation_temperature(1e20, {"H": 1.0}, 0.5) == pytest.approx(1e4, rel=0.11)


@pytest.mark.parametrize(("species", "share"), [("AR", 1e-3), ("H", 1e-3), ("XE", 7e-3)])
def test_dense_gas_at_12000_kelvin(species: str, share: float) -> None:
    """README of the source tables, doubt 3 (one digit, itself a Saha estimate from memory):
    12 000 K and 1e4 bar; about three times more at 1e3 bar."""
    density = 1e9 / (BOLTZMANN * 12000.0)
    dense = ionised_share(12000.0, density, {species: 1.0})
    assert dense == pytest.approx(share, rel=0.25)
    thin = ionised_share(12000.0, 0.1 * density, {species: 1.0})
    assert thin / dense == pytest.approx(3.0, rel=0.1)


def test_the_temperature_gives_the_share_back() -> None:
    mixture = {"AR": 0.7, "H2O": 0.2, "H": 0.08, "NO": 0.02}
    onset = ionisation_temperature(5e27, mixture)
    assert ionised_share(onset, 5e27, mixture) == pytest.approx(0.01, rel=1e-3)
    assert onset > ionisation_temperature(5e26, mixture)  # Saha: denser gas ionises later


def test_electrons_of_one_species_hold_back_another() -> None:
    alone = ionised_share(12000.0, 1e27, {"AR": 1.0})
    mixed = ionised_share(12000.0, 1e27, {"AR": 0.9, "XE": 0.1})
    assert alone < mixed < 0.9 * alone + 0.1 * ionised_share(12000.0, 1e26, {"XE": 1.0})


def test_every_species_of_the_mechanisms_is_known() -> None:
    assert set(load_phase("h2o_o2_n2").species) == set(FIRST)
