"""Nitric oxide at equilibrium, ``h2o_o2_n2`` against printed and computed rows (THM-*)."""

from __future__ import annotations

import cantera as ct
import pytest
from rows import ROWS

from sonoyield.describe.gas import load_phase

NITRIC_OXIDE = {"THM-27": 2000.0, "THM-28": 3000.0, "THM-30": 5000.0, "THM-31": 6000.0}


@pytest.mark.parametrize("row", NITRIC_OXIDE)
def test_equilibrium_constant(row: str) -> None:
    """ln Kp of 1/2 N2 + 1/2 O2 = NO, 1 atm standard state (JANAF; memory)."""
    gas = load_phase("h2o_o2_n2").solution()
    gas.TP = NITRIC_OXIDE[row], ct.one_atm
    gibbs = dict(zip(gas.species_names, gas.standard_gibbs_RT, strict=True))
    found = 0.5 * (gibbs["N2"] + gibbs["O2"]) - gibbs["NO"]
    assert abs(found - ROWS[row].number) <= ROWS[row].absolutes[0]


@pytest.mark.parametrize("temperature", [2000.0, 3000.0, 4000.0])
def test_heated_air(temperature: float) -> None:
    """THM-63 (computed with other data): 79 % N2, 21 % O2 at one atmosphere, within its 2 %."""
    row = ROWS["THM-63"]
    gas = load_phase("h2o_o2_n2").solution()
    gas.TPX = temperature, ct.one_atm, "N2:0.79, O2:0.21"
    gas.equilibrate("TP", rtol=1e-12)
    printed = row.number if temperature == 3000.0 else row.noted(f"{temperature:.0f} K: ")
    row.agrees(float(gas["NO"].X[0]), printed)
