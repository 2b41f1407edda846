"""Equilibria of ``h2o_o2`` against printed tables (rows THM-*; nitrogen comes with its mechanism).

Some rows were computed with 39.3 kJ/mol for the formation of OH; the mechanism
carries 37.49 kJ/mol (Active Thermochemical Tables). They are met with the older enthalpy put in,
and disagree without it by the figures asserted here.
"""

from __future__ import annotations

from functools import lru_cache

import cantera as ct
import pytest
from rows import ROWS

from sonoyield.describe.gas import load_phase

OLDER_OH = 39.3e3  # J/mol, as the rows state it
R = 8.31446261815324

STEAM_TO_OH = {"THM-23": 2000.0, "THM-02": 3000.0, "THM-25": 5000.0, "THM-26": 6000.0}
STEAM_TO_O2 = {"THM-19": 2000.0, "THM-01": 3000.0, "THM-20": 4000.0, "THM-21": 5000.0}
STEAM_TO_O2 |= {"THM-22": 6000.0}
HYDROGEN = {"THM-04": 2000.0, "THM-05": 3000.0, "THM-06": 4000.0, "THM-07": 5000.0}
HYDROGEN |= {"THM-08": 6000.0}
OXYGEN = {"THM-09": 2000.0, "THM-10": 3000.0, "THM-11": 4000.0, "THM-12": 5000.0}
OXYGEN |= {"THM-13": 6000.0}


@lru_cache
def phase(names: tuple[str, ...] = (), older: bool = False) -> ct.Solution:
    """The product's species, all or some, with our or the older formation enthalpy of OH."""
    ours = load_phase("h2o_o2").solution()
    kept = []
    for one in ours.species():
        if names and one.name not in names:
            continue
        copy = ct.Species.from_dict(one.input_data)
        if older and one.name == "OH":
            copy.thermo = _shifted(copy.thermo, OLDER_OH - one.thermo.h(298.15) / 1e3)
        kept.append(copy)
    return ct.Solution(thermo="ideal-gas", species=kept)


def _shifted(thermo: ct.SpeciesThermo, enthalpy: float) -> ct.SpeciesThermo:
    """The same NASA-9 table with its enthalpy (J/mol) moved."""
    coefficients = thermo.coeffs.copy()
    for zone in range(int(coefficients[0])):
        coefficients[1 + 11 * zone + 2 + 7] += enthalpy / R
    return ct.Nasa9PolyMultiTempRegion(
        thermo.min_temp, thermo.max_temp, thermo.reference_pressure, coefficients
    )


def ln_kp(temperature: float, change: dict[str, float], older: bool = False) -> float:
    """ln Kp with 1 atm as the standard state."""
    gas = phase(older=older)
    gas.TP = temperature, ct.one_atm
    gibbs = gas.standard_gibbs_RT
    return -sum(n * gibbs[gas.species_index(name)] for name, n in change.items())


def test_older_enthalpy_is_put_in() -> None:
    assert phase(older=True).species("OH").thermo.h(298.15) / 1e3 == pytest.approx(39.3e3, abs=0.1)
    assert phase().species("OH").thermo.h(298.15) / 1e3 == pytest.approx(37.49e3, abs=2.0)


@pytest.mark.parametrize("row", HYDROGEN)
def test_hydrogen(row: str) -> None:
    found = ln_kp(HYDROGEN[row], {"H2": -1.0, "H": 2.0})
    assert abs(found - ROWS[row].number) <= ROWS[row].absolutes[0]


@pytest.mark.parametrize("row", OXYGEN)
def test_oxygen(row: str) -> None:
    found = ln_kp(OXYGEN[row], {"O2": -1.0, "O": 2.0})
    assert abs(found - ROWS[row].number) <= ROWS[row].absolutes[0]


@pytest.mark.parametrize("row", STEAM_TO_O2)
def test_steam_to_hydrogen_and_oxygen(row: str) -> None:
    temperature = STEAM_TO_O2[row]
    found = ln_kp(temperature, {"H2O": -1.0, "H2": 1.0, "O2": 0.5})
    if row == "THM-01":
        ROWS[row].agrees(found)
    else:
        within = ROWS[row].absolutes[1 if temperature > 4000.0 else 0]
        assert abs(found - ROWS[row].number) <= within


@pytest.mark.parametrize("row", STEAM_TO_OH)
def test_steam_to_hydroxyl_with_the_older_enthalpy(row: str) -> None:
    temperature = STEAM_TO_OH[row]
    found = ln_kp(temperature, {"H2O": -1.0, "H2": 0.5, "OH": 1.0}, older=True)
    if row == "THM-02":
        ROWS[row].agrees(found)
    else:
        within = ROWS[row].absolutes[1 if temperature > 4000.0 else 0]
        assert abs(found - ROWS[row].number) <= within


@pytest.mark.parametrize("row", STEAM_TO_OH)
def test_steam_to_hydroxyl_as_it_is(row: str) -> None:
    """Our OH lies 1.81 kJ/mol lower, so ln Kp is 1.81/RT higher than with the older one."""
    change = {"H2O": -1.0, "H2": 0.5, "OH": 1.0}
    temperature = STEAM_TO_OH[row]
    higher = ln_kp(temperature, change) - ln_kp(temperature, change, older=True)
    assert higher == pytest.approx(1810.0 / (R * temperature), rel=2e-3)


def steam(
    temperature: float, pressure: float, older: bool, names: tuple[str, ...] = ()
) -> dict[str, float]:
    """Mole fractions of heated steam at equilibrium."""
    gas = phase(names, older)
    gas.TPX = temperature, pressure, "H2O:1"
    gas.equilibrate("TP", rtol=1e-12)
    return {name: float(gas[name].X[0]) for name in gas.species_names}


TEXTBOOK = ("H2O", "H2", "O2", "OH")


def test_dissociated_steam_of_the_textbook() -> None:
    """THM-03: 0.784 H2O, 0.162 H2, 0.054 O2, 0.108 OH (mol), with the older OH."""
    row = ROWS["THM-03"]
    row.agrees(steam(3000.0, ct.one_atm, True, TEXTBOOK)["H2O"])


def test_dissociated_steam_of_the_textbook_as_it_is() -> None:
    """THM-03 is moved by our OH, 1.81 kJ/mol lower: more OH and 0.4 % less steam."""
    row, found = ROWS["THM-03"], steam(3000.0, ct.one_atm, False, TEXTBOOK)
    assert found["OH"] / (0.108 / 1.108) - 1.0 == pytest.approx(0.0, abs=0.1)
    assert found["H2O"] / row.number - 1.0 == pytest.approx(SHORTFALL["THM-03"], abs=1e-3)


FULL = {"THM-60": (3000.0, ct.one_atm), "THM-61": (4000.0, 1e8)}
# Found minus printed, relative: H2O for THM-03, OH for the others.
SHORTFALL = {"THM-03": -0.0041, "THM-60": 0.0625, "THM-61": 0.0441}


@pytest.mark.parametrize("row", FULL)
def test_steam_of_the_full_set(row: str) -> None:
    """Computed with other data and the older OH: 3 % with that OH put in."""
    found = steam(*FULL[row], older=True)["OH"]
    ROWS[row].agrees(found, which=1)


@pytest.mark.parametrize("row", FULL)
def test_steam_of_the_full_set_as_it_is(row: str) -> None:
    """Expected to disagree, because our OH lies lower: more OH at equilibrium, by this much."""
    found = steam(*FULL[row], older=False)["OH"]
    assert found / ROWS[row].number - 1.0 == pytest.approx(SHORTFALL[row], abs=1e-3)
