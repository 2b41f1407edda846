"""Arithmetic of the dose against numbers worked by hand; rows of published yields as unit check."""

import pytest

from sonoyield.collapse.yields import OXIDANT, OXIDANT_FORMULA, Counts, oxidant_per_collapse
from sonoyield.expose.dose import dose
from sonoyield.expose.schedule import Driving

AVOGADRO = 6.02214076e23  # 1/mol, exact: SI brochure (2019)


def test_one_bubble_of_didenko_and_suslick() -> None:
    """8.2e5 OH a cycle at 52 kHz: Didenko, Suslick (2002), Nature 418, 394 (number from memory).

    7.08e-14 mol/s follow from it: row DID-08 of the table of checks, to 0.5 %.
    """
    second = Driving(share_on=1.0, per_second=52e3, per_second_on=52e3, duration=1.0)
    one = dose(8.2e5, number_density=1.0, volume=1.0, driven=second, dissipated=1e-9)
    assert one.mol == pytest.approx(7.08e-14, rel=5e-3)
    assert one.mol == pytest.approx(8.2e5 * 52e3 / AVOGADRO, rel=1e-12)


def test_yield_of_mark_and_others() -> None:
    """16e-10 mol/J at 170 W/kg are 16.32 umol/L/min in 1 kg/L: rows YLD-01 and -02, to 0.1 %.

    Mark, Tauber et al. (1998), Ultrason. Sonochem. 5, 41: G(OH) + 2 G(H2O2) at 321 kHz.
    """
    joule = 1e-9  # each collapse
    delivered = 16e-10 * joule * AVOGADRO
    per_second = 1e5
    density = 170e3 / (joule * per_second)  # 170 kW/m3 dissipated
    driven = Driving(1.0, per_second, per_second, 60.0)
    one = dose(delivered, density, volume=1e-3, driven=driven, dissipated=joule)
    assert one.mol_per_J == pytest.approx(16e-10, rel=1e-12)
    assert one.mol_per_L_per_s * 60.0 * 1e6 == pytest.approx(16.32, rel=1e-3)
    assert one.mol_per_L * 1e6 == pytest.approx(16.32, rel=1e-3)


def test_every_number_by_hand() -> None:
    """One mole a collapse in 2 L with 3 bubbles per m3, 5 collapses a second, a tenth of 40 s."""
    driven = Driving(share_on=0.1, per_second=0.5, per_second_on=5.0, duration=40.0)
    one = dose(AVOGADRO, number_density=3.0, volume=2e-3, driven=driven, dissipated=4.0)
    assert one.mol == pytest.approx(3.0 * 2e-3 * 0.5 * 40.0, rel=1e-12)
    assert one.mol_per_L == pytest.approx(one.mol / 2.0, rel=1e-12)
    assert one.mol_per_L_per_s == pytest.approx(1.5e-3, rel=1e-12)
    assert one.mol_per_L_per_s_on == pytest.approx(1.5e-2, rel=1e-12)
    assert one.mol_per_J == pytest.approx(0.25, rel=1e-12)


@pytest.mark.parametrize("dissipated", [0.0, -1e-12])
def test_no_yield_per_joule_where_nothing_is_dissipated(dissipated: float) -> None:
    driven = Driving(1.0, 1.0, 1.0, 1.0)
    assert dose(1.0, 1.0, 1.0, driven, dissipated).mol_per_J is None


def test_oxidant() -> None:
    """OH + 2 H2O2 + HO2 + 2 O + 2 O3, the definition; H, H2 and the other counts do not enter."""
    delivered = {"OH": 1.0, "H2O2": 10.0, "HO2": 100.0, "O": 1e3, "O3": 1e4, "H": 1e5, "H2": 1e6}
    counts = {name: Counts(peak=7e9, delivered=one, left=3e9) for name, one in delivered.items()}
    assert oxidant_per_collapse(counts) == 1 + 20 + 100 + 2000 + 20000


def test_printed_formula_is_the_one_used() -> None:
    terms = OXIDANT_FORMULA.split(",")[0].split(" + ")
    said = {term.split()[-1]: float(term.split()[0]) if " " in term else 1.0 for term in terms}
    assert said == OXIDANT
