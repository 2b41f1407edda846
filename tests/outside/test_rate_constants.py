"""Rate constants of both mechanisms against measurements made one reaction at a time (KIN-*).

Each is evaluated by Cantera from the shipped file at the conditions of the row and compared within
the tolerance written in the row.
"""

from __future__ import annotations

import math
import re

import cantera as ct
import pytest
from rows import ROWS

from sonoyield.describe.gas import AVOGADRO, load_phase

MECHANISMS = ("h2o_o2", "h2o_o2_n2")
TORR = 101325.0 / 760.0
PER_MOLE = 1e3  # cm3/mol in m3/kmol


def rate_constant(
    mechanism: str,
    equation: str,
    temperature: float,
    pressure: float,
    bath: str,
    back: bool = False,
) -> float:
    """Sum over duplicates in m3, kmol, s; of a falloff reaction per collider, forward or back."""
    gas = load_phase(mechanism).solution()
    gas.TPX = temperature, pressure, {bath: 1.0}
    constants = gas.reverse_rate_constants if back else gas.forward_rate_constants
    every = zip(constants, gas.reactions(), strict=True)
    found = [k for k, one in every if one.equation == equation]
    assert found, equation
    return sum(found) / (gas.density_mole if "(+M)" in equation else 1.0)


def arrhenius(text: str) -> tuple[float, float]:
    """A and E/R (K) of ``A*exp(-E/T)`` in a row."""
    found = re.search(r"([\d.e+-]+)\*exp\(-(\d+)/T\)", text)
    assert found is not None, text
    return float(found.group(1)), float(found.group(2))


@pytest.mark.parametrize("mechanism", MECHANISMS)
@pytest.mark.parametrize("temperature", [1020.0, 1100.0, 1200.0, 1300.0, 1400.0, 1460.0])
def test_hydrogen_peroxide_in_argon(mechanism: str, temperature: float) -> None:
    """KIN-10 (seen): all over the measured range; ours is 3 % low at its foot, 20 % high on top."""
    row = ROWS["KIN-10"]
    factor, slope = arrhenius(row.value)
    printed = factor * math.exp(-slope / temperature)
    assert 9.5e15 * math.exp(-slope / 1200.0) == pytest.approx(row.noted("at 1200 K: "), rel=5e-3)
    found = rate_constant(mechanism, "H2O2 (+M) <=> 2 OH (+M)", temperature, 1.8 * ct.one_atm, "AR")
    row.agrees(found * PER_MOLE, printed)


@pytest.mark.parametrize("mechanism", MECHANISMS)
def test_hydroxyl_with_hydrogen_peroxide(mechanism: str) -> None:
    """KIN-12: value and slope in 1/T (126 K +- 76 K read, the power of ten from memory)."""
    row, equation = ROWS["KIN-12"], "H2O2 + OH <=> H2O + HO2"
    per_molecule = PER_MOLE / AVOGADRO
    row.agrees(rate_constant(mechanism, equation, 298.0, 3.0 * TORR, "HE") * per_molecule)
    cold, warm = (rate_constant(mechanism, equation, t, 3.0 * TORR, "HE") for t in (273.0, 323.0))
    slope = math.log(warm / cold) / (1.0 / 273.0 - 1.0 / 323.0)
    assert abs(slope - row.noted("E/R=")) <= row.noted(r"\(\+-")


@pytest.mark.parametrize("mechanism", MECHANISMS)
def test_branching(mechanism: str) -> None:
    """KIN-13 (memory): at 2000 K, and beside it what Cantera's own file gives (note of the row)."""
    row, equation = ROWS["KIN-13"], "H + O2 <=> O + OH"
    printed = {2000.0: row.number, 1000.0: 4.863e10, 3000.0: 7.075e12}
    assert "4.863e10 at 1000 K, 7.075e12 at 3000 K" in row.note
    for temperature, value in printed.items():
        found = rate_constant(mechanism, equation, temperature, ct.one_atm, "AR")
        row.agrees(found * PER_MOLE, value)


WATER_RATIOS = {2196.0: 0.596, 2400.0: 0.839, 2792.0: 1.354, 3000.0: 1.628}  # ours / measured


@pytest.mark.parametrize("mechanism", MECHANISMS)
@pytest.mark.parametrize("temperature", WATER_RATIOS)
def test_steam_in_krypton(mechanism: str, temperature: float) -> None:
    """KIN-14 (memory): within its factor of two, over the measured range as well as at 3000 K.

    Not within the +-18 % of the measurement: ours comes from the recombination through the
    equilibrium constant and rises more steeply, from 0.60 to 1.63 of the measured one.
    """
    row = ROWS["KIN-14"]
    factor, slope = arrhenius(row.conditions)
    printed = factor * math.exp(-slope / temperature)
    if temperature == 3000.0:
        assert printed == pytest.approx(row.number, rel=1e-3)
    found = rate_constant(
        mechanism, "H + OH (+M) <=> H2O (+M)", temperature, 0.5 * ct.one_atm, "KR", back=True
    )
    ratio = found * PER_MOLE / AVOGADRO / printed
    stated = re.search(r"factor (\d)", row.tolerance)
    assert stated is not None
    within = float(stated.group(1))
    assert 1.0 / within <= ratio <= within
    assert ratio == pytest.approx(WATER_RATIOS[temperature], rel=5e-3)
